"""Layers to arrays and back: the only room that reads or writes features."""

from .grids import read_grid
from .opening import length_unit_of, open_layer, say, study_crs, versions
from .reading import near_section, read_section_lines, read_source
from .results import read_picks, read_traces
from .writing import Table, reload_layers, write_geopackage

__all__ = [
    "Table",
    "length_unit_of",
    "near_section",
    "open_layer",
    "read_grid",
    "read_picks",
    "read_section_lines",
    "read_source",
    "read_traces",
    "reload_layers",
    "say",
    "study_crs",
    "versions",
    "write_geopackage",
]
