"""Sequence tables: every problem is reported, and a plan written as one reads back as it was."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climbpath.contacts import LIMB_NAMES
from climbpath.errors import DataError
from climbpath.files import MAX_BYTES
from climbpath.study.results import Plan
from climbpath.study.sequence import (
    MAX_ROWS,
    Placement,
    Sequence,
    format_plan,
    parse_sequences,
    read_sequences,
    unknown_holds,
)
from tests.plan_samples import sample_result


@pytest.fixture(scope="module")
def plan() -> Plan:
    return sample_result().plans[0]


def problems_of(text: str) -> list[str]:
    """Messages of a table that cannot be read."""
    with pytest.raises(DataError) as caught:
        parse_sequences(text, "s.csv")
    assert all(problem.file == "s.csv" for problem in caught.value.problems)
    return [str(problem) for problem in caught.value.problems]


def test_a_single_sequence_needs_three_columns() -> None:
    text = "step,limb,hold\n0,LH,1\n0, RF ,floor\n\n1,RH,2\n1,LF,smear\n"
    assert parse_sequences(text) == (
        Sequence(
            "",
            (
                (Placement("LH", "1"), Placement("RF", "floor")),
                (Placement("RH", "2"), Placement("LF", "smear")),
            ),
        ),
    )


def test_several_runs_with_times_totals_and_notes() -> None:
    text = (
        "run,step,limb,hold,contact_s,release_s,x_mm,y_mm,note\n"
        "b,0,LH,1,0,0.75,,,\n"
        "a,1,RH,9,0.5,,100,200,slipped\n"
        "b,1,RH,2,1.25,,,,\n"
        "a,,total,,7.5,,,,\n"
    )
    first, second = parse_sequences(text)
    assert first == Sequence(
        "b", ((Placement("LH", "1", 0.0, 0.75),), (Placement("RH", "2", 1.25),))
    )
    # A table that begins with step 1 says nothing of the start: step 0 is empty.
    assert second == Sequence("a", ((), (Placement("RH", "9", 0.5),)), 7.5, "slipped")


def test_steps_may_stand_in_any_order_and_text_in_quotes() -> None:
    text = '\ufeffstep,limb,hold\n1,RH,"a,""b"\n0,LH,1\n'.lstrip("\ufeff")
    (only,) = parse_sequences(text)
    assert only.steps == ((Placement("LH", "1"),), (Placement("RH", 'a,"b'),))


def test_a_byte_order_mark_does_no_harm(tmp_path: Path) -> None:
    file = tmp_path / "s.csv"
    file.write_bytes(b"\xef\xbb\xbfstep,limb,hold\r\n0,LH,1\r\n")
    (only,) = read_sequences(str(file))
    assert only.steps == ((Placement("LH", "1"),),)


def test_every_problem_of_the_rows_is_reported_at_once() -> None:
    messages = problems_of(
        "run,step,limb,hold,contact_s,release_s\n"
        "a,0,LX,1,,\n"  # 2: no such limb
        "a,0,LH,,,\n"  # 3: no hold
        "a,0,RH,floor,,\n"  # 4: a hand on the floor
        "a,x,LF,1,,\n"  # 5: no number
        "a,-1,LF,1,,\n"  # 6
        "a,0,LH,2,,\n"  # 7: LH twice in a step
        "a,0,LF,1,nan,-1\n"  # 8: two wrong times
        "a,0,RF\n"  # 9: cells lack
        "a,,total,,,\n"  # 10: a total without a time
        "b,0,RF,1,inf,1e9\n"  # 11
        "b,0,RH,smear,x,\n"  # 12: two
    )
    expected = [
        "line 2 limb", "line 3 hold", "line 4 hold", "line 5 step", "line 6 step", "line 7: ",
        "line 8 contact_s", "line 8 release_s", "line 9: ", "line 10 contact_s",
        "line 11 contact_s", "line 11 release_s", "line 12 contact_s", "line 12 hold",
    ]  # fmt: skip
    found = [message.removeprefix("s.csv: ") for message in messages]
    assert len(found) == len(expected)
    for message, start in zip(found, expected, strict=True):
        assert message.startswith(start), (message, start)


def test_every_problem_of_the_header_is_reported_at_once() -> None:
    messages = problems_of("run,Step,limb,limb,height\na,1,LH,LH,2\n")
    for part in ("'Step'", "'height'", "a column step", "a column hold", "limb twice"):
        assert any(part in message for message in messages), (part, messages)


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("", "empty file"),
        ("\n\n", "empty file"),
        ("step,limb,hold\n", "no rows"),
        ("step,limb,hold\n\n ,, \n", "no rows"),
        ('step,limb,hold\n0,LH,"1\n', "comma-separated"),
        ("step,limb,hold\n0,LH,a\0b\n", "hold"),
        ("step,limb,hold\n0,LH,1\n2,RH,2\n", "gaps"),
        ("step,limb,hold\n5,LH,1\n", "first step 5"),
        ("step,limb,hold\n٣,LH,1\n", "whole number"),
        ("step,limb,hold\n0000001,LH,1\n", "whole number"),
        ("step,limb,hold\n0,LH," + "9" * 200_000 + "\n", "comma-separated"),
        ("step,limb,hold,x_mm\n0,LH,1,left\n", "millimetres"),
        ("step;limb;hold\n0;LH;1\n", "column step"),
        ("step,limb,hold\n" + "0,LH,1\n" * (MAX_ROWS + 1), "at most"),
    ],
)
def test_tables_that_cannot_be_read(text: str, part: str) -> None:
    messages = problems_of(text)
    assert any(part in message for message in messages), messages


def test_messages_are_short_and_show_nothing_unprintable() -> None:
    messages = problems_of("step,limb,hold\n0,\x1b[31m" + "x" * 5000 + ",1\n")
    assert all("\x1b" not in message and len(message) < 300 for message in messages)


def test_a_table_full_of_mistakes_does_not_flood_the_screen() -> None:
    messages = problems_of("step,limb,hold\n" + "x,y,\n" * 5000)
    assert len(messages) <= 202
    assert "more" in messages[-1]


def test_files_are_bounded(tmp_path: Path) -> None:
    file = tmp_path / "s.csv"
    file.write_bytes(b"x" * (MAX_BYTES + 1))
    with pytest.raises(DataError, match="at most"):
        read_sequences(str(file))


def test_a_plan_reads_back_as_it_was(plan: Plan) -> None:
    (read,) = parse_sequences(format_plan(plan, "best"))
    assert read.run == "best"
    assert len(read.steps) == len(plan.steps)
    for step, placements in zip(plan.steps, read.steps, strict=True):
        limbs = LIMB_NAMES if step.step == 0 else step.moved
        assert [p.limb for p in placements] == list(limbs)
        for placed in placements:
            assert placed.hold == step.contacts[placed.limb]
            assert placed.contact_s == pytest.approx(step.time_s, abs=5e-7)  # whole microseconds
    assert unknown_holds(read, frozenset()) != ()


# What a wall file allows in an id: no control characters, no blanks at the ends.
ids = st.text(
    st.characters(exclude_categories=("Cc", "Cf", "Cs", "Zl", "Zp")), min_size=1, max_size=32
).filter(lambda text: text == text.strip() and text not in ("floor", "free", "smear"))


@settings(derandomize=True, max_examples=60)
@given(name=ids)
def test_any_id_survives_writing_and_reading(name: str) -> None:
    plan = sample_result().plans[0]
    steps = tuple(
        replace(step, contacts={**step.contacts, "LH": name}) for step in plan.steps[:3]
    )
    (read,) = parse_sequences(format_plan(replace(plan, steps=steps), name))
    assert read.run == name
    assert next(p.hold for p in read.steps[0] if p.limb == "LH") == name


def test_unknown_holds_in_order_of_appearance_without_the_words() -> None:
    steps = (
        (Placement("LH", "b"), Placement("LF", "floor"), Placement("RF", "free")),
        (Placement("RH", "a"), Placement("LH", "b"), Placement("LF", "smear")),
        (Placement("RH", "c"),),
    )
    assert unknown_holds(Sequence("", steps), frozenset({"c"})) == ("b", "a")
