"""Source declarations and the door where raw values become elevations."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from geomcore.errors import GeomcoreError, SourceError, StudyError
from geomcore.sources import (
    NULL_CODES,
    ROLES,
    Features,
    Grid,
    SourceDeclaration,
    ZDeclaration,
    conversion_text,
    to_vertical,
)
from geomcore.units import LENGTH_UNITS, length_factor


def declared(**changes):
    """A sound declaration with some entries changed."""
    entries = {
        "key": "tops",
        "role": "horizon",
        "name": "A",
        "unit": "m",
        "sign": "elevation",
        "datum": "mean sea level",
    }
    return SourceDeclaration(**{**entries, **changes})


def in_time(**changes):
    """A sound declaration in two-way time."""
    time = {"unit": "ms", "sign": "depth", "domain": "time", "time_way": "two"}
    return declared(**{**time, **changes})


# The international foot is 0.3048 m and the US survey foot 1200/3937 m by
# definition (NIST SP 811; value from memory).
@pytest.mark.parametrize(
    ("unit", "metres"), [("m", 1.0), ("ft", 0.3048), ("us-ft", 1200 / 3937)]
)
def test_length_units_are_those_of_their_definition(unit, metres):
    """Metre, international foot and US survey foot convert by definition."""
    assert length_factor(unit, "m") == pytest.approx(metres, rel=1e-15)
    assert length_factor(unit, unit) == 1.0


def test_unknown_length_unit_is_refused_with_the_known_ones():
    """A unit that is not on the list is named, and so are those that are."""
    with pytest.raises(SourceError, match=r"'fathom'.*m, ft, us-ft") as caught:
        length_factor("fathom", "m")
    assert caught.value.code == "unknown-unit"


@pytest.mark.parametrize(
    ("changes", "raw", "study_unit", "expected"),
    [
        ({}, -1234.5, "m", -1234.5),
        ({"sign": "depth"}, 1234.5, "m", -1234.5),
        ({"unit": "ft"}, -1000.0, "m", -304.8),
        ({"unit": "m"}, -304.8, "ft", -1000.0),
        ({"unit": "us-ft"}, -3937.0, "m", -1200.0),
        # depth below a drilling floor 30 ft above mean sea level
        ({"unit": "ft", "sign": "depth", "datum_elevation": 30.0}, 1030.0, "m", -304.8),
        # elevation against a datum that lies 12 m below the study's
        ({"datum_elevation": -12.0}, -100.0, "m", -112.0),
    ],
    ids=["plain", "depth", "ft to m", "m to ft", "survey ft", "below floor", "datum"],
)
def test_depths_and_elevations_become_elevations(changes, raw, study_unit, expected):
    """Unit, sign and datum are taken from the declaration, not guessed."""
    converted = to_vertical(declared(**changes), [raw], study_unit)
    assert converted.value == pytest.approx([expected])
    assert converted.reason.tolist() == [""]


@pytest.mark.parametrize(
    ("unit", "way", "raw", "twt_ms"),
    [
        ("ms", "two", 850.0, 850.0),
        ("s", "two", 0.85, 850.0),
        ("ms", "one", 425.0, 850.0),
        ("s", "one", 0.425, 850.0),
    ],
)
def test_times_become_minus_two_way_time(unit, way, raw, twt_ms):
    """Time counts down; one-way times double, seconds become milliseconds."""
    source = in_time(unit=unit, time_way=way)
    assert to_vertical(source, [raw], "ft").value == pytest.approx([-twt_ms])


@given(
    st.floats(-1e5, 1e5).filter(lambda v: v not in NULL_CODES),
    st.sampled_from(sorted(LENGTH_UNITS)),
    st.sampled_from(sorted(LENGTH_UNITS)),
    st.floats(-500.0, 500.0),
)
def test_depth_and_elevation_declarations_agree(raw, unit, study_unit, datum):
    """A depth d and an elevation -d of one datum are one place."""
    common = {"unit": unit, "datum_elevation": datum}
    up = to_vertical(declared(sign="elevation", **common), [-raw], study_unit)
    down = to_vertical(declared(sign="depth", **common), [raw], study_unit)
    if -raw in NULL_CODES:
        assert up.reason[0] == "null code"
        return
    assert down.value == pytest.approx(up.value)


@pytest.mark.parametrize("code", [*NULL_CODES, 1e30, -1e30, 1.70141e38, 3.4028235e38])
def test_null_codes_are_counted_and_never_used(code):
    """-9999, 1e30 and their like mean 'unknown', also in depth."""
    for source in (declared(), declared(sign="depth", unit="ft"), in_time()):
        converted = to_vertical(source, [code, 10.0], "m")
        assert np.isnan(converted.value[0])
        assert converted.reason.tolist() == ["null code", ""]


def test_missing_values_are_no_null_codes():
    """NaN and infinity are values that are not there."""
    converted = to_vertical(declared(), [np.nan, np.inf, 1.0], "m")
    assert converted.reason.tolist() == ["no value", "no value", ""]
    assert np.isnan(converted.value[:2]).all()


def test_a_declaration_may_bring_its_own_null_codes():
    """A layer that uses 0 for 'unknown' can say so; -9999 is a value then."""
    source = declared(null_values=(0.0,))
    converted = to_vertical(source, [0.0, -9999.0], "m")
    assert converted.reason.tolist() == ["null code", ""]


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"role": "salt"}, "role is 'salt'"),
        ({"domain": "energy"}, "domain is 'energy'"),
        ({"sign": "down"}, "sign is 'down'"),
        ({"unit": "km"}, "unit is 'km'"),
        ({"unit": "ms"}, "unit is 'ms'"),
        ({"wall": "left"}, "wall is 'left'"),
        ({"azimuth_north": "plant"}, "azimuth_north is 'plant'"),
        ({"z": ZDeclaration("guess")}, "z cannot come from 'guess'"),
        ({"z": ZDeclaration("field")}, "no field is given"),
        ({"z": ZDeclaration("raster")}, "no uri is given"),
        ({"z": ZDeclaration("constant")}, "no value is given"),
        ({"sigma": -1.0}, "sigma is -1.0"),
        ({"sigma": float("nan")}, "sigma is nan"),
    ],
)
def test_wrong_declaration_is_refused_and_names_the_layer(changes, says):
    """A declared value that is not allowed is refused, naming layer and remedy."""
    with pytest.raises(SourceError, match=says) as caught:
        declared(layer="Tops of 1998", **changes)
    assert caught.value.code == "bad-declaration"
    assert "source 'Tops of 1998'" in str(caught.value)
    assert caught.value.remedy


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"unit": "m"}, "unit is 'm'"),
        ({"time_way": None}, "time_way is 'None'"),
        ({"sign": "elevation"}, "count downwards"),
    ],
)
def test_time_without_its_declaration_is_refused(changes, says):
    """One- or two-way, ms or s has to be said for times."""
    with pytest.raises(SourceError, match=says):
        in_time(**changes)


def test_constant_zero_is_a_value():
    """A trace at elevation 0 is declared with the constant 0."""
    assert declared(z=ZDeclaration("constant", value=0.0)).z.value == 0.0


@pytest.mark.parametrize("role", ROLES)
def test_declaration_survives_its_document(role):
    """What is written of a declaration reads back as the same declaration."""
    source = declared(
        role=role,
        unit="ft",
        sign="depth",
        sigma=3.0,
        wall="footwall",
        z=ZDeclaration("field", field="ELEV"),
        corridor=250.0,
    )
    again = SourceDeclaration.from_dict(source.to_dict())
    assert again == source
    assert again.to_dict() == source.to_dict()


@pytest.mark.parametrize(
    ("document", "says"),
    [
        ({"key": "tops"}, "not given: role, name, unit, sign, datum"),
        ({"datum": ""}, "not given: datum"),
        ({"colour": "red"}, "unknown entries: 'colour'"),
        ({"sigma": "five"}, "sigma is 'five', not a number"),
        ({"corridor": "wide"}, "corridor is 'wide', not a number"),
        ({"datum_elevation": True}, "datum_elevation is True, not a number"),
        ({"sigma": float("inf")}, "sigma is inf"),
        ({"name": 7}, "name is 7, not a text"),
        ({"name_field": 7}, "name_field is 7, not a text"),
        ({"null_values": 3}, "null_values is 3, not a list"),
        ({"null_values": ["x"]}, "null_values is .'x'., not a list of numbers"),
        ({"corridor": 0.0}, "corridor is 0"),
        ({"z": "geometry"}, "an object with named entries"),
        ({"z": {"source": "constant", "value": "deep"}}, "value is 'deep'"),
    ],
)
def test_bad_entry_of_a_source_is_refused_and_names_it(document, says):
    """Missing, unknown or mistyped entries are refused in words; nothing is guessed."""
    sound = declared().to_dict()
    document = document if list(document) == ["key"] else {**sound, **document}
    with pytest.raises(GeomcoreError, match=says) as caught:
        SourceDeclaration.from_dict(document)
    assert isinstance(caught.value, (SourceError, StudyError))
    assert "source 'tops'" in str(caught.value)


def test_conversion_is_said_in_words():
    """The input statement says how values were converted, datum and unit included."""
    text = conversion_text(
        declared(unit="ft", sign="depth", datum="KB", datum_elevation=30.0), "m"
    )
    for word in ("depth", "ft", "KB", "30", "elevation in m"):
        assert word in text
    assert "one-way time in s" in conversion_text(
        in_time(unit="s", time_way="one"), "m"
    )


def test_points_and_lines_become_flat_arrays():
    """Parts lie one after the other; each vertex knows its part."""
    lines = Features.lines([[(0, 0, 5), (1, 0, 6)], [(2, 2, 7), (3, 3, 8), (4, 4, 9)]])
    assert lines.offsets.tolist() == [0, 2, 5]
    assert lines.part_of_vertex.tolist() == [0, 0, 1, 1, 1]
    assert lines.value.tolist() == [5, 6, 7, 8, 9]
    points = Features.points([(0, 0), (1, 1)], 3.0, dip=[10.0, 20.0])
    assert points.value.tolist() == [3.0, 3.0]
    assert points.part_of_vertex.tolist() == [0, 1]


def test_lines_take_a_value_per_feature_or_none():
    """Contours may carry their elevation as an attribute; flat lines know none."""
    by_value = Features.lines([[(0, 0), (1, 0)], [(2, 2), (3, 3)]], values=[-10, -20])
    assert by_value.value.tolist() == [-10, -10, -20, -20]
    assert np.isnan(Features.lines([[(0, 0), (1, 0)]]).value).all()
    assert len(Features.lines([]).fid) == 0


def test_grid_is_asked_at_map_points():
    """A grid is anything that can be asked for its value at map points."""
    plane = Grid(lambda xy: xy[:, 0] * 0.5, cell=25.0)
    assert plane.sample(np.array([[10.0, 0.0]])).tolist() == [5.0]
    assert math.isclose(plane.cell, 25.0)
