"""Reading and writing athlete files (TOML, schema climbpath/athlete/1); mm and degrees there."""

from __future__ import annotations

import os
import re
import tomllib
from collections.abc import Mapping
from difflib import get_close_matches
from math import degrees, isfinite, pi
from typing import Any

import tomli_w

from climbpath.body.checks import MEASURED_NAMES
from climbpath.body.lengths import make_athlete
from climbpath.body.model import Athlete
from climbpath.body.tables import range_defaults
from climbpath.errors import DataError, Problem
from climbpath.files import read_text, write_atomically

SCHEMA = "climbpath/athlete/1"
MAX_BYTES = 256 * 1024
NAME_LENGTH = 100
ADULT_AGE = 18

CAPACITY_UNITS = ("bw", "mm", "m", "s", "m_s", "deg", "rad_s2", "n", "n_kg", "w_kg", "kg", "share")
_CAPACITY_KEY = re.compile(rf"[a-z][a-z0-9_]*_(?:{'|'.join(CAPACITY_UNITS)})")
_TOP_KEYS = (
    "schema",
    "name",
    "sex",
    "stature_mm",
    "mass_kg",
    "birth_year",
    "mass_table",
    "measured",
    "range",
    "capacity",
)


def _shown(value: object) -> str:
    """A value for a message: escaped, and short. A number too long to print stays unprinted."""
    try:
        text = repr(value)
    except ValueError:
        return "a number of thousands of digits"
    return text if len(text) <= 60 else text[:57] + "..."


class _Reader:
    """Takes values out of the parsed document and notes every problem."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.problems: list[Problem] = []

    def problem(self, key: str, found: str, expected: str) -> None:
        if not key.isprintable() or len(key) > 80:
            key = _shown(key)
        self.problems.append(Problem(self.file, key, found, expected))

    def unknown(self, key: str, name: str, known: tuple[str, ...]) -> None:
        near = get_close_matches(name, known, n=1)
        hint = f'"{near[0]}"' if near else f"one of {', '.join(known)}"
        self.problem(key, "an unknown key", hint)

    def number(self, key: str, value: object) -> float | None:
        """A finite number, or None with a problem noted."""
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            try:
                number = float(value)
            except OverflowError:
                number = float("inf")
            if isfinite(number):
                return number
        self.problem(key, _shown(value), "a finite number")
        return None

    def table(self, document: Mapping[str, Any], name: str) -> Mapping[str, Any]:
        value = document.get(name, {})
        if isinstance(value, dict):
            return value
        self.problem(name, _shown(value), "a table")
        return {}

    def text(self, key: str, value: object) -> str | None:
        if isinstance(value, str):
            if value.strip() and len(value) <= NAME_LENGTH and value.isprintable():
                return value
            self.problem(key, _shown(value), f"1 to {NAME_LENGTH} printable characters")
        else:
            self.problem(key, _shown(value), "a text")
        return None

    def scaled(
        self, document: Mapping[str, Any], table: str, names: tuple[str, ...], unit: str
    ) -> dict[str, float]:
        """Numbers of a table whose keys are ``names`` with a unit; mm to m, deg to rad."""
        known = tuple(f"{name}_{unit}" for name in names)
        result = {}
        for key, value in self.table(document, table).items():
            place = f"{table}.{key}"
            if key not in known:
                self.unknown(place, key, known)
                continue
            number = self.number(place, value)
            if number is not None:
                scaled = number / 1e3 if unit == "mm" else number * pi / 180.0
                result[key.removesuffix(f"_{unit}")] = scaled
        return result

    def capacity(self, document: Mapping[str, Any]) -> dict[str, float]:
        result = {}
        for key, value in self.table(document, "capacity").items():
            place = f"capacity.{key}"
            if not _CAPACITY_KEY.fullmatch(key):
                units = ", ".join(f"_{unit}" for unit in CAPACITY_UNITS)
                self.problem(place, "", f"a key in small letters that ends in a unit: {units}")
                continue
            number = self.number(place, value)
            if number is not None and number < 0.0:
                self.problem(place, _shown(value), "a number of at least 0")
            elif number is not None:
                result[key] = number
        return result


def _document(text: str, file: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except (ValueError, RecursionError) as error:
        found = "tables nested too deep" if isinstance(error, RecursionError) else str(error)
        raise DataError([Problem(file, "", found, "a TOML document")]) from error


def _basics(reader: _Reader, document: Mapping[str, Any]) -> dict[str, Any]:
    """The keys at the top of the file, as keyword arguments of ``make_athlete``."""
    for key in document:
        if key not in _TOP_KEYS:
            reader.unknown(key, key, _TOP_KEYS)
    if document.get("schema") != SCHEMA:
        found = _shown(document["schema"]) if "schema" in document else "nothing"
        reader.problem("schema", found, f'"{SCHEMA}"')
    result: dict[str, Any] = {}
    for key in ("name", "sex"):
        if key not in document:
            reader.problem(key, "nothing", "a text")
        else:
            result[key] = reader.text(key, document[key])
    for key, name, factor in (("stature_mm", "stature", 1e3), ("mass_kg", "mass", 1.0)):
        if key not in document:
            reader.problem(key, "nothing", "a finite number")
            continue
        number = reader.number(key, document[key])
        result[name] = None if number is None else number / factor
    if "birth_year" in document:
        year = document["birth_year"]
        if isinstance(year, int) and not isinstance(year, bool):
            result["birth_year"] = year
        else:
            reader.problem("birth_year", _shown(year), "a whole number")
    if "mass_table" in document:
        result["mass_table"] = reader.text("mass_table", document["mass_table"])
    return result


def parse_athlete(text: str, file: str = "") -> Athlete:
    """An athlete from the text of an athlete file. DataError with every problem found."""
    reader = _Reader(file)
    document = _document(text, file)
    # Stand-ins let the remaining values be checked although a required one is missing or wrong;
    # what they themselves would cause is not reported, since a problem is noted already.
    values = _basics(reader, document)
    values["measured"] = reader.scaled(document, "measured", MEASURED_NAMES, "mm")
    values["ranges"] = reader.scaled(document, "range", tuple(range_defaults()), "deg")
    values["capacity"] = reader.capacity(document)
    missing = {
        key: stand_in
        for key, stand_in in (("name", ""), ("sex", "female"), ("stature", None), ("mass", 60.0))
        if values.get(key) is None
    }
    if values.get("mass_table", "") is None:
        del values["mass_table"]
    if "stature" in missing:
        # Measured lengths are judged by the stature, so without it they cannot be.
        missing["stature"] = 1.7
        values["measured"] = {}
    try:
        athlete = make_athlete(**{**values, **missing})
    except DataError as error:
        found = [
            Problem(file, p.key, p.found, p.expected)
            for p in error.problems
            if not ("sex" in missing and p.key == "measured")
        ]
        raise DataError([*reader.problems, *found]) from error
    if reader.problems:
        raise DataError(reader.problems)
    return athlete


def read_athlete(path: str | os.PathLike[str]) -> Athlete:
    """An athlete from a file. DataError with every problem found."""
    return parse_athlete(read_text(path, MAX_BYTES), os.fspath(path))


def _plain(value: float) -> float | int:
    """A number without the conversion's rounding noise, whole where it is."""
    rounded = round(value, 6)
    return int(rounded) if rounded == int(rounded) else rounded


def format_athlete(athlete: Athlete) -> str:
    """The text of an athlete file; reading it back gives the same athlete (to 1 nm, 1e-6 deg)."""
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "name": athlete.name,
        "sex": athlete.sex,
        "stature_mm": _plain(athlete.stature * 1e3),
        "mass_kg": _plain(athlete.mass),
    }
    if athlete.birth_year is not None:
        document["birth_year"] = athlete.birth_year
    if athlete.mass_table != "de_leva":
        document["mass_table"] = athlete.mass_table
    ranges = {
        f"{name}_deg": _plain(degrees(value))
        for name, value in athlete.ranges.items()
        if _plain(degrees(value)) != range_defaults()[name]
    }
    tables = {
        "measured": {f"{k}_mm": _plain(v * 1e3) for k, v in athlete.measured.items()},
        "range": ranges,
        "capacity": dict(athlete.capacity),
    }
    document.update({name: table for name, table in tables.items() if table})
    return tomli_w.dumps(document)


def write_athlete(athlete: Athlete, path: str | os.PathLike[str]) -> None:
    """Write an athlete file. DataError if the place cannot be written."""
    write_atomically(path, format_athlete(athlete))


def growth_caution(athlete: Athlete, this_year: int) -> str | None:
    """A caution where the birth year leaves the athlete possibly under 18 in ``this_year``."""
    if athlete.birth_year is None or this_year - athlete.birth_year > ADULT_AGE:
        return None
    return (
        f"born in {athlete.birth_year}, may be under {ADULT_AGE}: lengths change within months, "
        "the tables are of adults, and maximal pulls and leaps injure growing fingers, elbows and "
        "shoulders"
    )
