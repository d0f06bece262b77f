"""From the simple parameters of an algorithm to a study; knows no QGIS.

What a form or a command line gives for the common case of one horizon and one fault
becomes the same study that a JSON document would give, and goes the same way.
"""

import os
from dataclasses import replace
from pathlib import Path

__all__ = [
    "calibration_study",
    "construction_study",
    "further_horizons",
    "horizons_study",
    "missing_values",
    "picks_study",
    "relative_uri",
    "sections_study",
    "source_list",
]

#: What the study says of the datum where no elevation is read.
NO_DATUM = "no elevations"


def transport_of(values, known=None):
    """Transport as given, else as an earlier step wrote it on the section lines."""
    from ..geomcore.recipe import TransportSpec

    azimuth = values.number("TRANSPORT_AZIMUTH")
    side = values.text("HW_SIDE")
    if azimuth is None and not side:
        azimuth = known
    return TransportSpec(azimuth, side)


def sections_study(values, crs, unit, extent=None):
    """Give the study that lays parallel sections across a fault trace.

    Parameters
    ----------
    values : Values
    crs : str
        Study CRS.
    unit : str
        Its length unit.
    extent : tuple (xmin, ymin, xmax, ymax), optional

    Returns
    -------
    Study
        With the one source ``fault_trace``, whose elevation is not asked for.
    """
    from ..geomcore.recipe import ConstructionSpec, ParallelSpec, SectionsSpec, Study
    from ..geomcore.sources import SourceDeclaration, ZDeclaration

    parallel = ParallelSpec(
        values.number("SPACING"),
        values.count("COUNT"),
        values.number("LENGTH_FOOTWALL"),
        values.number("LENGTH_HANGING_WALL"),
        extent,
    )
    trace = SourceDeclaration(
        "fault_trace",
        "fault trace",
        values.text("FAULT"),
        unit,
        "elevation",
        NO_DATUM,
        z=ZDeclaration("constant", value=0.0),
        layer=values.layer_name("FAULT_TRACE"),
    )
    return Study(
        values.text("FAULT"),
        values.text("FAULT"),
        crs,
        unit,
        NO_DATUM,
        (trace,),
        ConstructionSpec(""),
        SectionsSpec(parallel=parallel),
        transport_of(values),
    )


# ---- picks -------------------------------------------------------------------------


def missing_values(values):
    """Say which simple parameters are missing for the layers that were given.

    Returns
    -------
    list of str
        Sentences; empty if nothing is missing.
    """
    horizon, trace, picks = map(values.has, ("HORIZON", "FAULT_TRACE", "FAULT_PICKS"))
    if not (horizon or trace or picks or values.has("SOURCES")):
        return ["There is nothing to pull: give a horizon, a fault or SOURCES."]
    asked = {
        "HORIZON_NAME": horizon,
        "VERTICAL_UNIT": horizon or trace or picks,
        "VERTICAL_SIGN": horizon or picks,
        "VERTICAL_DATUM": horizon or trace or picks,
        "SIGMA": horizon,
        "FAULT_TRACE_Z_FIELD": trace and values.choice("FAULT_TRACE_Z") == "field",
        "FAULT_TRACE_Z_RASTER": trace and values.choice("FAULT_TRACE_Z") == "raster",
        "FAULT_TRACE_Z_VALUE": trace and values.choice("FAULT_TRACE_Z") == "constant",
    }
    return [
        f"{values.label(key)} ({key}) is not given. Nothing is guessed: say it."
        for key, needed in asked.items()
        if needed and not values.has(key)
    ]


def picks_study(values, crs, unit, sources=(), transport=None):
    """Give the study that pulls picks to section lines.

    Parameters
    ----------
    values : Values
    crs, unit : str
        Study CRS and its length unit.
    sources : tuple of SourceDeclaration
        Further sources, from SOURCES.
    transport : float, optional
        Transport azimuth that an earlier step wrote on the section lines.

    Returns
    -------
    Study
    """
    from ..geomcore.recipe import ConstructionSpec, PicksSpec, SectionsSpec, Study

    declared = (*simple_sources(values), *sources)
    named = [s.name for s in declared if s.role == "horizon"]
    horizon = values.text("HORIZON_NAME") or (named[0] if named else "")
    datum = values.text("VERTICAL_DATUM") or declared[0].datum
    return Study(
        values.text("FAULT"),
        values.text("FAULT"),
        crs,
        unit,
        datum,
        declared,
        ConstructionSpec(horizon),
        SectionsSpec(values.uri("SECTIONS"), values.field("SECTION_ID") or ""),
        transport_of(values, transport),
        PicksSpec(
            values.number("CORRIDOR"),
            values.number("FAULT_BUFFER"),
            values.number("GRID_STEP"),
        ),
    )


def simple_sources(values):
    """Declare the layers that the simple parameters name.

    Returns
    -------
    tuple of SourceDeclaration
        Of ``horizon``, ``fault_trace`` and ``fault_picks`` those that are given.
    """
    makers = {
        "HORIZON": _horizon_source,
        "FAULT_TRACE": _trace_source,
        "FAULT_PICKS": _fault_picks_source,
    }
    return tuple(make(values) for key, make in makers.items() if values.has(key))


def _horizon_source(values):
    return _declare(
        values,
        "HORIZON",
        role="horizon",
        name=values.text("HORIZON_NAME"),
        sign=values.choice("VERTICAL_SIGN"),
        z=_field_or_geometry(values.field("ELEVATION_FIELD")),
        sigma=values.number("SIGMA"),
    )


def _trace_source(values):
    from ..geomcore.sources import ZDeclaration

    z = ZDeclaration(
        values.choice("FAULT_TRACE_Z"),
        values.field("FAULT_TRACE_Z_FIELD"),
        values.uri("FAULT_TRACE_Z_RASTER") or None,
        values.number("FAULT_TRACE_Z_VALUE"),
    )
    return _declare(
        values,
        "FAULT_TRACE",
        role="fault trace",
        name=values.text("FAULT"),
        sign="elevation",
        z=z,
        sigma=_fault_sigma(values),
        dip_field=values.field("DIP_FIELD"),
        dip_azimuth_field=values.field("DIP_AZIMUTH_FIELD"),
        azimuth_north=values.choice("AZIMUTH_NORTH"),
        declination=values.number("DECLINATION"),
    )


def _fault_picks_source(values):
    return _declare(
        values,
        "FAULT_PICKS",
        role="fault",
        name=values.text("FAULT"),
        sign=values.choice("VERTICAL_SIGN"),
        z=_field_or_geometry(values.field("FAULT_PICKS_FIELD")),
        sigma=_fault_sigma(values),
    )


def _declare(values, key, **entries):
    from ..geomcore.sources import SourceDeclaration

    return SourceDeclaration(
        key=key.lower(),
        unit=values.choice("VERTICAL_UNIT"),
        datum=values.text("VERTICAL_DATUM"),
        uri=values.uri(key),
        layer=values.layer_name(key),
        **entries,
    )


def _field_or_geometry(field):
    from ..geomcore.sources import ZDeclaration

    return ZDeclaration("field", field) if field else ZDeclaration()


def _fault_sigma(values):
    own = values.number("FAULT_SIGMA")
    return own if own is not None else values.number("SIGMA") or 0.0


def source_list(document):
    """Read SOURCES: a list of declarations, or an object that holds one.

    Parameters
    ----------
    document : list or dict
        JSON; a whole study will do, its sources are taken.

    Returns
    -------
    tuple of SourceDeclaration

    Raises
    ------
    StudyError, SourceError
    """
    from ..geomcore.errors import StudyError
    from ..geomcore.sources import SourceDeclaration

    if isinstance(document, dict):
        document = document.get("sources")
    if not isinstance(document, list) or not document:
        raise StudyError(
            "bad-study",
            "a list of source declarations is expected.",
            "SOURCES",
            "See the sources of a study.",
        )
    for entry in document:
        if not isinstance(entry, dict):
            raise StudyError(
                "bad-study", f"{entry!r} is not a source declaration.", "SOURCES"
            )
    return tuple(SourceDeclaration.from_dict(entry) for entry in document)


# ---- construction ------------------------------------------------------------------


def construction_study(values, crs, unit, transport, earlier=None):
    """Give the study that constructs the fault from picks.

    Parameters
    ----------
    values : Values
    crs, unit : str
        CRS of the section lines and its length unit.
    transport : float or None
        Transport azimuth as it stands on the section lines.
    earlier : Study, optional
        The study the picks come from; its sources stay on record.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        If nothing tells transport or vertical datum.
    """
    base = _after(values, crs, unit, transport, earlier, _construction(values))
    picks = replace(
        base.picks,
        separation_from=values.number("SEPARATION_FROM"),
        separation_to=values.number("SEPARATION_TO"),
    )
    return replace(base, picks=picks)


def calibration_study(values, crs, unit, transport, earlier=None):
    """Give the study that finds the shear angle from picks.

    Parameters
    ----------
    values, crs, unit, transport, earlier
        As in `construction_study`.

    Returns
    -------
    Study
    """
    from ..geomcore.recipe import CalibrationSpec, ConstructionSpec

    made = earlier.construction if earlier else ConstructionSpec("")
    regional = replace(
        made.regional,
        dip=values.number("REGIONAL_DIP"),
        footwall_within=values.number("FOOTWALL_WITHIN"),
        parallel_to="" if values.has("REGIONAL_DIP") else made.regional.parallel_to,
    )
    base = _after(
        values, crs, unit, transport, earlier, replace(made, regional=regional)
    )
    calibration = CalibrationSpec(
        names_in(values.text("HORIZON")),
        names_in(values.text("PRE_GROWTH")),
        detachment_z=values.number("DETACHMENT_Z"),
        detachment_sigma=values.number("DETACHMENT_SIGMA"),
    )
    return replace(base, calibration=calibration)


def horizons_study(values, crs, unit, transport, earlier, further):
    """Give the study that predicts further horizons from faults.

    Parameters
    ----------
    values, crs, unit, transport
        As in `construction_study`.
    earlier : Study or None
        The study the faults come from.
    further : tuple of HorizonSpec

    Returns
    -------
    Study
    """
    from ..geomcore.recipe import ConstructionSpec

    made = earlier.construction if earlier else ConstructionSpec("")
    made = replace(made, further_horizons=further)
    return _after(values, crs, unit, transport, earlier, made)


def _after(values, crs, unit, transport, earlier, construction):
    """Carry on from an earlier study with section lines that are there already."""
    from ..geomcore.errors import StudyError
    from ..geomcore.recipe import OutputsSpec, SectionsSpec, Study, TransportSpec

    if transport is None:
        raise StudyError(
            "no-transport",
            "the section lines have no transport_azimuth.",
            f"layer '{values.layer_name('SECTIONS')}'",
            "Use the section_lines that Pull Picks to Sections writes.",
        )
    if earlier is not None and earlier.crs != crs:
        raise StudyError(
            "other-crs",
            f"they are in {crs}, but the earlier step ran in {earlier.crs}, and x and "
            "azimuths hold there only.",
            f"layer '{values.layer_name('SECTIONS')}'",
            "Use the section lines as they were written.",
        )
    datum = values.text("VERTICAL_DATUM") or (earlier.vertical_datum if earlier else "")
    if not datum:
        raise StudyError(
            "no-datum",
            "nothing tells the vertical datum of the elevations.",
            remedy="Give the vertical datum (VERTICAL_DATUM).",
        )
    fault = values.text("FAULT") or (earlier.fault if earlier else "fault")
    base = earlier or Study(fault, fault, crs, unit, datum, (), construction)
    return replace(
        base,
        fault=fault,
        crs=crs,
        length_unit=unit,
        vertical_datum=datum,
        construction=construction,
        sections=SectionsSpec(values.uri("SECTIONS"), "section_id"),
        transport=TransportSpec(transport),
        outputs=OutputsSpec(),
    )


def _construction(values):
    from ..geomcore.recipe import ConstructionSpec, RegionalSpec

    regional = RegionalSpec(
        values.number("REGIONAL_Z"),
        values.number("REGIONAL_DIP"),
        values.number("FOOTWALL_WITHIN"),
        values.number("FAR_FROM"),
    )
    return ConstructionSpec(
        values.text("HORIZON"),
        model=values.choice("MODEL"),
        shear_angle=values.number("SHEAR_ANGLE"),
        shear_angle_sigma=values.number("SHEAR_ANGLE_SIGMA"),
        solver=values.choice("SOLVER"),
        samples_per_strip=values.count("SAMPLES_PER_STRIP"),
        fit_horizons=names_in(values.text("FIT_HORIZONS")),
        robust=values.yes("ROBUST"),
        detachment_z=values.number("DETACHMENT_Z"),
        detachment_sigma=values.number("DETACHMENT_SIGMA"),
        regional=regional,
        compare=candidates(values),
        balance=values.yes("BALANCE"),
    )


def candidates(values):
    """Read COMPARE: constructions in words, or a JSON list of them.

    Parameters
    ----------
    values : Values

    Returns
    -------
    tuple of CandidateSpec

    Raises
    ------
    StudyError, ConstructionError
        If an entry is no construction.
    """
    from ..geomcore.documents import read_object
    from ..geomcore.errors import StudyError
    from ..geomcore.recipe import CandidateSpec

    text = values.text("COMPARE")
    if not text.startswith(("[", "{")):
        return tuple(_candidate(part) for part in names_in(text.replace("\n", ";")))
    document, _ = values.json("COMPARE")
    if not isinstance(document, list):
        raise StudyError("bad-study", "a list is expected.", "COMPARE")
    return tuple(read_object(CandidateSpec, entry, "COMPARE") for entry in document)


def _candidate(text):
    """Read one construction in words: model, perhaps angle, perhaps solver."""
    from ..geomcore.recipe import SOLVERS, CandidateSpec

    words, given = text.split(), {}
    if words[-1] in SOLVERS:
        given["solver"] = words.pop()
    if words and _is_number(words[-1]):
        given["shear_angle"] = float(words.pop().replace(",", "."))
    return CandidateSpec(" ".join(words), **given)


def _is_number(word):
    return word.replace(",", ".", 1).lstrip("+-").replace(".", "", 1).isdigit()


def names_in(text):
    """Give the names in a text that separates them by semicolons."""
    return tuple(name.strip() for name in text.split(";") if name.strip())


def further_horizons(names, offsets, slip=None):
    """Pair the names of further horizons with their offsets.

    Parameters
    ----------
    names, offsets : str
        Separated by semicolons; an empty place among the offsets leaves that
        horizon to its own footwall picks.
    slip : float, optional
        Predict them by slip lines with this slip.

    Returns
    -------
    tuple of HorizonSpec

    Raises
    ------
    StudyError
        If there is no name, or the offsets are no numbers or too many.

    Examples
    --------
    >>> [h.offset for h in further_horizons("A; B; C", "-250; ; 30,5")]
    [-250.0, None, 30.5]
    """
    from ..geomcore.errors import StudyError
    from ..geomcore.recipe import HorizonSpec

    names = names_in(names)
    places = [text.strip() for text in offsets.split(";")] if offsets else []
    if not names:
        raise StudyError("no-horizon", "no horizon is named.", "HORIZON")
    if len(places) > len(names):
        raise StudyError(
            "bad-offset",
            f"there are {len(places)} offsets for {len(names)} horizons.",
            "OFFSET",
            "Give one for each, separated by semicolons.",
        )
    places += [""] * (len(names) - len(places))
    return tuple(HorizonSpec(n, _offset(text), slip) for n, text in zip(names, places))


def _offset(text):
    from ..geomcore.errors import StudyError

    if not text:
        return None
    try:
        return float(text.replace(",", "."))
    except ValueError:
        raise StudyError("bad-offset", f"'{text}' is not a number.", "OFFSET") from None


# ---- where the layers are ----------------------------------------------------------


def relative_uri(uri, base, folder):
    """Write the source of a layer relative to a folder, where that can be.

    Parameters
    ----------
    uri : str
        Layer source; options after ``|`` stay.
    base : pathlib.Path or None
        Folder that a relative source is meant from.
    folder : pathlib.Path
        Folder that the result is to be relative to.

    Returns
    -------
    str
        Unchanged for databases, services and files on another drive.

    Examples
    --------
    >>> relative_uri("data/a.gpkg|layername=b", Path("p"), Path("p/results"))
    '../data/a.gpkg|layername=b'
    """
    path, bar, options = uri.partition("|")
    if not path or "://" in path or ":" in path[2:] or path.startswith("/vsi"):
        return uri
    whole = Path(path) if Path(path).is_absolute() or base is None else base / path
    try:
        inside = os.path.relpath(whole, folder)
    except ValueError:  # another drive
        return str(whole) + bar + options
    return Path(inside).as_posix() + bar + options
