"""Saving figures: no half-written file, and the same bytes each time."""

from __future__ import annotations

import io
import os
import warnings
from pathlib import Path
from typing import TYPE_CHECKING, Any

from climbpath.errors import UsageError
from climbpath.files import write_atomically

if TYPE_CHECKING:
    from matplotlib.figure import Figure

FORMATS = ("png", "svg", "pdf")
DOTS_PER_INCH = 150
HASH_SALT = "climbpath"
"""Fixes the ids inside an SVG, which are random otherwise."""


def new_figure(width: float, height: float) -> Figure:
    """An empty figure, sizes in inches, with a canvas of its own and no global state."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width, height), layout="constrained")
    FigureCanvasAgg(figure)
    return figure


def figure_format(path: str | os.PathLike[str]) -> str:
    """ "png", "svg" or "pdf" by the ending of a file name; UsageError for any other."""
    ending = Path(path).suffix.lower().removeprefix(".")
    if ending not in FORMATS:
        found = f"{ending!r}" if ending else "no ending"
        raise UsageError(
            f"{os.fspath(path)}: expected a name ending in .png, .svg or .pdf, found {found}"
        )
    return ending


def save_figure(figure: Figure, path: str | os.PathLike[str]) -> None:
    """Write a figure as PNG, SVG or PDF, by the ending of the name.

    UsageError for an ending that is not known, DataError if the place cannot be written.
    """
    write_atomically(path, figure_bytes(figure, figure_format(path)))


def figure_bytes(figure: Figure, kind: str) -> bytes:
    """A figure as the content of a file of one of ``FORMATS``.

    The bytes depend on the figure alone: no dates, no random ids.
    """
    import matplotlib as mpl

    metadata: dict[str, dict[str, Any]] = {
        "png": {"Software": None},
        "svg": {"Date": None, "Creator": None},
        "pdf": {"CreationDate": None, "ModDate": None, "Creator": None, "Producer": None},
    }
    stream = io.BytesIO()
    with (
        warnings.catch_warnings(),
        mpl.rc_context({"svg.hashsalt": HASH_SALT, "svg.fonttype": "path"}),
    ):
        # A letter that the font lacks is drawn as a box; that is no reason to speak up or stop.
        warnings.filterwarnings("ignore", message=r"Glyph \d+ .* missing from font")
        figure.savefig(stream, format=kind, dpi=DOTS_PER_INCH, metadata=metadata[kind])
    return stream.getvalue()
