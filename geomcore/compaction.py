"""Construction with compaction: columns keep their solid thickness, not the whole."""

from dataclasses import dataclass

import numpy as np

from .errors import ConstructionError
from .kinematics import ConstantHeave
from .porosity import PRESETS, PorosityLaw, decompact, preset

__all__ = [
    "PRESETS",
    "Compaction",
    "PorosityLaw",
    "check_compaction",
    "check_surfaces",
    "compaction_from",
    "decompact",
    "preset",
]


@dataclass(frozen=True)
class Compaction:
    """What a construction needs to know to keep solid instead of whole thickness.

    The column between bed and fault keeps its solid thickness,
    S_now(B(X), F(X)) = S_then(R(x), F(x)); footwall and fault are rigid.

    Parameters
    ----------
    law : PorosityLaw
        Of the hanging wall, in the study's length unit.
    surface_now_z, surface_then_z : float
        Elevation of the sediment surface now, and when the fault moved.
    approximate : bool
        Let it run with inclined shear too, along the shear lines.

    References
    ----------
    White, Jackson & McKenzie 1986 (through methods.md section 9, from memory).
    """

    law: PorosityLaw
    surface_now_z: float
    surface_then_z: float
    approximate: bool = False

    def thinning(self, bed_z, regional_z, fault_then_z):
        """Give how much thinner each column is now, its fault point unknown.

        F(X) = F(x) + B(X) - R(x) + thinning.

        Parameters
        ----------
        bed_z, regional_z, fault_then_z : ndarray (n,)
            B at X; R and F at the column's origin x.

        Returns
        -------
        ndarray (n,)
            Thickness then less thickness now.
        """
        top = self.surface_then_z - regional_z
        bottom = self.surface_then_z - fault_then_z
        new_top = self.surface_now_z - bed_z
        new_bottom = decompact(self.law, top, bottom, new_top)
        return self._lost_pores(top, bottom, new_top, new_bottom)

    def thinning_above(self, regional_z, fault_then_z, fault_z):
        """Give how much thinner each column is now, its bed unknown.

        B(X) = R(x) + F(X) - F(x) - thinning.

        Parameters
        ----------
        regional_z, fault_then_z : ndarray (n,)
            R and F at the column's origin x.
        fault_z : ndarray (n,)
            F at X.
        """
        top = self.surface_then_z - regional_z
        bottom = self.surface_then_z - fault_then_z
        new_bottom = self.surface_now_z - fault_z
        solid = self.law.solid_thickness(0.0, new_bottom)
        solid = solid - self.law.solid_thickness(top, bottom)
        new_top = self.law.depth_of_solid(solid)
        return self._lost_pores(top, bottom, new_top, new_bottom)

    def gains(self, bed_z, fault_then_z, fault_z):
        """Give dF(X)/dF(x) and dF(X)/dB(X), for carrying small errors.

        Both are 1 without compaction.
        """
        solid = 1.0 - self.law.porosity(self.surface_now_z - fault_z)
        then = 1.0 - self.law.porosity(self.surface_then_z - fault_then_z)
        bed = 1.0 - self.law.porosity(self.surface_now_z - bed_z)
        return then / solid, bed / solid

    def _lost_pores(self, top, bottom, new_top, new_bottom):
        then = self.law.pore_thickness(top, bottom)
        return then - self.law.pore_thickness(new_top, new_bottom)


def check_compaction(compaction, model, where=""):
    """Refuse a kinematic model that compaction does not go with.

    Raises
    ------
    ConstructionError
        If the columns do not all move by one heave, or are inclined and the
        approximation along shear lines is not asked for.
    """
    if compaction is None:
        return
    if not isinstance(model, ConstantHeave):
        raise ConstructionError(
            "compaction-model",
            f"compaction goes with constant heave only, not with {model.label}.",
            where,
            "Use constant heave (vertical shear), or leave compaction out.",
        )
    if model.shear_angle != 0 and not compaction.approximate:
        raise ConstructionError(
            "compaction-inclined",
            "rock compacts along the vertical and the columns stand at "
            f"{model.shear_angle:g} degrees to it: the two do not go together.",
            where,
            "Use vertical shear, leave compaction out, or ask for the approximation "
            "along the shear lines.",
        )


def check_surfaces(compaction, bed_z, regional_z, bed_slack, regional_slack, where=""):
    """Refuse a bed above the sediment surface of its time.

    Parameters
    ----------
    compaction : Compaction
    bed_z, regional_z : ndarray
        The bed now, and its regional when the fault moved.
    bed_slack, regional_slack : ndarray or float
        How far above is let pass as noise; the porosity there is the surface's.
    where : str

    Raises
    ------
    ConstructionError
        If either lies higher than that.
    """
    now, then = compaction.surface_now_z, compaction.surface_then_z
    for what, when, above, slack in (
        ("bed", "now", bed_z - now, bed_slack),
        ("regional", "when the fault moved", regional_z - then, regional_slack),
    ):
        if np.any(above > slack):
            raise ConstructionError(
                "above-sediment-surface",
                f"the {what} lies up to {np.max(above):.0f} above the sediment surface "
                f"{when}.",
                where,
                "Check the two elevations of the sediment surface.",
            )


def compaction_from(spec, length_unit):
    """Make the compaction of a construction from its entry in the study.

    Parameters
    ----------
    spec : CompactionSpec or None
    length_unit : str
        Of the study.

    Returns
    -------
    Compaction or None

    Raises
    ------
    ConstructionError
        If the law is unknown, both or neither of a name and own numbers are given,
        or a number is out of range.
    """
    if spec is None:
        return None
    where = "construction.compaction"
    own = (spec.surface_porosity, spec.decay)
    if bool(spec.law) == any(v is not None for v in own) or own.count(None) == 1:
        raise ConstructionError(
            "bad-porosity",
            "either the name of a law is needed, or surface_porosity and decay.",
            where,
            "Known laws: " + ", ".join(law.name for law in PRESETS) + ".",
        )
    try:
        law = (
            preset(spec.law, length_unit)
            if spec.law
            else PorosityLaw("own law", *own, length_unit=length_unit)
        )
    except ConstructionError as error:
        raise ConstructionError(error.code, error.reason, where, error.remedy) from None
    return Compaction(
        law, spec.surface_now_z, spec.surface_then_z, bool(spec.approximate)
    )
