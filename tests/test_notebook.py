"""The notebook is valid and its code runs as it stands."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

NOTEBOOK = Path(__file__).parents[1] / "notebooks" / "first_look.ipynb"


@pytest.fixture(scope="module")
def notebook() -> dict[str, Any]:
    document: dict[str, Any] = json.loads(NOTEBOOK.read_text(encoding="utf-8"))
    return document


def test_it_is_a_notebook_of_format_4_5_without_outputs(notebook: dict[str, Any]) -> None:
    # Required keys of notebook and cells: the published notebook format 4.5 (from memory).
    assert (notebook["nbformat"], notebook["nbformat_minor"]) == (4, 5)
    assert notebook["metadata"]["kernelspec"]["name"] == "python3"
    cells = notebook["cells"]
    ids = [cell["id"] for cell in cells]
    assert len(set(ids)) == len(ids)
    for cell in cells:
        assert cell["cell_type"] in ("markdown", "code")
        assert cell["metadata"] == {}
        assert all(line.endswith("\n") for line in cell["source"][:-1])
        if cell["cell_type"] == "code":
            assert cell["outputs"] == []
            assert cell["execution_count"] is None


def test_its_code_runs_and_finds_ways_up(
    notebook: dict[str, Any], monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    monkeypatch.chdir(NOTEBOOK.parent)
    before = set(plt.get_fignums())
    names: dict[str, Any] = {"__name__": "__main__"}
    try:
        for cell in notebook["cells"]:
            if cell["cell_type"] == "code":
                source = "".join(cell["source"])
                exec(compile(source, f"{NOTEBOOK.name}:{cell['id']}", "exec"), names)
        names["figure"].canvas.draw()
        names["comparison"].canvas.draw()
    finally:
        for number in set(plt.get_fignums()) - before:
            plt.close(number)
    assert len(names["results"]) == 2
    assert all(result.plans for result in names["results"].values())
    assert all(result.plans for found in names["by_stature"].values() for result in found)
    # Aiming at the least lateral area cannot give more of it than aiming at time.
    fastest = next(iter(names["results"].values())).plans[0]
    assert names["straight"].plans[0].lateral_area_mm_s <= fastest.lateral_area_mm_s
    assert names["straight"].plans[0].time_s >= fastest.time_s
    printed = capsys.readouterr().out
    assert "CoM dx" in printed
    assert "qualified coach" in printed
