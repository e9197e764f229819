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
        "com_path_mm": {**listed(listed(NUMBER, 4)), "minItems": 1},
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

ERRORS: dict[str, Any] = strict(
    {
        "splits": COUNT,
        "rms_s": TIME,
        "left_out_rms_s": MAYBE_SHARE,
        "default_rms_s": TIME,
        "others_rms_s": MAYBE_SHARE,
        "others_splits": COUNT,
        "left_out_there_rms_s": MAYBE_SHARE,
    }
)

PARAMETER: dict[str, Any] = strict(
    {
        "parameter": TEXT,
        "default": TIME,
        "value": TIME,
        "interval": listed(TIME, 2),
        "standard_error": TIME,
        "prior_share": {"type": "number", "minimum": 0, "maximum": 1},
        "told": {"enum": ["much", "some", "little", "nothing"]},
        "at_bound": {"type": "boolean"},
    }
)

RUN: dict[str, Any] = strict(
    {
        "run": TEXT,
        "splits": COUNT,
        "rms_s": TIME,
        "left_out_rms_s": MAYBE_SHARE,
        "last_s": TIME,
        "last_predicted_s": TIME,
        "weight": {"type": "number", "minimum": 0, "maximum": 1},
    }
)

CALIBRATE_SCHEMA: dict[str, Any] = {
    "$schema": "https://json-schema.org/draft/2020-12/schema",
    **strict(
        {
            "schema": {"const": "climbpath/calibrate/1"},
            "wall": TEXT,
            "athlete": TEXT,
            "cautions": listed(TEXT),
            "parameters": listed(PARAMETER),
            "capacity": {"type": "object", "additionalProperties": TIME},
            "errors": ERRORS,
            "runs": listed(RUN),
            "left_out": listed(strict({"run": TEXT, "reason": TEXT})),
            "open_questions": listed(TEXT),
            "singular_values": listed(TIME),
            "correlations": listed(
                strict(
                    {
                        "parameters": listed(TEXT, 2),
                        "correlation": {"type": "number", "minimum": -1, "maximum": 1},
                    }
                )
            ),
            "intervals_from": {"enum": ["runs drawn again", "independent errors"]},
            "draws": COUNT,
            "seed": COUNT,
            "converged": {"type": "boolean"},
            "predictions": COUNT,
        }
    ),
}

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

SHARE: dict[str, Any] = {"type": "number", "minimum": 0, "maximum": 1}
STATUS: dict[str, Any] = {"enum": ["holds", "does not hold", "not identifiable", "one wall only"]}
ANSWER: dict[str, Any] = {"type": ["boolean", "null"]}


def maybe(item: dict[str, Any]) -> dict[str, Any]:
    """``item`` or null."""
    return {"oneOf": [{"type": "null"}, item]}


SPREAD: dict[str, Any] = strict({"mean": NUMBER, "sd": NUMBER})
COUNTED: dict[str, Any] = strict({"better": COUNT, "worse": COUNT})
COMPARED: dict[str, Any] = maybe(strict({"with": TIME, "without": TIME}))

EVIDENCE_WALL: dict[str, Any] = strict(
    {
        "layout": COUNT,
        "bodies": {"type": "integer", "minimum": 1},
        "without_way_up": COUNT,
        "share_with_way_up": SHARE,
        "time_s": maybe(strict({"p5": TIME, "p50": TIME, "p95": TIME})),
        "stretch_speeds_m_s": listed(MAYBE_NUMBER, 3),
        "use_shares": maybe(listed(SHARE, 20)),
        "opening": strict(
            {
                "up_with": COUNT,
                "up_without": COUNT,
                "up_both_ways": COUNT,
                "time_without": COUNTED,
                "opening_mean_without": COUNTED,
                "lateral_max_without": COUNTED,
                "time_s": COMPARED,
                "opening_mean_mm": COMPARED,
                "lateral_max_mm": COMPARED,
            }
        ),
    }
)

EVIDENCE_HOLD: dict[str, Any] = strict(
    {
        "hold": TEXT,
        "predicted_share": maybe(SHARE),
        "observed_share": SHARE,
        "error": {"type": ["number", "null"], "minimum": -1, "maximum": 1},
        "contested": {"type": "boolean"},
        "right_side": ANSWER,
        "layout_shares": maybe(strict({"least": SHARE, "p50": SHARE, "greatest": SHARE})),
        "used_by_most": STATUS,
    }
)

EVIDENCE_SCORES: dict[str, Any] = strict(
    {
        "name": TEXT,
        "correlation": {"type": ["number", "null"], "minimum": -1, "maximum": 1},
        "right_side": COUNT,
        "holds": {"const": 20},
        "brier": SHARE,
        "excess": SHARE,
        "brier_contested": SHARE,
        "excess_contested": SHARE,
    }
)

EVIDENCE_CONCLUSION: dict[str, Any] = strict(
    {
        "claim": TEXT,
        "expected": ANSWER,
        "lane": ANSWER,
        "layouts": strict({"true": COUNT, "false": COUNT, "undecided": COUNT}),
        "status": STATUS,
    }
)

EVIDENCE_SCHEMA: dict[str, Any] = {
    "$schema": "https://json-schema.org/draft/2020-12/schema",
    **strict(
        {
            "schema": {"const": "climbpath/evidence/1"},
            "bodies": COUNT,
            "layouts": COUNT,
            "layout_bodies": COUNT,
            "seed": COUNT,
            "split_holds": listed(TEXT, 2),
            "opening_hold": TEXT,
            "opening_end": TEXT,
            "foot_layouts": listed(strict({"layout": COUNT, "feet_mm": listed(listed(NUMBER, 2))})),
            "populations": listed(
                strict(
                    {
                        "sex": {"enum": ["female", "male"]},
                        "stature_mm": SPREAD,
                        "body_mass_index_kg_m2": SPREAD,
                        "observed": strict(
                            {"years": listed(COUNT), "runs": COUNT, "mean_of_medians_s": TIME}
                        ),
                        "lane": EVIDENCE_WALL,
                        "foot_layouts": listed(EVIDENCE_WALL),
                        "holds": listed(EVIDENCE_HOLD, 20),
                        "scores": listed(EVIDENCE_SCORES),
                        "rivals": listed(EVIDENCE_SCORES, 3),
                        "conclusions": listed(EVIDENCE_CONCLUSION),
                        "disagreements": listed(TEXT),
                    }
                ),
                2,
            ),
            "cautions": listed(TEXT),
        }
    ),
}
