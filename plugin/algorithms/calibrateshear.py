"""The shear angle from the data, section by section and for the whole fault."""

from pathlib import Path

from ..definitions import declared, tr
from .base import Algorithm, Steps

__all__ = ["CalibrateShear"]


class CalibrateShear(Algorithm):
    """Find the shear angle from picks."""

    NAME = "calibrateshear"
    TITLE = "Find shear angle from data"
    GROUP = "construction"
    TAGS = ("shear", "angle", "calibration", "growth", "cut-off", "detachment")
    PARAMETERS = (
        declared("SECTIONS"),
        declared("PICKS"),
        declared("CALIBRATION_HORIZONS"),
        declared("PRE_GROWTH"),
        declared(
            "DETACHMENT_Z",
            help="Elevation, up positive, of a level detachment that is known from "
            "elsewhere: with it the lost area tells the angle too.",
            advanced=False,
        ),
        declared("DETACHMENT_SIGMA"),
        declared("REGIONAL_DIP"),
        declared("FOOTWALL_WITHIN"),
        declared("FAULT", optional=True, default=None),
        declared("VERTICAL_DATUM"),
        declared("OUTPUT"),
        declared(
            "PLOTS",
            label="Folder for the misfit curves",
            help="One figure of all misfit curves as PNG, SVG and PDF. Needs "
            "matplotlib. None if not given.",
        ),
        declared("LOAD"),
    )
    LAYERS = ("shear_angle", "shear_misfit", "runs")
    NUMBERS = {  # noqa: RUF012 - constants of the class
        "ANGLE": "Best shear angle for the fault, degrees; none if not resolved",
        "ANGLE_SIGMA": "Its standard deviation, degrees",
        "RESOLVED": "Sections that tell the angle by themselves",
    }

    def check(self, values):
        """Ask for layers as earlier steps write them, a study that holds, and scipy."""
        from ..recipes import names_in

        if not names_in(values.text("HORIZON")):
            yield tr("{}: no horizon is named.").format(values.label("HORIZON"))
        self._study(values, self.place(values, "SECTIONS"))
        yield from self.missing("scipy", tr(self.TITLE))

    def work(self, values, feedback):
        """Read sections and picks, find the angle, draw, write."""
        from ...geomcore.study import calibrate, section_frames
        from ..layers import read_picks
        from ..studies import calibration_tables, read_lines

        plots = values.destination("PLOTS")
        steps = Steps(feedback, 4 if plots else 3)
        place = self.place(values, "SECTIONS")
        study = self._study(values, place)
        steps.next("Reading sections and picks")
        lines = read_lines(values.source("SECTIONS"), "", place, steps)
        section_set = section_frames(study, {}, lines)
        how = (place.crs, place.transform_context, steps.feedback)
        picks = read_picks(values.source("PICKS"), None, *how)
        steps.next("Finding the shear angle")
        own = [f.section_id for f in section_set.frames if f.section_id in picks]
        depth = [picks[name].depth for name in own]
        result = calibrate(study, depth, steps.progress, steps.cancelled)
        self._tell(result, section_set, picks, steps)
        tables = calibration_tables(study, section_set, picks, result)
        return self._finish(values, study, result, tables, plots, place, steps)

    def _tell(self, result, section_set, picks, steps):
        from ..reporting import calibration_lines, doubt_lines

        steps.say(calibration_lines(result))
        bare = [f.section_id for f in section_set.frames if f.section_id not in picks]
        steps.warn(
            [
                *(tr("{}: there are no picks.").format(name) for name in bare),
                *doubt_lines(result.all_doubts),
            ]
        )

    def _finish(self, values, study, result, tables, plots, place, steps):
        """Draw, write, and give the results; figures go into their folder last."""
        from ..studies import draw_calibration, publish, temporary_folder, write

        path = values.destination("OUTPUT")
        with temporary_folder() as drawn:
            if plots:
                steps.next("Drawing the misfit curves")
                draw_calibration(study, result, Path(drawn))
            steps.next("Writing the results")
            steps.check()
            if plots:
                plots.mkdir(parents=True, exist_ok=True)
            counts = write(tables, study, path, place, steps)
            if plots:
                publish(Path(drawn), plots)
        more = {"PLOTS": str(plots)} if plots else {}
        return self.results(values, path, counts, **self._numbers(result), **more)

    def _numbers(self, result):
        best = result.best
        alone = [any(e.resolved for e in s.estimates) for s in result.sections]
        return {
            "ANGLE": best.best if best else None,
            "ANGLE_SIGMA": best.sd if best else None,
            "RESOLVED": alone.count(True),
        }

    def _study(self, values, place):
        """Give the study that the parameters and the earlier step say."""
        from ..earlier import known_transport, study_of
        from ..recipes import calibration_study

        transport = known_transport(values.source("SECTIONS"))
        earlier = study_of(values.source("PICKS"), values.layer("PICKS"))
        return calibration_study(values, place.crs_text, place.unit, transport, earlier)
