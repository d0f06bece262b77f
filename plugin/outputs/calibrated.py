"""Rows of the tables of the shear angle. Pure Python, knows no QGIS."""

import math

from ..fields import Table

__all__ = ["shear_angle_table", "shear_misfit_table"]


def _known(value):
    """Give a plain float, or None where it is unknown."""
    return float(value) if value is not None and math.isfinite(value) else None


def _estimates(result):
    """Give (section or None, estimate), all sections together first."""
    yield from ((None, estimate) for estimate in result.joint)
    for section in result.sections:
        yield from ((section, estimate) for estimate in section.estimates)


def shear_angle_table(stamp, result):
    """Rows of ``shear_angle``: one a section and way, and one a way for all of them.

    Parameters
    ----------
    stamp : Stamp
    result : CalibrationResult
    """
    rows = []
    for section, estimate in _estimates(result):
        told = estimate.best is not None
        doubts = section.doubts if section else result.doubts
        values = {
            "section_id": section.section_id if section else None,
            "way": estimate.way,
            "best": _known(estimate.best),
            "low": _known(estimate.low),
            "high": _known(estimate.high),
            "sigma": _known(estimate.sd),
            "resolved": estimate.resolved,
            "chi2": _known(min(estimate.chi2)) if told else None,
            "freedom": _known(estimate.freedom) if told else None,
            "horizons": "; ".join(section.horizons) if section else None,
            "text": estimate.text,
            "warnings": "\n".join(dict.fromkeys(map(str, doubts))) or None,
        }
        rows.append((None, {**stamp.short, **values}))
    return Table("shear_angle", rows)


def shear_misfit_table(stamp, result):
    """Rows of ``shear_misfit``: one an angle tried; none where no angle can be told.

    Parameters
    ----------
    stamp : Stamp
    result : CalibrationResult
    """
    rows = []
    for section, estimate in _estimates(result):
        if estimate.best is None:
            continue
        fixed = {
            **stamp.short,
            "section_id": section.section_id if section else None,
            "way": estimate.way,
        }
        rows += [
            (None, {**fixed, "angle": float(angle), "chi2": _known(chi2)})
            for angle, chi2 in zip(estimate.angles, estimate.chi2)
        ]
    return Table("shear_misfit", rows)
