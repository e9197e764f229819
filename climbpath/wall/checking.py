"""Reading single values out of a parsed file, noting every problem instead of stopping.

A reading method returns None where it noted a problem, so that no later check complains about
the same value again.
"""

from __future__ import annotations

import difflib
import math
import re
import unicodedata
from collections.abc import Iterable, Mapping
from typing import Any

from climbpath.errors import DataError, Problem

MAX_SHOWN = 60
"""Longest piece of input that a message repeats, characters."""

MAX_PROBLEMS = 200
"""Problems listed for one file; the rest are counted."""

NOTHING = "nothing"
PLAIN_KEY = re.compile(r"[A-Za-z0-9_-]{1,40}")


def shown(value: object) -> str:
    """A value of the input as a message shows it: short, on one line, nothing unprintable."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    if isinstance(value, int) and abs(value) > 10**MAX_SHOWN:
        return "a very large number"
    text = ascii_safe(value) if isinstance(value, str) else str(value)
    return text if len(text) <= MAX_SHOWN else text[: MAX_SHOWN - 1] + "…"


def ascii_safe(text: str) -> str:
    """The text in quotes with everything unprintable escaped."""
    return repr(text[: 2 * MAX_SHOWN])


def has_control(text: str) -> bool:
    """Whether a text has control, formatting, surrogate or line-separator characters."""
    return any(unicodedata.category(sign) in ("Cc", "Cf", "Cs", "Zl", "Zp") for sign in text)


class Checker:
    """Collects the problems of one file."""

    def __init__(self, file_name: str) -> None:
        self.file_name = file_name
        self.problems: list[Problem] = []

    def add(self, key: str, found: str, expected: str) -> None:
        """Note one problem."""
        self.problems.append(Problem(self.file_name, key, found, expected))

    def raise_if_any(self) -> None:
        """DataError with every problem noted, if there is one."""
        if not self.problems:
            return
        listed = self.problems[:MAX_PROBLEMS]
        if len(self.problems) > MAX_PROBLEMS:
            more = f"{len(self.problems) - MAX_PROBLEMS} more"
            listed.append(Problem(self.file_name, "further problems", more, "none"))
        raise DataError(listed)

    def known_keys(self, table: Mapping[str, Any], place: str, known: Iterable[str]) -> None:
        """Note every key that is not known, with the nearest one that is."""
        names = list(known)
        for key in table:
            if key in names:
                continue
            near = difflib.get_close_matches(key[:MAX_SHOWN], names, n=1)
            hint = f"did you mean {near[0]!r}?" if near else "known are " + ", ".join(names)
            expected = f"a known key ({hint})"
            # A key can hold anything; only a plain one may stand in the place as it is.
            if PLAIN_KEY.fullmatch(key):
                self.add(joined(place, key), "an unknown key", expected)
            else:
                self.add(place, f"the unknown key {shown(key)}", expected)

    def number(
        self,
        table: Mapping[str, Any],
        key: str,
        place: str,
        low: float,
        high: float,
        *,
        default: float | None = None,
        unit: str = "",
        open_ends: bool = False,
    ) -> float | None:
        """A finite number from ``low`` to ``high`` (both left out with ``open_ends``).

        With no default the key is required.
        """
        if key not in table:
            if default is None:
                self.add(joined(place, key), NOTHING, "a number")
            return default
        return self.number_value(table[key], joined(place, key), low, high, unit, open_ends)

    def number_value(
        self,
        value: object,
        place: str,
        low: float,
        high: float,
        unit: str = "",
        open_ends: bool = False,
    ) -> float | None:
        """Like ``number`` for a value that is already at hand."""
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            self.add(place, shown(value), "a number")
            return None
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            self.add(place, shown(value), "a finite number")
            return None
        inside = low < number < high if open_ends else low <= number <= high
        if not inside:
            between = "between" if open_ends else "from"
            joint = "and" if open_ends else "to"
            expected = f"a number {between} {low:.10g} {joint} {high:.10g} {unit}".rstrip()
            self.add(place, shown(value), expected)
            return None
        return number

    def whole(
        self, table: Mapping[str, Any], key: str, place: str, low: int, high: int, default: int
    ) -> int | None:
        """A whole number from ``low`` to ``high``."""
        value = table.get(key, default)
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            expected = f"{low} or {high}" if high == low + 1 else f"{low} to {high}"
            self.add(joined(place, key), shown(value), f"a whole number, {expected}")
            return None
        return value

    def text(
        self, table: Mapping[str, Any], key: str, place: str, max_length: int, what: str
    ) -> str | None:
        """A required name: not empty, not over-long, no control characters, no outer blanks."""
        if key not in table:
            self.add(joined(place, key), NOTHING, what)
            return None
        return self.text_value(table[key], joined(place, key), max_length, what)

    def text_value(self, value: object, place: str, max_length: int, what: str) -> str | None:
        """Like ``text`` for a value that is already at hand."""
        if not isinstance(value, str):
            self.add(place, shown(value), f"{what} in quotes")
        elif not value.strip():
            self.add(place, "an empty text", what)
        elif len(value) > max_length:
            self.add(place, f"{len(value)} characters", f"{what} of at most {max_length}")
        elif has_control(value):
            self.add(place, shown(value), f"{what} without control characters")
        elif value != value.strip():
            self.add(place, shown(value), f"{what} without blanks at its ends")
        else:
            return value
        return None

    def choice(
        self, table: Mapping[str, Any], key: str, place: str, choices: Iterable[str], default: str
    ) -> str | None:
        """One of a few words."""
        value = table.get(key, default)
        names = list(choices)
        if isinstance(value, str) and value in names:
            return value
        near = difflib.get_close_matches(value, names, n=1) if isinstance(value, str) else []
        hint = f" (did you mean {near[0]!r}?)" if near else ""
        self.add(joined(place, key), shown(value), "one of " + ", ".join(names) + hint)
        return None

    def table(self, parent: Mapping[str, Any], key: str, place: str) -> Mapping[str, Any] | None:
        """A table; None, without a problem, where the key is absent."""
        if key not in parent:
            return None
        value = parent[key]
        if isinstance(value, dict):
            return value
        self.add(joined(place, key), shown(value), f"a table [{key}]")
        return None

    def tables(
        self, parent: Mapping[str, Any], key: str, place: str, most: int
    ) -> list[Mapping[str, Any]]:
        """An array of at most ``most`` tables; empty where the key is absent."""
        value = parent.get(key, [])
        if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
            self.add(joined(place, key), shown(value), f"tables headed [[{key}]]")
            return []
        if len(value) > most:
            self.add(joined(place, key), f"{len(value)} of them", f"at most {most}")
            return []
        return value


def joined(place: str, key: str) -> str:
    """``place.key``, or the key alone at the top of the file."""
    return f"{place}.{key}" if place else key
