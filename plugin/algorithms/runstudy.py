"""A whole study from its JSON document."""

from ..definitions import declared, tr
from .construction import ConstructingAlgorithm

__all__ = ["RunStudy"]


class RunStudy(ConstructingAlgorithm):
    """Run a study: sections, picks, construction, layers, plots."""

    NAME = "runstudy"
    TITLE = "Run study"
    GROUP = "study"
    TAGS = ("study", "recipe", "batch", "json", "headless")
    PARAMETERS = (
        declared("STUDY"),
        declared("OUTPUT", optional=True),
        declared("PLOTS"),
        declared("LOAD"),
    )
    LAYERS = (
        "section_lines",
        "picks",
        "picks_time",
        "predicted_fault_traces",
        "fault_points",
        "cutoffs",
        "predicted_horizons",
        "march_table",
        "method_comparison",
        "balance",
        "subsidiary_faults",
        "growth_history",
        "input_statement",
        "runs",
    )

    def check(self, values):
        """Ask for a readable study, a CRS to measure in, and a place to write to."""
        from ..studies import Place

        study = self._study(values)
        Place.of(study.crs, values.context)
        if self._output(values, study) is None:
            yield tr(
                "Neither OUTPUT nor the study says where to write the results: give "
                "OUTPUT, or outputs.geopackage in the study."
            )
        if study.construction.solver == "fit":
            yield from self.missing("scipy", "solver fit")

    def work(self, values, feedback):
        """Read the study and its layers, run it, write, draw."""
        from dataclasses import replace

        from ...geomcore.study import run
        from ..north import convergence_of
        from ..reporting import statement_lines
        from ..studies import Place, read_sources, read_study_lines, recorded

        study = self._study(values)
        place = Place.of(study.crs, values.context, values.file("STUDY").parent)
        steps = self.steps(feedback, self._plots(values, study))
        plots = self.usable_plots(self._plots(values, study), steps)
        steps.next("Reading the layers")
        sources = read_sources(study, place, steps)
        lines = read_study_lines(study, place, steps)
        steps.next("Running the study")
        product = run(
            study,
            sources,
            lines,
            steps.progress,
            steps.cancelled,
            convergence_of(place.crs, place.transform_context),
        )
        steps.say(statement_lines(product.statement))
        path = self._output(values, study)
        product = replace(product, study=recorded(study, place.base, path.parent))
        return self.finish(product, values, path, plots, place, steps)

    def _study(self, values):
        """Read the study document."""
        from ...geomcore.recipe import Study
        from .values import read_text

        return Study.from_json(read_text(values.file("STUDY")))

    def _output(self, values, study):
        """Give the GeoPackage: as asked for, else as the study says beside itself."""
        if values.has("OUTPUT"):
            return values.destination("OUTPUT")
        named = study.outputs.geopackage
        return values.file("STUDY").parent / named if named else None

    def _plots(self, values, study):
        """Give the folder of figures; that of the study only with its own results."""
        if values.has("PLOTS") or values.has("OUTPUT"):
            return values.destination("PLOTS")
        named = study.outputs.plots
        return values.file("STUDY").parent / named if named else None
