"""What all algorithms have in common: names, help, checks, words, errors, outputs."""

from html import escape

from qgis.core import (
    Qgis,
    QgsProcessingAlgorithm,
    QgsProcessingContext,
    QgsProcessingException,
    QgsProcessingLayerPostProcessorInterface,
    QgsProcessingMultiStepFeedback,
    QgsProcessingOutputNumber,
    QgsProcessingOutputVectorLayer,
    QgsProcessingParameterEnum,
    QgsProcessingParameterNumber,
)
from qgis.PyQt import sip

from ..definitions import make, tr
from .values import Values

__all__ = ["GROUPS", "Algorithm", "Steps"]

#: Groups of the toolbox by their stable id, in the order of the work.
GROUPS = {
    "sections": "Sections and picks",
    "construction": "Construction",
    "study": "Whole studies",
}


class Steps:
    """Progress, cancellation and words of a run in steps.

    Parameters
    ----------
    feedback : QgsProcessingFeedback
    count : int
        Number of steps.
    """

    def __init__(self, feedback, count):
        self.feedback = QgsProcessingMultiStepFeedback(count, feedback)
        if feedback.isCanceled():
            self.feedback.cancel()  # it hears only of what comes after it was made
        self._number = -1

    def next(self, text):
        """Begin the next step, unless the user has cancelled."""
        self.check()
        self._number += 1
        self.feedback.setCurrentStep(self._number)
        self.feedback.setProgressText(tr(text))

    def progress(self, fraction):
        """Tell how far the step is, 0 to 1."""
        self.feedback.setProgress(100.0 * fraction)

    def cancelled(self):
        """Tell whether the user has cancelled."""
        return self.feedback.isCanceled()

    def check(self):
        """End the run where the user has cancelled.

        Raises
        ------
        StudyError
            With code ``cancelled``.
        """
        if self.cancelled():
            from ...geomcore.errors import StudyError

            words = "the run was cancelled; nothing was written."
            raise StudyError("cancelled", words)

    def say(self, lines):
        """Give aligned lines to the log, as they stand in every kind of log."""
        text = "\n".join(lines)
        if text:
            self.feedback.pushFormattedMessage(f"<pre>{escape(text)}</pre>", text)

    def warn(self, lines):
        """Give warnings to the log, one each."""
        for line in lines:
            self.feedback.pushWarning(line)


class Algorithm(QgsProcessingAlgorithm):
    """A Processing algorithm that declares, reads, calls the core, and writes.

    A child gives `NAME`, `TITLE`, `GROUP` (key of `GROUPS`), `TAGS`, `PARAMETERS`
    (declared parameters), `LAYERS` (names of the result layers), `NUMBERS` (counts
    by output name), and the methods `check` and `work`.
    """

    NAME = ""
    TITLE = ""
    GROUP = ""
    TAGS = ()
    PARAMETERS = ()
    LAYERS = ()
    NUMBERS = {}  # noqa: RUF012 - constants of each class

    # ---- what QGIS asks ----------------------------------------------------------

    def name(self):
        """Stable id within the provider."""
        return self.NAME

    def displayName(self):
        """Title in the toolbox."""
        return tr(self.TITLE)

    def group(self):
        """Title of its group in the toolbox."""
        return tr(GROUPS[self.GROUP])

    def groupId(self):
        """Stable id of its group."""
        return self.GROUP

    def shortDescription(self):
        """One sentence for the tooltip."""
        from ..helptext import read_help

        return tr(read_help(self.NAME)["summary"])

    def tags(self):
        """Words by which the toolbox finds it."""
        return [tr(tag) for tag in ("fault", "listric", "section", *self.TAGS)]

    def icon(self):
        """Icon of the plugin."""
        from ..provider import plugin_icon

        return plugin_icon()

    def shortHelpString(self):
        """Help beside the form: inputs, outputs with fields, assumptions."""
        from ..helptext import help_html

        return help_html(self.NAME, self.parameterDefinitions())

    def createInstance(self):
        """Make a fresh one for each run."""
        return type(self)()

    def initAlgorithm(self, configuration=None):  # noqa: ARG002 - QGIS gives it
        """Declare parameters and outputs."""
        for parameter in self.PARAMETERS:
            self.addParameter(make(parameter))
        for name in self.LAYERS:
            title = tr(name.replace("_", " ").capitalize())
            self.addOutput(QgsProcessingOutputVectorLayer(name.upper(), title))
        for name, label in self.NUMBERS.items():
            self.addOutput(QgsProcessingOutputNumber(name, tr(label)))

    def canExecute(self):
        """Tell whether numpy is there; without it nothing runs."""
        from ..packages import missing_sentence

        sentence = missing_sentence("numpy")
        return not sentence, sentence

    def checkParameterValues(self, parameters, context):
        """Check what can be checked before the run; the first fault is told."""
        ready, sentence = self.canExecute()
        if not ready:
            return ready, sentence
        for definition in self.parameterDefinitions():
            sentence = _unusable(definition, parameters, context)
            if sentence:
                return False, sentence
        ready, sentence = super().checkParameterValues(parameters, context)
        if not ready:
            return ready, sentence.rstrip(".") + "."
        values = Values(self, parameters, context)
        try:
            for sentence in (*self._destination_faults(values), *self.check(values)):
                return False, sentence
        except ValueError as error:
            if not hasattr(error, "code"):
                raise
            return False, str(error)
        return True, ""

    def processAlgorithm(self, parameters, context, feedback):
        """Run; what is wrong is said in words."""
        ready, sentence = self.canExecute()
        if not ready:
            raise QgsProcessingException(sentence)
        values = Values(self, parameters, context)
        try:
            return self.work(values, feedback)
        except ValueError as error:
            # by its code, not its class: the core may be loaded under two names
            if not hasattr(error, "code"):
                raise
            raise QgsProcessingException(str(error)) from None
        except OSError as error:
            raise QgsProcessingException(_file_sentence(error)) from None

    # ---- what each algorithm says ------------------------------------------------

    def check(self, values):
        """Give a sentence for each fault of the values; none if they will do."""
        raise NotImplementedError

    def work(self, values, feedback):
        """Do the work; give the results by output name."""
        raise NotImplementedError

    # ---- what they share ---------------------------------------------------------

    def place(self, values, key, base=None):
        """Give the place of the study: CRS as asked for, else that of a layer.

        Parameters
        ----------
        values : Values
        key : str
            Parameter of the layer whose CRS is taken where none is given.
        base : pathlib.Path, optional
            Folder that relative layer sources are looked for from.

        Raises
        ------
        StudyError
            If lengths cannot be measured in the CRS.
        """
        from ..studies import Place

        crs = values.crs("CRS")
        if crs is not None:
            return Place.of(crs, values.context, base)
        source = values.source(key)
        name = source.sourceName()
        return Place.of(source.sourceCrs(), values.context, base, name)

    def missing(self, package, what):
        """Say what to install where a package is missing that is asked for."""
        from ..packages import missing_sentence

        sentence = missing_sentence(package)
        if sentence:
            yield f"{what}: {sentence}"

    def _destination_faults(self, values):
        """Say what is wrong with the places to write to."""
        output = values.destination("OUTPUT")
        if output is not None and output.suffix.lower() != ".gpkg":
            yield tr(
                "{}: '{}' is not a GeoPackage. Give a file name that ends in .gpkg."
            ).format(values.label("OUTPUT"), output)
        if values.has("PLOTS"):
            yield from self.missing("matplotlib", values.label("PLOTS"))

    def replaced_by_part(self, values, keys):
        """Refuse to replace a layer by the part of it that was asked for."""
        output = values.destination("OUTPUT")
        for key in keys:
            if values.is_part(key) and values.is_in_file(key, output):
                yield tr(
                    "{}: only a part of the layer is read, and the results would "
                    "replace the whole of it in {}. Give another file for the results."
                ).format(values.label(key), output)

    def results(self, values, path, counts, **numbers):
        """Give the results of a run and have its layers loaded where asked for.

        Parameters
        ----------
        values : Values
        path : pathlib.Path
            GeoPackage that was written.
        counts : mapping of str to int
            Rows written, by layer; empty layers are not added to the project.
        **numbers
            Further outputs.
        """
        uris = {n: f"{path}|layername={n}" for n in self.LAYERS if n in counts}
        if values.yes("LOAD"):
            filled = {name: uri for name, uri in uris.items() if counts[name]}
            _load_on_completion(values.context, filled, path.stem)
        results = {name.upper(): uri for name, uri in uris.items()}
        return {"OUTPUT": str(path), **results, **numbers}


class _Style(QgsProcessingLayerPostProcessorInterface):
    """Give a loaded layer the default style that is stored in its file."""

    def postProcessLayer(self, layer, context, feedback):  # noqa: ARG002
        """Load the style, which Processing itself leaves aside, once.

        A layer that was in the project before keeps what its user made of it.
        """
        if not layer.customProperty(_STYLED):
            layer.loadDefaultStyle()
            layer.setCustomProperty(_STYLED, True)


_STYLED = "heaveline/styled"
#: The context deletes each when it goes, but does not keep Python's half alive.
_KEPT = []


def _new_style():
    """Make a post-processor that lives as long as the context it is given to."""
    _KEPT[:] = [style for style in _KEPT if not sip.isdeleted(style)]
    _KEPT.append(_Style())
    return _KEPT[-1]


#: From the lowest in the legend to the topmost: tables, lines, points.
_DRAWING_ORDER = (
    "runs",
    "input_statement",
    "shear_misfit",
    "shear_angle",
    "growth_history",
    "subsidiary_faults",
    "balance",
    "method_comparison",
    "march_table",
    "section_lines",
    "predicted_horizons",
    "predicted_fault_traces",
    "picks_time",
    "picks",
    "fault_points",
    "cutoffs",
)


def _load_on_completion(context, uris, group):
    """Ask Processing to add layers to the project in the order of drawing."""
    from ..fields import LAYERS

    project = context.project()
    if project is None:
        return
    for name, uri in uris.items():
        details = QgsProcessingContext.LayerDetails(LAYERS[name].title, project)
        details.forceName = True
        details.groupName = group
        details.layerSortKey = _DRAWING_ORDER.index(name) + 1
        details.setPostProcessor(_new_style())
        context.addLayerToLoadOnCompletion(uri, details)


def _unusable(definition, parameters, context):
    """Say what a parameter would take, where it does not take its value."""
    key = definition.name()
    value = parameters.get(key, definition.defaultValue())
    if definition.checkValueIsAcceptable(value, context):
        return ""
    label = f"{definition.description()} ({key})"
    optional = definition.flags() & Qgis.ProcessingParameterFlag.Optional
    if value in (None, "") and not optional:
        return tr("{} is not given.").format(label)
    return tr("{}: '{}' cannot be used.{}").format(label, value, _takes(definition))


def _takes(definition):
    """Say what values a number or a choice takes."""
    if isinstance(definition, QgsProcessingParameterEnum):
        return " " + tr("Use one of: {}.").format(", ".join(definition.options()))
    if isinstance(definition, QgsProcessingParameterNumber):
        low, high = definition.minimum(), definition.maximum()
        if high < 1e12:
            return " " + tr("Give a number from {:g} to {:g}.").format(low, high)
        if low > -1e12:
            return " " + tr("Give a number of {:g} or more.").format(low)
        return " " + tr("Give a number.")
    return ""


def _file_sentence(error):
    """Say which file could not be used and why."""
    why = error.strerror or str(error)
    if error.filename:
        return tr("{}: {}.").format(error.filename, why)
    return tr("A file could not be used: {}.").format(why)
