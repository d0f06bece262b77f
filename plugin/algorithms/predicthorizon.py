"""Horizons in the hanging wall from the predicted fault."""

from ..definitions import declared, tr
from .base import Algorithm, Steps

__all__ = ["PredictHorizon"]


class PredictHorizon(Algorithm):
    """Predict horizons from the fault and compare them with picks."""

    NAME = "predicthorizon"
    TITLE = "Predict horizons from fault"
    GROUP = "construction"
    TAGS = ("horizon", "rollover", "misfit", "forward")
    PARAMETERS = (
        declared("PREDICTED_TRACES"),
        declared("SECTIONS"),
        declared("PICKS", optional=True),
        declared("HORIZONS"),
        declared("OFFSET"),
        declared("SLIP"),
        declared("FAULT", optional=True, default=None),
        declared("VERTICAL_DATUM"),
        declared("OUTPUT"),
        declared("LOAD"),
    )
    LAYERS = ("predicted_horizons", "runs")
    NUMBERS = {  # noqa: RUF012
        "HORIZON_COUNT": "Horizons predicted, over all sections",
        "NOT_PREDICTED": "Horizons that could not be predicted, over all sections",
    }

    def check(self, values):
        """Ask for readable names and offsets, picks where needed, and a CRS."""
        if not values.has("PICKS") and any(
            h.offset is None for h in self._horizons(values)
        ):
            yield tr(
                "Without picks each horizon needs an offset: give OFFSET, or the picks "
                "that show the horizon in the footwall."
            )
        self._study(values, self.place(values, "SECTIONS"))

    def work(self, values, feedback):
        """Read faults, sections and picks, predict each horizon, write."""
        from ..horizons import horizon_digest, horizons_of
        from ..reporting import horizon_lines, lost_horizon_lines
        from ..studies import horizon_tables, write

        steps = Steps(feedback, 3)
        place = self.place(values, "SECTIONS")
        study = self._study(values, place)
        steps.next("Reading faults, sections and picks")
        section_set, names, traces, picks = self._read(values, study, place, steps)
        frames = section_set.frames
        steps.next("Predicting the horizons")
        further = study.construction.further_horizons
        items = horizons_of(further, frames, names, traces, picks, steps)
        steps.say(horizon_lines(items))
        steps.warn(lost_horizon_lines(items, frames, traces))
        steps.next("Writing the horizons")
        path = values.destination("OUTPUT")
        sha256 = horizon_digest(study, frames, traces, picks)
        tables = horizon_tables(study, section_set, items, sha256)
        written = write(tables, study, path, place, steps)
        made = [bool(horizon) for _, _, horizon in items]
        numbers = {
            "HORIZON_COUNT": made.count(True),
            "NOT_PREDICTED": made.count(False),
        }
        return self.results(values, path, written, **numbers)

    def _horizons(self, values):
        from ..recipes import further_horizons

        return further_horizons(
            values.text("HORIZON"), values.text("OFFSET"), values.number("SLIP")
        )

    def _study(self, values, place):
        """Give the study that the parameters and the earlier step say."""
        from ..earlier import known_transport, study_of
        from ..recipes import horizons_study

        traces, layer = values.source("FAULT_TRACE"), values.layer("FAULT_TRACE")
        return horizons_study(
            values,
            place.crs_text,
            place.unit,
            known_transport(values.source("SECTIONS")),
            study_of(traces, layer),
            self._horizons(values),
        )

    def _read(self, values, study, place, steps):
        """Give sections, names of traces, traces, and picks by section."""
        from ...geomcore.study import section_frames
        from ..earlier import trace_names
        from ..horizons import check_methods
        from ..layers import read_picks, read_traces
        from ..studies import read_lines

        how = (place.crs, place.transform_context, steps.feedback)
        lines = read_lines(values.source("SECTIONS"), "", place, steps)
        section_set = section_frames(study, {}, lines)
        source = values.source("FAULT_TRACE")
        names = trace_names(source)
        check_methods(names)
        traces = read_traces(source, section_set.frames, *how)
        picks = read_picks(values.source("PICKS"), None, *how)
        return section_set, names, traces, picks
