"""Further horizons from predicted faults, and the digest of what they come from."""

import hashlib

import numpy as np

from ..geomcore import study as core
from ..geomcore.digest import digest
from ..geomcore.errors import GeomcoreError, StudyError, Unsolved
from ..geomcore.kinematics import ConstantHeave

__all__ = ["check_methods", "horizon_digest", "horizons_of"]


def check_methods(names):
    """Refuse traces made by a model that the way back does not know.

    Parameters
    ----------
    names : mapping of str to TraceName

    Raises
    ------
    StudyError
    """
    others = {n.method for n in names.values()} - {ConstantHeave.NAME}
    if others:
        raise StudyError(
            "wrong-model",
            f"the traces were made by {', '.join(sorted(others))}; horizons are "
            f"predicted by {ConstantHeave.NAME} only.",
            "fault traces",
            f"Predict the fault by {ConstantHeave.NAME}.",
        )


def horizons_of(horizons, frames, names, traces, picks, steps):
    """Predict every horizon in every section that has a trace.

    Parameters
    ----------
    horizons : sequence of HorizonSpec
    frames : sequence of SectionFrame
    names : mapping of str to TraceName
    traces : mapping of str to GivenTrace
    picks : mapping of str to SectionPicks
        By section id; sections without picks are left to the offsets.
    steps : Steps

    Returns
    -------
    list of tuple (SectionFrame, str, HorizonPrediction or Unsolved)
        Frame, trace id, horizon.
    """
    items = []
    solved = [frame for frame in frames if frame.section_id in traces]
    for i, frame in enumerate(solved):
        steps.check()
        name = frame.section_id
        own = picks.get(name) or core.SectionPicks.empty(name)
        for spec in horizons:
            horizon = _one(spec, name, own.depth, traces[name])
            items.append((frame, names[name].trace_id, horizon))
        steps.progress((i + 1) / len(solved))
    return items


def _one(spec, section_id, picks, trace):
    try:
        return core.horizon_from_trace(spec, picks, trace)
    except GeomcoreError as error:
        return Unsolved(section_id, error.code, f"{spec.name}: {error}")


def horizon_digest(study, frames, traces, picks):
    """SHA-256 over the study, the sections, the picks and the faults used.

    Returns
    -------
    str
    """
    total = hashlib.sha256(digest(study, frames, picks).encode())
    for section_id in sorted(traces):
        trace = traces[section_id]
        regional = trace.regional
        total.update(section_id.encode())
        numbers = [trace.oblique_heave, trace.shear_angle]
        numbers += [regional.x0, regional.z0, regional.slope]
        for column in (trace.x, trace.z, numbers):
            total.update(np.ascontiguousarray(column, dtype="<f8").tobytes())
    return total.hexdigest()
