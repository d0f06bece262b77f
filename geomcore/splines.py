"""A smooth curve as a sum of evenly spaced cubic B-splines, straight beyond its ends.

The coefficients are the unknowns of `jointfit`: values, slopes and the integral of the
squared curvature are linear, or quadratic, in them.
"""

from dataclasses import dataclass

import numpy as np

__all__ = ["EvenSplines"]


@dataclass(frozen=True)
class EvenSplines:
    """Cubic B-splines with one knot every `step`.

    Parameters
    ----------
    low : float
        First knot.
    step : float
    pieces : int
        Pieces between knots; there are three coefficients more.
    """

    low: float
    step: float
    pieces: int

    @classmethod
    def over(cls, low, high, step):
        """Cover a stretch of x with pieces of about one step."""
        pieces = max(int(np.ceil((high - low) / step)), 4)
        return cls(float(low), float((high - low) / pieces), pieces)

    @property
    def count(self):
        """Number of coefficients."""
        return self.pieces + 3

    @property
    def high(self):
        """Last knot."""
        return self.low + self.step * self.pieces

    def _weights(self, x):
        """Weights of four neighbouring coefficients for value and slope at x."""
        inside = np.minimum(np.maximum(x, self.low), self.high)
        at = (inside - self.low) / self.step
        first = np.minimum(at.astype(int), self.pieces - 1)
        t = at - first
        s, t2 = 1.0 - t, t * t
        s2 = s * s
        value = np.empty((*t.shape, 4))
        slope = np.empty((*t.shape, 4))
        value[..., 0], value[..., 3] = s2 * s / 6.0, t2 * t / 6.0
        value[..., 1] = (3.0 * t - 6.0) * t2 / 6.0 + 2.0 / 3.0
        value[..., 2] = (3.0 * s - 6.0) * s2 / 6.0 + 2.0 / 3.0
        slope[..., 0], slope[..., 3] = -s2, t2
        slope[..., 1] = t * (3.0 * t - 4.0)
        slope[..., 2] = -s * (3.0 * s - 4.0)
        slope *= 0.5 / self.step
        value += slope * (x - inside)[..., None]
        return first, value, slope

    def values(self, coefficients, x):
        """Give value and slope of a curve at x.

        Parameters
        ----------
        coefficients : ndarray (count,)
        x : ndarray (n,)

        Returns
        -------
        value, slope : ndarray (n,)
        """
        first, value, slope = self._weights(np.asarray(x, dtype=float))
        near = coefficients[first[..., None] + np.arange(4)]
        return (
            np.einsum("...i,...i", near, value),
            np.einsum("...i,...i", near, slope),
        )

    def rows(self, x):
        """Give the matrix (n, count) that turns coefficients into values at x."""
        first, value, _ = self._weights(np.atleast_1d(np.asarray(x, dtype=float)))
        rows = np.zeros((len(first), self.count))
        rows[np.arange(len(first))[:, None], first[:, None] + np.arange(4)] = value
        return rows

    def roughness(self):
        """Give the matrix whose quadratic form is the integral of f''^2.

        The second derivative is straight between knots, where it is the second
        difference of the coefficients.
        """
        bend = np.diff(np.eye(self.count), n=2, axis=0) / self.step**2
        n = len(bend)
        mass = np.diag(np.full(n, 4.0)) + np.eye(n, k=1) + np.eye(n, k=-1)
        mass[0, 0] = mass[-1, -1] = 2.0
        return bend.T @ (mass * (self.step / 6.0)) @ bend

    def following(self, curve):
        """Give coefficients whose curve follows another without overshooting.

        Schoenberg's approximation: each coefficient is the value in the middle of its
        spline.
        """
        return curve(self.low + self.step * (np.arange(self.count) - 1.0))
