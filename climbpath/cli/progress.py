"""A progress bar on stderr for work that turns out to be long."""

from __future__ import annotations

import os
import sys
import threading
from types import TracebackType
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from click._termui_impl import ProgressBar

DELAY_S = 1.0
"""Work that is done within this time shows no bar."""

PARTS = 100


class Progress:
    """Told by ``progress(what, share)`` how far the work is; shows a bar after a second.

    A context manager. The bar is drawn on stderr and only where that is a terminal that can move
    its cursor; it has no colours.
    """

    def __init__(self) -> None:
        self._lock = threading.RLock()
        self._what, self._share = "", 0.0
        self._bar: ProgressBar[int] | None = None
        self._done = False
        self._timer: threading.Timer | None = None

    def __enter__(self) -> Progress:
        if sys.stderr is not None and sys.stderr.isatty() and os.environ.get("TERM") != "dumb":
            self._timer = threading.Timer(DELAY_S, self._show)
            self._timer.daemon = True
            self._timer.start()
        return self

    def __call__(self, what: str, share: float) -> None:
        with self._lock:
            self._what, self._share = what, share
            self._update()

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._timer is not None:
            self._timer.cancel()
        with self._lock:
            self._done = True
            if self._bar is None:
                return
            if error is None:
                self._what, self._share = "done", 1.0
                self._update()
            self._bar.render_finish()  # also shows the cursor again

    def _show(self) -> None:
        with self._lock:
            if self._done:
                return
            template = "%(label)-8s [%(bar)s] %(info)s"
            self._bar = click.progressbar(
                length=PARTS, bar_template=template, show_eta=False, file=sys.stderr, color=False
            )
            self._update()

    def _update(self) -> None:
        if self._bar is None:
            return
        self._bar.label = self._what
        steps = round(PARTS * self._share) - self._bar.pos
        if steps > 0:
            self._bar.update(steps)
        else:
            self._bar.render_progress()
