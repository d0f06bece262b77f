"""What the algorithms that construct a fault have in common: results and plots."""

from pathlib import Path

from ..packages import missing_sentence
from .base import Algorithm, Steps

__all__ = ["ConstructingAlgorithm"]


class ConstructingAlgorithm(Algorithm):
    """An algorithm whose product is a run of a study, with layers and plots."""

    NUMBERS = {  # noqa: RUF012 - constants of the class
        "SOLVED": "Sections whose fault was predicted",
        "NOT_SOLVED": "Sections without a prediction",
    }

    def steps(self, feedback, plots):
        """Make the steps: read, construct, write, and draw where there are plots."""
        return Steps(feedback, 4 if plots else 3)

    def finish(self, run, values, path, plots, place, steps):
        """Tell of a run, draw and write it; give the results.

        Figures are drawn first and put into their folder last, so that a run that
        is cancelled or fails leaves neither layers nor figures.

        Parameters
        ----------
        run : StudyRun
        values : Values
        path : pathlib.Path
            GeoPackage to write.
        plots : pathlib.Path or None
            Folder for the figures.
        place : Place
        steps : Steps
        """
        from ..studies import (
            draw_plots,
            publish,
            result_tables,
            temporary_folder,
            write,
        )

        self.tell(run, steps)
        tables = [t for t in result_tables(run) if t.name in self.LAYERS]
        with temporary_folder() as drawn:
            if plots:
                steps.next("Drawing the sections")
                draw_plots(run, Path(drawn), steps)
            steps.next("Writing the results")
            steps.check()
            if not values.has("OUTPUT"):  # where the study says, folder and all
                path.parent.mkdir(parents=True, exist_ok=True)
            if plots:  # before the layers: a folder that cannot be made stops them
                plots.mkdir(parents=True, exist_ok=True)
            counts = write(tables, run.study, path, place, steps)
            if plots:
                publish(Path(drawn), plots)
        more = {"PLOTS": str(plots)} if plots else {}
        return self.results(values, path, counts, **self._counts(run), **more)

    def tell(self, run, steps):
        """Say what a run gave: results, sections without one, and doubts."""
        from ..reporting import doubt_lines, result_lines, unsolved_lines

        steps.say(result_lines(run))
        doubts = [d for section in run.sections for d in section.all_doubts]
        steps.warn([*unsolved_lines(run), *doubt_lines([*run.doubts, *doubts])])

    def _counts(self, run):
        solved = [bool(section.prediction) for section in run.sections]
        lost = solved.count(False) + len(run.unsolved)
        return {"SOLVED": solved.count(True), "NOT_SOLVED": lost}

    def usable_plots(self, folder, steps):
        """Give the folder where figures can be drawn; else warn and give None.

        For a folder that a study names: the run goes on without figures.
        """
        if folder is None:
            return None
        sentence = missing_sentence("matplotlib")
        if not sentence:
            return folder
        steps.warn([f"The sections are not drawn: {sentence}"])
        return None
