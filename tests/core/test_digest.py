"""The fingerprint of a run: what changes it and what does not (design, section 2)."""

from dataclasses import replace

import pytest

from geomcore.digest import digest
from geomcore.recipe import ConstructionSpec, OutputsSpec, SectionsSpec, Study
from geomcore.sources import SourceDeclaration, ZDeclaration


def study(uri="a.gpkg", raster="dem.tif", sections="lines.gpkg", out="", unit="m"):
    """A study with one horizon over an elevation model."""
    z = ZDeclaration("raster", uri=raster)
    source = SourceDeclaration(
        "top", "horizon", "Top", unit, "elevation", "MSL", uri=uri, z=z
    )
    return Study(
        "Sample",
        "Fault",
        "EPSG:32633",
        "m",
        "MSL",
        (source,),
        ConstructionSpec("Top"),
        SectionsSpec(uri=sections),
        outputs=OutputsSpec(geopackage=out),
    )


@pytest.mark.parametrize(
    "moved", ["uri", "raster", "sections", "out"], ids=lambda name: name
)
def test_moving_a_file_keeps_the_name_of_the_run(moved):
    """The same data in another folder are the same run."""
    assert digest(study(**{moved: "elsewhere/x.gpkg"}), (), {}) == digest(
        study(), (), {}
    )


def test_another_declaration_changes_the_name_of_the_run():
    """Feet are not metres, and a run that takes them so has to be told apart."""
    assert digest(study(unit="ft"), (), {}) != digest(study(), (), {})


def test_another_parameter_changes_the_name_of_the_run():
    """A shear angle of 20 degrees is another run."""
    angle = replace(study().construction, shear_angle=20.0)
    other = replace(study(), construction=angle)
    assert digest(other, (), {}) != digest(study(), (), {})
