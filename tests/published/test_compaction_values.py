"""Published and tabulated values of compaction: laws, thicknesses, dips."""

import pytest

from geomcore.burial import buried_dip
from geomcore.porosity import PRESETS, PorosityLaw, decompact, preset

pytestmark = pytest.mark.published


# [P] Wangen 2010, Physical Principles of Sedimentary Basin Analysis, table 2.1
# (after Sclater & Christie 1980): phi0 and 1/c in metres, printed without rounding.
@pytest.mark.parametrize(
    ("name", "phi0", "scale"),
    [
        ("shale", 0.63, 1960.0),
        ("sand", 0.49, 3703.0),
        ("chalk", 0.70, 1408.0),
        ("shaly sand", 0.56, 2464.0),
    ],
)
def test_presets_are_those_of_the_table(name, phi0, scale):
    """Surface porosity as printed, 1/c to the metre."""
    law = preset(name)
    assert law.surface_porosity == phi0
    # the table cuts 1960.8 and 3703.7 off to whole metres
    assert 0.0 <= 1.0 / law.decay - scale < 1.0
    assert "Wangen 2010" in law.source
    assert [p.name for p in PRESETS].count(name) == 1


# [N] quadrature, methods.md section 16: phi0, c per km, layer; solid, at the surface.
@pytest.mark.parametrize(
    ("name", "phi0", "per_km", "layer", "solid", "surface"),
    [
        ("shale", 0.63, 0.51, (2000.0, 3000.0), 822.044, 1475.197),
        ("sand", 0.49, 0.27, (1000.0, 2500.0), 1038.632, 1709.610),
    ],
)
def test_solid_thickness_and_decompaction(name, phi0, per_km, layer, solid, surface):
    """A buried layer's solid thickness, and its thickness at the surface."""
    for law in (preset(name), PorosityLaw(name, phi0, per_km / 1000.0)):
        assert float(law.solid_thickness(*layer)) == pytest.approx(solid, abs=5e-4)
        # one unit of the last digit: the sand is 1709.6095, printed as 1709.610
        assert float(decompact(law, *layer, 0.0)) == pytest.approx(surface, abs=1e-3)


def test_fault_dip_after_compaction():
    """60 degrees at the surface in shale, buried to 3 km: 36.58 degrees.

    Formula of Davison 1987 and Xiao & Suppe 1989; value computed, methods.md
    section 16.
    """
    law = preset("shale")
    assert float(law.porosity(3000.0)) == pytest.approx(0.1364, abs=5e-5)
    assert float(buried_dip(60.0, law, 0.0, 3000.0)) == pytest.approx(36.58, abs=5e-3)
