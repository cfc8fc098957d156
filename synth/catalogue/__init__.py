"""The tables that come with the program: preferred numbers, codes, resistor styles, transistors and derating policies.

Every figure is in SI units once loaded: temperatures in kelvin, fractions instead of per cent, 1/K instead
of ppm/K. A table that breaks a rule of its columns is refused with file, line and column, so that a mistaken
edit cannot pass as data.
"""

from synth.catalogue.derating import Derating, derating, deratings
from synth.catalogue.reading import CatalogueError, directory
from synth.catalogue.resistors import (
    ResistorStyle,
    TcrCode,
    ToleranceCode,
    preferred_numbers,
    resistor_style,
    resistor_styles,
    series_name,
    series_tolerance,
    tcr_codes,
    tolerance_codes,
    tolerance_series,
)
from synth.catalogue.transistors import (
    HfePoint,
    TransistorRow,
    gain_bins,
    hfe_points,
    transistor,
    transistors,
)

__all__ = [
    "CatalogueError",
    "Derating",
    "HfePoint",
    "ResistorStyle",
    "TcrCode",
    "ToleranceCode",
    "TransistorRow",
    "derating",
    "deratings",
    "directory",
    "gain_bins",
    "hfe_points",
    "preferred_numbers",
    "resistor_style",
    "resistor_styles",
    "series_name",
    "series_tolerance",
    "tcr_codes",
    "tolerance_codes",
    "tolerance_series",
    "transistor",
    "transistors",
]
