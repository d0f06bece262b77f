"""Several constructions of one section side by side, a straight fault among them."""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .errors import ConstructionError, GeomcoreError, Unsolved
from .fit import assemble, solve_fit, straight_evidence, whitened
from .fitting import section_rows
from .kinematics import ConstantHeave, to_shear_frame
from .problem import Problem, bed_from, bed_in_frame
from .profile import Profile

__all__ = [
    "Comparison",
    "ComparisonRow",
    "StraightFaultTest",
    "compare",
    "problem_of",
    "straight_fault_test",
]

#: Twice the log of the ratio of likelihoods beyond which evidence is called very
#: strong (Kass & Raftery 1995, value from memory).
VERY_STRONG = 10.0


@dataclass(frozen=True, eq=False)
class ComparisonRow:
    """One construction of the section.

    Parameters
    ----------
    model : object
        Kinematic model.
    solver : str
    prediction : Prediction or Unsolved
    misfit_rms : float or None
        Of the bed picks in units of their sigma; None for the march, whose
        construction reproduces the bed by definition.
    """

    model: object
    solver: str
    prediction: object
    misfit_rms: Optional[float]

    @property
    def label(self):
        """Name of the model for tables and figures."""
        return self.model.label


@dataclass(frozen=True)
class StraightFaultTest:
    """Whether the section needs a curved fault at all.

    Parameters
    ----------
    dip : float
        Dip of the straight fault through the known piece, degrees.
    misfit_rms : float
        Of the bed picks against the bed a straight fault would give, in sigma.
    worst : float
        Largest such misfit in the unit of z.
    log_ratio : float or None
        Twice the log of the likelihood of a smooth curve over that of a straight
        line (REML, both through the known piece); None without scipy.
    verdict : str
        ``curved``, ``straight`` or ``not resolved``.
    text : str
        The evidence for and against, in words.
    through : tuple of two tuples (x, z)
        Cut-offs that the straight fault goes through.
    """

    dip: float
    misfit_rms: float
    worst: float
    log_ratio: Optional[float]
    verdict: str
    text: str
    through: tuple

    def z_at(self, x):
        """Give the straight fault's z at x."""
        (x0, z0), (x1, z1) = self.through
        return z0 + (z1 - z0) / (x1 - x0) * (np.asarray(x, dtype=float) - x0)


@dataclass(frozen=True, eq=False)
class Comparison:
    """All constructions of one section.

    Parameters
    ----------
    section_id : str
    rows : tuple of ComparisonRow
    x : ndarray (n,)
        Common reach of those that could be solved.
    spread : ndarray (n,)
        Deepest less shallowest fault there.
    straight : StraightFaultTest or Unsolved
    """

    section_id: str
    rows: tuple
    x: np.ndarray
    spread: np.ndarray
    straight: object

    @property
    def solved(self):
        """Rows with a fault."""
        return tuple(r for r in self.rows if r.prediction)

    @property
    def spread_max(self):
        """Largest spread; None where fewer than two share any reach."""
        known = len(self.solved) > 1 and len(self.spread) > 0
        return float(self.spread.max()) if known else None


def compare(section_id, constructions, straight):
    """Run several constructions of one section and compare them.

    Parameters
    ----------
    section_id : str
    constructions : sequence of (model, solver, callable)
        Each callable gives a `Prediction` or raises a `GeomcoreError`.
    straight : callable
        Gives a `StraightFaultTest` of the section or raises a `GeomcoreError`.

    Returns
    -------
    Comparison
    """
    rows = []
    for model, solver, construct in constructions:
        prediction = _or_reason(section_id, construct)
        detail = getattr(prediction, "detail", None)
        misfit = detail.misfit_rms if detail is not None else None
        rows.append(ComparisonRow(model, solver, prediction, misfit))
    x, spread = _spread([r.prediction.trace for r in rows if r.prediction])
    tested = _or_reason(section_id, straight)
    return Comparison(section_id, tuple(rows), x, spread, tested)


def _or_reason(section_id, make):
    """Make a part of the comparison, or say why there is none."""
    try:
        return make()
    except GeomcoreError as error:
        return Unsolved(section_id, error.code, str(error))


def _spread(traces):
    """Deepest less shallowest over the reach that all traces share."""
    if not traces:
        return np.empty(0), np.empty(0)
    low = max(t.x[0] for t in traces)
    high = min(t.x[-1] for t in traces)
    if high <= low:
        return np.empty(0), np.empty(0)
    x = np.linspace(low, high, 201)
    z = np.array([t.z_at(x) for t in traces])
    return x, z.max(axis=0) - z.min(axis=0)


def straight_fault_test(problem):
    """Ask whether a straight fault through the known piece explains the bed.

    Parameters
    ----------
    problem : Problem
        With constant heave, at any shear angle.

    Returns
    -------
    StraightFaultTest

    Raises
    ------
    ConstructionError
        If the model is not constant heave.

    Notes
    -----
    Over a straight fault every column sinks alike, so the bed stays parallel to the
    regional: B~(u) = R~(u - H) + slope H, less what the columns thin where the
    problem has compaction. Compaction that it leaves out, tilting after the faulting
    and a second fault can bend a bed too; the test does not tell them apart.
    """
    if not isinstance(problem.model, ConstantHeave):
        raise ConstructionError(
            "straight-model", "the straight-fault test holds for constant heave only."
        )
    bed = bed_in_frame(problem)
    u, z = bed.x[1:], bed.z[1:]
    dip = problem.separation.cutoff_dip
    miss = z - _straight_bed(problem, u)
    sigma = np.maximum(bed.sigma[1:], 1e-4 * problem.separation.throw)
    shared = _shared_errors(problem, u)
    rms = _misfit(miss, sigma, shared)
    worst = float(np.abs(miss).max())
    ratio = _log_ratio(problem)
    verdict = _verdict(rms, ratio, len(u))
    but = "" if problem.options.compaction is None else ", but for its compaction"
    text = _words(verdict, dip, rms, worst, ratio, but)
    cuts = problem.separation.footwall, problem.separation.hanging_wall
    through = tuple((float(c.x), float(c.z)) for c in cuts)
    return StraightFaultTest(dip, rms, worst, ratio, verdict, text, through)


def _straight_bed(problem, u):
    """Bed over a straight fault through both cut-offs."""
    foot, heave = problem.separation.footwall, problem.oblique_heave
    throw, compaction = problem.separation.throw, problem.options.compaction
    level = problem.regional_at(u - heave)
    if compaction is None:
        return level - throw
    along = (u - heave - (foot.x - foot.z * problem.tan)) / heave
    then = foot.z - throw * along
    return level - throw - compaction.thinning_above(level, then, then - throw)


def _shared_errors(problem, u):
    """Covariance columns of what shifts or tilts all picks of the bed together.

    Level and dip of the regional and the hanging-wall cut-off; columns are scaled
    so that their products add up to the covariance.
    """
    arm = u - problem.oblique_heave - problem.regional.x0
    a, b, c = problem.regional.covariance
    values, vectors = np.linalg.eigh([[a, b], [b, c]])
    root = vectors * np.sqrt(np.maximum(values, 0.0))
    of_regional = np.column_stack([np.ones_like(u), arm]) @ root
    of_cutoff = np.full((len(u), 1), problem.separation.hanging_wall.sigma_z)
    return np.hstack([of_regional, of_cutoff])


def _misfit(miss, sigma, shared):
    """Root mean square of the misfit against its whole covariance."""
    covariance = np.diag(sigma**2) + shared @ shared.T
    return float(np.sqrt(miss @ np.linalg.solve(covariance, miss) / len(miss)))


def _log_ratio(problem):
    """Twice the log likelihood ratio of a smooth curve over a straight line."""
    if problem.options.compaction is not None:
        return None  # the fit does not hold with it
    try:
        u, beds, points = section_rows(problem)
        system = _with_shared_errors(problem, assemble(u, beds, points), beds)
        system = _less_straight(system)
        curved = solve_fit(system)
    except ConstructionError:
        return None
    return float(2.0 * (curved.evidence - straight_evidence(system)))


def _with_shared_errors(problem, system, beds):
    """Let shared errors of the first bed's picks count once, not once a pick."""
    n = len(beds[0].u)
    columns = whitened(
        _shared_errors(problem, beds[0].u),
        beds[0].u,
        beds[0].sigma,
        beds[0].correlation,
    )
    root = np.linalg.cholesky(np.eye(n) + columns @ columns.T)
    matrix, right = system.matrix.copy(), system.right.copy()
    matrix[:n] = np.linalg.solve(root, matrix[:n])
    right[:n] = np.linalg.solve(root, right[:n])
    return replace(system, matrix=matrix, right=right)


def _less_straight(system):
    """Take the best straight fault out of the data.

    It changes no likelihood, since smoothness does not see it; but misfits as small
    as the noise would drown in the rounding of squares of whole elevations.
    """
    basis = np.column_stack([np.ones(len(system.u)), system.u - system.u.mean()])
    shape = system.matrix @ basis
    line, *_ = np.linalg.lstsq(shape, system.right, rcond=None)
    return replace(system, right=system.right - shape @ line)


def _verdict(rms, ratio, n):
    """Call it curved only where both the misfit and the likelihood say so."""
    beyond_chance = rms > 1.0 + 2.0 / np.sqrt(2.0 * n)
    if ratio is None:
        return "curved" if rms > 2.0 else "not resolved"
    if ratio > VERY_STRONG and beyond_chance:
        return "curved"
    return "not resolved" if ratio > VERY_STRONG or beyond_chance else "straight"


def _words(verdict, dip, rms, worst, ratio, but):
    against = (
        f"A straight fault of {dip:.0f} degrees would keep the bed parallel to the "
        f"regional{but}; the picks miss that by {rms:.1f} times their error, that of "
        f"regional and cut-offs included ({worst:.0f} at most)."
    )
    weight = (
        ""
        if ratio is None
        else f" Twice the log likelihood ratio for a curve is {ratio:.1f}."
    )
    ending = {
        "curved": " The bed asks for a curved fault. Compaction, later tilting or a "
        "second fault can bend a bed as well.",
        "straight": " The picks do not ask for a curve: a planar fault explains them.",
        "not resolved": " The picks do not decide between the two.",
    }[verdict]
    return against + weight + ending


def problem_of(prediction, fault, bed, options, where):
    """Write a prediction's inputs as a problem of constant heave (vertical shear).

    Outboard of a subsidiary fault the heave is another, and in its shadow the bed
    does not see the master: it counts up to there.
    """
    if prediction.subsidiaries:
        angle = prediction.model.shear_angle
        seen = to_shear_frame(bed.x, bed.z, angle) < min(
            s.shadow[0] for s in prediction.subsidiaries
        )
        columns = (bed.x, bed.z, bed.sigma, bed.correlation)
        bed = Profile(*(c[seen] for c in columns))
    return Problem(
        where,
        prediction.separation,
        fault,
        bed_from(prediction.separation.hanging_wall, bed),
        prediction.regional,
        ConstantHeave(0.0),
        options,
    )
