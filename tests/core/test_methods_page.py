"""The methods page: every model is on it, its figures exist, its numbers hold."""

import re
import sys

import pytest
from house_rules import ROOT

from geomcore.kinematics import MODELS

PAGE = ROOT / "docs" / "methods.md"
TEXT = PAGE.read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def script():
    """The script that makes the page."""
    folder = str(ROOT / "scripts")
    sys.path.insert(0, folder)
    try:
        import make_methods_page
    finally:
        sys.path.remove(folder)
    return make_methods_page


@pytest.fixture(scope="module")
def checks(script):
    """Every number of the page, computed anew, by chapter."""
    return {chapter.title: chapter.checks() for chapter in script.chapters()}


def chapter_text(title):
    """Text of one chapter of the page."""
    parts = re.split(r"^## (.+)$", TEXT, flags=re.MULTILINE)
    return dict(zip(parts[1::2], parts[2::2]))[title]


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.NAME)
def test_every_model_has_its_chapter(model):
    """Source, when to use it and when not, as the model itself says."""
    text = chapter_text(model.NAME.capitalize())
    for words in (model.REFERENCE, model.USE_WHEN, model.NOT_WHEN):
        assert words in text
    assert model.KEEPS_AREA or "Area is not kept" in text


def test_the_other_methods_have_theirs(script):
    """Slip lines, the fit, the assumed arc and compaction; nothing else is there."""
    titles = re.findall(r"^## (.+)$", TEXT, flags=re.MULTILINE)
    assert titles == [chapter.title for chapter in script.chapters()]
    assert titles[-4:] == ["Slip lines", "The fit", "Assumed arc", "Compaction"]


def test_a_model_without_an_equation_stops_the_script(script):
    """A new model cannot be forgotten on the page."""

    class Unheard:
        NAME = "unheard of"

    with pytest.raises(SystemExit, match="no equation of 'unheard of'"):
        script.model_chapter(Unheard)


def test_figures_exist_and_are_small(script):
    """Two for each chapter, PNG, below 60 kB, and none left behind."""
    shown = re.findall(r"!\[[^]]*\]\(([^)]+)\)", TEXT)
    paths = [PAGE.parent / name for name in shown]
    assert len(paths) == 2 * len(script.chapters())
    for path in paths:
        content = path.read_bytes()
        assert content[:8] == b"\x89PNG\r\n\x1a\n"
        assert 3000 < len(content) < 60000, path.name
    assert {p.name for p in paths} == {p.name for p in script.FIGURES.iterdir()}


def test_every_number_of_the_page_holds(checks):
    """Recomputed now, each within its tolerance of the value it is checked against."""
    assert [c.what for own in checks.values() for c in own if not c.holds] == []
    assert all(len(own) >= 2 for own in checks.values())
    assert all(c.source for own in checks.values() for c in own)


def test_numbers_of_the_page_are_those_computed(checks):
    """As printed, to two units of the last digit (other machines round otherwise)."""
    for title, own in checks.items():
        text = chapter_text(title)
        for check in own:
            found = re.search(rf"^\| {re.escape(check.what)} \| (\S+) \|", text, re.M)
            assert found, check.what
            last = 2.0 * 10.0**-check.digits
            assert float(found.group(1)) == pytest.approx(check.value, abs=last)


def test_every_figure_can_be_drawn_anew(script):
    """No figure of the page depends on something that is gone."""
    for chapter in script.chapters():
        for make in (chapter.picture, chapter.verification):
            assert script.pictures.drawn(make).axes
