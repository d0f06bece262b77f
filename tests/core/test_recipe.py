"""The study document: strict reading, ranges, and the way there and back."""

import pytest
from hypothesis import given
from hypothesis import strategies as st
from worlds import DOCUMENT, changed

from geomcore.documents import read_object
from geomcore.errors import GeomcoreError, StudyError
from geomcore.recipe import OutputsSpec, ParallelSpec, Study


def refused(document):
    """Read a study that has to be refused; the error."""
    with pytest.raises(GeomcoreError) as caught:
        Study.from_dict(document)
    return caught.value


def read_or_refused(document):
    """Read a study; what came of it."""
    try:
        return Study.from_dict(document)
    except GeomcoreError as error:
        return error


def test_study_survives_its_document():
    """What is written of a study reads back as the same study."""
    document = changed(DOCUMENT, "note", to="höher als gedacht")
    document = changed(document, "sections", "parallel", to={"count": 5})
    document = changed(document, "construction", "regional", to={"dip": 1.5})
    document = changed(
        document,
        "construction",
        "further_horizons",
        to=[{"name": "B", "offset": -90.0}],
    )
    study = Study.from_dict(document)
    again = Study.from_json(study.to_json())
    assert again == study
    assert again.to_json() == study.to_json()
    assert "höher" in study.to_json()
    assert study.sections.parallel == ParallelSpec(count=5)


def test_defaults_are_left_out_of_the_document():
    """A study document says only what its author set."""
    assert "outputs" not in Study.from_dict(DOCUMENT).to_dict()
    assert Study.from_dict(DOCUMENT).to_dict() == DOCUMENT


@pytest.mark.parametrize(
    ("document", "says"),
    [
        ([], "'format' is not"),
        ({}, "'format' is not"),
        ({**DOCUMENT, "format": "recipe"}, "'format' is not"),
        ({**DOCUMENT, "version": 2}, "version 2.*reads version 1"),
        ({**DOCUMENT, "version": None}, "version None"),
    ],
)
def test_another_document_or_version_is_refused(document, says):
    """A file of another kind or of a later version is refused in words."""
    error = refused(document)
    assert error.code == "bad-study"
    with pytest.raises(StudyError, match=says):
        Study.from_dict(document)


def test_text_that_is_no_json_is_refused():
    """A broken file is refused with the place where reading stopped."""
    with pytest.raises(StudyError, match=r"not valid JSON.*line 1") as caught:
        Study.from_json('{"format": ')
    assert caught.value.code == "bad-study"


@pytest.mark.parametrize(
    ("path", "value", "says"),
    [
        (["colour"], "red", "study: unknown entries: 'colour'"),
        (["fault"], "", "study: not given: fault"),
        (["crs"], None, "study: not given: crs"),
        (["name"], 5, "study: name is 5, not a text"),
        (["length_unit"], "km", "length_unit is 'km'.*m, ft, us-ft"),
        (["sources"], {}, "sources has to be a list"),
        (["sources", 1, "key"], "trace", "keys used twice: trace"),
        (["sources", 1, "colour"], 1, "source 'deep': unknown entries: 'colour'"),
        (["sources", 1], "deep", "an object with named entries"),
        (
            ["transport", "azimuth"],
            "east",
            "transport: azimuth is 'east', not a number",
        ),
        (["transport", "azimuth"], float("inf"), "azimuth is inf, not a number"),
        (["transport", "hw_side"], 90, "hw_side is 90, not a text"),
        (["transport"], "east", "transport: an object with named entries"),
        (["picks", "corridor"], "wide", "picks: corridor is 'wide', not a number"),
        (["picks", "corridor"], 0.0, "picks: corridor is 0"),
        (["picks", "corridor"], -5.0, "picks: corridor is -5"),
        (["picks", "fault_buffer"], -1.0, "picks: fault_buffer is -1"),
        (["picks", "grid_step"], 0.0, "picks: grid_step is 0"),
        (["picks", "separation_to"], 20.0, "separation_to is 20"),
        (["picks", "tracked"], "tops", "tracked is 'tops', not a list"),
        (["picks", "tracked"], ["topz"], "tracked names 'topz'"),
        (["sections", "parallel"], {"count": 2.5}, "count is 2.5, not a whole number"),
        (["sections", "parallel"], {"gap": 1}, "sections.parallel: unknown entries"),
        (
            ["sections", "parallel"],
            {"count": 2, "extent": [1, 2, 3]},
            "extent is .1, 2, 3., not four numbers",
        ),
        (["sections"], [], "sections: an object with named entries"),
        (["construction", "horizon"], "", "construction: not given: horizon"),
        (["construction", "model"], "magic", "no kinematic model 'magic'"),
        (["construction", "shear_angle"], 75.0, "shear angle is 75 degrees"),
        (["construction", "shear_angle"], True, "shear_angle is True, not a number"),
        (["construction", "shear_angle_sigma"], -1.0, "shear_angle_sigma is -1"),
        (["construction", "solver"], "magic", "no solver 'magic'"),
        (["construction", "samples_per_strip"], 3, "samples_per_strip has to be 4"),
        (["construction", "samples_per_strip"], "40", "not a whole number"),
        (["construction", "samples_per_strip"], 40.5, "not a whole number"),
        (["construction", "regional"], {"level": 1}, "construction.regional: unknown"),
        (["construction", "regional"], {"dip": "flat"}, "dip is 'flat', not a number"),
        (["construction", "regional"], {"dip": 90.0}, "dip is 90"),
        (
            ["construction", "regional"],
            {"footwall_within": 0.0},
            "footwall_within is 0",
        ),
        (["construction", "regional"], {"far_from": -1.0}, "far_from is -1"),
        (
            ["construction", "further_horizons"],
            [{}],
            "further_horizons: not given: name",
        ),
        (["construction", "further_horizons"], 5, "further_horizons is 5, not a list"),
        (["construction", "fit_horizons"], "B", "fit_horizons is 'B', not a list"),
        (["construction"], None, "construction"),
        (["outputs"], {"geopackage": 5}, "outputs: geopackage is 5, not a text"),
    ],
)
def test_unsound_entry_is_refused_and_named(path, value, says):
    """Every entry that is unknown, missing, mistyped or out of range is named."""
    document = changed(DOCUMENT, *path, to=value)
    with pytest.raises(GeomcoreError, match=says):
        Study.from_dict(document)


@given(
    st.recursive(
        st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5),
        lambda inner: (
            st.lists(inner, max_size=3)
            | st.dictionaries(st.text(max_size=5), inner, max_size=3)
        ),
        max_leaves=4,
    ),
    st.sampled_from(
        ["name", "sources", "sections", "transport", "picks", "construction", "outputs"]
    ),
)
def test_nothing_in_a_document_ends_in_a_stack_trace(value, entry):
    """Whatever stands in a study file, it is read or refused in words."""
    said = read_or_refused({**DOCUMENT, entry: value})
    assert isinstance(said, Study) or said.reason


@given(
    st.one_of(st.none(), st.integers(), st.text(max_size=4), st.lists(st.integers())),
    st.sampled_from(
        ["regional", "further_horizons", "fit_horizons", "solver", "model"]
    ),
)
def test_nothing_in_the_construction_ends_in_a_stack_trace(value, entry):
    """The same one level deeper, where the lists and objects are."""
    said = read_or_refused(changed(DOCUMENT, "construction", entry, to=value))
    assert isinstance(said, Study) or said.reason


def test_object_reader_takes_sub_objects_already_read():
    """Values read beforehand stand in for their entries."""
    spec = read_object(OutputsSpec, {"geopackage": "a.gpkg"}, "outputs", plots="p")
    assert spec == OutputsSpec("a.gpkg", "p")
