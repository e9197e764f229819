"""Running the command in this process, and small walls for it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
import tomli_w

from climbpath.cli.main import run

BODY = ("--sex", "male", "--stature-mm", "1780", "--mass-kg", "70")

HOLDS: tuple[dict[str, Any], ...] = (
    {"id": "1", "x": 800.0, "y": 1300.0},
    {"id": "2", "x": 1200.0, "y": 1500.0},
    {"id": "3", "x": 850.0, "y": 2000.0},
    {"id": "4", "x": 1150.0, "y": 2450.0},
    {"id": "5", "x": 700.0, "y": 2900.0},
    {"id": "f", "x": 1000.0, "y": 600.0, "use": "foot"},
    {"id": "pad", "x": 1000.0, "y": 3800.0, "use": "strike"},
)
START = {"LH": "1", "RH": ["1", "2"], "LF": "floor", "RF": ["floor", "free"]}
PER_MM = {"mm": 1.0, "cm": 0.1, "m": 0.001}


@dataclass(frozen=True)
class Done:
    """What one run of the command gave."""

    code: int
    out: str
    err: str


Runner = Callable[..., Done]


def run_command(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, *arguments: object
) -> Done:
    """Run ``climbpath`` with arguments; a traceback would come out as an exception."""
    monkeypatch.setattr("sys.argv", ["climbpath", *map(str, arguments)])
    capsys.readouterr()
    with pytest.raises(SystemExit) as ended:
        run()
    text = capsys.readouterr()
    return Done(int(ended.value.code or 0), text.out, text.err)


def wall_text(
    holds: Sequence[dict[str, Any]] = HOLDS,
    unit: str = "mm",
    shift: tuple[float, float] = (0.0, 0.0),
    height: float = 4000.0,
    **more: Any,
) -> str:
    """A wall file of 2 m by 4 m. ``shift`` (mm) moves holds, line, floor and edges together."""
    per = PER_MM[unit]
    across, up = shift
    document: dict[str, Any] = {
        "schema": "climbpath/wall/1",
        "name": "Small",
        "unit": unit,
        "width": (2000.0 + 2.0 * across) * per,
        "line_x": (1000.0 + across) * per,
        "floor_y": up * per,
        "section": [{"height": (height + up) * per, "overhang_deg": 5.0}],
        "hold": [
            {**hold, "x": (hold["x"] + across) * per, "y": (hold["y"] + up) * per}
            for hold in holds
        ],
        "start": [START],
        "finish": {"holds": ["pad"]},
        **more,
    }
    return tomli_w.dumps({key: value for key, value in document.items() if value is not None})


def write_wall_file(folder: Path, name: str = "wall.toml", **options: Any) -> Path:
    """``wall_text`` in a file."""
    path = folder / name
    path.write_text(wall_text(**options), encoding="utf-8")
    return path
