"""Parallel section lines across a fault trace."""

from ..definitions import declared, tr
from .base import Algorithm, Steps

__all__ = ["ParallelSections"]


class ParallelSections(Algorithm):
    """Lay parallel sections by spacing or count."""

    NAME = "parallelsections"
    TITLE = "Lay parallel sections"
    GROUP = "sections"
    TAGS = ("parallel", "lines", "strike", "transport")
    PARAMETERS = (
        declared("FAULT_TRACE"),
        declared("FAULT"),
        declared("SPACING"),
        declared("COUNT"),
        declared("LENGTH_FOOTWALL"),
        declared("LENGTH_HANGING_WALL"),
        declared("TRANSPORT_AZIMUTH"),
        declared("HW_SIDE"),
        declared("EXTENT"),
        declared("CRS"),
        declared("OUTPUT"),
        declared("LOAD"),
    )
    LAYERS = ("section_lines",)
    NUMBERS = {"SECTION_COUNT": "Number of sections"}  # noqa: RUF012

    def check(self, values):
        """Ask for spacing or count, a side, and a CRS to measure in."""
        if values.has("SPACING") == values.has("COUNT"):
            yield tr("Give either the distance between sections or their number.")
        if not (values.has("TRANSPORT_AZIMUTH") or values.text("HW_SIDE")):
            yield tr(
                "Nothing tells where the hanging wall is: give the transport azimuth "
                "or the side of the hanging wall."
            )
        self.place(values, "FAULT_TRACE")

    def work(self, values, feedback):
        """Read the trace, lay the lines, write them."""
        from ...geomcore.study import prepare, section_frames
        from ..recipes import sections_study
        from ..reporting import doubt_lines, section_lines
        from ..studies import read_sources, section_tables, write

        steps = Steps(feedback, 2)
        place = self.place(values, "FAULT_TRACE")
        extent = values.extent("EXTENT", place.crs)
        study = sections_study(values, place.crs_text, place.unit, extent)
        steps.next("Reading the fault trace")
        at_hand = {"fault_trace": values.source("FAULT_TRACE")}
        sources = read_sources(study, place, steps, at_hand)
        section_set = section_frames(study, prepare(study, sources))
        steps.say(section_lines(section_set))
        steps.warn(doubt_lines(section_set.doubts))
        steps.next("Writing the section lines")
        path = values.destination("OUTPUT")
        counts = write(section_tables(study, section_set), study, path, place, steps)
        count = len(section_set.frames)
        return self.results(values, path, counts, SECTION_COUNT=count)
