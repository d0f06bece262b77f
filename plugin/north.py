"""Where true north lies from grid north: the meridian convergence of a CRS."""

from qgis.core import QgsCoordinateTransform, QgsCsException, QgsPoint, QgsPointXY

from ..geomcore.errors import SourceError

__all__ = ["convergence_of"]


def convergence_of(crs, transform_context):
    """Give the function that tells the meridian convergence of a projected CRS.

    Parameters
    ----------
    crs : QgsCoordinateReferenceSystem
        The study's CRS.
    transform_context : QgsCoordinateTransformContext

    Returns
    -------
    callable
        ``convergence(xy)`` takes map coordinates (n, 2) and gives degrees (n,), so
        that true azimuth = grid azimuth + convergence.

    Notes
    -----
    Every point is its own: convergence changes by degrees across a zone. QGIS takes
    the factors from PROJ at the point's geographic coordinates.
    """
    to_geographic = QgsCoordinateTransform(
        crs, crs.toGeographicCrs(), transform_context
    )

    def convergence(xy):
        import numpy as np

        points = np.asarray(xy, dtype=float).reshape(-1, 2)
        return np.array([_at(crs, to_geographic, x, y) for x, y in points.tolist()])

    return convergence


def _at(crs, to_geographic, x, y):
    """Convergence at one map point in degrees."""
    try:
        place = to_geographic.transform(QgsPointXY(x, y))
    except QgsCsException as error:
        raise _unknown(crs, x, y, f" ({error})") from None
    factors = crs.factors(QgsPoint(place))
    if not factors.isValid():
        raise _unknown(crs, x, y)
    return factors.meridianConvergence()


def _unknown(crs, x, y, why=""):
    return SourceError(
        "no-convergence",
        f"the meridian convergence of {crs.userFriendlyIdentifier()} is not known at "
        f"x = {x:.0f}, y = {y:.0f}{why}.",
        remedy="Convert the azimuths to grid north.",
    )
