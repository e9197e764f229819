"""JSON schemas of the documents the program writes, as strict as the contract is."""

from __future__ import annotations

from typing import Any

NUMBER: dict[str, Any] = {"type": "number"}
MAYBE_NUMBER: dict[str, Any] = {"type": ["number", "null"]}
MAYBE_SHARE: dict[str, Any] = {"type": ["number", "null"], "minimum": 0}
TEXT: dict[str, Any] = {"type": "string"}
MAYBE_TEXT: dict[str, Any] = {"type": ["string", "null"]}
COUNT: dict[str, Any] = {"type": "integer", "minimum": 0}
TIME: dict[str, Any] = {"type": "number", "minimum": 0}
LIMB: dict[str, Any] = {"enum": ["LH", "RH", "LF", "RF"]}


def strict(properties: dict[str, Any], optional: tuple[str, ...] = ()) -> dict[str, Any]:
    """An object with exactly these keys, those in ``optional`` excepted."""
    return {
        "type": "object",
        "properties": properties,
        "required": [key for key in properties if key not in optional],
        "additionalProperties": False,
    }


def listed(item: dict[str, Any], length: int | None = None) -> dict[str, Any]:
    """A list of ``item``, of exactly ``length`` entries if given."""
    bounds = {} if length is None else {"minItems": length, "maxItems": length}
    return {"type": "array", "items": item, **bounds}


def by_limb(item: dict[str, Any]) -> dict[str, Any]:
    """An object whose keys are limbs."""
    return {"type": "object", "propertyNames": LIMB, "additionalProperties": item}


STEP: dict[str, Any] = strict(
    {
        "step": COUNT,
        "time_s": TIME,
        "kind": {"enum": ["start", "move", "flight", "finish"]},
        "moved": listed(LIMB),
        "contacts": strict({"LH": TEXT, "RH": TEXT, "LF": TEXT, "RF": TEXT}),
        "points_mm": by_limb(listed(NUMBER, 2)),
        "com_mm": listed(NUMBER, 3),
        "joints_mm": {"type": "object", "additionalProperties": listed(NUMBER, 3)},
        "speed_m_s": MAYBE_NUMBER,
        "margin_mm": MAYBE_NUMBER,
        "load": MAYBE_SHARE,
        "load_by_limb": by_limb(MAYBE_SHARE),
    }
)

PLAN: dict[str, Any] = strict(
    {
        "rank": {"type": "integer", "minimum": 1},
        "time_s": TIME,
        "lattice_time_s": TIME,
        "expected_time_s": MAYBE_NUMBER,
        "chance_clean": {"type": ["number", "null"], "minimum": 0, "maximum": 1},
        "time_interval_s": {"oneOf": [{"type": "null"}, listed(NUMBER, 2)]},
        "lattice_error_s": MAYBE_NUMBER,
        "pad_off_s": MAYBE_NUMBER,
        "lateral_area_mm_s": {"type": "number", "minimum": 0},
        "lateral_mean_mm": {"type": "number", "minimum": 0},
        "lateral_max_mm": {"type": "number", "minimum": 0},
        "sideways_mm": {"type": "number", "minimum": 0},
        "path_ratio": {"type": ["number", "null"]},
        "hand_moves": COUNT,
        "hand_holds": listed(TEXT),
        "margin_min_mm": MAYBE_NUMBER,
        "load_max": MAYBE_SHARE,
        "steps": {**listed(STEP), "minItems": 1},
    }
)

WHY_NOT: dict[str, Any] = strict(
    {
        "step": COUNT,
        "limb": {"enum": ["LH", "RH", "LF", "RF", None]},
        "hold": MAYBE_TEXT,
        "missing_mm": MAYBE_NUMBER,
        "missing_bw": MAYBE_NUMBER,
        "change": TEXT,
    }
)

PLAN_SCHEMA: dict[str, Any] = {
    "$schema": "https://json-schema.org/draft/2020-12/schema",
    **strict(
        {
            "schema": {"const": "climbpath/plan/1"},
            "wall": TEXT,
            "athlete": TEXT,
            "line_x_mm": NUMBER,
            "aim": TEXT,
            "cautions": listed(TEXT),
            "plans": listed(PLAN),
            "trade_off": listed(listed(NUMBER, 3)),
            "why_not": WHY_NOT,
        },
        optional=("line_x_mm", "aim", "why_not"),
    ),
    # A document says why exactly where it has no plan.
    "if": {"properties": {"plans": {"maxItems": 0}}},
    "then": {"required": ["why_not"]},
    "else": {"not": {"required": ["why_not"]}},
}
