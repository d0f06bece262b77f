"""Raster layers to surfaces that are sampled bilinearly between pixel centres.

Local rasters are read through GDAL, because QGIS shows a rotated raster through a
resampled, unrotated view; other providers (web coverage, databases) by their blocks.
"""

from dataclasses import dataclass
from typing import Any, Callable

import numpy as np
from osgeo import gdal, gdal_array
from qgis.core import (
    Qgis,
    QgsCoordinateTransform,
    QgsCsException,
    QgsGeometry,
    QgsProviderRegistry,
    QgsRectangle,
)

from ...geomcore.errors import SourceError
from ...geomcore.sources import Grid
from .opening import is_undefined, say
from .wkb import line_wkb, parse_wkb

__all__ = ["read_grid"]

_BAND = 1
#: Pixels in the side of one tile that is read at once and kept: large enough for few
#: calls, small enough not to read far beside an oblique section.
_TILE = 128
#: Tiles kept at most, about 270 MB of 32-bit values; then reading starts afresh.
_KEEP = 4096
#: Pixels of slack, so that rounding loses no point on the outermost pixel centres.
_SLACK = 1e-6


@dataclass(frozen=True, eq=False)
class _Raster:
    """A band that can be read by windows, and the way from map to pixel.

    Parameters
    ----------
    read : callable
        ``read(column, row, width, height)`` gives raw values (height, width).
    known : callable
        Turns raw values into floats, NaN where they stand for 'no data'.
    dtype : dtype
        Of the raw values.
    shape : tuple (columns, rows)
    geotransform : tuple of 6 float
        As GDAL counts it: from pixel corners.
    dataset : object
        What has to stay open for reading.
    """

    read: Callable[[int, int, int, int], np.ndarray]
    known: Callable[[np.ndarray], np.ndarray]
    dtype: Any
    shape: tuple
    geotransform: tuple
    dataset: Any

    def to_pixel(self, xy):
        """Give columns and rows counted from the first pixel's centre."""
        g = self.geotransform
        det = g[1] * g[5] - g[2] * g[4]
        dx, dy = xy[:, 0] - g[0], xy[:, 1] - g[3]
        column = (g[5] * dx - g[2] * dy) / det - 0.5
        row = (g[1] * dy - g[4] * dx) / det - 0.5
        return column, row

    def to_map(self, column, row):
        """Give the map coordinates of pixel centres (n, 2)."""
        g = self.geotransform
        c, r = np.asarray(column) + 0.5, np.asarray(row) + 0.5
        return np.column_stack([g[0] + c * g[1] + r * g[2], g[3] + c * g[4] + r * g[5]])


def read_grid(layer, crs, transform_context, feedback=None):
    """Make a raster layer a surface in the study's CRS.

    Parameters
    ----------
    layer : QgsRasterLayer
        Its first band is read.
    crs : QgsCoordinateReferenceSystem
        Of the study.
    transform_context : QgsCoordinateTransformContext
    feedback : QgsFeedback, optional

    Returns
    -------
    Grid
        Sampled bilinearly between pixel centres; NaN outside them and where one of
        the four pixels that count has no data.

    Raises
    ------
    SourceError
        If the band cannot be read, or is a single row or column.
    """
    raster = _open_raster(layer)
    if min(raster.shape) < 2:
        _refuse(layer, "it has a single row or column of pixels.", "Use a larger one.")
    transform = _transform(layer, crs, transform_context, feedback)
    place = _bulk_transform(transform, layer)

    tiles = _Tiles(raster)

    def sample(xy):
        return _sample(tiles, place(np.asarray(xy, dtype=float).reshape(-1, 2)))

    return Grid(sample, _cell(raster, transform, layer))


def _refuse(layer, reason, remedy):
    raise SourceError("bad-raster", reason, f"raster '{layer.name()}'", remedy)


def _transform(layer, crs, context, feedback):
    """Transform from the study's CRS to the raster's, or None where none is needed."""
    own = layer.crs()
    if is_undefined(own):
        say(
            feedback,
            f"Raster '{layer.name()}' has no CRS; its coordinates are taken to be in "
            f"the study's CRS ({crs.authid() or crs.description()}).",
        )
        return None
    if own == crs:
        return None
    return QgsCoordinateTransform(crs, own, context)


def _bulk_transform(transform, layer):
    """Give a function that transforms (n, 2) coordinates at once."""
    if transform is None:
        return lambda xy: xy

    def place(xy):
        if len(xy) < 2:
            return place(np.repeat(xy, 2, axis=0))[: len(xy)] if len(xy) else xy
        geometry = QgsGeometry()
        geometry.fromWkb(line_wkb(xy))
        try:
            geometry.transform(transform)
        except QgsCsException as error:
            _refuse(
                layer,
                f"the sections cannot be transformed to its CRS: {error}",
                "Check the CRS of the raster and of the study.",
            )
        return parse_wkb([geometry.asWkb().data()]).xy

    return place


def _cell(raster, transform, layer):
    """Smaller side of a cell in the middle of the raster, in the study's unit."""
    column, row = raster.shape[0] / 2.0, raster.shape[1] / 2.0
    at = raster.to_map([column, column + 1, column], [row, row, row + 1])
    if transform is not None:
        back = QgsCoordinateTransform(transform)
        back = QgsCoordinateTransform(
            transform.destinationCrs(), transform.sourceCrs(), transform.context()
        )
        at = _bulk_transform(back, layer)(at)
    return float(np.hypot(*(at[1:] - at[0]).T).min())


class _Tiles:
    """Pixels read so far, in square tiles that overlap by one pixel.

    The overlap puts the four pixels round any point into one tile.
    """

    def __init__(self, raster):
        self.raster = raster
        across = [-(-(n - 1) // _TILE) for n in raster.shape]
        self.table = np.full((across[1], across[0]), -1, dtype=np.int64)
        self.store = np.empty((0, _TILE + 1, _TILE + 1), dtype=raster.dtype)
        self.used = 0

    def corners(self, i, j):
        """Give the raw values of pixels (i, j) and their three neighbours, (4, n)."""
        tile_i, tile_j = i // _TILE, j // _TILE
        self._load(tile_j * self.table.shape[1] + tile_i)
        side = _TILE + 1
        slot = self.table[tile_j, tile_i]
        at = (slot * side + (j - tile_j * _TILE)) * side + (i - tile_i * _TILE)
        flat = self.store.reshape(-1)
        return np.stack([flat[at], flat[at + 1], flat[at + side], flat[at + side + 1]])

    def _load(self, wanted):
        """Read the tiles that are not there yet."""
        slots = self.table.reshape(-1)
        missing = np.unique(wanted[slots[wanted] < 0])
        if self.used + len(missing) > _KEEP:
            slots[:] = -1
            self.used, missing = 0, np.unique(wanted)
        self._grow(self.used + len(missing))
        for number in missing.tolist():
            tile = self._read(*divmod(number, self.table.shape[1]))
            self.store[self.used, : tile.shape[0], : tile.shape[1]] = tile
            slots[number] = self.used
            self.used += 1

    def _grow(self, needed):
        if needed > len(self.store):
            size = max(needed, min(2 * len(self.store), _KEEP))
            store = np.empty((size, *self.store.shape[1:]), dtype=self.store.dtype)
            store[: self.used] = self.store[: self.used]
            self.store = store

    def _read(self, tile_j, tile_i):
        column, row = tile_i * _TILE, tile_j * _TILE
        width = min(_TILE + 1, self.raster.shape[0] - column)
        height = min(_TILE + 1, self.raster.shape[1] - row)
        return self.raster.read(column, row, width, height)


def _sample(tiles, xy):
    """Bilinear values at raster coordinates, NaN outside the pixel centres."""
    column, row = tiles.raster.to_pixel(xy)
    last_column, last_row = (n - 1 for n in tiles.raster.shape)
    with np.errstate(invalid="ignore"):
        inside = (column >= -_SLACK) & (column <= last_column + _SLACK)
        inside &= (row >= -_SLACK) & (row <= last_row + _SLACK)
    out = np.full(len(xy), np.nan)
    at = np.flatnonzero(inside)
    # no more tiles are needed at once than points are sampled
    for first in range(0, len(at), _KEEP):
        some = at[first : first + _KEEP]
        out[some] = _bilinear(
            tiles,
            np.clip(column[some], 0, last_column),
            np.clip(row[some], 0, last_row),
        )
    return out


def _bilinear(tiles, column, row):
    """Bilinear values; a pixel without weight may lack data."""
    last_column, last_row = (n - 2 for n in tiles.raster.shape)
    i = np.minimum(column.astype(np.int64), last_column)
    j = np.minimum(row.astype(np.int64), last_row)
    f, g = _snapped(column - i), _snapped(row - j)
    weight = np.stack([(1 - f) * (1 - g), f * (1 - g), (1 - f) * g, f * g])
    value = tiles.raster.known(tiles.corners(i, j))
    return np.where(weight > 0, weight * value, 0.0).sum(axis=0)


def _snapped(fraction):
    """Fractions, those within rounding of a pixel centre put onto it."""
    whole = np.round(fraction)
    return np.where(np.abs(fraction - whole) < _SLACK, whole, fraction)


def _open_raster(layer):
    """Open the band through GDAL where it can be, else through the provider."""
    if layer.providerType() == "gdal":
        dataset = _gdal_dataset(layer)
        if dataset is not None:
            return _of_gdal(dataset, layer)
    return _of_provider(layer)


def _gdal_dataset(layer):
    """Open the layer's file; None where GDAL does not know it under this name."""
    source = layer.source()
    decoded = QgsProviderRegistry.instance().decodeUri("gdal", source)
    names = [source]
    if decoded.get("path") and not decoded.get("layerName"):
        names.append(decoded["path"])
    for name in names:
        gdal.PushErrorHandler("CPLQuietErrorHandler")
        try:
            dataset = gdal.OpenEx(name, gdal.OF_RASTER | gdal.OF_READONLY)
        except RuntimeError:  # where another plugin has GDAL raise errors
            dataset = None
        finally:
            gdal.PopErrorHandler()
        if dataset is not None:
            return dataset
    return None


def _of_gdal(dataset, layer):
    band = dataset.GetRasterBand(_BAND)
    if gdal.DataTypeIsComplex(band.DataType):
        _refuse(layer, "its first band holds complex numbers.", "Use another raster.")
    nodata = _nodata_values(layer, band.GetNoDataValue())
    masked = band.GetMaskFlags() & (gdal.GMF_PER_DATASET | gdal.GMF_ALPHA)
    mask = band.GetMaskBand() if masked else None
    scale, offset = band.GetScale() or 1.0, band.GetOffset() or 0.0

    def read(*window):
        raw = _window(band, window, layer)
        if mask is None:
            return raw
        hidden = _window(mask, window, layer) == 0
        return np.where(hidden, np.nan, _known(raw, nodata))

    def known(raw):
        return _known(raw, nodata) * scale + offset

    kind = (
        np.float64
        if masked
        else gdal_array.GDALTypeCodeToNumericTypeCode(band.DataType)
    )
    shape = (dataset.RasterXSize, dataset.RasterYSize)
    return _Raster(read, known, kind, shape, dataset.GetGeoTransform(), dataset)


def _window(band, window, layer):
    """Read a window; GDAL gives None or, where it is set to, raises an error."""
    try:
        raw, why = band.ReadAsArray(*window), gdal.GetLastErrorMsg()
    except RuntimeError as error:
        raw, why = None, error
    if raw is None:
        _refuse(
            layer,
            f"pixels at column {window[0]}, row {window[1]} cannot be read: {why}",
            "Check the file.",
        )
    return raw


def _nodata_values(layer, own):
    """No-data values of the file, unless switched off, and those set in QGIS."""
    provider = layer.dataProvider()
    values = []
    if own is not None and provider.useSourceNoDataValue(_BAND):
        values.append((own, own))
    for span in provider.userNoDataValues(_BAND):
        values.append((span.min(), span.max()))
    return values


def _known(raw, nodata):
    """Values as floats, NaN where they stand for 'no data'."""
    value = raw.astype(np.float64)
    for low, high in nodata:
        if low != low:
            continue  # NaN is unknown by itself
        if raw.dtype == np.float32:
            low, high = np.float32(low), np.float32(high)
        value[(raw >= low) & (raw <= high)] = np.nan
    return value


def _of_provider(layer):
    """Read through the data provider, whose blocks know scale and no-data values."""
    provider = layer.dataProvider()
    columns, rows = provider.xSize(), provider.ySize()
    box = provider.extent()
    if columns < 1 or rows < 1:
        _refuse(layer, "its provider does not tell its pixels.", "Save it as a file.")
    dx, dy = box.width() / columns, box.height() / rows
    x0, y0 = box.xMinimum(), box.yMaximum()

    def read(column, row, width, height):
        window = QgsRectangle(
            x0 + column * dx,
            y0 - (row + height) * dy,
            x0 + (column + width) * dx,
            y0 - row * dy,
        )
        block = provider.block(_BAND, window, width, height)
        if not block.isValid() or not block.convert(Qgis.DataType.Float64):
            _refuse(
                layer,
                f"pixels at column {column}, row {row} cannot be read.",
                "Check the connection, or save it as a file.",
            )
        return _of_block(block, width, height)

    geotransform = (x0, dx, 0.0, y0, 0.0, -dy)
    return _Raster(
        read, np.asarray, np.float64, (columns, rows), geotransform, provider
    )


def _of_block(block, width, height):
    value = np.frombuffer(block.data().data(), dtype=np.float64).copy()
    value = value.reshape(height, width)
    if block.hasNoDataValue():
        value[value == block.noDataValue()] = np.nan
    elif block.hasNoData():
        for j, i in np.ndindex(height, width):
            if block.isNoData(j, i):
                value[j, i] = np.nan
    return value
