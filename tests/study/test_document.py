"""The plan document: its schema, its decimals, its bytes; and the cautions that go with it."""

from __future__ import annotations

import json
from dataclasses import replace
from types import MappingProxyType
from typing import Any

import jsonschema
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climbpath.study.cautions import CAUTIONS, GROWTH_CAUTION, cautions_for
from climbpath.study.document import JOINT_ORDER, dump_json, plan_document
from climbpath.study.results import Plan, PlanResult
from tests.plan_samples import no_way_result, sample_result
from tests.schemas import PLAN_SCHEMA

HOSTILE = ("$x^2", "<b>&", "a\nb\r\t", "\x1b[31mred\x7f", "\u202eevil", "“ü” 墙 \U0001f9d7")

# The order of keys in the plan document of the file contract.
DOCUMENT_KEYS = ["schema", "wall", "athlete", "line_x_mm", "aim", "cautions", "plans", "trade_off"]
PLAN_KEYS = [
    "rank", "time_s", "lattice_time_s", "expected_time_s", "chance_clean", "time_interval_s",
    "lattice_error_s", "pad_off_s", "lateral_area_mm_s", "lateral_mean_mm", "lateral_max_mm",
    "sideways_mm", "path_ratio", "hand_moves", "hand_holds", "margin_min_mm", "load_max", "steps",
    "com_path_mm",
]  # fmt: skip
STEP_KEYS = [
    "step", "time_s", "kind", "moved", "contacts", "points_mm", "com_mm", "joints_mm",
    "speed_m_s", "margin_mm", "load", "load_by_limb",
]  # fmt: skip


def checked(result: PlanResult) -> Any:
    """The document as a reader gets it back from the text, after a check of its schema."""
    jsonschema.Draft202012Validator.check_schema(PLAN_SCHEMA)
    document = json.loads(dump_json(plan_document(result)), parse_constant=pytest.fail)
    jsonschema.validate(document, PLAN_SCHEMA)
    return document


def with_plan(**changes: Any) -> PlanResult:
    """The sample result with other values in its plan."""
    result = sample_result()
    return replace(result, plans=(replace(result.plans[0], **changes),))


def with_step(**changes: Any) -> PlanResult:
    """The sample result with other values in the first step of its plan."""
    first, *rest = sample_result().plans[0].steps
    return with_plan(steps=(replace(first, **changes), *rest))


def test_document_fits_schema_and_keeps_the_order_of_keys() -> None:
    document = checked(sample_result())
    assert list(document) == DOCUMENT_KEYS
    assert list(document["plans"][0]) == PLAN_KEYS
    for step in document["plans"][0]["steps"]:
        assert list(step) == STEP_KEYS
        assert list(step["contacts"]) == ["LH", "RH", "LF", "RF"]
        assert list(step["joints_mm"]) == list(JOINT_ORDER)


def test_text_reads_back_as_the_document() -> None:
    document = plan_document(sample_result())
    assert json.loads(dump_json(document)) == document


def test_no_plan_says_why() -> None:
    document = checked(no_way_result())
    assert document["plans"] == []
    # 38.25 to one decimal; Python rounds halves to even.
    assert document["why_not"] == {
        "step": 4,
        "limb": "RH",
        "hold": "7",
        "missing_mm": 38.2,
        "missing_bw": None,
        "change": "move hold 7 down by 38 mm",
    }


@pytest.mark.parametrize(
    "spoil",
    [
        lambda d: d.update(extra=1),
        lambda d: d.pop("cautions"),
        lambda d: d["plans"][0].update(extra=1),
        lambda d: d["plans"][0]["steps"][0].pop("com_mm"),
        lambda d: d["plans"][0]["steps"][0].update(kind="jump"),
        lambda d: d.update(plans=[]),
        lambda d: d.update(why_not=plan_document(no_way_result())["why_not"]),
    ],
)
def test_schema_is_strict(spoil: Any) -> None:
    document = plan_document(sample_result())
    spoil(document)
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(document, PLAN_SCHEMA)


def test_decimals() -> None:
    plan = checked(
        with_plan(
            time_s=6.12345678,
            time_interval_s=(5.0000004, 7.0000006),
            lateral_area_mm_s=612.34567,
            lateral_mean_mm=94.26,
            path_ratio=1.081251,
            load_max=0.123456,
        )
    )["plans"][0]
    assert plan["time_s"] == 6.123457
    assert plan["time_interval_s"] == [5.0, 7.000001]
    assert plan["lateral_area_mm_s"] == 612.346
    assert plan["lateral_mean_mm"] == 94.3
    assert plan["path_ratio"] == 1.0813
    assert plan["load_max"] == 0.1235


def test_whole_numbers_that_are_floats_stay_floats_and_no_zero_is_negative() -> None:
    result = with_step(time_s=np.float64(0), com_mm=(1500, -0.04, np.float32(7)), margin_mm=-0.0)
    text = dump_json(plan_document(result))
    assert '"com_mm": [1500.0, 0.0, 7.0]' in text
    assert '"time_s": 0.0,' in text
    assert '"margin_mm": 0.0,' in text
    assert "-0.0" not in text
    assert '"hand_moves": 19,' in text


@pytest.mark.parametrize("value", [float("nan"), float("inf"), float("-inf"), np.float64("nan")])
def test_numbers_that_are_not_finite_become_null(value: float) -> None:
    assert checked(with_step(margin_mm=value))["plans"][0]["steps"][0]["margin_mm"] is None
    assert checked(with_plan(load_max=value))["plans"][0]["load_max"] is None
    assert json.loads(dump_json({"a": [value, {"b": value}]})) == {"a": [None, {"b": None}]}
    joints = {"head": (value, 0.0, 0.0)}
    step = plan_document(with_step(joints_mm=joints))["plans"][0]["steps"][0]
    assert step["joints_mm"] == {"head": [None, 0.0, 0.0]}


def test_bytes_do_not_hang_on_the_order_of_mappings() -> None:
    def turned(plan: Plan) -> Plan:
        steps = tuple(
            replace(
                step,
                contacts=MappingProxyType(dict(reversed(step.contacts.items()))),
                points_mm=dict(reversed(step.points_mm.items())),
                joints_mm=dict(reversed(step.joints_mm.items())),
                load_by_limb=dict(reversed(step.load_by_limb.items())),
            )
            for step in plan.steps
        )
        return replace(plan, steps=steps)

    result = sample_result()
    other = replace(result, plans=tuple(turned(plan) for plan in result.plans))
    assert dump_json(plan_document(other)) == dump_json(plan_document(result))


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_names_come_back_unchanged_from_plain_text(name: str) -> None:
    result = replace(with_plan(hand_holds=(name,)), wall_name=name, athlete_name=name)
    text = dump_json(plan_document(result))
    assert all(letter == "\n" or " " <= letter <= "~" for letter in text)
    document = checked(result)
    assert document["wall"] == document["athlete"] == name
    assert document["plans"][0]["hand_holds"] == [name]


json_values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(),
    lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
    max_leaves=20,
)  # fmt: skip


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.dictionaries(st.text(), json_values))
def test_any_document_reads_back_the_same(document: dict[str, Any]) -> None:
    text = dump_json(document)
    assert text.endswith("\n")
    assert json.loads(text) == document


def test_cautions_put_the_notes_first_and_repeat_nothing() -> None:
    note = "The foot layout was invented."
    texts = cautions_for(note, GROWTH_CAUTION, "", note, CAUTIONS[0])
    assert texts == (note, GROWTH_CAUTION, CAUTIONS[0], *CAUTIONS[1:])
    assert cautions_for() == CAUTIONS


@pytest.mark.parametrize(
    "word",
    # What the limits of the program demand to be said: model, interval, injury, growth, rope,
    # coach, warming up, inspection and approval, code and standard.
    [
        "model", "interval", "injure", "growing", "rope", "coach", "warmed", "inspected",
        "approved", "code", "standard",
    ],
)
def test_cautions_say_what_they_must(word: str) -> None:
    assert word in " ".join(CAUTIONS)
