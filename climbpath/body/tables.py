"""Loading of the published tables in ``climbpath/body/tables``; each names its source."""

from __future__ import annotations

import csv
import tomllib
from collections.abc import Mapping
from functools import cache
from importlib.resources import files
from types import MappingProxyType
from typing import Any

SEXES = ("female", "male")


def _text(name: str) -> str:
    return (files("climbpath.body") / "tables" / name).read_text(encoding="utf-8")


@cache
def rows(name: str) -> tuple[dict[str, str], ...]:
    """Rows of a CSV table by column name; lines that begin with # are its source note."""
    lines = [line for line in _text(name).splitlines() if line and not line.startswith("#")]
    return tuple(csv.DictReader(lines))


@cache
def settings(name: str) -> Mapping[str, Any]:
    """A TOML table."""
    return MappingProxyType(tomllib.loads(_text(name)))


@cache
def survey_statistics(sex: str) -> Mapping[str, tuple[float, float, float]]:
    """Mean and SD (mm; kg for ``weightkg``) and correlation with stature, by survey variable."""
    return MappingProxyType(
        {
            row["variable"]: (float(row["mean"]), float(row["sd"]), float(row["r_with_stature"]))
            for row in rows("survey_2012.csv")
            if row["sex"] == sex
        }
    )


@cache
def survey_lines(sex: str) -> Mapping[str, tuple[float, float, float, float]]:
    """Least-squares lines: intercept (mm), slopes on stature, span, sitting height."""
    return MappingProxyType(
        {
            row["quantity"]: (
                float(row["intercept"]),
                float(row["stature"]),
                float(row["span"]),
                float(row["sitting_height"]),
            )
            for row in rows("survey_2012_lines.csv")
            if row["sex"] == sex
        }
    )


@cache
def stature_fractions() -> Mapping[str, float]:
    """Drillis & Contini's heights and lengths as fractions of stature."""
    return MappingProxyType(
        {row["quantity"]: float(row["fraction"]) for row in rows("stature_fractions.csv")}
    )


def _pairs(table: Mapping[str, Any]) -> Mapping[str, tuple[float, float]]:
    return MappingProxyType({name: (float(p[0]), float(p[1])) for name, p in table.items()})


@cache
def share_bounds() -> Mapping[str, tuple[float, float]]:
    """Least and greatest plausible share of stature, by length or measurement."""
    return _pairs(settings("constants.toml")["share_of_stature"])


@cache
def range_defaults() -> Mapping[str, float]:
    """Joint ranges of adults, degrees."""
    return MappingProxyType(dict(settings("joint_ranges.toml")["degrees"]))


@cache
def range_bounds() -> Mapping[str, tuple[float, float]]:
    """Least and greatest joint range that is taken for a human joint, degrees."""
    return _pairs(settings("joint_ranges.toml")["bounds"])
