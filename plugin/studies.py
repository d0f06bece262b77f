"""The way of a study through QGIS: layers to arrays, the core, arrays to layers."""

import shutil
import tempfile
from dataclasses import dataclass, replace
from datetime import datetime, timezone
from pathlib import Path
from typing import Any, Optional

from qgis.core import QgsProcessingUtils

from ..geomcore import __version__
from ..geomcore import study as core
from ..geomcore.digest import digest
from ..geomcore.errors import GeomcoreError, StudyError, Unsolved
from .earlier import with_earlier_runs
from .fields import ON_REQUEST
from .layers import (
    length_unit_of,
    open_layer,
    read_section_lines,
    read_source,
    study_crs,
    versions,
    write_geopackage,
)
from .north import convergence_of
from .outputs import calibrated
from .outputs import tables as rows
from .outputs.dress import dresser
from .recipes import relative_uri

__all__ = [
    "Place",
    "Pulled",
    "calibration_tables",
    "draw_calibration",
    "draw_plots",
    "file_names",
    "horizon_tables",
    "picks_tables",
    "publish",
    "pull",
    "read_lines",
    "read_sources",
    "recorded",
    "result_tables",
    "section_tables",
    "temporary_folder",
    "write",
]

#: What every figure is saved as.
PLOT_FORMATS = ("png", "svg", "pdf")


@dataclass(frozen=True, eq=False)
class Place:
    """Where a study runs: its CRS, and what QGIS needs to know besides.

    Parameters
    ----------
    crs : QgsCoordinateReferenceSystem
        Of the study, checked.
    transform_context : QgsCoordinateTransformContext
    base : pathlib.Path, optional
        Folder that relative layer sources are looked for from.
    project : QgsProject, optional
        Project whose open layers a result file may belong to.
    """

    crs: Any
    transform_context: Any
    base: Optional[Path] = None
    project: Any = None

    @classmethod
    def of(cls, crs, context, base=None, layer_name=""):
        """Make one from a CRS and a Processing context.

        Parameters
        ----------
        crs : str or QgsCoordinateReferenceSystem
        context : QgsProcessingContext
        base : pathlib.Path, optional
        layer_name : str
            Layer the CRS was taken from, for the message.

        Raises
        ------
        StudyError
            With code ``study-crs`` if lengths cannot be measured in it.
        """
        try:
            crs = study_crs(crs)
        except GeomcoreError as error:
            if not layer_name:
                raise
            words = f"its CRS cannot be that of the study. {error.reason}"
            where = f"layer '{layer_name}'"
            raise StudyError(error.code, words, where, error.remedy) from None
        return cls(crs, context.transformContext(), base, context.project())

    @property
    def unit(self):
        """Length unit of the study."""
        return length_unit_of(self.crs)

    @property
    def crs_text(self):
        """The CRS as a text that names it on every machine."""
        name = self.crs.authid()
        return name if name and not name.startswith("USER:") else self.crs.toWkt()


# ---- in ----------------------------------------------------------------------------


def read_sources(study, place, steps, at_hand=None):
    """Read every source of a study.

    Parameters
    ----------
    study : Study
    place : Place
    steps : Steps
        Asked for cancellation, told how far it is.
    at_hand : mapping of str to layer or feature source, optional
        Those that need not be opened, by source key.

    Returns
    -------
    dict of str to Features or Grid
    """
    data, at_hand = {}, at_hand or {}
    for i, declaration in enumerate(study.sources):
        steps.check()
        data[declaration.key] = read_source(
            declaration,
            place.crs,
            place.base,
            place.transform_context,
            steps.feedback,
            at_hand.get(declaration.key),
        )
        steps.progress((i + 1) / len(study.sources))
    return data


def read_lines(layer, id_field, place, steps):
    """Read section lines; the field ``section_id`` names them where none is given.

    Returns
    -------
    list of SectionLine
    """
    if not id_field and layer.fields().lookupField("section_id") >= 0:
        id_field = "section_id"
    return read_section_lines(
        layer, id_field or "", place.crs, place.transform_context, steps.feedback
    )


def read_study_lines(study, place, steps):
    """Read the section lines that a study names; None where it lays its own.

    Returns
    -------
    list of SectionLine or None
    """
    if study.sections.parallel is not None:
        return None
    layer = open_layer(study.sections.uri, place.base, "sections")
    return read_lines(layer, study.sections.id_field, place, steps)


# ---- picks without construction ----------------------------------------------------


@dataclass(frozen=True, eq=False)
class Pulled:
    """Sections and their picks, before any construction.

    Parameters
    ----------
    study : Study
    section_set : SectionSet
    picks : dict of str to SectionPicks
    statement : tuple of SourceCount
    sha256 : str
    """

    study: Any
    section_set: Any
    picks: dict
    statement: tuple
    sha256: str

    @property
    def used(self):
        """Number of picks that enter the construction."""
        return sum(count.used for count in self.statement)

    def recorded_beside(self, folder, base):
        """Give the same with the layers' places relative to a folder."""
        return replace(self, study=recorded(self.study, base, folder))


def pull(study, sources, lines, place, steps):
    """Make the section frames and pull the picks.

    Returns
    -------
    Pulled
    """
    prepared = core.prepare(study, sources)
    section_set = core.section_frames(study, prepared, lines)
    picks, statement = core.pull_picks(
        study,
        prepared,
        section_set.frames,
        steps.progress,
        steps.cancelled,
        convergence_of(place.crs, place.transform_context),
    )
    sha256 = digest(study, section_set.frames, picks, sources)
    return Pulled(study, section_set, picks, statement, sha256)


# ---- out ---------------------------------------------------------------------------


def _stamp(study, sha256):
    return rows.Stamp.of(study, sha256, _now(), __version__)


def _now():
    return datetime.now(timezone.utc).isoformat(timespec="seconds")


def section_tables(study, section_set):
    """Give the rows of ``section_lines`` alone.

    Returns
    -------
    list of Table
    """
    sha256 = digest(study, section_set.frames, {})
    return [_section_table(_stamp(study, sha256), section_set)]


def _section_table(stamp, section_set):
    frames, unsolved = section_set.frames, section_set.unsolved
    return rows.section_lines_table(stamp, frames, unsolved, (), section_set.doubts)


def picks_tables(pulled):
    """Give the rows of sections, picks, input statement and run.

    Parameters
    ----------
    pulled : Pulled

    Returns
    -------
    list of Table
    """
    stamp = _stamp(pulled.study, pulled.sha256)
    labels = {s.key: s.layer or s.key for s in pulled.study.sources}
    own = [(f, pulled.picks[f.section_id]) for f in pulled.section_set.frames]
    made = [
        _section_table(stamp, pulled.section_set),
        *rows.picks_tables(stamp, [(f, p.depth, p.time) for f, p in own], labels),
        rows.input_statement_table(stamp, pulled.statement),
    ]
    run = _unconstructed(pulled.study, pulled.section_set, pulled.sha256)
    return [*made, rows.runs_table(stamp, run, made, versions())]


def _unconstructed(study, section_set, sha256):
    """Give a run in which no section has a prediction, for the table of runs."""
    sections = []
    for frame in section_set.frames:
        own = core.SectionPicks.empty(frame.section_id)
        none = Unsolved(frame.section_id, "not-constructed", "nothing was constructed.")
        sections.append(
            core.SectionResult(frame, own.depth, own.time, (), None, none, (), ())
        )
    return core.StudyRun(
        study,
        tuple(sections),
        section_set.unsolved,
        (),
        section_set.transport_azimuth,
        section_set.transport_from,
        section_set.doubts,
        sha256,
    )


def result_tables(run):
    """Give the rows of all layers of a run.

    Parameters
    ----------
    run : StudyRun

    Returns
    -------
    list of Table
        Comparison and balance only where the study asks for them, subsidiary faults
        and growth only where there are any.
    """
    made = rows.run_tables(run, _now(), __version__, versions())
    return [t for t in made if len(t) or t.name not in ON_REQUEST]


def horizon_tables(study, section_set, items, sha256):
    """Give the rows of predicted horizons and of the run.

    Parameters
    ----------
    study : Study
    section_set : SectionSet
    items : list of tuple (SectionFrame, str, HorizonPrediction or Unsolved)
        Frame, trace id, horizon.
    sha256 : str

    Returns
    -------
    list of Table
    """
    stamp = _stamp(study, sha256)
    made = [rows.predicted_horizons_table(stamp, items)]
    run = _unconstructed(study, section_set, sha256)
    return [*made, rows.runs_table(stamp, run, made, versions())]


def calibration_tables(study, section_set, picks, result):
    """Give the rows of the shear angle, its misfit curves and the run.

    Parameters
    ----------
    study : Study
    section_set : SectionSet
    picks : dict of str to SectionPicks
    result : CalibrationResult

    Returns
    -------
    list of Table
    """
    sha256 = digest(study, section_set.frames, picks)
    stamp = _stamp(study, sha256)
    made = [
        calibrated.shear_angle_table(stamp, result),
        calibrated.shear_misfit_table(stamp, result),
    ]
    run = _unconstructed(study, section_set, sha256)
    run = replace(run, doubts=(*run.doubts, *result.doubts))
    return [*made, rows.runs_table(stamp, run, made, versions())]


def recorded(study, base, folder):
    """Write the places of a study's layers relative to the folder of its results.

    So that the study, exported beside its results, finds its layers again.

    Parameters
    ----------
    study : Study
    base : pathlib.Path or None
        Folder they are relative to now.
    folder : pathlib.Path
        Folder of the results; a temporary one changes nothing.

    Returns
    -------
    Study
    """
    if _is_temporary(folder):
        return study
    sources = tuple(_source_from(s, base, folder) for s in study.sources)
    uri = relative_uri(study.sections.uri, base, folder)
    sections = replace(study.sections, uri=uri)
    return replace(study, sources=sources, sections=sections)


def _is_temporary(folder):
    own, folder = Path(QgsProcessingUtils.tempFolder()).resolve(), folder.resolve()
    return own == folder or own in folder.parents


def _source_from(source, base, folder):
    z = source.z
    if z.uri:
        z = replace(z, uri=relative_uri(z.uri, base, folder))
    return replace(source, uri=relative_uri(source.uri, base, folder), z=z)


def write(tables, study, path, place, steps):
    """Write layers, styled, into a GeoPackage: whole or not at all.

    Parameters
    ----------
    tables : list of Table
    study : Study
    path : pathlib.Path
    place : Place
    steps : Steps

    Returns
    -------
    dict of str to int
        Rows written, by layer.
    """
    steps.check()
    written = write_geopackage(
        path,
        [with_earlier_runs(t, path) if t.name == "runs" else t for t in tables],
        place.crs,
        place.transform_context,
        dress=dresser(study),
        project=place.project,
        feedback=steps.feedback,
    )
    return dict(written.counts)


# ---- figures -----------------------------------------------------------------------


def temporary_folder():
    """Make a folder that is taken away when it is closed."""
    return tempfile.TemporaryDirectory(prefix="heaveline-")


def draw_plots(run, folder, steps):
    """Draw one figure per section into a folder, and one of each comparison.

    Parameters
    ----------
    run : StudyRun
    folder : pathlib.Path
    steps : Steps

    Returns
    -------
    int
        Number of sections drawn.
    """
    from ..geomcore import __version__
    from ..geomcore.plot_comparison import comparison_figure
    from ..geomcore.plots import FigureOptions, save_section_figure, section_figure

    options = FigureOptions.of_run(run, made_with=f"Heaveline {__version__}")
    names = file_names([s.frame.section_id for s in run.sections])
    for i, (section, name) in enumerate(zip(run.sections, names)):
        steps.check()
        figure = section_figure(run.study, section, options)
        save_section_figure(figure, folder / name, PLOT_FORMATS)
        if section.comparison:
            figure = comparison_figure(run.study, section, options)
            other = f"comparison{name[len('section') :]}"
            save_section_figure(figure, folder / other, PLOT_FORMATS)
        steps.progress((i + 1) / len(run.sections))
    return len(run.sections)


def draw_calibration(study, result, folder):
    """Draw the misfit curves of the shear angle into a folder.

    Parameters
    ----------
    study : Study
    result : CalibrationResult
    folder : pathlib.Path
    """
    from ..geomcore.plot_calibration import calibration_figure
    from ..geomcore.plots import save_section_figure

    figure = calibration_figure(study, result)
    save_section_figure(figure, folder / "shear_angle", PLOT_FORMATS)


def file_names(section_ids):
    """Turn names of sections into file names, all different even if case counts not.

    Examples
    --------
    >>> file_names(["A-A'", "A-A*", "B"])
    ['section_A-A_', 'section_A-A__2', 'section_B']
    """
    names, taken = [], set()
    for section_id in section_ids:
        kept = (c if c.isalnum() or c in "-_" else "_" for c in section_id)
        plain = name = "section_" + "".join(kept)
        number = 2
        while name.lower() in taken:
            name, number = f"{plain}_{number}", number + 1
        taken.add(name.lower())
        names.append(name)
    return names


def publish(made, folder):
    """Move finished figures into their folder, each whole.

    Parameters
    ----------
    made : pathlib.Path
        Folder they were drawn into.
    folder : pathlib.Path
        Figures of the same name in it are replaced.

    Returns
    -------
    list of pathlib.Path
    """
    placed = []
    for path in sorted(made.iterdir()):
        half = folder / f".{path.name}.part"
        shutil.copyfile(path, half)
        half.replace(folder / path.name)
        placed.append(folder / path.name)
    return placed
