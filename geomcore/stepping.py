"""The step of every column construction: each node from its column's origin."""

import numpy as np

from .errors import ConstructionError

__all__ = ["at_origin", "hat_matrix", "march"]


def at_origin(origin_index, origin_fraction, values):
    """Read values at the nodes at the origins of columns, straight between nodes."""
    shape = (-1,) + (1,) * (np.ndim(values) - 1)
    f = origin_fraction.reshape(shape)
    if not f.any():
        return values[origin_index]
    return (1 - f) * values[origin_index] + f * values[origin_index + 1]


def march(origin_index, origin_fraction, start, increment, step=None):
    """Carry the fault outwards strip by strip.

    Parameters
    ----------
    origin_index : ndarray (n,) of int
        Node before the place where the column of each node came from.
    origin_fraction : ndarray (n,)
        Where between that node and the next, 0 to 1.
    start : ndarray (m, ...)
        F at the first m nodes (the known or assumed piece).
    increment : ndarray (n, ...)
        B at each node minus R at its origin; the first m rows are not used.
        Further axes run through together (several beds, or derivatives).
    step : callable, optional
        ``step(inner, nodes)`` gives F at a slice of nodes from F at their origins,
        where it is more than that plus the increment.

    Returns
    -------
    ndarray (n, ...)
        F[i] = F(origin of i) + increment[i] (eq. 5 of methods.md; 2 and 3 are
        special cases).

    Notes
    -----
    A node can be solved when its origin lies on the solved part, so a whole strip
    is solved in one step. Where it lies between the last solved node and itself (a
    shadow wider than the heave, with no nodes in it), F is straight between the two
    by assumption and F[i] = F[i - 1] + increment[i]/(1 - fraction).
    """
    n = len(origin_index)
    fault = np.empty((n, *np.shape(increment)[1:]))
    done = len(start)
    fault[:done] = start
    needed = origin_index + (origin_fraction > 0)
    while done < n:
        waits = needed[done:] >= done
        first = int(waits.argmax())
        stop = done + first if waits[first] else n
        if stop == done and step is None and origin_index[done] == done - 1:
            rise = increment[done] / (1.0 - origin_fraction[done])
            fault[done] = fault[done - 1] + rise
            done += 1
            continue
        if stop == done:
            raise ConstructionError(
                "no-progress", "a column has not moved: its origin lies beyond itself."
            )
        nodes = slice(done, stop)
        inner = at_origin(origin_index[nodes], origin_fraction[nodes], fault)
        fault[nodes] = inner + increment[nodes] if step is None else step(inner, nodes)
        done = stop
    return fault


def hat_matrix(at, points):
    """Give the weights of linear interpolation.

    Parameters
    ----------
    at : ndarray (n,)
        Where values are wanted.
    points : ndarray (m,)
        Where they are known, growing.

    Returns
    -------
    ndarray (n, m)
        values at `at` = matrix @ values at `points`; ends are held.
    """
    matrix = np.zeros((len(at), len(points)))
    j = np.clip(np.searchsorted(points, at, side="right") - 1, 0, len(points) - 2)
    f = np.clip((at - points[j]) / (points[j + 1] - points[j]), 0.0, 1.0)
    rows = np.arange(len(at))
    matrix[rows, j] = 1.0 - f
    matrix[rows, j + 1] += f
    return matrix
