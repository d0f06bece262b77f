"""Section figures: what has to be there is there, is right, and can be read.

What a figure has to show is the project's own list (design and the reviewer's
questions); the numbers it shows are compared with the results it was made from.
"""

import itertools
import sys
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import oracles
import pytest
from worlds import DOCUMENT, Place, World, changed, line_for, sources_for, truth_points

from geomcore.errors import Doubt, GeomcoreError, Unsolved
from geomcore.picks import Picks
from geomcore.plot_page import FreePlaces, TextRuler
from geomcore.plot_section import HORIZON_COLOURS, number
from geomcore.plot_words import compass_point
from geomcore.plots import FigureOptions, save_section_figure, section_figure
from geomcore.section import SectionFrame
from geomcore.sources import Features, Grid
from geomcore.study import SectionLine, SectionPicks, SectionResult, Study, run

pytest.importorskip("matplotlib", reason="matplotlib is not installed")
from matplotlib.backends.backend_agg import FigureCanvasAgg

# --- ground to draw ------------------------------------------------------------------


def document(**construction):
    """A study with two horizons, their layers named, and errors stated."""
    doc = changed(DOCUMENT, "picks", "fault_buffer", to=120.0)
    for source, layer, sigma in zip(
        doc["sources"], ("fault trace", "fault at depth", "contours of A"), (1, 5, 10)
    ):
        source.update(layer=layer, sigma=float(sigma))
    second = dict(doc["sources"][2], key="b", layer="points on B", name="B", sigma=15.0)
    doc["sources"].append(second)
    further = [{"name": "B", "offset": -600.0}]
    doc["construction"].update(
        further_horizons=further, shear_angle_sigma=3.0, **construction
    )
    return doc


def ground(world, seed=1, noise=10.0):
    """Noisy picks of two horizons and the fault, B from up to 400 m off the line."""
    rng = np.random.default_rng(seed)
    deep, tops = truth_points(world, 300.0, 150.0)
    tops = tops[::3] + np.column_stack(
        [0 * tops[::3, 0], rng.normal(0, noise, len(tops[::3]))]
    )
    sources = sources_for(world, deep, tops)
    bed = oracles.rolled_bed(
        world.fault,
        lambda x: world.regional(x) - 600.0,
        world.angle,
        world.oblique_heave,
        250.0,
        world.reach,
    )
    foot = [(x, world.regional(x) - 600.0) for x in np.arange(-3500.0, 500.0, 300.0)]
    below = np.array(foot + bed[1:])
    off = rng.uniform(-400.0, 400.0, len(below))
    sources["b"] = Features.points(
        world.place.at(below[:, 0], off), below[:, 1] + rng.normal(0, 15.0, len(below))
    )
    return sources


def solved(world=None, line=None, doc=None, **options):
    """Run a world's section; the study, the run and its figure."""
    world = world or World(angle=20.0)
    study = Study.from_dict(doc or document(shear_angle=world.angle))
    result = run(study, ground(world), [line or line_for(world, "S01")])
    options = FigureOptions.of_run(result, made_with="Heaveline 0.1.0", **options)
    return study, result, section_figure(study, result.sections[0], options)


@pytest.fixture(scope="module")
def plain():
    """Study, run and figure of an ordinary section."""
    return solved()


def artists(figure):
    """Artists by group id; a group id that comes twice is a mistake."""
    found = {}
    for artist in figure.findobj(lambda a: a.get_gid() is not None):
        assert artist.get_gid() not in found, artist.get_gid()
        found[artist.get_gid()] = artist
    return found


def words(figure):
    """All text of a figure, as one string with blanks between the lines."""
    texts = [t.get_text() for t in all_texts(figure)]
    return " ".join(texts).replace("\N{NO-BREAK SPACE}", " ")


def all_texts(figure):
    """Texts that are drawn, tick labels included."""
    from matplotlib.text import Text

    FigureCanvasAgg(figure).draw()
    hidden = [
        t
        for axes in figure.axes
        for t in (*axes.get_xticklabels(), *axes.get_yticklabels())
        if not _tick_is_in_view(axes, t)
    ]
    found = figure.findobj(Text)
    return [
        t
        for t in found
        if t.get_visible() and t.get_text().strip() and not any(t is h for h in hidden)
    ]


def _tick_is_in_view(axes, label):
    if not axes.axison:
        return False
    x, y = label.get_position()
    (x0, x1), (y0, y1) = axes.get_xlim(), axes.get_ylim()
    return x0 <= x <= x1 if y in (0, 1) else y0 <= y <= y1


def section_axes(figure):
    """The axes that hold the section."""
    return next(a for a in figure.axes if a.get_gid() == "section")


def drawn(figure, prefix):
    """Lines of the section whose group ids begin so."""
    return [
        line for line in section_axes(figure).lines if line.get_gid().startswith(prefix)
    ]


# --- what has to be there ------------------------------------------------------------

ELEMENTS = [
    "picks-1",
    "picks-1-left-out",
    "regional",
    "bed-1-footwall",
    "bed-1-hanging-wall",
    "cutoff-footwall-1",
    "cutoff-hanging-wall-1",
    "fault-known",
    "fault-predicted",
    "envelope",
    "envelope-upper",
    "envelope-lower",
    "dimension-heave",
    "dimension-throw",
    "heave-label",
    "throw-label",
    "further-horizon-1",
    "datum",
    "end-left-name",
    "end-right-bearing",
    "scale-1",
    "caution-1",
    "run-1",
    "warnings-1",
    "key-picks-1",
    "key-shear-planes",
    "x-label",
    "y-label",
]


@pytest.mark.parametrize("gid", ELEMENTS)
def test_figure_has_every_element(plain, gid):
    """Every element a section figure needs is there and can be found by its id."""
    assert gid in artists(plain[2])


def test_figure_says_what_a_reviewer_asks(plain):
    """Method, angle, horizon, regional, datum, unit, run and caution are said."""
    _, result, figure = plain
    text = words(figure)
    prediction = result.sections[0].prediction
    for part in (
        "Section S01 – Great Fault",
        "constant heave (20 degrees antithetic shear), solver: march, from horizon A",
        f"Heave {number(prediction.separation.heave)} m",
        f"throw {number(prediction.separation.throw)} m",
        "Regional −",
        "True scale (vertical = horizontal, V.E. 1x)",
        "Elevation in m, up positive, datum mean sea level",
        "EPSG:32633",
        "W 270°",
        "E 090°",
        f"run {result.run_id}",
        "Heaveline 0.1.0",
        "reviewed by a qualified geologist",
        "20° from the vertical (antithetic)",
        "A picks, contours of A:",
        "within 120 of the fault",
    ):
        assert part in text, part


def test_every_warning_is_listed_once(plain):
    """Doubts of section and separations stand on the figure, numbered, none twice."""
    _, result, figure = plain
    text = words(figure)
    section = result.sections[0]
    doubts = {d.text for d in section.all_doubts}
    assert doubts
    for doubt in doubts:
        assert text.count(doubt) == 1, doubt
    assert f"Warning {len(doubts)}:" in text


def test_doubts_of_the_study_are_listed_those_of_other_sections_not(plain):
    """What the study doubts as a whole concerns every figure, other sections do not."""
    study, result, _ = plain
    doubts = (
        Doubt("a", "the strike is uncertain."),
        Doubt("b", "this one is oblique.", "section S01"),
        Doubt("c", "that one is oblique.", "section S02"),
    )
    figure = section_figure(study, result.sections[0], FigureOptions(doubts=doubts))
    text = words(figure)
    assert "the strike is uncertain." in text
    assert "this one is oblique." in text
    assert "that one is oblique." not in text


# --- what is drawn is what was computed ----------------------------------------------


def test_parts_of_the_fault_are_the_trace_in_three_styles():
    """Known, assumed and predicted parts are the trace's own points, each its style."""
    world = World(angle=20.0)
    sources = ground(world)
    deep = truth_points(world, 60.0)[0][:10]
    sources["deep"] = Features.points(world.place.at(deep[:, 0]), deep[:, 1])
    study = Study.from_dict(document(shear_angle=20.0))
    result = run(study, sources, [line_for(world)]).sections[0]
    figure = section_figure(study, result)
    trace = result.prediction.trace
    styles = set()
    for state in ("known", "assumed", "predicted"):
        line = drawn(figure, f"fault-{state}")[0]
        x = line.get_xdata()
        own = trace.x[1:][trace.constrained[1:] == state]
        assert set(own) <= set(x)
        assert np.allclose(line.get_ydata(), trace.z_at(x))
        styles.add(
            str(
                line._dash_pattern
                if hasattr(line, "_dash_pattern")
                else line.get_linestyle()
            )
        )
    assert len(styles) == 3


def test_envelope_is_one_sigma_either_side(plain):
    """The thin lines lie one stated standard deviation above and below the fault."""
    _, result, figure = plain
    trace = result.sections[0].prediction.trace
    upper, lower = (
        drawn(figure, "envelope-upper")[0],
        drawn(figure, "envelope-lower")[0],
    )
    assert np.allclose(upper.get_ydata() - trace.z, trace.sigma_z)
    assert np.allclose(trace.z - lower.get_ydata(), trace.sigma_z)


def test_regional_is_dashed_over_the_whole_section(plain):
    """The regional is the dashed straight line the construction used."""
    _, result, figure = plain
    line = drawn(figure, "regional")[0]
    section = result.sections[0]
    assert line.is_dashed()
    assert list(line.get_xdata()) == [0.0, section.frame.x_max]
    assert np.allclose(line.get_ydata(), section.prediction.regional(line.get_xdata()))


def test_dimension_arrows_are_as_long_as_heave_and_throw(plain):
    """The arrows run from cut-off to cut-off and carry the numbers with the unit."""
    _, result, figure = plain
    found = artists(figure)
    separation = result.sections[0].prediction.separation
    heave, throw = (
        found[f"dimension-{name}"]._posA_posB for name in ("heave", "throw")
    )
    assert heave[1][0] - heave[0][0] == pytest.approx(separation.heave)
    assert heave[0][0] == pytest.approx(separation.footwall.x)
    assert throw[0][1] - throw[1][1] == pytest.approx(separation.throw)
    assert throw[0][1] == pytest.approx(separation.footwall.z)
    text = found["heave-label"].get_text()
    assert text == f"heave {number(separation.heave, 'm')}"
    assert found["throw-label"].get_text() == f"throw {number(separation.throw, 'm')}"


def test_picks_are_drawn_by_source_the_unused_hollow_and_counted(plain):
    """Every pick is drawn once; those left out are hollow, with a count."""
    study, result, figure = plain
    picks = result.sections[0].picks
    hollow = [m for m in drawn(figure, "picks-") if m.get_gid().endswith("left-out")]
    full = [m for m in drawn(figure, "picks-") if m not in hollow]
    assert sum(len(m.get_xdata()) for m in full) == picks.used.sum()
    assert sum(len(m.get_xdata()) for m in hollow) == (~picks.used).sum() > 0
    assert all(m.get_markerfacecolor() == "none" for m in hollow)
    text = words(figure)
    for source in study.sources:
        own = picks.select(picks.source == source.key)
        out = int((~own.used).sum())
        count = f"{source.layer}: {int(own.used.sum())} used"
        assert count + (f", {out} left out" if out else "") in text


def test_each_kind_has_its_marker_and_each_horizon_its_colour(plain):
    """Shape tells horizon from fault, colour tells horizon from horizon."""
    figure = plain[2]
    full = [m for m in drawn(figure, "picks-") if not m.get_gid().endswith("left-out")]
    looks = [(m.get_marker(), m.get_color()) for m in full]
    assert looks[0][0] == looks[1][0] == "o"
    assert looks[0][1] != looks[1][1]
    assert {marker for marker, _ in looks[2:]} == {"s", "D"}


def test_colours_can_be_told_apart_by_the_colour_blind():
    """All colours are of Okabe & Ito's palette (2008, values from memory)."""
    palette = {"#e69f00", "#56b4e9", "#009e73", "#f0e442", "#0072b2", "#d55e00"}
    assert set(HORIZON_COLOURS) < palette | {"#cc79a7"}
    assert len(set(HORIZON_COLOURS)) == len(HORIZON_COLOURS)


def test_further_horizons_and_their_misfit_are_shown(plain):
    """A predicted horizon ends at its cut-offs, and the key says how far it misses."""
    _, result, figure = plain
    horizon = result.sections[0].horizons[0]
    line = drawn(figure, "further-horizon-1")[0]
    assert np.allclose(line.get_xdata()[3:], horizon.profile.x)
    assert (line.get_xdata()[1], line.get_ydata()[1]) == horizon.footwall
    text = words(figure)
    assert f"misses {horizon.misfit_n} picks by {number(horizon.misfit_rms)} m" in text


def test_detachment_is_labelled_where_it_is_reached():
    """With the bed back at its far position the detachment level is drawn."""
    _, result, figure = solved(World(reach=16000.0))
    level = result.sections[0].prediction.detachment_z
    assert level is not None
    found = artists(figure)
    assert list(found["detachment"].get_ydata()) == [level, level]
    assert found["detachment-label"].get_text() == f"detachment at {number(level, 'm')}"
    assert "deeper" not in found


def test_an_open_end_says_at_least_this_deep():
    """Without a detachment an arrow points on down from the last point reached."""
    world = World(reach=4000.0)
    _, result, figure = solved(world, line_for(world, "S01"))
    prediction = result.sections[0].prediction
    found = artists(figure)
    start, end = found["deeper"]._posA_posB
    assert start == pytest.approx((prediction.trace.x[-1], prediction.trace.z[-1]))
    assert end[1] < start[1]
    deepest = number(prediction.deepest_z, "m")
    assert found["deeper-label"].get_text() == f"at least this deep: {deepest}"


def test_dips_are_drawn_as_steep_as_they_are():
    """A dip given with a pick is a short line of that slope through it."""
    picks = Picks.build("S1", [100.0, 500.0], [-10.0, -50.0], dip=[60.0, -30.0])
    frame = SectionFrame("S1", Place().at([0.0, 1000.0]), 90.0)
    figure = figure_of_picks(frame, picks)
    line = drawn(figure, "dips")[0]
    x, z = line.get_xdata().reshape(2, 3), line.get_ydata().reshape(2, 3)
    slope = (z[:, 1] - z[:, 0]) / (x[:, 1] - x[:, 0])
    assert np.degrees(np.arctan(-slope)) == pytest.approx([60.0, -30.0])


def figure_of_picks(frame, picks, time=None, doc=DOCUMENT, **options):
    """Figure of a section that has picks but no solution."""
    empty = SectionPicks.empty(frame.section_id)
    time = empty.time if time is None else time
    unsolved = Unsolved("S1", "x", f"section {frame.section_id}: for a reason.")
    result = SectionResult(frame, picks, time, (), None, unsolved, (), ())
    return section_figure(Study.from_dict(doc), result, FigureOptions(**options))


# --- scale and direction -------------------------------------------------------------


def points_per_unit(figure):
    """Points on paper per unit of x and of z."""
    axes = section_axes(figure)
    FigureCanvasAgg(figure).draw()
    box = axes.get_window_extent()
    per_dot = 72.0 / figure.dpi
    return (
        box.width * per_dot / np.ptp(axes.get_xlim()),
        box.height * per_dot / np.ptp(axes.get_ylim()),
    )


@pytest.mark.parametrize("exaggeration", [1.0, 2.0, 0.5])
def test_vertical_is_exaggerated_as_stated(plain, exaggeration):
    """True scale unless another exaggeration is asked for, and then it is said."""
    study, result, _ = plain
    options = FigureOptions(vertical_exaggeration=exaggeration)
    figure = section_figure(study, result.sections[0], options)
    x, z = points_per_unit(figure)
    assert z / x == pytest.approx(exaggeration, rel=1e-6)
    said = f"Vertical exaggeration {exaggeration:g}x"
    assert (said in words(figure)) == (exaggeration != 1.0)


@pytest.mark.parametrize(("unit", "metres"), [("m", 1.0), ("ft", 0.3048)])
def test_stated_scale_holds_on_paper(unit, metres):
    """A ruler on the print agrees with the scale that is stated."""
    doc = changed(document(), "length_unit", to=unit)
    for source in doc["sources"]:
        source["unit"] = unit
    figure = solved(World(), doc=doc)[2]
    ratio = float(words(figure).split(", 1:")[1].split()[0])
    paper = points_per_unit(figure)[0] * 0.0254 / 72.0
    assert metres / paper == pytest.approx(ratio, rel=1e-6)
    assert f"Elevation ({unit})" in words(figure)


@pytest.mark.parametrize(
    ("length", "height"),
    [(14000.0, 4000.0), (120000.0, 8000.0), (5000.0, 9000.0), (500.0, 30.0)],
)
def test_page_is_a4_landscape_at_most(length, height):
    """Sections of all shapes fit on a landscape page and are not lost on it."""
    frame = SectionFrame("S1", Place().at([0.0, length]), 90.0)
    picks = Picks.build("S1", [0.0, length], [-height, 0.0], name="A")
    figure = figure_of_picks(frame, picks)
    wide, high = figure.get_size_inches() * 25.4
    assert wide == pytest.approx(297.0)
    assert high <= 210.0 + 1e-6
    x, z = points_per_unit(figure)
    assert x == pytest.approx(z)
    # round scales lose a fifth at most; a narrow one is bound by the page's height
    assert x * length > 0.78 * 600.0 or z * height > 0.7 * 250.0


def test_everything_drawn_lies_inside_the_frame(plain):
    """Nothing of the section is cut off."""
    for figure in (plain[2], solved(World(angle=-15.0, reach=9000.0))[2]):
        axes = section_axes(figure)
        (x0, x1), (z0, z1) = axes.get_xlim(), axes.get_ylim()
        for line in axes.lines:
            if line.get_transform() != axes.transData:
                continue
            x, z = (
                np.asarray(line.get_xdata(), float),
                np.asarray(line.get_ydata(), float),
            )
            assert np.nanmin(x) >= x0 - 1e-6, line.get_gid()
            assert np.nanmax(x) <= x1 + 1e-6, line.get_gid()
            assert np.nanmin(z) >= z0 - 1e-6, line.get_gid()
            assert np.nanmax(z) <= z1 + 1e-6, line.get_gid()


@pytest.mark.parametrize(
    ("azimuth", "left", "right"),
    [
        (90.0, "W 270°", "E 090°"),
        (270.0, "E 090°", "W 270°"),
        (123.0, "WNW 303°", "ESE 123°"),
        (359.8, "S 180°", "N 000°"),
    ],
)
@pytest.mark.parametrize("reverse", [False, True], ids=["as x", "against x"])
def test_ends_carry_letters_and_bearings(azimuth, left, right, reverse):
    """The footwall is left whichever way the line was drawn; both ends say where."""
    ends = Place(azimuth=azimuth).at([0.0, 3000.0])
    frame = SectionFrame("S7", ends[::-1] if reverse else ends, azimuth)
    found = artists(figure_of_picks(frame, Picks.empty("S7")))
    assert found["end-left-bearing"].get_text() == left
    assert found["end-right-bearing"].get_text() == right
    names = [found[f"end-{side}-name"].get_text() for side in ("left", "right")]
    assert names == (["S7′", "S7"] if reverse else ["S7", "S7′"])
    assert found["end-left-side"].get_text() == "footwall side"
    against = "x grows against the drawn direction"
    assert (against in found["line-1"].get_text()) == reverse


def test_compass_points_are_the_nearest_of_sixteen():
    """A bearing has the letters of the point it is nearest to."""
    assert [compass_point(a) for a in (0, 11, 12, 348, 349, 225)] == [
        *("N", "N", "NNE", "NNW", "N", "SW")
    ]


def test_bends_are_marked_where_they_are():
    """A tick at the top of the frame stands at each bend of the line."""
    line = Place().at([0.0, 1000.0, 2500.0, 4000.0], [0.0, 200.0, -100.0, 0.0])
    frame = SectionFrame("S1", line, 90.0)
    figure = figure_of_picks(frame, Picks.build("S1", [10.0], [-900.0], name="A"))
    marks = artists(figure)["bends"]
    assert np.allclose(marks.get_xdata(), [1000.0, 2500.0])
    assert list(marks.get_ydata()) == [1.0, 1.0]
    assert "2 bends" in words(figure)


# --- sections without a solution, and times ------------------------------------------


def test_unsolved_section_shows_picks_and_the_reason():
    """A section without a solution has its picks and says in words why."""
    world = World()
    deep, tops = truth_points(world)
    high = tops + np.where(tops[:, :1] > 0, [[0.0, 900.0]], 0.0)
    study = Study.from_dict(DOCUMENT)
    result = run(study, sources_for(world, deep, high), [line_for(world)]).sections[0]
    assert result.prediction.code == "reverse-separation"
    figure = section_figure(study, result)
    text = words(figure)
    reason = result.prediction.reason.split(": ", 1)[1]
    assert f"Not solved: {reason}" in text
    assert "no fault is predicted here" in text
    found = artists(figure)
    assert "picks-1" in found
    assert "fault-known" in found
    assert "fault-predicted" not in found
    assert "(reverse separation)" in found["heave-label"].get_text()


def test_section_without_any_pick_says_so():
    """An empty section is no blank sheet."""
    frame = SectionFrame("S1", Place().at([0.0, 3000.0]), 90.0)
    figure = figure_of_picks(frame, Picks.empty("S1"))
    assert "no picks with a value on this section" in words(figure)
    assert "Not solved: for a reason." in words(figure)


def time_section(**options):
    """Figure of a section whose picks are two-way times, with its separation."""
    doc = changed(DOCUMENT, "picks", "fault_buffer", to=0.0)
    for source in doc["sources"][1:]:
        source.update(unit="ms", domain="time", time_way="two", sign="depth")
    world = World()
    deep, tops = truth_points(world)
    sources = sources_for(world)
    for key, points in (("deep", deep), ("tops", tops)):
        at = world.place.at(points[:, 0])
        sources[key] = Features.points(at, -0.8 * points[:, 1])
    study = Study.from_dict(doc)
    result = run(study, sources, [line_for(world)]).sections[0]
    return result, section_figure(study, result, FigureOptions(**options))


def test_times_are_shown_as_times():
    """Two-way times grow downwards, in ms, and nothing is said in metres of throw."""
    result, figure = time_section()
    axes = section_axes(figure)
    text = words(figure)
    assert axes.get_ylabel() == "Two-way time (ms)"
    low, high = sorted(axes.get_ylim())
    assert axes.get_ylim() == (low, high)
    ticks = [t for t in axes.get_yticklabels() if low <= t.get_position()[1] <= high]
    shown = [float(t.get_text()) for t in ticks]
    assert shown == pytest.approx([-t.get_position()[1] for t in ticks])
    separation = result.separations[0].separation
    assert separation.domain == "time"
    assert f"throw {number(separation.throw)} ms" in text
    assert f"heave {number(separation.heave)} m" in text.lower()
    assert f"{number(separation.throw)} m " not in text
    assert "there is no true scale" in text
    assert "Not solved: the picks are two-way times" in text


def test_depths_are_shown_of_a_section_that_has_both():
    """Where there are depths the times are left out, and that is said."""
    frame = SectionFrame("S1", Place().at([0.0, 3000.0]), 90.0)
    depth = Picks.build("S1", [100.0], [-500.0], name="A")
    time = Picks.build("S1", [100.0, 200.0], [-400.0, -410.0], "time", name="A")
    text = words(figure_of_picks(frame, depth, time))
    assert "Not shown: 2 picks in two-way time." in text
    text = words(figure_of_picks(frame, depth, time, domain="time"))
    assert "Not shown: 1 pick in depth." in text


# --- can it be read? -----------------------------------------------------------------


def boxes(figure):
    """Box of every text that is drawn, in dots."""
    texts = all_texts(figure)
    renderer = FigureCanvasAgg(figure).get_renderer()
    return [(t.get_text(), _bare_box(t, renderer)) for t in texts]


def _bare_box(text, renderer):
    patch, text._bbox_patch = text._bbox_patch, None  # the white ground may touch
    box = text.get_window_extent(renderer)
    text._bbox_patch = patch
    return box.x0, box.y0, box.x1, box.y1


def faults_of_layout(figure):
    """Texts that overlap each other or stick out of the page."""
    wide, high = figure.get_size_inches() * figure.dpi
    found = boxes(figure)
    wrong = [
        f"outside: {text}"
        for text, (x0, y0, x1, y1) in found
        if x0 < 0 or y0 < 0 or x1 > wide or y1 > high
    ]
    for (one, a), (two, b) in itertools.combinations(found, 2):
        across = min(a[2], b[2]) - max(a[0], b[0])
        upright = min(a[3], b[3]) - max(a[1], b[1])
        if across > 1.0 and upright > 1.5:  # lines of a paragraph touch by a dot
            wrong.append(f"overlap: {one} / {two}")
    return wrong


def test_layout_check_finds_planted_mistakes(plain):
    """The check of overlaps is no empty one."""
    study, result, _ = plain
    figure = section_figure(study, result.sections[0])
    assert faults_of_layout(figure) == []
    figure.text(0.05, 0.925, "planted in the title", size=14)
    figure.text(0.95, 0.5, "planted over the edge of the page")
    kinds = {w.split(":")[0] for w in faults_of_layout(figure)}
    assert kinds == {"overlap", "outside"}


LONG = "a_rather_long_layer_name_without_a_blank_as_exports_have_them_v12_final_final"


def with_long_names():
    """Names that are long, with signs that mean something elsewhere."""
    doc = document()
    doc["name"] = "Study of <everything> & more at $x^2$ cost, " * 4
    doc["fault"] = (
        "Great Northern Boundary Fault of the Eastern Basin, western splay, new"
    )
    doc["vertical_datum"] = (
        "Invented National Vertical Datum of 1988, Geoid Model Eighteen"
    )
    for source in doc["sources"]:
        source["layer"] = f"{LONG}_{source['key']}"
    world = World()
    line = line_for(
        world, "Section through the old quarry at the eastern end, no. 12-a"
    )
    return solved(world, line, doc)[2]


def with_many_sources():
    """A grid, fourteen line layers and eleven horizons."""
    world = World()
    rng = np.random.default_rng(3)
    tops = truth_points(world, footwall_spacing=20.0)[1]
    doc, sources = document(), ground(world)
    order = np.argsort(tops[:, 0])
    x, z = world.place.east + tops[order, 0], tops[order, 1]
    sources["tops"] = Grid(lambda xy: np.interp(xy[:, 0], x, z), 50.0)
    for i in range(14):
        name = "A" if i < 4 else f"Horizon {i}"
        layer = f"seismic line {i + 1}"
        extra = dict(doc["sources"][2], key=f"k{i}", name=name, layer=layer)
        doc["sources"].append(extra)
        some = tops[rng.choice(len(tops), 25, replace=False)]
        at = world.place.at(some[:, 0], rng.uniform(-300.0, 300.0, 25))
        sources[f"k{i}"] = Features.points(at, some[:, 1] - 150.0 * max(i - 3, 0))
    study = Study.from_dict(doc)
    return section_figure(study, run(study, sources, [line_for(world)]).sections[0])


def with_bends():
    """A bent line, drawn from the hanging wall."""
    world = World(angle=-10.0)
    x, s = [-4000.0, -1500.0, 3000.0, 8000.0, 12500.0], [0.0, 600.0, -700.0, 900.0, 0.0]
    return solved(world, SectionLine("A-B", world.place.at(x, s)[::-1]))[2]


def with_feet():
    """US survey feet."""
    doc = changed(document(), "length_unit", to="us-ft")
    for source in doc["sources"]:
        source["unit"] = "us-ft"
    return solved(World(), doc=doc)[2]


def tiny_fault():
    """A heave that is no longer than a marker."""
    world = World(heave=12.0, reach=1500.0)
    doc = changed(DOCUMENT, "picks", "fault_buffer", to=5.0)
    study = Study.from_dict(doc)
    deep, tops = truth_points(world)
    result = run(study, sources_for(world, deep, tops[::3]), [line_for(world)])
    return section_figure(study, result.sections[0])


def narrow_section():
    """A section deeper than it is long, with a long name."""
    frame = SectionFrame(
        "A rather long name of a section", Place().at([0.0, 900.0]), 90.0
    )
    picks = Picks.build(
        "A rather long name of a section", [50.0, 850.0], [-4000.0, 10.0]
    )
    return figure_of_picks(frame, picks)


def small_page():
    """The smallest page that is allowed."""
    return solved(width=6.0, height=4.0)[2]


READABLE = {
    "true scale": lambda: solved()[2],
    "exaggerated": lambda: solved(vertical_exaggeration=3.0)[2],
    "long names": with_long_names,
    "many sources": with_many_sources,
    "bends": with_bends,
    "feet": with_feet,
    "tiny fault": tiny_fault,
    "narrow": narrow_section,
    "small page": small_page,
    "time": lambda: time_section()[1],
    "long section": lambda: solved(World(angle=30.0, heave=3000.0, reach=60000.0))[2],
    "short section": lambda: solved(World(reach=3500.0))[2],
}


@pytest.mark.parametrize("case", READABLE)
def test_no_text_overlaps_or_leaves_the_page(case):
    """Every word can be read."""
    assert faults_of_layout(READABLE[case]()) == []


def test_tiny_fault_has_its_numbers_in_one_label():
    """Where there is no room for arrows the numbers stand beside the fault."""
    found = artists(tiny_fault())
    assert "dimension-heave" not in found
    assert found["heave-throw-label"].get_text().startswith("heave ")
    assert "throw " in found["heave-throw-label"].get_text()


def test_labels_keep_off_the_picks(plain):
    """No label of a dimension lies on a pick."""
    figure = plain[2]
    axes = section_axes(figure)
    renderer = FigureCanvasAgg(figure).get_renderer()
    FigureCanvasAgg(figure).draw()
    marks = [m for m in axes.lines if m.get_gid().startswith("picks")]
    at = np.vstack([axes.transData.transform(m.get_xydata()) for m in marks])
    for gid in ("heave-label", "throw-label"):
        x0, y0, x1, y1 = _bare_box(artists(figure)[gid], renderer)
        on = (at[:, 0] > x0) & (at[:, 0] < x1) & (at[:, 1] > y0) & (at[:, 1] < y1)
        assert not on.any(), gid


# --- text and places -----------------------------------------------------------------


@pytest.mark.parametrize("width", [40.0, 90.0, 300.0])
def test_wrapped_text_fits_and_loses_nothing(width):
    """Lines are no wider than asked, and all letters are still there."""
    ruler = TextRuler()
    text = f"Warning 1: {LONG} is wider than a column of the key; so it is broken."
    lines = ruler.wrap(text, 8.0, width)
    assert all(ruler.width(line, 8.0) <= width for line in lines)
    assert "".join(lines).replace(" ", "") == text.replace(" ", "")


def test_signs_of_formulas_are_plain_text():
    """A name with dollar signs is no formula, on paper and in the width."""
    doc = changed(document(), "fault", to="Fault $x$ and $y$")
    assert "Fault \\$x\\$ and \\$y\\$" in words(solved(doc=doc)[2])


def test_letters_no_font_has_are_shown_as_such(monkeypatch):
    """A letter that cannot be drawn here is replaced by the sign for that."""
    monkeypatch.setattr("geomcore.plot_page._fonts_with", lambda c: ((), frozenset(c)))
    ruler = TextRuler("Fault 断层")
    assert ruler.shown("Fault 断层") == "Fault \N{REPLACEMENT CHARACTER}" * 1 + "\ufffd"
    doc = changed(document(), "fault", to="断层")
    assert "\ufffd\ufffd" in words(solved(doc=doc)[2])


def test_free_place_is_the_nearest_without_data():
    """A label goes beside the data it is about, and never onto another label."""
    free = FreePlaces(400.0, 100.0)
    free.take_path([0.0, 400.0], [50.0, 50.0])
    places = [free.nearest(60.0, 10.0, (200.0, 50.0)) for _ in range(4)]
    assert all(y > 50.0 or y + 10.0 < 50.0 for _, y in places)
    for (x, y), (u, v) in itertools.combinations(places, 2):
        assert abs(x - u) >= 60.0 or abs(y - v) >= 10.0
    assert abs(places[0][1] + 5.0 - 50.0) < 16.0


def test_no_place_is_none():
    """A frame too small for a label has no place for it."""
    assert FreePlaces(50.0, 50.0).nearest(60.0, 10.0, (25.0, 25.0)) is None


# --- files ---------------------------------------------------------------------------


@pytest.fixture(scope="module")
def files(plain, tmp_path_factory):
    """The three files of the plain figure."""
    folder = tmp_path_factory.mktemp("plots")
    return save_section_figure(plain[2], folder / "section 1.5 é")


def test_three_files_are_written_under_the_name_given(files):
    """PNG, SVG and PDF, dots and letters of the name kept, nothing else left there."""
    names = [path.name for path in files]
    assert names == [f"section 1.5 é.{kind}" for kind in ("png", "svg", "pdf")]
    assert sorted(p.name for p in files[0].parent.iterdir()) == sorted(names)
    starts = [path.read_bytes()[:5] for path in files]
    assert starts[0][1:4] == b"PNG"
    assert starts[1] == b"<?xml"
    assert starts[2] == b"%PDF-"
    assert all(path.stat().st_size > 10000 for path in files)


def test_png_is_no_blank(files):
    """The picture has more than paper on it."""
    from matplotlib.image import imread

    image = imread(files[0])[..., :3]
    assert image.shape[1] == pytest.approx(297.0 / 25.4 * 200.0, abs=1.0)
    inked = (image < 0.98).any(axis=2)
    assert 0.01 < inked.mean() < 0.5
    edges = np.concatenate(
        [inked[:10].ravel(), inked[-10:].ravel(), inked[:, -10:].ravel()]
    )
    assert not edges.any()


def test_svg_keeps_text_and_ids(files, plain):
    """The SVG is well-formed, its text can be searched, its ids are one of each."""
    root = ElementTree.fromstring(files[1].read_bytes())
    space = "{http://www.w3.org/2000/svg}"
    texts = [t.text for t in root.iter(f"{space}text")]
    assert any("A model, not an observation" in t for t in texts)
    assert any(t.startswith("Section S01") for t in texts)
    assert "throw" in " ".join(texts)
    ids = [e.get("id") for e in root.iter() if e.get("id")]
    assert len(ids) == len(set(ids))
    for gid in ("fault-known", "regional", "picks-1", "dimension-heave", "caution-1"):
        assert gid in ids


def test_svg_fonts_are_written_as_qt_reads_them(files):
    """QGIS layouts draw SVG by Qt, which knows font-size and font-family alone."""
    text = files[1].read_text("utf-8")
    assert "font:" not in text
    assert text.count("font-size:") == text.count("<text ")
    assert "font-weight: 700" in text
    assert "font-style: italic" in text


def test_same_section_gives_the_same_bytes(files, tmp_path):
    """Two runs of the same study can be compared file by file."""
    again = save_section_figure(solved()[2], tmp_path / "again")
    for one, two in zip(files, again):
        assert one.read_bytes() == two.read_bytes(), one.suffix
    assert b"CreationDate" not in files[2].read_bytes()
    assert b"date" not in files[1].read_bytes()


def test_unknown_format_is_refused(plain, tmp_path):
    """A format that is not one of the three is named."""
    with pytest.raises(GeomcoreError, match="'gif' is not a format") as caught:
        save_section_figure(plain[2], tmp_path / "x", ("png", "gif"))
    assert caught.value.code == "bad-figure"
    assert not list(tmp_path.iterdir())


def test_missing_folder_is_said_in_words(plain, tmp_path):
    """A folder that is not there is named, with what to do."""
    with pytest.raises(GeomcoreError, match=r"could not be written.*nowhere") as caught:
        save_section_figure(plain[2], tmp_path / "nowhere" / "x", ("png",))
    assert caught.value.code == "figure-not-written"


def test_older_files_are_kept_when_a_format_fails(plain, tmp_path, monkeypatch):
    """A full disk half-way through leaves the older figures as they were."""

    def full_disk(figure, kind, dpi):
        if kind == "svg":
            raise OSError(28, "No space left on device")
        return b"new"

    (tmp_path / "x.png").write_bytes(b"old")
    monkeypatch.setattr("geomcore.plots._rendered", full_disk)
    with pytest.raises(GeomcoreError, match="No space left"):
        save_section_figure(plain[2], tmp_path / "x", ("png", "svg"))
    assert [p.name for p in tmp_path.iterdir()] == ["x.png"]
    assert (tmp_path / "x.png").read_bytes() == b"old"


# --- options and surroundings --------------------------------------------------------


@pytest.mark.parametrize(
    "wrong",
    [
        {"vertical_exaggeration": 0.0},
        {"vertical_exaggeration": float("nan")},
        {"domain": "space"},
        {"width": 2.0},
    ],
)
def test_options_out_of_range_are_refused(wrong):
    """An exaggeration of nothing, an unknown domain, a stamp-sized page."""
    with pytest.raises(GeomcoreError) as caught:
        FigureOptions(**wrong)
    assert caught.value.code == "bad-figure"
    assert caught.value.remedy


def test_without_matplotlib_it_says_what_to_install(plain, monkeypatch):
    """A missing package is a sentence, not a traceback."""
    study, result, _ = plain
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    with pytest.raises(GeomcoreError, match="Install matplotlib") as caught:
        section_figure(study, result.sections[0])
    assert caught.value.code == "no-matplotlib"


def test_the_users_style_changes_nothing_and_is_left_alone(plain, files, tmp_path):
    """A dark style of the user's neither darkens our figures nor is lost."""
    import matplotlib

    study, result, _ = plain
    options = FigureOptions.of_run(result, made_with="Heaveline 0.1.0")
    dark = {"axes.facecolor": "black", "text.color": "white", "font.size": 30.0}
    with matplotlib.rc_context(dark):
        figure = section_figure(study, result.sections[0], options)
        again = save_section_figure(figure, tmp_path / "dark", ("svg",))[0]
        assert all(matplotlib.rcParams[k] == v for k, v in dark.items())
    assert again.read_bytes() == files[1].read_bytes()


def test_pyplot_is_not_used():
    """Figures are made without pyplot, which would start a window system."""
    for name in ("plots", "plot_page", "plot_section", "plot_words"):
        source = Path(sys.modules[f"geomcore.{name}"].__file__)
        assert "pyplot" not in source.read_text("utf-8")
