"""The Processing provider: which algorithms there are."""

from pathlib import Path

from qgis.core import QgsProcessingProvider
from qgis.PyQt.QtGui import QIcon

from .algorithms.calibrateshear import CalibrateShear
from .algorithms.parallelsections import ParallelSections
from .algorithms.predictfault import PredictFault
from .algorithms.predicthorizon import PredictHorizon
from .algorithms.pullpicks import PullPicks
from .algorithms.runstudy import RunStudy

__all__ = ["ALGORITHMS", "HeavelineProvider", "plugin_icon"]

#: Every algorithm, in the order of the work.
ALGORITHMS = (
    ParallelSections,
    PullPicks,
    CalibrateShear,
    PredictFault,
    PredictHorizon,
    RunStudy,
)

_ICON = Path(__file__).resolve().parent / "outputs" / "icons" / "heaveline.svg"


def plugin_icon():
    """Give the icon of the plugin."""
    return QIcon(str(_ICON))


class HeavelineProvider(QgsProcessingProvider):
    """The algorithms of Heaveline under the id ``heaveline``."""

    def id(self):
        """Stable id, first part of every algorithm's id."""
        return "heaveline"

    def name(self):
        """Name in the toolbox."""
        return "Heaveline"

    def longName(self):
        """Name where there is room for more."""
        return "Heaveline: listric faults from rollover"

    def icon(self):
        """Icon in the toolbox."""
        return plugin_icon()

    def svgIconPath(self):
        """Icon as a file, for places that scale it."""
        return str(_ICON)

    def loadAlgorithms(self):
        """Make one of each algorithm."""
        for algorithm in ALGORITHMS:
            self.addAlgorithm(algorithm())
