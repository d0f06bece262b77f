"""Picks of any number of declared sources on section lines."""

from ..definitions import declared
from .base import Algorithm, Steps

__all__ = ["PullPicks"]


class PullPicks(Algorithm):
    """Pull horizon and fault picks to sections."""

    NAME = "pullpicks"
    TITLE = "Pull picks to sections"
    GROUP = "sections"
    TAGS = ("picks", "horizon", "contours", "grid", "corridor", "input statement")
    PARAMETERS = (
        declared("SECTIONS"),
        declared("SECTION_ID"),
        declared("HORIZON_LAYER"),
        declared("HORIZON_NAME"),
        declared("ELEVATION_FIELD"),
        declared("SIGMA"),
        declared("FAULT"),
        declared("FAULT_TRACE", optional=True),
        declared("FAULT_TRACE_Z"),
        declared("FAULT_TRACE_Z_FIELD"),
        declared("FAULT_TRACE_Z_RASTER"),
        declared("FAULT_TRACE_Z_VALUE"),
        declared("DIP_FIELD"),
        declared("DIP_AZIMUTH_FIELD"),
        declared("AZIMUTH_NORTH"),
        declared("DECLINATION"),
        declared("FAULT_PICKS"),
        declared("FAULT_PICKS_FIELD"),
        declared("FAULT_SIGMA"),
        declared("VERTICAL_UNIT"),
        declared("VERTICAL_SIGN"),
        declared("VERTICAL_DATUM"),
        declared("SOURCES"),
        declared("TRANSPORT_AZIMUTH"),
        declared("HW_SIDE"),
        declared("CORRIDOR"),
        declared("FAULT_BUFFER"),
        declared("GRID_STEP"),
        declared("CRS"),
        declared("OUTPUT"),
        declared("LOAD"),
    )
    LAYERS = ("section_lines", "picks", "picks_time", "input_statement", "runs")
    NUMBERS = {  # noqa: RUF012
        "SECTION_COUNT": "Number of sections",
        "USED_PICKS": "Picks that enter the construction",
    }

    def check(self, values):
        """Ask for what the layers need, readable SOURCES, and a CRS."""
        from ..recipes import missing_values

        yield from missing_values(values)
        self._declared_sources(values)
        self.place(values, "SECTIONS")

    def work(self, values, feedback):
        """Read sections and sources, pull, write."""
        from ..reporting import doubt_lines, section_lines, statement_lines
        from ..studies import picks_tables, pull, read_lines, read_sources, write

        steps = Steps(feedback, 4)
        study, place = self._study(values)
        steps.next("Reading the section lines")
        id_field = values.field("SECTION_ID")
        lines = read_lines(values.source("SECTIONS"), id_field, place, steps)
        steps.next("Reading the sources")
        sources = read_sources(study, place, steps, self._at_hand(values))
        steps.next("Pulling the picks")
        pulled = pull(study, sources, lines, place, steps)
        steps.say(section_lines(pulled.section_set))
        steps.say(statement_lines(pulled.statement))
        steps.warn(doubt_lines(pulled.section_set.doubts))
        steps.next("Writing the picks")
        path = values.destination("OUTPUT")
        pulled = pulled.recorded_beside(path.parent, place.base)
        counts = write(picks_tables(pulled), pulled.study, path, place, steps)
        numbers = {
            "SECTION_COUNT": len(pulled.section_set.frames),
            "USED_PICKS": pulled.used,
        }
        return self.results(values, path, counts, **numbers)

    def _study(self, values):
        """Give the study that the parameters say, and where it runs."""
        from ..earlier import known_transport
        from ..recipes import picks_study

        declarations, base = self._declared_sources(values)
        place = self.place(values, "SECTIONS", base)
        sections = values.source("SECTIONS")
        # a grid azimuth holds in its own CRS only
        same = sections.sourceCrs() == place.crs
        transport = known_transport(sections) if same else None
        study = picks_study(values, place.crs_text, place.unit, declarations, transport)
        return study, place

    def _declared_sources(self, values):
        """Give the declarations in SOURCES and the folder they are relative to."""
        from ..recipes import source_list

        document, base = values.json("SOURCES")
        if document is None:
            return (), values.project_folder()
        return source_list(document), base or values.project_folder()

    def _at_hand(self, values):
        """Give the layers of the simple parameters, by source key."""
        found = {
            key.lower(): values.source(key)
            for key in ("FAULT_TRACE", "FAULT_PICKS")
            if values.has(key)
        }
        if values.has("HORIZON"):
            found["horizon"] = values.source("HORIZON") or values.layer("HORIZON")
        return found
