"""What a user has to be told about a prediction, in plain words; knows no QGIS.

The texts go into layer notes, metadata and reports. They follow common practice and
have to be read by a professional of the trade before a release is relied on.
"""

__all__ = [
    "ACTIVE_FAULT",
    "DATA",
    "DRILLING",
    "GENERAL",
    "SHORT",
    "layer_cautions",
]

#: One line for a figure or a legend.
SHORT = (
    "A model, not an observation: to be reviewed by a qualified geologist before any "
    "decision."
)

#: What holds for every predicted layer.
GENERAL: tuple[str, ...] = (
    "This fault is a model, not an observation. It follows from the picks, the "
    "regional, the cut-offs and the method stated with it. Have a qualified geologist "
    "review it before it is used for any decision.",
    "Stated errors cover the sources of error named with them and no others. They do "
    "not cover a wrong idea of the structure, such as a planar fault, a second fault, "
    "moving salt or shale, or slip oblique to the section.",
    "Between the sections and beyond the picks the fault is carried on, not known. "
    "Take those parts as a question.",
)

#: What holds where a well is planned near the fault.
DRILLING: tuple[str, ...] = (
    "A well that meets a fault may lose drilling fluid, lose the hole, or meet a "
    "change of pressure or an inflow of water, gas or hydrogen sulphide. Shallow gas "
    "can lie above any predicted depth. Well design, barriers, monitoring and gas "
    "safety are the duty of the operator under the rules that hold at the site.",
    "Plan for the shallow and the deep limit, not for the middle. A small chance of "
    "meeting the fault is not none.",
    "For disposal, injection or storage a fault may leak or seal. The prediction says "
    "where it may be, not how it behaves.",
)

#: What holds where a fault may be active.
ACTIVE_FAULT: tuple[str, ...] = (
    "Predicted traces are no mapping of rupture hazard. Setbacks and site studies are "
    "set by law and local code, and made by licensed practitioners.",
)

#: What holds for the numbers themselves.
DATA: tuple[str, ...] = (
    "Times are not depths. Check datum, sign and unit before any number is used.",
    "Places of wells, utilities and private land may be sensitive. Ask for permission "
    "before they are shared.",
)

_PREDICTED = (
    "predicted_fault_traces",
    "fault_points",
    "predicted_horizons",
    "cutoffs",
    "march_table",
    "method_comparison",
    "balance",
    "subsidiary_faults",
    "growth_history",
    "shear_angle",
    "shear_misfit",
    "runs",
)


def layer_cautions(layer_name):
    """Give the cautions that belong to an output layer.

    Parameters
    ----------
    layer_name : str
        A name of `fields.LAYERS`; other layers get what holds for all data.

    Returns
    -------
    tuple of str
        Most important first; never empty.
    """
    if layer_name in _PREDICTED:
        return (*GENERAL, *DRILLING, *ACTIVE_FAULT, *DATA)
    return DATA
