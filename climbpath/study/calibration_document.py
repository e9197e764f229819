"""The calibrate document: a ``Calibration`` as plain values with fixed decimals."""

from __future__ import annotations

from typing import Any

from climbpath.study.calibrate import DECIMALS, Calibration, FittedParameter, RunError
from climbpath.study.document import rounded, rounded_share, rounded_time

CALIBRATE_SCHEMA_NAME = "climbpath/calibrate/1"


def calibration_document(result: Calibration) -> dict[str, Any]:
    """The document of ``result``: dicts, lists, strings, ints, floats and None only.

    Times have 6 decimals, capacities, shares and correlations 4. The unit of a parameter stands at
    the end of its name.
    """
    errors = result.errors
    return {
        "schema": CALIBRATE_SCHEMA_NAME,
        "wall": result.wall_name,
        "athlete": result.athlete_name,
        "cautions": list(result.cautions),
        "parameters": [_parameter(one) for one in result.parameters],
        "capacity": {key: _value(value) for key, value in result.athlete.capacity.items()},
        "errors": {
            "splits": sum(run.splits for run in result.runs),
            "rms_s": rounded_time(errors.in_sample),
            "left_out_rms_s": rounded_time(errors.left_out),
            "default_rms_s": rounded_time(errors.default),
            "others_rms_s": rounded_time(errors.others),
            "others_splits": errors.others_count,
            "left_out_there_rms_s": rounded_time(errors.left_out_there),
        },
        "runs": [_run(one) for one in result.runs],
        "left_out": [{"run": run, "reason": reason} for run, reason in result.left_out],
        "open_questions": list(result.open_questions),
        "singular_values": [rounded_share(value) for value in result.singular_values],
        "correlations": [
            {"parameters": [first, second], "correlation": rounded_share(value)}
            for first, second, value in result.correlations
        ],
        "intervals_from": "runs drawn again" if result.resampled else "independent errors",
        "draws": result.draws,
        "seed": result.seed,
        "converged": result.converged,
        "predictions": result.predictions,
    }


def _parameter(one: FittedParameter) -> dict[str, Any]:
    return {
        "parameter": one.key,
        "default": _value(one.default),
        "value": _value(one.value),
        "interval": [_value(bound) for bound in one.interval],
        "standard_error": _value(one.standard_error),
        "prior_share": rounded_share(one.prior_share),
        "told": one.told,
        "at_bound": one.at_bound,
    }


def _run(one: RunError) -> dict[str, Any]:
    return {
        "run": one.run,
        "splits": one.splits,
        "rms_s": rounded_time(one.rms_s),
        "left_out_rms_s": rounded_time(one.left_out_rms_s),
        "last_s": rounded_time(one.last_s),
        "last_predicted_s": rounded_time(one.last_predicted_s),
        "weight": rounded_share(one.weight),
    }


def _value(value: float) -> float | None:
    return rounded(value, DECIMALS)
