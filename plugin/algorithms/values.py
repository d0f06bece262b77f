"""The parameter values of one run, read by kind; what is not given is None."""

import json
from pathlib import Path

from qgis.core import (
    QgsCoordinateReferenceSystem,
    QgsMapLayer,
    QgsProcessingFeatureSourceDefinition,
    QgsProcessingParameters,
    QgsProcessingUtils,
    QgsProperty,
    QgsVariantUtils,
)

__all__ = ["Values", "read_text"]


class Values:
    """Values of an algorithm's parameters.

    Parameters
    ----------
    algorithm : QgsProcessingAlgorithm
        Gives the definitions.
    parameters : dict
        As Processing hands them over.
    context : QgsProcessingContext
    """

    def __init__(self, algorithm, parameters, context):
        self.algorithm = algorithm
        self.parameters = parameters
        self.context = context
        self._destinations = {}

    def _definition(self, key):
        return self.algorithm.parameterDefinition(key)

    def _ask(self, reader, key, *more):
        """Read a value by the reader of its kind."""
        return reader(self._definition(key), self.parameters, self.context, *more)

    def has(self, key):
        """Tell whether the algorithm has a parameter and a value for it."""
        definition = self._definition(key)
        if definition is None:
            return False
        value = self.parameters.get(key)
        if isinstance(value, QgsProperty):
            return True
        if value is None or QgsVariantUtils.isNull(value):
            value = definition.defaultValue()
        return value is not None and not QgsVariantUtils.isNull(value) and value != ""

    def text(self, key):
        """Give a text without blanks at its ends; empty where not given."""
        if not self.has(key):
            return ""
        return self._ask(QgsProcessingParameters.parameterAsString, key).strip()

    def number(self, key):
        """Give a number, or None."""
        if not self.has(key):
            return None
        return self._ask(QgsProcessingParameters.parameterAsDouble, key)

    def count(self, key):
        """Give a whole number, or None."""
        if not self.has(key):
            return None
        return self._ask(QgsProcessingParameters.parameterAsInt, key)

    def choice(self, key):
        """Give the word chosen, or None."""
        if not self.has(key):
            return None
        return self._ask(QgsProcessingParameters.parameterAsEnumString, key) or None

    def yes(self, key):
        """Give a yes or no."""
        return self._ask(QgsProcessingParameters.parameterAsBool, key)

    def field(self, key):
        """Give the name of a field, or None."""
        if not self.has(key):
            return None
        names = self._ask(QgsProcessingParameters.parameterAsStrings, key)
        return names[0] if names else None

    def source(self, key):
        """Give a layer's features as Processing was asked for them, or None.

        Selected features only, filters and limits are honoured.
        """
        if not self.has(key):
            return None
        return self._ask(QgsProcessingParameters.parameterAsSource, key)

    def layer(self, key):
        """Give a layer itself, whole even where a part was asked for, or None."""
        if not self.has(key):
            return None
        value = self.parameters.get(key)
        if not isinstance(value, QgsProcessingFeatureSourceDefinition):
            return self._ask(QgsProcessingParameters.parameterAsLayer, key)
        text, _ = value.source.valueAsString(self.context.expressionContext())
        return QgsProcessingUtils.mapLayerFromString(text, self.context)

    def raster(self, key):
        """Give a raster layer, or None."""
        if not self.has(key):
            return None
        return self._ask(QgsProcessingParameters.parameterAsRasterLayer, key)

    def crs(self, key):
        """Give a CRS, or None."""
        if not self.has(key):
            return None
        crs = self._ask(QgsProcessingParameters.parameterAsCrs, key)
        return crs if isinstance(crs, QgsCoordinateReferenceSystem) else None

    def extent(self, key, crs):
        """Give an extent in a CRS as (xmin, ymin, xmax, ymax), or None."""
        if not self.has(key):
            return None
        box = self._ask(QgsProcessingParameters.parameterAsExtent, key, crs)
        if box.isNull() or box.isEmpty():
            return None
        return (box.xMinimum(), box.yMinimum(), box.xMaximum(), box.yMaximum())

    def file(self, key):
        """Give the path of an input file, or None."""
        if not self.has(key):
            return None
        return Path(self._ask(QgsProcessingParameters.parameterAsFile, key))

    def destination(self, key):
        """Give the path of a file or folder to be written, or None."""
        if not self.has(key):
            return None
        if key not in self._destinations:  # a temporary one is another at each asking
            text = self._ask(QgsProcessingParameters.parameterAsFileOutput, key)
            self._destinations[key] = Path(text) if text else None
        return self._destinations[key]

    def label(self, key):
        """Give the label of a parameter, as the form shows it."""
        return self._definition(key).description()

    def layer_name(self, key):
        """Name a layer for messages, as the user knows it."""
        layer = self.layer(key)
        if layer is not None:
            return layer.name()
        return str(self.parameters.get(key))

    def uri(self, key):
        """Say where a layer is, for the record of the run; empty where it is nowhere.

        The provider's own source, without name and password.
        """
        layer = self.layer(key)
        return _public_source(layer) if isinstance(layer, QgsMapLayer) else ""

    def is_part(self, key):
        """Tell whether only selected or filtered features of a layer were asked for."""
        value = self.parameters.get(key)
        return isinstance(value, QgsProcessingFeatureSourceDefinition) and bool(
            value.selectedFeaturesOnly or value.filterExpression
        )

    def is_in_file(self, key, path):
        """Tell whether a layer lies in a file."""
        layer = self.layer(key)
        if layer is None or path is None:
            return False
        own = Path(layer.source().split("|")[0])
        return own.is_file() and path.is_file() and own.samefile(path)

    def project_folder(self):
        """Folder of the project, from which relative layer sources are meant."""
        project = self.context.project()
        folder = project.homePath() if project is not None else ""
        return Path(folder) if folder else None

    def json(self, key):
        """Give JSON from a text, or from the file that the text names.

        Returns
        -------
        document : object or None
            None where nothing is given.
        base : pathlib.Path or None
            Folder of the file.

        Raises
        ------
        StudyError
            If it is neither JSON nor a file of JSON.
        """
        text = self.text(key)
        if not text:
            return None, None
        base = None
        if text[0] not in "[{":
            path = Path(text)
            text, base = read_text(path), path.parent
        try:
            return json.loads(text), base
        except ValueError as error:
            from ...geomcore.errors import StudyError

            raise StudyError(
                "bad-json", f"it is not valid JSON: {error}.", key
            ) from None


def read_text(path):
    """Read a text file, with a sentence where it cannot be read.

    Raises
    ------
    StudyError
    """
    from ...geomcore.errors import StudyError

    try:
        return Path(path).read_text(encoding="utf-8-sig")
    except OSError as error:
        why = error.strerror or error
        raise StudyError("no-file", f"it cannot be read: {why}.", str(path)) from None
    except UnicodeDecodeError:
        raise StudyError(
            "no-file", "it is not a text in UTF-8.", str(path), "Save it as UTF-8."
        ) from None


def _public_source(layer):
    """Give the source of a layer as a study names it, without user and password."""
    from qgis.core import QgsDataSourceUri

    provider = layer.providerType()
    if provider == "memory":
        return ""  # a scratch layer cannot be found again
    source = QgsDataSourceUri.removePassword(layer.source())
    if provider in ("ogr", "gdal"):
        return source
    uri = QgsDataSourceUri(source)
    if uri.username() or uri.password():
        uri.setUsername("")
        uri.setPassword("")
        source = uri.uri(False)
    return f"{provider}://{source}" if uri.table() else f"{provider}:{source}"
