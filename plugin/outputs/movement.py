"""Rows of the tables of movement: on subsidiary faults, and since each horizon.

Knows no QGIS; a section that has nothing of the kind gives no row.
"""

import math

import numpy as np

from ...geomcore.growth import section_history
from ...geomcore.kinematics import to_shear_frame
from ..fields import Table

__all__ = ["growth_table", "subsidiary_table"]

OLDEST = "The oldest horizon measured: nothing below it to compare with."
#: Said of an interval that thickens by more than its error.
GROWN = (
    "Growth: laid down while the fault moved, so this horizon has only the heave since "
    "then, not that of the next older one."
)


def _known(value):
    """Give a plain float, or None where it is unknown."""
    return float(value) if value is not None and math.isfinite(value) else None


# ---- subsidiary faults -------------------------------------------------------------


def subsidiary_table(stamp, results):
    """Rows of ``subsidiary_faults``: one a section and subsidiary fault used.

    Parameters
    ----------
    stamp : Stamp
    results : sequence of SectionResult
    """
    rows = []
    for result in results:
        prediction = result.prediction
        if prediction:
            fixed = {
                **stamp.short,
                "section_id": result.frame.section_id,
                "horizon": prediction.horizon,
            }
            rows += [
                {**fixed, **_subsidiary(prediction, share)}
                for share in prediction.subsidiaries
            ]
    return Table("subsidiary_faults", [(None, values) for values in rows])


def _subsidiary(prediction, share):
    fault = share.fault
    branch_x, branch_z = share.branch
    start, end = _on_master(prediction, share.shadow)
    return {
        "name": fault.plane.name,
        "sense": fault.plane.sense,
        "dip": 90.0 - abs(fault.plane.angle),
        "heave": _known(fault.heave),
        "throw": _known(fault.throw),
        "added_heave": _known(share.added_heave),
        "sigma_added_heave": _known(share.sigma),
        "share": _known(share.share),
        "branch_x": _known(branch_x),
        "branch_z": _known(branch_z),
        "shadow_from_x": _known(start),
        "shadow_to_x": _known(end),
    }


def _on_master(prediction, places):
    """Give x where the shear lines at places u meet the trace, NaN beyond its ends."""
    trace = prediction.trace
    u = to_shear_frame(trace.x, trace.z, prediction.model.shear_angle)
    return np.interp(places, u, trace.x, left=np.nan, right=np.nan)


# ---- growth ------------------------------------------------------------------------


def growth_table(stamp, results, shear_angle):
    """Rows of ``growth_history``: one a horizon, from the oldest to the youngest.

    Parameters
    ----------
    stamp : Stamp
    results : sequence of SectionResult
        Those with fewer than two horizons measured in depth give no row; refused
        sections have theirs written all the same.
    shear_angle : float
        Of the study, degrees.
    """
    rows = []
    for result in results:
        measured = [s.separation for s in result.separations]
        if sum(s.domain == "depth" for s in measured) > 1:
            fixed = {**stamp.short, "section_id": result.frame.section_id}
            found = section_history(result.picks, measured, shear_angle)
            rows += [{**fixed, **values} for values in _grown(found)]
    return Table("growth_history", [(None, values) for values in rows])


def _grown(found):
    """Rows of one section, each with the interval below its horizon."""
    for older, row in zip((None, *found.rows), found.rows):
        yield {
            "horizon": row.horizon,
            "heave": _known(row.heave),
            "throw": _known(row.throw),
            "oblique_heave": _known(row.oblique_heave),
            "sigma_heave": _known(row.sigma_heave),
            "sigma_throw": _known(row.sigma_throw),
            "heave_before": _known(row.heave_before),
            "throw_before": _known(row.throw_before),
            **(_interval(found, row, older) if older else {"note": OLDEST}),
        }


def _interval(found, row, older):
    """Expansion from a horizon down to the next older one, or why there is none."""
    name = f"{row.horizon} to {older.horizon}"
    for one in found.intervals:
        if (one.upper, one.lower) == (row.horizon, older.horizon):
            return {
                "interval": name,
                "expansion_index": _known(one.index),
                "sigma_expansion": _known(one.sigma),
                "is_growth": bool(one.is_growth),
                "note": GROWN if one.is_growth else None,
            }
    # the core says which interval it left out before it says why
    whys = [w for w in found.left_out if w.startswith(f"{name}: ")]
    return {"interval": name, "note": "; ".join(w[len(name) + 2 :] for w in whys)}
