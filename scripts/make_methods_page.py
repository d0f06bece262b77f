"""Make docs/methods.md: what each method does, its source, limits and verification.

Usage: python scripts/make_methods_page.py

Numbers and figures are computed anew; a number that is off stops the script. Models
come from `geomcore.kinematics.MODELS`: a new one needs an equation here.
"""

import sys
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
sys.path[:0] = [str(ROOT), str(ROOT / "scripts")]

import methods_cases as cases  # noqa: E402 - after the path is set
import methods_pictures as pictures  # noqa: E402

from geomcore import sliplines  # noqa: E402
from geomcore.kinematics import MODELS  # noqa: E402

PAGE = ROOT / "docs" / "methods.md"
FIGURES = ROOT / "docs" / "images" / "methods"


@dataclass(frozen=True)
class Chapter:
    """One method.

    Parameters
    ----------
    title : str
    idea, equation, source, use_when, not_when : str
    limits : tuple of str
    checks, picture, verification : callable
        Give the numbers, the picture and the verification figure.
    caption : str
        Of the verification figure.
    """

    title: str
    idea: str
    equation: str
    source: str
    use_when: str
    not_when: str
    limits: tuple
    checks: object
    picture: object
    verification: object
    caption: str

    @property
    def slug(self):
        """Name of its figures."""
        return self.title.lower().replace(" ", "_")


#: Of each column model: the idea, the equation, the limits.
COLUMNS = {
    "constant heave": (
        "Every column of the hanging wall moves by the same oblique heave H and keeps "
        "its length; its foot slides on the fault. With a shear angle a the columns "
        "are inclined: positive a leans with antithetic faults, 0 is vertical shear.",
        "u = x - z tan(a)                  constant along a shear line\n"
        "H = heave + throw tan(a)          oblique heave\n"
        "F(u + H) = F(u) + B(u + H) - R(u) the march, strip by strip",
        (
            "The fault between the cut-offs has to be known or assumed; every wiggle "
            "in it is copied into each strip.",
            "Errors of the regional count once in every strip.",
            "With synthetic shear the fault has to dip less than the shear lines.",
            "The shear angle often outweighs all errors of the picks.",
        ),
    ),
    "constant slip": (
        "Every column moves by the same straight distance D between its old and its "
        "new foot, so that the heave grows outwards as the fault flattens.",
        "vx^2 + (B(X) - R(X - vx))^2 = D^2   solved for vx\n"
        "F(X) = F(X - vx) + B(X) - R(X - vx) the march",
        (
            "Area is not kept: no depth from area, no restored section.",
            "No solution where the bed lies farther from the regional than D.",
            "Upright columns only; the march only.",
        ),
    ),
    "constant bed length": (
        "The bed keeps its length from the cut-off outwards: a point of the bed came "
        "from the point of the regional that is as far from the footwall cut-off.",
        "length of R from the footwall cut-off to x =\n"
        "    length of B from the hanging-wall cut-off to X\n"
        "F(X) = F(x) + B(X) - R(x)           the march",
        (
            "Area is not kept: no depth from area, no restored section.",
            "Pick noise lengthens the bed; it is averaged first.",
            "No solution where the fault flattens too fast.",
            "Each horizon has a displacement of its own, so no further horizons are "
            "predicted.",
        ),
    ),
}


def model_chapter(model):
    """Write the chapter of a column model; its words are those of the model."""
    if model.NAME not in COLUMNS:
        words = f"error: the page has no equation of '{model.NAME}' (COLUMNS)"
        raise SystemExit(words)
    idea, equation, limits = COLUMNS[model.NAME]
    return Chapter(
        model.NAME.capitalize(),
        idea,
        equation,
        model.REFERENCE,
        model.USE_WHEN,
        model.NOT_WHEN,
        limits,
        lambda: cases.model_checks(model),
        lambda: pictures.model_picture(model),
        lambda: pictures.model_check(model),
        "Error of the fault marched from the bed that the same model made: a round "
        "trip, which tests the arithmetic, not the geology.",
    )


def other_chapters():
    """Write the chapters of what is no column model."""
    yield Chapter(
        "Slip lines",
        "Particles move a set distance along lines parallel to the fault; at a bend "
        "the lines turn on the bisector of the two dips. A forward model: it shows "
        "what rollover such a movement would make, and gives no fault.",
        "n  = const along a line            distance from the fault\n"
        "turn of a particle = D / r         on a circular fault, radius r",
        sliplines.REFERENCE.split(" (through")[0],
        "Layers that slide on each other and keep thickness and length.",
        "Soft sediment; a level top over a listric fault, whose rollover it makes "
        "poorly.",
        (
            "No inverse here.",
            "Breaks down where the bed is farther from a concave fault than its "
            "radius of curvature; refused there.",
        ),
        cases.slip_line_checks,
        pictures.slip_picture,
        pictures.slip_check,
        "Particles over a circular fault turn by slip over radius.",
    )
    yield Chapter(
        "The fit",
        "Constant heave is linear in the fault, so all picks of all horizons, the "
        "known fault and deep ties go into one least-squares system. Smoothness "
        "settles what the data cannot see; its weight is chosen by marginal "
        "likelihood. The march stays beside it as the plain construction.",
        "[F(u) - F(u - H)] / s = [B(u) - R(u - H)] / s   a row for each pick\n"
        "F(u) / s = z / s                                fault, ties, detachment\n"
        "w F'' = 0                                       smoothness, w by REML\n"
        "s at fixed x = s along the shear line (1 + tan(dip) tan(a))",
        "The system is our own writing of eq. 3 of constant heave; REML after "
        "Patterson and Thompson 1971 (from memory)",
        "Many noisy picks, several horizons, deep ties or a known detachment.",
        "Sharp bends in the fault; compaction; models other than constant heave.",
        (
            "Picks that err together have to be declared so, else its bands are far "
            "too thin.",
            "Nodes far from any pick are marked out of reach.",
            "Needs scipy.",
        ),
        cases.fit_checks,
        pictures.fit_picture,
        pictures.fit_check,
        "Heave 600 m, 25 picks a strip, start piece and cut-offs exact, 60 seeded "
        "surveys.",
    )
    yield Chapter(
        "Assumed arc",
        "Where the fault is seen above the cut-off only, the bed's dip against the "
        "regional tells by how much the fault flattens between its cut-offs. An arc "
        "of one curvature that turns by as much is assumed, marked and warned about, "
        "and its possible error goes into the stated sigma.",
        "F'(u_h) = F'(u_f) + B'(u_h) - R'    in the shear frame",
        "The relation is the derivative of eq. 3 of constant heave; the arc is ours",
        "The fault is known at its trace and dip, or down to somewhere above the "
        "hanging-wall cut-off.",
        "The fault has a bend between trace and cut-off, or the bed is dragged there.",
        (
            "Nothing tells an arc from any other curve of the same turn.",
            "The dip at the last known point is taken to 3 degrees, the curvature to "
            "30 % (common practice, no source).",
        ),
        cases.arc_checks,
        pictures.arc_picture,
        pictures.arc_check,
        "Heave found from trace and dip alone over the 60 degree exponential fault; "
        "grey: 10 % either side.",
    )
    yield Chapter(
        "Compaction",
        "Columns keep their solid thickness instead of their length: as they sink "
        "they lose pores, and the bed over them sags. Porosity falls with depth below "
        "the sediment surface of each time.",
        "phi = phi0 exp(-c y)\n"
        "S(y1, y2) = y2 - y1 - (phi0 / c) (exp(-c y1) - exp(-c y2))\n"
        "S now (bed, F(X)) = S then (R(x), F(x)),  x = X - h\n"
        "tan(dip now) = tan(dip formed) (1 - phi formed) / (1 - phi now)",
        "Athy 1930; Sclater & Christie 1980 as tabulated by Wangen 2010; White, "
        "Jackson & McKenzie 1986; Davison 1987; Xiao & Suppe 1989",
        "Shale or chalk that was buried after the fault moved, vertical shear.",
        "Rock that was hard already. With inclined shear only as an approximation "
        "along the shear lines, asked for and marked.",
        (
            "Footwall and fault are taken as rigid.",
            "The march with constant heave only; no balance of areas.",
            "The sediment surface of both times has to be given.",
        ),
        cases.compaction_checks,
        pictures.compaction_picture,
        pictures.compaction_check,
        "Shale, heave 900 m: with compaction the true fault is found, without it the "
        "fault comes out too deep.",
    )


def chapters():
    """Give every chapter, the column models first."""
    return [*map(model_chapter, MODELS), *other_chapters()]


HEAD = """# Methods

Each method with its picture, equation, source, use and limits, and numbers that this
page's script computes anew. Elevations are up; x grows along transport from the
footwall into the hanging wall. F is the fault, R the regional (where the horizon would
lie had the fault not moved), B the horizon now. In the pictures the fault is
vermillion, the horizon green (dashed: its regional), columns grey before and blue after
the fault moved.

A predicted fault is a model, not an observation. Whatever the method: show the fault
for shear angles 5 degrees and heaves 5 % to either side, trust no more than six strips
without a deep tie, and compare methods, a straight fault among them.

Made by `scripts/make_methods_page.py`; do not edit by hand.
"""


def page_text(all_chapters, checks):
    """Write the page.

    Parameters
    ----------
    all_chapters : list of Chapter
    checks : list of list of Check
        Of each chapter.
    """
    links = [
        f"- [{c.title}](#{c.title.lower().replace(' ', '-')})" for c in all_chapters
    ]
    parts = [HEAD, "\n".join(links) + "\n"]
    parts += [_chapter_text(c, own) for c, own in zip(all_chapters, checks)]
    return "\n".join(parts)


def _chapter_text(chapter, checks):
    rows = ["| what | here | expected | source |", "|---|---:|---:|---|"]
    rows += [
        f"| {c.what} | {c.value:.{c.digits}f} | {_expected(c)} | {c.source} |"
        for c in checks
    ]
    return "\n".join(
        [
            f"## {chapter.title}\n",
            f"{chapter.idea}\n",
            f"![{chapter.title}](images/methods/{chapter.slug}.png)\n",
            f"```\n{chapter.equation}\n```\n",
            f"**Source.** {chapter.source}.\n",
            f"**Use it when.** {chapter.use_when}\n",
            f"**Not when.** {chapter.not_when}\n",
            "**Limits.**\n",
            *(f"- {limit}" for limit in chapter.limits),
            "\n**Verification.**\n",
            f"![Verification](images/methods/{chapter.slug}_check.png)\n",
            f"{chapter.caption}\n",
            *rows,
            "",
        ]
    )


def _expected(check):
    """Write the expected value; one that is a bound says so."""
    if check.expected == 0.0:
        return f"within {check.tolerance:g}"
    return f"{check.expected:.{check.digits}f}"


def main():
    """Compute, check, draw and write."""
    all_chapters = chapters()
    checks = [chapter.checks() for chapter in all_chapters]
    wrong = [c.what for own in checks for c in own if not c.holds]
    if wrong:
        raise SystemExit("error: not as expected: " + "; ".join(wrong))
    FIGURES.mkdir(parents=True, exist_ok=True)
    for chapter in all_chapters:
        for ending, make in (("", chapter.picture), ("_check", chapter.verification)):
            figure = pictures.drawn(make)
            pictures.save(figure, FIGURES / f"{chapter.slug}{ending}.png")
    PAGE.write_text(page_text(all_chapters, checks), encoding="utf-8")


if __name__ == "__main__":
    main()
