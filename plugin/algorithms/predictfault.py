"""The fault at depth from the rollover of one horizon, section by section."""

from ..definitions import declared
from .construction import ConstructingAlgorithm

__all__ = ["PredictFault"]


class PredictFault(ConstructingAlgorithm):
    """Predict the fault from picks."""

    NAME = "predictfault"
    TITLE = "Predict fault from rollover"
    GROUP = "construction"
    TAGS = ("rollover", "heave", "throw", "detachment", "shear", "regional")
    PARAMETERS = (
        declared("SECTIONS"),
        declared("PICKS"),
        declared("HORIZON"),
        declared("FAULT", optional=True, default=None),
        declared("MODEL"),
        declared("SHEAR_ANGLE"),
        declared("SHEAR_ANGLE_SIGMA"),
        declared("SOLVER"),
        declared("REGIONAL_Z"),
        declared("REGIONAL_DIP"),
        declared("FAR_FROM"),
        declared("FOOTWALL_WITHIN"),
        declared("FIT_HORIZONS"),
        declared("ROBUST"),
        declared("DETACHMENT_Z"),
        declared("DETACHMENT_SIGMA"),
        declared("SAMPLES_PER_STRIP"),
        declared("SEPARATION_FROM"),
        declared("SEPARATION_TO"),
        declared("COMPARE"),
        declared("BALANCE"),
        declared("PICKS_TIME"),
        declared("VERTICAL_DATUM"),
        declared("OUTPUT"),
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
        "march_table",
        "method_comparison",
        "balance",
        "subsidiary_faults",
        "growth_history",
        "runs",
    )

    def check(self, values):
        """Ask for layers as earlier steps write them, and a study that holds."""
        yield from self.replaced_by_part(values, ("SECTIONS", "PICKS", "PICKS_TIME"))
        self._study(values, self.place(values, "SECTIONS"))
        if values.choice("SOLVER") == "fit":
            yield from self.missing("scipy", "SOLVER")

    def work(self, values, feedback):
        """Read sections and picks, construct, write, draw."""
        from ...geomcore.study import run_from_picks, section_frames
        from ..layers import read_picks
        from ..studies import read_lines

        plots = values.destination("PLOTS")
        steps = self.steps(feedback, plots)
        place = self.place(values, "SECTIONS")
        study = self._study(values, place)
        steps.next("Reading sections and picks")
        lines = read_lines(values.source("SECTIONS"), "", place, steps)
        picks = read_picks(
            values.source("PICKS"),
            values.source("PICKS_TIME"),
            place.crs,
            place.transform_context,
            steps.feedback,
        )
        steps.next("Constructing")
        run = run_from_picks(
            study,
            section_frames(study, {}, lines),
            picks,
            progress=steps.progress,
            cancelled=steps.cancelled,
        )
        path = values.destination("OUTPUT")
        return self.finish(run, values, path, plots, place, steps)

    def _study(self, values, place):
        """Give the study that the parameters and the earlier step say."""
        from ..earlier import known_transport, study_of
        from ..recipes import construction_study

        transport = known_transport(values.source("SECTIONS"))
        earlier = study_of(values.source("PICKS"), values.layer("PICKS"))
        return construction_study(
            values, place.crs_text, place.unit, transport, earlier
        )
