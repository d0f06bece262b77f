"""The cases of the methods page: invented faults, and numbers recomputed from them.

Every number has the value it is checked against and where that comes from. 'Derived'
values were derived for this project and confirmed with particles moved along their
shear lines by root finding (tests/oracles.py), which shares no code with the core.
"""

from dataclasses import dataclass, replace

import numpy as np

from geomcore.burial import buried_dip
from geomcore.compaction import Compaction
from geomcore.construction import predict_fault
from geomcore.fault import KnownFault
from geomcore.fit import BedRows, assemble, solve_fit
from geomcore.forward import forward_horizon
from geomcore.kinematics import ConstantHeave
from geomcore.porosity import decompact, preset
from geomcore.problem import MarchOptions
from geomcore.profile import Profile, line_through
from geomcore.section import SectionFrame
from geomcore.separation import CutOff, Separation
from geomcore.sliplines import slide_along
from geomcore.sources import Features
from geomcore.study import SectionLine, Study, run

DERIVED = "derived, particle model"


@dataclass(frozen=True)
class Check:
    """One number, recomputed.

    Parameters
    ----------
    what : str
    value, expected, tolerance : float
    source : str
        Where the expected value comes from.
    digits : int
        Decimals shown.
    """

    what: str
    value: float
    expected: float
    tolerance: float
    source: str
    digits: int = 1

    @property
    def holds(self):
        """Whether the value is the expected one within the tolerance."""
        return abs(self.value - self.expected) <= self.tolerance


@dataclass(frozen=True)
class Case:
    """A fault, a regional and a displacement that a column model is shown with."""

    dip: float
    detachment: float
    regional: float
    displacement: float

    def fault(self, x):
        """Give z = det (1 - exp(-x/L)) below (0, 0), straight above it."""
        slope = np.tan(np.radians(self.dip))
        x = np.asarray(x, dtype=float)
        length = -self.detachment / slope
        curved = -self.detachment * np.expm1(-np.maximum(x, 0.0) / length)
        return np.where(x < 0, -slope * x, curved)

    def points(self, step=4.0, reach=32000.0):
        """Give the fault as points."""
        x = np.arange(-600.0, reach, step)
        return x, self.fault(x)

    def forward(self, model, step=4.0, reach=32000.0, compaction=None):
        """Give the deformed horizon and its two cut-offs."""
        level = line_through(0.0, self.regional, 0.0)
        return forward_horizon(
            *self.points(step, reach), level, self.displacement, model, 2000, compaction
        )


#: Case of each column model; a model without a row of its own has the first.
LISTRIC = Case(60.0, -4000.0, -500.0, 900.0)
CASES = {
    "constant slip": replace(LISTRIC, displacement=1000.0),
    "constant bed length": Case(45.0, -4000.0, 0.0, 700.0),
}
#: Numbers of each column model, by its name: what, expected, tolerance, digits.
KNOWN = {
    "constant slip": (
        ("heave", 599.583, 0.01, 2),
        ("throw", 800.313, 0.01, 2),
        ("far heave", 1000.0, 0.05, 1),
        ("lost area", 2.90758e6, 100.0, 0),
    ),
    "constant bed length": (
        ("far heave", 673.15, 0.1, 2),
        ("lost area", 2.7254e6, 820.0, 0),
    ),
}
#: Heave and throw at an oblique heave of 900, by shear angle.
CUTOFFS = {
    -15.0: (1304.798, 1510.728),
    0.0: (900.0, 1129.617),
    20.0: (605.988, 807.790),
    30.0: (503.885, 686.092),
    45.0: (375.181, 524.819),
}


def case_of(model):
    """Give the case that a column model is shown with."""
    return CASES.get(model.NAME, LISTRIC)


def shown(model):
    """Give the instances of a column model that are shown."""
    angles = (0.0, 30.0) if hasattr(model, "ANGLE_BOUNDS") else (0.0,)
    return tuple(model(angle) for angle in angles)


def measured(model, case):
    """Give heave, throw, far heave and lost area of a forward model."""
    x, z = case.points()
    bed, foot, hang = case.forward(model)
    inside = (x > foot[0]) & (x < hang[0])
    ring_x = np.r_[foot[0], x[inside], bed.x, bed.x[-1]]
    ring_z = np.r_[foot[1], z[inside], bed.z, case.regional]
    crossed = ring_x * np.roll(ring_z, -1) - ring_z * np.roll(ring_x, -1)
    start = line_through(0.0, case.regional, 0.0)
    at = np.array([foot[0], 20000.0])
    arrived = model.arrival(
        np.linspace(*at, 3000),
        lambda u: np.interp(u, x, z),
        start.slope,
        case.displacement,
    )
    return {
        "heave": hang[0] - foot[0],
        "throw": foot[1] - hang[1],
        "far heave": float(arrived[-1] - at[1]),
        "lost area": float(0.5 * abs(crossed.sum())),
    }


def model_checks(model):
    """Give the numbers of a column model, and its round trip."""
    case = case_of(model)
    checks = []
    if hasattr(model, "ANGLE_BOUNDS"):
        for angle, pair in CUTOFFS.items():
            got = measured_cutoffs(model(angle), case)
            for what, value, expected in zip(("heave", "throw"), got, pair):
                label = f"{what} at {angle:g} degrees, m"
                checks.append(Check(label, value, expected, 0.02, DERIVED, 2))
        area = measured(model(0.0), case)["lost area"]
        checks.append(
            Check("lost area, m2", area, 900.0 * 3500.0, 3000.0, "eq. A = H d", 0)
        )
    else:
        got = measured(model(), case)
        for what, expected, tolerance, digits in KNOWN.get(model.NAME, ()):
            unit = "m2" if what == "lost area" else "m"
            label, value = f"{what}, {unit}", got[what]
            checks.append(Check(label, value, expected, tolerance, DERIVED, digits))
    for instance in shown(model):
        _, miss, depth = round_trip(instance)
        share = 100.0 * float(np.abs(miss).max()) / depth
        label = f"round trip of {instance.label}: largest error, % of depth"
        checks.append(Check(label, share, 0.0, 0.2, "the fault it was made from", 3))
    return checks


def measured_cutoffs(model, case):
    """Give heave and throw of a forward model."""
    _, foot, hang = case.forward(model)
    return hang[0] - foot[0], foot[1] - hang[1]


def inverse_inputs(case, model, compaction=None, last=9000.0):
    """Give what `predict_fault` takes, the bed of the forward model as picks."""
    bed, foot, hang = case.forward(model, compaction=compaction)
    x = np.r_[np.linspace(0.0, hang[0], 120)]
    at = np.arange(hang[0] + 10.0, last, 20.0)
    end = np.array([[-5000.0, 0.0], [last + 2000.0, 0.0]])
    slope = float(np.diff(case.fault(np.array([hang[0], hang[0] + 1.0])))[0])
    return {
        "section": SectionFrame("S1", end, 90.0),
        "separation": Separation(
            "A", CutOff("footwall", *foot), CutOff("hanging wall", *hang)
        ),
        "fault": KnownFault(
            x, case.fault(x), 0.0, -np.tan(np.radians(case.dip)), slope, "known"
        ),
        "bed": Profile(at, bed(at), np.zeros(len(at))),
        "regional": line_through(foot[0], foot[1], 0.0),
        "model": model,
        "options": MarchOptions(compaction=compaction),
    }


def round_trip(model, case=None):
    """March the fault from the bed that the same model made.

    Returns
    -------
    x, miss : ndarray (n,)
        Predicted less true fault.
    depth : float
        Depth range of the fault there.
    """
    case = case or case_of(model)
    trace = predict_fault(**inverse_inputs(case, model)).trace
    truth = case.fault(trace.x)
    return trace.x, trace.z - truth, float(np.ptp(truth))


# ---- slip lines ---------------------------------------------------------------------


def circle(radius=5000.0, n=2001):
    """Give a concave fault: lower left part of a circle about (0, 0)."""
    angle = np.linspace(np.radians(190.0), np.radians(268.0), n)
    return radius * np.cos(angle), radius * np.sin(angle)


def turns(slip=900.0, radius=5000.0):
    """Give heights over a circular fault, the turn of a particle, and slip/radius."""
    height = np.array([1.0, 400.0, 800.0, 1200.0, 1600.0, 2000.0, 2500.0])
    start = np.radians(205.0)
    unit = np.array([np.cos(start), np.sin(start)])
    points = [(radius - h) * unit for h in height]
    moved = slide_along(*circle(radius), points, slip)
    turned = np.arctan2(moved[:, 1], moved[:, 0]) % (2 * np.pi) - start
    return height, np.degrees(turned), np.degrees(slip / (radius - height))


def slip_line_checks():
    """Turn of a particle on a circular fault, and an area before and after."""
    height, turned, wanted = turns()
    checks = [
        Check(f"turn {h:g} m over the fault, degrees", t, w, 2e-3, "slip/radius", 3)
        for h, t, w in zip(height[[0, 2, 6]], turned[[0, 2, 6]], wanted[[0, 2, 6]])
    ]
    a, r = np.radians(np.linspace(200.0, 206.0, 40)), np.linspace(3000.0, 4500.0, 12)
    ring = np.concatenate(
        [
            [(r[0] * np.cos(v), r[0] * np.sin(v)) for v in a],
            [(v * np.cos(a[-1]), v * np.sin(a[-1])) for v in r],
            [(r[-1] * np.cos(v), r[-1] * np.sin(v)) for v in a[::-1]],
            [(v * np.cos(a[0]), v * np.sin(a[0])) for v in r[::-1]],
        ]
    )
    kept = _area(slide_along(*circle(), ring, 1200.0)) / _area(ring)
    checks.append(Check("area after / before", kept, 1.0, 1e-3, "area is kept", 5))
    return checks


def _area(ring):
    x, z = ring.T
    return 0.5 * abs(x @ np.roll(z, -1) - z @ np.roll(x, -1))


# ---- the fit ------------------------------------------------------------------------

FIT_HEAVE, FIT_STRIPS, FIT_PICKS, FIT_NOISE = 600.0, 10, 25, 10.0
FIT_CASE = Case(60.0, -3500.0, 0.0, FIT_HEAVE)


def noisy_runs(count=60, seed=20):
    """Fit and march the same noisy picks; start piece and cut-offs exact.

    Returns
    -------
    fits : ndarray (count, nodes)
        Errors of the fit at its nodes, ten a strip.
    stated : ndarray (count, nodes)
        Its stated standard errors.
    marches : ndarray (count, picks)
        Errors of the march at the picks.
    """
    rng = np.random.default_rng(seed)
    step = FIT_HEAVE / FIT_PICKS
    at = np.arange(FIT_HEAVE, (FIT_STRIPS + 1) * FIT_HEAVE + 1e-6, step)
    nodes = np.arange(0.0, (FIT_STRIPS + 1) * FIT_HEAVE + 1.0, FIT_HEAVE / 10)
    fits, stated, marches = [], [], []
    for _ in range(count):
        bed = FIT_CASE.fault(at) - FIT_CASE.fault(at - FIT_HEAVE)
        bed = bed + rng.normal(0.0, FIT_NOISE, len(at))
        result = _fitted(at, bed, nodes)
        fits.append(result.z - FIT_CASE.fault(nodes))
        stated.append(np.sqrt(np.diag(result.covariance)))
        marches.append(_marched(bed) - FIT_CASE.fault(np.arange(len(bed) + 25) * step))
    return np.array(fits), np.array(stated), np.array(marches)


def _fitted(at, bed, nodes):
    n, start = len(at) - 1, np.linspace(0.0, FIT_HEAVE, 11)
    rows = BedRows(
        "A",
        at[1:],
        bed[1:],
        np.full(n, FIT_NOISE),
        np.zeros(n),
        np.zeros(n),
        FIT_HEAVE,
    )
    points = (start, FIT_CASE.fault(start), np.full(len(start), 0.1))
    return solve_fit(assemble(nodes, [rows], points))


def _marched(bed):
    """March by hand: each pick adds to the fault one heave before it."""
    known = np.arange(FIT_PICKS + 1) * FIT_HEAVE / FIT_PICKS
    z = [*FIT_CASE.fault(known)]
    for rise in bed[1:]:
        z.append(z[-FIT_PICKS] + rise)
    return np.array(z)


def by_strip(errors, per_strip):
    """Give the root mean square error in each strip."""
    return np.array(
        [
            np.sqrt(np.mean(errors[:, i * per_strip : (i + 1) * per_strip + 1] ** 2))
            for i in range(1, FIT_STRIPS + 1)
        ]
    )


def fit_checks(runs=None):
    """Error of the fit against that of the march, and against what it states."""
    fits, stated, marches = runs or noisy_runs()
    fit, march = by_strip(fits, 10)[-1], by_strip(marches, FIT_PICKS)[-1]
    scatter = by_strip(stated, 10)[-1] / fit
    goal = "at most 0.35"
    return [
        Check("rms of the fit over that of the march", fit / march, 0.0, 0.35, goal, 2),
        Check("stated over true error of the fit", scatter, 1.0, 0.25, "1", 2),
    ]


# ---- the assumed arc ----------------------------------------------------------------


def assumed(angle):
    """Solve a section whose fault is known at its trace only.

    Returns
    -------
    section : SectionResult
    heave : float
        The true one.
    """
    bed, foot, hang = LISTRIC.forward(ConstantHeave(angle))
    at = np.r_[np.arange(-4000.0, foot[0], 100.0), np.arange(hang[0] + 5, 9000.0, 50.0)]
    z = np.where(at < foot[0], LISTRIC.regional, bed(at))
    declared = {"unit": "m", "sign": "elevation", "datum": "sea level", "sigma": 1.0}
    study = Study.from_dict(
        {
            "format": "heaveline-study",
            "version": 1,
            "name": "assumed arc",
            "fault": "F",
            "crs": "EPSG:32633",
            "length_unit": "m",
            "vertical_datum": "sea level",
            "sources": [
                {"key": "trace", "role": "fault trace", "name": "F", **declared},
                {"key": "bed", "role": "horizon", "name": "A", **declared},
            ],
            "transport": {"hw_side": "E"},
            "construction": {"horizon": "A", "shear_angle": angle},
        }
    )
    trace = [(0.0, -9000.0, 0.0), (0.0, 9000.0, 0.0)]
    data = {
        "trace": Features.lines([trace], dip=[LISTRIC.dip], dip_azimuth=[90.0]),
        "bed": Features.points(np.column_stack([at, 0 * at]), z),
    }
    line = SectionLine("S1", np.array([(-5000.0, 0.0), (20000.0, 0.0)]))
    return run(study, data, [line]).sections[0], hang[0] - foot[0]


def arc_checks():
    """Heave found with the arc over the true heave, by shear angle."""
    checks = []
    for angle in (0.0, 20.0, 30.0):
        section, heave = assumed(angle)
        share = section.prediction.separation.heave / heave
        label = f"heave found / true, {angle:g} degrees"
        checks.append(Check(label, share, 1.0, 0.10, "the fault it was made from", 3))
    return checks


# ---- compaction ---------------------------------------------------------------------

SAGGED = Case(60.0, -4000.0, -800.0, 900.0)


def compacted():
    """Give the true fault, that found with compaction, and that found without.

    Returns
    -------
    x, truth, kept, ignored : ndarray (n,)
    bed, stiff : Profile
        The compacted bed, and the bed without compaction.
    """
    law = Compaction(preset("shale"), 0.0, 0.0)
    inputs = inverse_inputs(SAGGED, ConstantHeave(), law, 11000.0)
    kept = predict_fault(**inputs).trace
    ignored = predict_fault(**{**inputs, "options": MarchOptions()}).trace
    stiff, _, _ = SAGGED.forward(ConstantHeave())
    x = kept.x[kept.strip > 0]
    truth = SAGGED.fault(x)
    return x, truth, kept.z_at(x), ignored.z_at(x), inputs["bed"], stiff


def compaction_checks():
    """Thicknesses, a buried dip, and what ignoring compaction costs."""
    shale, sand = preset("shale"), preset("sand")
    table = "quadrature of the law"
    _, truth, kept, ignored, _, _ = compacted()
    at = int(np.argmin(np.abs(truth + 3916.0)))
    burial = "formula of Davison 1987, Xiao & Suppe 1989"
    return [
        Check(
            "shale 2000-3000 m: solid thickness, m",
            float(shale.solid_thickness(2000.0, 3000.0)),
            822.044,
            0.001,
            table,
            2,
        ),
        Check(
            "the same at the surface, m",
            float(decompact(shale, 2000.0, 3000.0, 0.0)),
            1475.197,
            0.002,
            table,
            2,
        ),
        Check(
            "sand 1000-2500 m: solid thickness, m",
            float(sand.solid_thickness(1000.0, 2500.0)),
            1038.632,
            0.001,
            table,
            2,
        ),
        Check(
            "60 degrees at the surface, buried to 3 km in shale, degrees",
            float(buried_dip(60.0, shale, 0.0, 3000.0)),
            36.58,
            0.01,
            burial,
            2,
        ),
        Check(
            "error at 3916 m depth with compaction, m",
            float(kept[at] - truth[at]),
            0.0,
            8.0,
            "the fault it was made from",
            1,
        ),
        Check(
            "too deep there without it, m",
            float(truth[at] - ignored[at]),
            743.0,
            2.0,
            DERIVED,
            0,
        ),
    ]
