"""The error tree. Every error the package raises on purpose is a ClimbpathError."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True)
class Problem:
    """One thing wrong with input: where it stands, and what was expected there.

    ``file`` is the name as the user gave it ("" for values that came from no file), ``key`` the
    place in it (such as ``hold[3].x``), ``found`` what stood there, ``expected`` what should.
    """

    file: str
    key: str
    found: str
    expected: str

    def __str__(self) -> str:
        place = ": ".join(part for part in (self.file, self.key) if part)
        text = f"expected {self.expected}"
        if self.found:
            text += f", found {self.found}"
        return f"{place}: {text}" if place else text


class ClimbpathError(Exception):
    """Base of all errors of the package. ``exit_code`` is what the command line returns."""

    exit_code = 1


class DataError(ClimbpathError):
    """A file or a value is wrong. Carries every problem found, not only the first."""

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))


class UsageError(ClimbpathError):
    """The command or the call was asked for something that makes no sense."""

    exit_code = 2


class TooLargeError(ClimbpathError):
    """The problem would not fit into the memory of this machine."""


class NoWayUpError(ClimbpathError):
    """Nothing gets through; the result that goes with it says why."""

    exit_code = 3


class NoPacingError(ClimbpathError):
    """No motion along a given path keeps within the limits. ``place`` is the grid point where."""

    def __init__(self, message: str, place: int) -> None:
        self.place = place
        super().__init__(f"grid point {place}: {message}")
