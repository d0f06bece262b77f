"""Points and boxes sorted into square cells, to find those near a section quickly."""

from dataclasses import dataclass

import numpy as np

__all__ = ["CellIndex", "expanded"]

#: Items in a cell on average; few enough to be selective, many enough to be quick.
_ITEMS = 8
#: Most cells: their numbers fit 16 bits, which NumPy sorts by radix.
_CELLS = 60000
#: Most cells an item may lie in on average; larger cells are taken beyond it.
_COPIES = 4


def expanded(first, count):
    """Give ``first[i], first[i] + 1, ...`` for ``count[i]`` numbers, one after another.

    Parameters
    ----------
    first, count : ndarray (n,) of int

    Returns
    -------
    numbers, owner : ndarray (sum of count,) of int
        The numbers, and which i each belongs to.

    Examples
    --------
    >>> expanded(np.array([5, 0]), np.array([2, 1]))
    (array([5, 6, 0]), array([0, 0, 1]))
    """
    owner = np.repeat(np.arange(len(count)), count)
    start = np.cumsum(count) - count
    return np.arange(len(owner)) + (first - start)[owner], owner


@dataclass(frozen=True, eq=False)
class CellIndex:
    """Items by cell; made by `build`.

    Parameters
    ----------
    origin : ndarray (2,)
        Corner of the first cell.
    size : float
        Side of a cell.
    shape : ndarray (2,) of int
        Cells along x and y.
    first : ndarray (cells + 1,)
        Cell c holds ``item[first[c]:first[c + 1]]``.
    item : ndarray
        Numbers of the items; one in several cells is there several times.
    """

    origin: np.ndarray
    size: float
    shape: np.ndarray
    first: np.ndarray
    item: np.ndarray

    @classmethod
    def build(cls, low, high=None):
        """Sort boxes, or points where `high` is not given, into cells.

        Parameters
        ----------
        low, high : ndarray (n, 2)
            Opposite corners.
        """
        n = len(low)
        if not n:
            none = np.empty(0, dtype=np.int64)
            one = np.ones(2, dtype=np.int64)
            return cls(np.zeros(2), 1.0, one, np.zeros(2, dtype=np.int64), none)
        high = low if high is None else high
        origin = low.min(axis=0)
        extent = high.max(axis=0) - origin
        size = _cell_size(extent, n)
        while True:
            ranges = _ranges(low, high, origin, size, None)
            if ranges[1].prod(axis=1).sum() <= _COPIES * n:
                break
            size *= 2.0
        shape = np.floor(extent / size).astype(np.int64) + 1
        cell, item = _cells_of(*ranges, shape)
        if shape.prod() <= np.iinfo(np.uint16).max:
            order = np.argsort(cell.astype(np.uint16), kind="stable")
        else:
            order = np.argsort(cell, kind="stable")
        count = np.bincount(cell, minlength=int(shape.prod()))
        first = np.concatenate([[0], np.cumsum(count)])
        return cls(origin, float(size), shape, first, item[order])

    def near(self, low, high):
        """Give the numbers of the items in the cells that boxes reach into.

        Parameters
        ----------
        low, high : ndarray (m, 2)

        Returns
        -------
        ndarray of int
            Growing, each once. All items that touch a box are among them.
        """
        ranges = _ranges(low, high, self.origin, self.size, self.shape)
        cell = np.unique(_cells_of(*ranges, self.shape)[0])
        at, _ = expanded(self.first[cell], self.first[cell + 1] - self.first[cell])
        return np.unique(self.item[at])


def _cell_size(extent, n):
    """Side of cells that hold `_ITEMS` each, if items lie evenly."""
    cells = min(max(n // _ITEMS, 1), _CELLS)
    side = max(np.sqrt(extent[0] * extent[1] / cells), extent.max() / cells)
    return side if side > 0 else 1.0


def _ranges(low, high, origin, size, shape):
    """First cell and number of cells of boxes along x and y."""
    first = np.floor((low - origin) / size)
    last = first if high is low else np.floor((high - origin) / size)
    if shape is not None:
        # cut to the map before they become whole numbers: tiny cells overflow those
        first, last = np.clip(first, 0, shape), np.clip(last, -1, shape - 1)
    count = np.maximum(last - first + 1, 0)
    return first.astype(np.int64), count.astype(np.int64)


def _cells_of(first, count, shape):
    """Numbers of all cells of boxes, and which box each belongs to."""
    if (count == 1).all():
        return first[:, 1] * shape[0] + first[:, 0], np.arange(len(first))
    k, owner = expanded(np.zeros(len(count), dtype=np.int64), count.prod(axis=1))
    row, column = np.divmod(k, count[owner, 0])
    return (first[owner, 1] + row) * shape[0] + first[owner, 0] + column, owner
