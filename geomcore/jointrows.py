"""What one horizon says of a fault at one shear angle: residuals and derivatives.

Everything is measured in the section itself: picks miss in z at their own x. Measures
of the shear frame change with the angle and would prefer some angles to others.
"""

from dataclasses import dataclass

import numpy as np

from .fit import whitened

__all__ = ["HorizonData", "LeaningFault"]

#: How loosely a found cut-off is held, as a share of the throw. It comes from the
#: fault and from the same picks as the rows of the bed, so it only starts the search.
_LOOSE = 0.2


class LeaningFault:
    """A fault at given coefficients, and the way to it along shear lines.

    Parameters
    ----------
    splines : EvenSplines
    coefficients : ndarray (n,)
    tan : float
        Tangent of the shear angle.
    """

    def __init__(self, splines, coefficients, tan):
        self.splines, self.coefficients, self.tan = splines, coefficients, tan
        self.x = np.linspace(splines.low, splines.high, 6 * splines.pieces + 1)
        z, slope = splines.values(coefficients, self.x)
        self.u = self.x - z * tan
        #: Every shear line meets it once.
        self.single = bool((1.0 - slope * tan).min() > 0.05)

    def at(self, x):
        """Give value and slope at x."""
        return self.splines.values(self.coefficients, x)

    def under(self, u):
        """Give the fault on shear lines: x, F~, dF~/du and 1 - F' tan."""
        x = np.interp(u, self.u, self.x)
        z, slope = self.at(x)
        lean = 1.0 - slope * self.tan
        # between the points of the table a tangent will do
        dx = (u - x + z * self.tan) / lean
        return x + dx, z + slope * dx, slope / lean, lean


@dataclass(frozen=True, eq=False)
class _Strips:
    """The modelled bed at the picks.

    Parameters
    ----------
    u, bed : ndarray (n,)
        Shear lines that meet the bed at the picks' x, and its z there.
    flat : ndarray (n,)
        1 + B~' tan: change of the bed at fixed u over that at fixed x.
    outer, inner : tuple of ndarray
        The fault on those lines and one displacement inwards (`LeaningFault.under`).
    """

    u: np.ndarray
    bed: np.ndarray
    flat: np.ndarray
    outer: tuple
    inner: tuple


class HorizonData:
    """A horizon's picks, and what is stated of its regional and cut-offs.

    Parameters
    ----------
    problem : Problem
        Its shear angle does not count.
    least : float
        Least standard deviation of any datum.

    Notes
    -----
    The horizon's own unknowns are two pulls of its regional (level and slope in units
    of their errors) and the x of its hanging-wall cut-off. The footwall cut-off is
    where the regional meets the fault; both cut-offs give the displacement H.
    """

    def __init__(self, problem, least):
        separation, regional, bed = problem.separation, problem.regional, problem.bed
        foot, hang = separation.footwall, separation.hanging_wall
        self.x, self.z = bed.x[1:], bed.z[1:]  # the first point is the cut-off
        self.sigma = np.maximum(bed.sigma[1:], least)
        self.correlation = bed.correlation[1:]
        self.regional, self.x0 = np.array([regional.z0, regional.slope]), regional.x0
        a, b, c = regional.covariance
        values, vectors = np.linalg.eigh([[a, b], [b, c]])
        self.root = vectors * np.sqrt(np.maximum(values, 0.0))
        loose = _LOOSE * separation.throw
        self.cut = np.array([foot.x, hang.x, hang.z])
        of_foot = loose if foot.slides else max(foot.sigma_x, least)
        of_hang = [max(s, least) for s in (hang.sigma_x, hang.sigma_z)]
        self.cut_sigma = np.array(
            [of_foot, *([loose, loose] if hang.slides else of_hang)]
        )
        self.start = np.array([0.0, 0.0, hang.x])

    def evaluate(self, fault, own, bed, rows=True):
        """Compare the data with a fault.

        Parameters
        ----------
        fault : LeaningFault
        own : ndarray (3,)
            The horizon's own unknowns.
        bed : ndarray (n,)
            The modelled bed at the picks, nearly.
        rows : bool
            Whether derivatives are wanted.

        Returns
        -------
        residual : ndarray (n + 3,)
            Model less observed in units of the errors: picks in z at their x, x of
            the footwall cut-off, x and z of the hanging-wall cut-off.
        by_fault : ndarray (n + 3, count)
        by_own : ndarray (n + 3, 3)
        bed : ndarray (n,)

        None instead where the construction has no solution.
        """
        level, slope = self.regional + self.root @ own[:2]
        foot = self._footwall(fault, level, slope)
        z, steep = fault.at(np.array([foot, own[2]]))
        heave = own[2] - foot - (z[1] - z[0]) * fault.tan
        if not (heave > 0 and steep[0] < slope):
            return None
        strips = self._strips(fault, level, slope, heave, bed)
        if strips is None:
            return None
        miss = (strips.bed - self.z)[:, None]
        cut = (np.array([foot, own[2], z[1]]) - self.cut) / self.cut_sigma
        if not rows:
            residual = np.concatenate([self._white(miss)[:, 0], cut])
            return residual, None, None, strips.bed
        of_cut = self._cut_rows(fault, own[2], foot, steep, slope)
        of_bed = self._bed_rows(fault, strips, level, slope, heave, of_cut)
        white = self._white(np.hstack([miss, of_bed]))
        matrix = np.vstack([white[:, 1:], of_cut[:3] / self.cut_sigma[:, None]])
        residual = np.concatenate([white[:, 0], cut])
        return residual, matrix[:, :-3], matrix[:, -3:], strips.bed

    def _white(self, rows):
        return whitened(rows, self.x, self.sigma, self.correlation)

    def _footwall(self, fault, level, slope):
        """Give x where the regional meets the fault."""
        x = self.cut[0]
        for _ in range(8):
            z, steep = fault.at(x)
            miss = z - level - slope * (x - self.x0)
            x = x - miss / min(steep - slope, -1e-3)
            if abs(miss) < 1e-6 * self.cut_sigma[0]:
                break
        return float(x)

    def _strips(self, fault, level, slope, heave, bed):
        """Find the shear lines that meet the modelled bed at the picks' x."""
        tan, n = fault.tan, len(self.x)
        by_u = slope / (1.0 - slope * tan)
        u = self.x - bed * tan
        for _ in range(6):
            both = fault.under(np.concatenate([u, u - heave]))
            outer, inner = ([v[:n] for v in both], [v[n:] for v in both])
            bed = _level_at(level, slope, self.x0, u - heave, tan)
            bed = bed + outer[1] - inner[1]
            flat = 1.0 + (by_u + outer[2] - inner[2]) * tan
            if not flat.min() > 0.05:
                return None
            miss = u + bed * tan - self.x
            if np.abs(miss).max() < 1e-3 * heave:
                break
            u = u - miss / flat
        # so near, the bed is straight
        slope_at_x = (by_u + outer[2] - inner[2]) / flat
        return _Strips(u, bed - slope_at_x * miss, flat, outer, inner)

    def _cut_rows(self, fault, hang, foot, steep, slope):
        """Derive the places of the cut-offs."""
        of_foot, of_hang = fault.splines.rows(np.array([foot, hang]))
        # rows: x of the footwall, x and z of the hanging wall, z of the footwall
        rows = np.zeros((4, len(of_foot) + 3))
        across = steep[0] - slope
        rows[0, :-3] = -of_foot / across
        rows[0, -3:-1] = np.array([1.0, foot - self.x0]) @ self.root / across
        rows[1, -1] = 1.0
        rows[2, :-3], rows[2, -1] = of_hang, steep[1]
        rows[3] = steep[0] * rows[0]
        rows[3, :-3] += of_foot
        return rows

    def _bed_rows(self, fault, strips, level, slope, heave, of_cut):
        """Derive the bed, B~(u) = R~(u - H) + F~(u) - F~(u - H), at fixed x."""
        tan, n = fault.tan, fault.splines.rows
        lean = 1.0 - slope * tan
        # H = x_h - x_f - (z_h - z_f) tan
        of_heave = of_cut[1] - of_cut[0] - tan * (of_cut[2] - of_cut[3])
        by_heave = strips.inner[2] - slope / lean
        rows = by_heave[:, None] * of_heave
        rows[:, :-3] += n(strips.outer[0]) / strips.outer[3][:, None]
        rows[:, :-3] -= n(strips.inner[0]) / strips.inner[3][:, None]
        by_slope = (strips.u - heave - self.x0 + tan * level) / lean**2
        of_level = np.column_stack([np.full(len(by_slope), 1.0 / lean), by_slope])
        rows[:, -3:-1] += of_level @ self.root
        return rows / strips.flat[:, None]


def _level_at(level, slope, x0, u, tan):
    """Give R~(u) of the regional z = level + slope (x - x0)."""
    return (level + slope * (u - x0)) / (1.0 - slope * tan)
