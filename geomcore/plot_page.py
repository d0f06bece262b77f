"""The page of a figure: text measured and wrapped, a key, free places for labels.

Everything is in points (1/72 inch) from the lower left corner of the page or frame.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np

__all__ = [
    "FAMILY",
    "Block",
    "FreePlaces",
    "Key",
    "KeyEntry",
    "TextRuler",
    "TextTable",
    "clean",
    "draw_block",
    "draw_key",
    "draw_table",
    "layout_key",
    "nearest_of_box",
    "text_block",
    "text_table",
]

#: Distance of lines of text over the size of the type.
LEADING = 1.3
#: Length of the samples in the key, and the distance from there to the words.
HANDLE, HANDLE_GAP = 22.0, 5.0
#: Least distance between two columns of the key.
COLUMN_GAP = 14.0
FAMILY = "DejaVu Sans"  # comes with matplotlib, so that widths are known everywhere
UNKNOWN = "\N{REPLACEMENT CHARACTER}"


def clean(text):
    """Give a name as one line of printable text."""
    plain = "".join(c if c.isprintable() else " " for c in str(text))
    return " ".join(plain.split())


@lru_cache(maxsize=64)
def _fonts_with(characters):
    """Find installed fonts that have some characters.

    Returns
    -------
    names : tuple of str
    missing : frozenset of int
        Characters that no font has.
    """
    from matplotlib import font_manager

    names, missing = [], set(characters)
    for entry in font_manager.fontManager.ttflist:
        if not missing:
            break
        try:
            found = missing & set(font_manager.get_font(entry.fname).get_charmap())
        except (OSError, RuntimeError):
            continue  # a damaged font file on the user's machine
        if found:
            names.append(entry.name)
            missing -= found
    return tuple(names), frozenset(missing)


class TextRuler:
    """Measures and wraps text, and knows in which fonts it can be set.

    Parameters
    ----------
    sample : str
        All the names that will be set, for finding fonts that have their letters.
    """

    def __init__(self, sample=""):
        from matplotlib import font_manager
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        basic = font_manager.get_font(font_manager.findfont(FAMILY)).get_charmap()
        lacking = frozenset(ord(c) for c in sample) - set(basic)
        found, self.unknown = _fonts_with(lacking) if lacking else ((), frozenset())
        self.families = [FAMILY, *found]
        # four times the size, so that hinting does not round the widths
        self._canvas = FigureCanvasAgg(Figure(dpi=288))
        self._widths = {}

    def shown(self, text):
        """Give the text as it can be drawn: no formulas, no unknown letters."""
        drawable = "".join(UNKNOWN if ord(c) in self.unknown else c for c in text)
        return drawable.replace("$", r"\$")

    def width(self, text, size, weight="normal", style="normal"):
        """Give the width of one line in points."""
        key = (text, size, weight, style)
        if key not in self._widths:
            from matplotlib.font_manager import FontProperties

            font = FontProperties(
                family=self.families, style=style, weight=weight, size=size
            )
            drawable = self.shown(text).replace(r"\$", "$")
            renderer = self._canvas.get_renderer()
            wide = renderer.get_text_width_height_descent(drawable, font, False)[0]
            self._widths[key] = wide / 4.0
        return self._widths[key]

    def wrap(self, text, size, width, weight="normal", style="normal"):
        """Break text at its blanks, long words at their joints or else anywhere.

        Returns
        -------
        list of str
            Lines no wider than `width` points.
        """

        def fits(line):
            return self.width(line, size, weight, style) <= width

        lines = [""]
        for word in text.split(" "):
            longer = f"{lines[-1]} {word}" if lines[-1] else word
            if fits(longer):
                lines[-1] = longer
                continue
            if lines[-1]:
                lines.append("")
            for piece in [word] if fits(word) else re.split(r"(?<=[_/\\.-])", word):
                for part in [piece] if fits(piece) else piece:
                    if not fits(lines[-1] + part):
                        lines.append("")
                    lines[-1] += part
        return lines

    def shortened(self, text, size, width, weight="normal"):
        """Cut one line to a width, with an ellipsis where something is lost."""
        if self.width(text, size, weight) <= width:
            return text
        while (
            text and self.width(text + "\N{HORIZONTAL ELLIPSIS}", size, weight) > width
        ):
            text = text[:-1]
        return text.rstrip() + "\N{HORIZONTAL ELLIPSIS}"


@dataclass(frozen=True)
class Block:
    """Lines of text of one size."""

    gid: str
    lines: tuple
    size: float
    weight: str = "normal"
    style: str = "normal"
    colour: str = "black"

    @property
    def height(self):
        """Height in points."""
        return len(self.lines) * self.size * LEADING


def text_block(ruler, gid, text, size, width, **look):
    """Wrap a paragraph, or several, to a width; no text gives no lines."""
    weight, style = look.get("weight", "normal"), look.get("style", "normal")
    lines = []
    for paragraph in [text] if isinstance(text, str) else text:
        if paragraph:
            lines += ruler.wrap(paragraph, size, width, weight, style)
    return Block(gid, tuple(lines), size, **look)


def draw_block(page, ruler, block, x, top):
    """Draw a block below `top`; gives the height where the next may start."""
    for i, line in enumerate(block.lines):
        page.text(
            x,
            top - (i + 0.78) * block.size * LEADING,
            ruler.shown(line),
            size=block.size,
            weight=block.weight,
            style=block.style,
            color=block.colour,
            family=ruler.families,
            gid=f"{block.gid}-{i + 1}",
        )
    return top - block.height


@dataclass(frozen=True)
class KeyEntry:
    """One entry of the key.

    Parameters
    ----------
    gid, label : str
    look : mapping
        Properties of the sample, as for a matplotlib line; ``slant`` = (dx, dy)
        draws a line of that direction instead.
    """

    gid: str
    label: str
    look: Mapping = field(default_factory=dict)


@dataclass(frozen=True)
class Key:
    """A key laid out in columns of (entry, lines of its words)."""

    columns: tuple
    column_width: float
    size: float

    @property
    def height(self):
        """Height in points."""
        deepest = max((_column_lines(c) for c in self.columns), default=0)
        return deepest * self.size * LEADING


def _column_lines(column):
    return sum(len(lines) for _, lines in column)


def layout_key(ruler, entries, width, size):
    """Lay a key out in the number of columns that makes it lowest."""
    best = None
    for count in (1, 2, 3, 4):
        column_width = (width - (count - 1) * COLUMN_GAP) / count
        room = column_width - HANDLE - HANDLE_GAP
        rows = [(e, ruler.wrap(e.label, size, room)) for e in entries]
        key = Key(_columns(rows, count), column_width, size)
        if best is None or key.height < best.height - 1e-6:
            best = key
    return best


def _columns(rows, count):
    """Fill columns one after the other, the deepest as shallow as can be."""
    lengths = [len(lines) for _, lines in rows]
    limit = max(-(-sum(lengths) // count), max(lengths, default=1))
    while True:
        columns, used = [[]], 0
        for row, length in zip(rows, lengths):
            if used + length > limit:
                columns.append([])
                used = 0
            columns[-1].append(row)
            used += length
        if len(columns) <= count:
            return tuple(columns)
        limit += 1


def draw_key(page, ruler, key, x, top):
    """Draw a key below `top`; gives the height where the next block may start."""
    step = key.size * LEADING
    for i, column in enumerate(key.columns):
        left, y = x + i * (key.column_width + COLUMN_GAP), top
        for entry, lines in column:
            _draw_sample(page, entry, left, y - 0.5 * step)
            words = Block(f"{entry.gid}-words", tuple(lines), key.size)
            y = draw_block(page, ruler, words, left + HANDLE + HANDLE_GAP, y)
    return top - key.height


def _draw_sample(page, entry, x, y):
    look = dict(entry.look)
    slant = look.pop("slant", None)
    ends = np.array([0.0, HANDLE])
    if slant is not None:
        reach = np.array(slant) / np.hypot(*slant) * 4.5
        page.plot(
            x + 0.5 * HANDLE + np.array([-1, 1]) * reach[0],
            y + np.array([-1, 1]) * reach[1],
            gid=entry.gid,
            **look,
        )
    elif look.get("linestyle", "-") in ("", "none"):
        page.plot([x + 0.5 * HANDLE], [y], gid=entry.gid, **look)
    else:
        page.plot(x + ends, [y, y], gid=entry.gid, **look)


@dataclass(frozen=True)
class TextTable:
    """A table laid out on the page; its first row is the head.

    Parameters
    ----------
    gid : str
    lines : tuple of tuple (look, cells)
        A row each: properties of the line drawn before it, or None, and the lines of
        words of each cell.
    places : tuple of float
        Left edge of each column in points.
    size : float
    """

    gid: str
    lines: tuple
    places: tuple
    size: float

    @property
    def height(self):
        """Height in points."""
        return sum(_row_lines(cells) for _, cells in self.lines) * self.size * LEADING


def _row_lines(cells):
    return max(len(lines) for lines in cells)


def text_table(ruler, gid, rows, size, width):
    """Lay out a table; the last cell of each row wraps in what room is left.

    Parameters
    ----------
    ruler : TextRuler
    gid : str
    rows : sequence of tuple (look, cells)
        Head first; cells are texts. The last one of a row with fewer cells than the
        head takes the rest of the width.
    size, width : float
        Size of the type and width of the page in points.

    Returns
    -------
    TextTable
    """
    steps = []
    for j in range(len(rows[0][1]) - 1):
        texts = [cells[j] for _, cells in rows if j < len(cells) - 1]
        steps.append(max(ruler.width(t, size, "bold") for t in texts) + COLUMN_GAP)
    places = HANDLE + HANDLE_GAP + np.r_[0.0, np.cumsum(steps)]

    def laid(cells):
        rest = max(width - places[len(cells) - 1], 60.0)
        return (*((text,) for text in cells[:-1]), ruler.wrap(cells[-1], size, rest))

    lines = tuple((look, laid(cells)) for look, cells in rows)
    return TextTable(gid, lines, tuple(places), size)


def draw_table(page, ruler, table, x, top):
    """Draw a table below `top`; gives the height where the next block may start."""
    step, y = table.size * LEADING, top
    for i, (look, cells) in enumerate(table.lines):
        if look:
            entry = KeyEntry(f"{table.gid}-sample-{i}", "", look)
            _draw_sample(page, entry, x, y - 0.5 * step)
        for j, (place, lines) in enumerate(zip(table.places, cells)):
            gid, weight = f"{table.gid}-{i}-{j}", "normal" if i else "bold"
            words = Block(gid, tuple(lines), table.size, weight)
            draw_block(page, ruler, words, x + place, y)
        y -= _row_lines(cells) * step
    return top - table.height


class FreePlaces:
    """Which parts of a frame are free of data and of other labels.

    Parameters
    ----------
    width, height : float
        Size of the frame in points.
    """

    CELL = 2.0

    def __init__(self, width, height):
        shape = (int(height / self.CELL) + 1, int(width / self.CELL) + 1)
        self._size = (width, height)
        self._data = np.zeros(shape, dtype=bool)
        self._labels = np.zeros(shape, dtype=bool)

    def take_path(self, x, y):
        """Mark a line through points of the frame as taken (NaN breaks it)."""
        x, y = np.atleast_1d(np.asarray(x, float)), np.atleast_1d(np.asarray(y, float))
        if len(x) == 1:
            return self.take_points(x, y)
        for i in np.flatnonzero(np.isfinite(x[1:] + x[:-1] + y[1:] + y[:-1])):
            span = np.hypot(x[i + 1] - x[i], y[i + 1] - y[i])
            f = np.linspace(0.0, 1.0, int(min(span, 5000.0) / self.CELL) + 2)
            self.take_points(x[i] + f * (x[i + 1] - x[i]), y[i] + f * (y[i + 1] - y[i]))
        return None

    def take_points(self, x, y):
        """Mark single points of the frame as taken."""
        known = np.isfinite(x) & np.isfinite(y)
        column = np.floor(np.asarray(x)[known] / self.CELL).astype(int)
        row = np.floor(np.asarray(y)[known] / self.CELL).astype(int)
        rows, columns = self._data.shape
        inside = (row >= 0) & (row < rows) & (column >= 0) & (column < columns)
        self._data[row[inside], column[inside]] = True

    def take_label(self, x, y, width, height):
        """Mark the box of a label as taken."""
        c = self.CELL
        rows = slice(max(int(y / c) - 1, 0), int((y + height) / c) + 2)
        self._labels[rows, max(int(x / c) - 1, 0) : int((x + width) / c) + 2] = True

    def nearest(self, width, height, anchor, margin=3.0):
        """Find the free box nearest to a point, and take it.

        Data are covered only where no box is free of them; other labels never.

        Parameters
        ----------
        width, height : float
        anchor : tuple (x, y)
        margin : float
            Kept free round the box.

        Returns
        -------
        tuple (x, y) or None
            Lower left corner; None where the frame has no room left.
        """
        c = self.CELL
        nx, ny = (int((v + 2 * margin) / c) + 2 for v in (width, height))
        rows, columns = self._data.shape
        if nx >= columns or ny >= rows:
            return None
        x = np.arange(columns - nx) * c + margin + c
        y = np.arange(rows - ny) * c + margin + c
        dx = np.maximum(np.maximum(x - anchor[0], anchor[0] - x - width), 0.0)
        dy = np.maximum(np.maximum(y - anchor[1], anchor[1] - y - height), 0.0)
        off = x + 0.5 * width - anchor[0], y + 0.5 * height - anchor[1]
        cost = np.hypot(dx[None, :], dy[:, None])
        # of places equally near, the one that is best centred
        cost = cost + 0.1 * np.hypot(off[0][None, :], off[1][:, None])
        cost = cost + 1000.0 * _box_sums(self._data, ny, nx)
        cost[_box_sums(self._labels, ny, nx) > 0] = np.inf
        for i in np.argsort(cost, axis=None, kind="stable")[:4000]:
            row, column = np.unravel_index(int(i), cost.shape)
            if not np.isfinite(cost[row, column]):
                return None
            place = float(x[column]), float(y[row])
            end = nearest_of_box(anchor, place, width, height)
            if not self._crosses_label(anchor, end):
                self.take_label(*place, width, height)
                self._take_leader(anchor, end)
                return place
        return None

    def _cells_of_leader(self, start, end):
        """Give the cells of a leader but for its first few points, where many start."""
        span = np.hypot(end[0] - start[0], end[1] - start[1])
        f = np.linspace(min(6.0 / max(span, 1e-9), 1.0), 1.0, int(span / self.CELL) + 2)
        column = (start[0] + f * (end[0] - start[0])) / self.CELL
        row = (start[1] + f * (end[1] - start[1])) / self.CELL
        rows, columns = self._data.shape
        return (
            np.clip(row.astype(int), 0, rows - 1),
            np.clip(column.astype(int), 0, columns - 1),
        )

    def _crosses_label(self, start, end):
        return bool(self._labels[self._cells_of_leader(start, end)].any())

    def _take_leader(self, start, end):
        """Keep further labels off a leader."""
        self._labels[self._cells_of_leader(start, end)] = True


def nearest_of_box(point, corner, width, height):
    """Give the point of a box that is nearest to a point."""
    return tuple(
        min(max(p, low), low + size)
        for p, low, size in zip(point, corner, (width, height))
    )


def _box_sums(taken, ny, nx):
    """Taken cells in every box of ny by nx cells."""
    total = np.zeros((taken.shape[0] + 1, taken.shape[1] + 1), dtype=int)
    total[1:, 1:] = taken.cumsum(axis=0).cumsum(axis=1)
    sums = total[ny:, nx:] - total[:-ny, nx:] - total[ny:, :-nx] + total[:-ny, :-nx]
    return sums[: taken.shape[0] - ny, : taken.shape[1] - nx]
