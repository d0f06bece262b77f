"""The restored section: the hanging wall moved back, its beds' lengths then and now.

Lengths, elevations and displacements are in the study's length unit, in section
coordinates.
"""

from dataclasses import dataclass, replace

import numpy as np

from .errors import ConstructionError
from .kinematics import from_shear_frame, smoothed_line, to_shear_frame
from .lostarea import require_area, why_no_area
from .problem import bed_in_frame
from .profile import Profile

__all__ = ["RestoredHorizon", "RestoredSection", "restored_section"]

#: Lengthening of a bed by pick noise that is let through, relative.
NOISE = 2e-4


@dataclass(frozen=True, eq=False)
class RestoredHorizon:
    """One horizon of the hanging wall, moved back.

    Parameters
    ----------
    name : str
    x, z : ndarray (n,)
        Its points before the fault moved, from the footwall cut-off on.
    now_x, now_z : ndarray (n,)
        The same points now, from the hanging-wall cut-off on.
    regional : Regional
        Where they should come to lie.
    length_now, length_before : float
        Unfolded length of the bed between its first and last point, and the length
        of the regional it came from.
    misfit_rms, misfit_max : float
        Of the restored points against the regional.
    beyond : int
        Picks beyond the ends of the fault, which cannot be moved back.
    note : str
    """

    name: str
    x: np.ndarray
    z: np.ndarray
    now_x: np.ndarray
    now_z: np.ndarray
    regional: object
    length_now: float
    length_before: float
    misfit_rms: float
    misfit_max: float
    beyond: int
    note: str

    @property
    def strain(self):
        """Change of bed length over the length before; positive if it lengthened."""
        return self.length_now / self.length_before - 1.0

    def __repr__(self):
        return (
            f"RestoredHorizon({self.name!r}, {len(self.x)} points, "
            f"length_before={self.length_before:.6g}, "
            f"length_now={self.length_now:.6g}, "
            f"strain={self.strain:.4g}, misfit_rms={self.misfit_rms:.4g})"
        )


@dataclass(frozen=True, eq=False)
class RestoredSection:
    """The section before the fault moved.

    Parameters
    ----------
    section_id : str
    model, solver : str
        Of the construction whose fault the hanging wall was moved back along.
    displacement : float
        Oblique heave H it was moved back by.
    trace : FaultTrace
        The fault; it and the footwall stay where they are.
    horizons : tuple of RestoredHorizon
    left_out : tuple of (str, str)
        Horizons not restored, and why.
    """

    section_id: str
    model: str
    solver: str
    displacement: float
    trace: object
    horizons: tuple
    left_out: tuple

    @property
    def strain(self):
        """Change of the bed lengths of all horizons over their lengths before."""
        now = sum(h.length_now for h in self.horizons)
        return now / sum(h.length_before for h in self.horizons) - 1.0

    def __repr__(self):
        return (
            f"RestoredSection({self.section_id!r}, {self.model!r}, "
            f"displacement={self.displacement:.6g}, strain={self.strain:.4g}, "
            f"{self.horizons})"
        )


def restored_section(prediction, problems, growth=()):
    """Move the hanging wall back along a predicted fault.

    Parameters
    ----------
    prediction : Prediction
    problems : sequence of Problem
        The horizons, each with its own cut-offs, regional and bed.
    growth : sequence of str
        Horizons laid down while the fault moved; they were not there before and
        are left out.

    Returns
    -------
    RestoredSection

    Raises
    ------
    ConstructionError
        If the model does not keep area, or no horizon can be moved back.

    Notes
    -----
    A bed point at u came from u - H, and was higher by F~(u - H) - F~(u).
    """
    where = f"section {prediction.section_id}"
    require_area(why_no_area(prediction.model, prediction.compaction), where)
    done, left_out = [], []
    for problem in problems:
        name = problem.separation.horizon
        if name in growth:
            why = "a growth horizon was not there before the fault moved"
            left_out.append((name, why))
            continue
        horizon = _restored(prediction, replace(problem, model=prediction.model))
        if horizon is None:
            left_out.append((name, "the fault is not known where its columns slid"))
        else:
            done.append(horizon)
    if not done:
        reasons = "; ".join(f"{name}: {why}" for name, why in left_out)
        raise ConstructionError(
            "nothing-restored",
            f"no horizon can be moved back ({reasons}).",
            where,
            "Bring in pre-growth horizons over the predicted fault.",
        )
    return RestoredSection(
        prediction.section_id,
        prediction.model.label,
        prediction.solver,
        prediction.oblique_heave,
        prediction.trace,
        tuple(done),
        tuple(left_out),
    )


def _restored(prediction, problem):
    """Move one horizon back; None where fewer than two of its points can be."""
    angle, heave = prediction.model.shear_angle, prediction.oblique_heave
    fault_u = to_shear_frame(prediction.trace.x, prediction.trace.z, angle)
    bed = bed_in_frame(problem)
    slack = 1e-6 * heave
    inside = (bed.x <= fault_u[-1] + slack) & (bed.x - heave >= fault_u[0] - slack)
    if inside.sum() < 2:
        return None
    u, now_z, sigma = bed.x[inside], bed.z[inside], bed.sigma[inside]
    fall = np.interp(u, fault_u, prediction.trace.z)
    fall = fall - np.interp(u - heave, fault_u, prediction.trace.z)
    z = now_z - fall
    x, now_x = from_shear_frame(u - heave, z, angle), from_shear_frame(u, now_z, angle)
    regional = problem.regional
    miss = z - regional(x)
    length = np.hypot(1.0, regional.slope) * (x[-1] - problem.separation.footwall.x)
    return RestoredHorizon(
        problem.separation.horizon,
        x,
        z,
        now_x,
        now_z,
        regional,
        _unfolded_length(now_x, now_z, sigma),
        float(length),
        float(np.sqrt((miss**2).mean())),
        float(np.abs(miss).max()),
        int((~inside).sum()),
        _note(prediction, problem),
    )


def _unfolded_length(x, z, sigma):
    """Length along the bed; picks are averaged where their noise would lengthen it."""
    x, z = smoothed_line(Profile(x, z, sigma), NOISE)
    return float(np.hypot(np.diff(x), np.diff(z)).sum())


def _note(prediction, problem):
    name, detail = problem.separation.horizon, prediction.detail
    if detail is not None and name in set(detail.residuals.horizon):
        return "used for the fault: the misfit is that of the fit"
    if name == prediction.horizon:
        return "the horizon made the fault: that it comes back is an identity"
    return "not used for the fault: the misfit tests the construction"
