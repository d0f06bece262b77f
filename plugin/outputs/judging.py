"""Rows of the tables that judge a construction: other methods beside it, its balance.

Pure Python, knows no QGIS; a section that has neither gives no row.
"""

import math

from ..fields import Table

__all__ = ["balance_table", "comparison_table", "trust_values"]

STRAIGHT = "straight fault"
ALL_HORIZONS = "all pre-growth horizons"
#: Said in every row of one horizon's area.
NO_TEST = "The area of one horizon is no independent test of the construction."


def _known(value):
    """Give a plain float, or None where it is unknown."""
    return float(value) if value is not None and math.isfinite(value) else None


# ---- how far to trust, and why -----------------------------------------------------

#: Source of error in the core, by the field that tells its share.
_SHARES = {
    "sigma_picks": "picks",
    "sigma_known_fault": "known fault",
    "sigma_regional": "regional",
    "sigma_cutoffs": "cut-offs",
    "sigma_shear_angle": "shear angle",
}


def trust_values(prediction):
    """Give how far a prediction is trusted, and what each source of error does.

    Parameters
    ----------
    prediction : Prediction

    Returns
    -------
    dict
        Fields of ``predicted_fault_traces``; a share that is not stated, or stated
        as nothing, is None.
    """
    trust, shares = prediction.trust, prediction.error_shares
    stated = {field: _known(shares.get(name)) for field, name in _SHARES.items()}
    return {
        "trusted_x": _known(trust.x),
        "trusted_z": _known(trust.z),
        "trusted_until": trust.reason or None,
        **{field: share or None for field, share in stated.items()},
    }


# ---- other methods beside it -------------------------------------------------------


def comparison_table(stamp, results):
    """Rows of ``method_comparison``: one a construction, one a straight fault.

    Parameters
    ----------
    stamp : Stamp
    results : sequence of SectionResult
    """
    rows = []
    for result in results:
        if result.comparison:
            fixed = {**stamp.short, "section_id": result.frame.section_id}
            made = result.comparison
            rows += [{**fixed, **_compared(made, row)} for row in made.rows]
            rows.append({**fixed, **_straight(made.straight)})
    return Table("method_comparison", [(None, values) for values in rows])


def _compared(comparison, row):
    values = {
        "method": row.model.NAME,
        "solver": row.solver,
        "shear_angle": row.model.shear_angle,
        "misfit_rms": row.misfit_rms,
    }
    prediction = row.prediction
    if not prediction:
        return {**values, "status": "not solved", "reason": prediction.reason}
    return {
        **values,
        "status": "solved",
        "heave": _known(prediction.separation.heave),
        "throw": _known(prediction.separation.throw),
        "detachment_z": _known(prediction.detachment_z),
        "deepest_z": _known(prediction.deepest_z),
        "spread_max": comparison.spread_max,
    }


def _straight(test):
    values = {"method": STRAIGHT}
    if not test:
        return {**values, "status": "not solved", "reason": test.reason}
    (foot_x, foot_z), (hang_x, hang_z) = test.through
    return {
        **values,
        "status": "solved",
        "heave": _known(hang_x - foot_x),
        "throw": _known(foot_z - hang_z),
        "dip": _known(test.dip),
        "misfit_rms": _known(test.misfit_rms),
        "log_ratio": _known(test.log_ratio),
        "verdict": test.verdict,
        "text": test.text,
    }


# ---- the balance -------------------------------------------------------------------


def balance_table(stamp, results):
    """Rows of ``balance``: one a horizon, one for all of them, or why there is none.

    Parameters
    ----------
    stamp : Stamp
    results : sequence of SectionResult
    """
    rows = []
    for result in results:
        if result.balance is not None:
            fixed = {**stamp.short, "section_id": result.frame.section_id}
            rows += [{**fixed, **values} for values in _balanced(result)]
    return Table("balance", [(None, values) for values in rows])


def _balanced(result):
    balance = result.balance
    if not balance:
        return [{"status": "not balanced", "reason": balance.reason}]
    rows = [_horizon_row(result, lost) for lost in balance.areas]
    rows.append(_all_horizons(balance))
    left_out = [(n, why) for n, why in balance.left_out]
    return rows + [
        {"horizon": name, "status": "not balanced", "reason": why}
        for name, why in left_out
    ]


def _horizon_row(result, lost):
    """Row of one horizon; that of the construction up to its own last pick."""
    balance, prediction = result.balance, result.prediction
    own = lost.horizon == prediction.horizon
    values = {
        "horizon": lost.horizon,
        "status": "balanced",
        "lost_area": _known(lost.total),
        "lost_area_sigma": _known(lost.sigma),
        "gap_area": _known(lost.gap),
        "oblique_heave": _known(lost.displacement),
        "area_detachment_z": _known(lost.regional_z - lost.total / lost.displacement),
        "construction_detachment_z": _known(prediction.detachment_z),
        "note": NO_TEST,
        **_restored(balance.restored, lost.horizon),
    }
    if not own:
        return values
    one = balance.one_horizon
    return {
        **values,
        "area_detachment_z": _known(one.z),
        "area_detachment_sigma": _known(one.sigma),
        "convergence": balance.convergence.text,
        "note": f"{one.statement} {NO_TEST}",
    }


def _restored(restored, name):
    """Unfolded length and strain of a horizon, or why it was not restored."""
    if not restored:
        return {"reason": restored.reason}
    for horizon in restored.horizons:
        if horizon.name == name:
            return {
                "unfolded_length": _known(horizon.length_now),
                "length_before": _known(horizon.length_before),
                "strain": _known(horizon.strain),
            }
    return {"reason": "; ".join(w for n, w in restored.left_out if n == name) or None}


def _all_horizons(balance):
    """Row of the line through several horizons, or why there is none."""
    values, depth = {"horizon": ALL_HORIZONS}, balance.area_depth
    if not depth:
        return {**values, "status": "not balanced", "reason": depth.reason}
    low, high = depth.detachment_interval or (None, None)
    beside = balance.comparison
    doubts = " ".join(d.text for d in depth.doubts)
    words = [depth.text, doubts, beside.text if beside else beside.reason]
    return {
        **values,
        "status": "balanced",
        "oblique_heave": _known(depth.displacement),
        "area_detachment_z": _known(depth.detachment_z),
        "area_detachment_low": _known(low),
        "area_detachment_high": _known(high),
        "construction_detachment_z": _known(beside.construction_z) if beside else None,
        "strain": _known(balance.restored.strain) if balance.restored else None,
        "note": " ".join(w for w in words if w),
    }
