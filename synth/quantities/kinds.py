"""The kinds of quantity, and how each is written."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from decimal import Context, Decimal
from types import MappingProxyType

from synth.quantities.values import QuantityError

# Holds the exact sum of 273.15 and the least float (some 330 places), and products of the longest numbers.
EXACT = Context(prec=1000)

PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "µ": -6, "m": -3, "k": 3, "M": 6, "G": 9, "T": 12}
_PRINTED_PREFIXES = sorted({shift: prefix for prefix, shift in {**PREFIXES, "": 0}.items()}.items())
_CELSIUS = ("°C", "degC", "C")


@dataclass(frozen=True, kw_only=True, eq=False, repr=False)
class Kind:
    """What a field measures, and how that is written.

    Attributes
    ----------
    name : str
        Key in `KINDS`.
    unit : str
        Unit as printed; empty for a pure number.
    examples : tuple of str
        Texts of this kind.
    title : str
        Name in messages, if it differs.
    units : mapping of str to int
        Accepted spellings of the unit and the power of ten that leads to SI, if there is more than the
        printed one. Messages suggest the first one; the empty spelling is a bare number.
    prefixes : mapping of str to int
        Accepted SI prefixes and their powers of ten.
    letters : mapping of str to int
        Letters that stand for the decimal mark, or end a number, and their powers of ten (IEC 60062).
    offsets : mapping of str to Decimal
        Spelling of a unit to the SI value of its zero [SI unit].
    bare_below : float
        Least magnitude that a bare number may not have [-].
    minimum : float
        Least value that has a meaning [SI unit].
    shifts : mapping of str to int
        All that may follow a number, and its power of ten; derived.
    """

    name: str
    unit: str
    examples: tuple[str, ...]
    title: str = ""
    units: Mapping[str, int] = field(default_factory=dict)
    prefixes: Mapping[str, int] = field(default_factory=dict)
    letters: Mapping[str, int] = field(default_factory=dict)
    offsets: Mapping[str, Decimal] = field(default_factory=dict)
    bare_below: float = math.inf
    minimum: float = -math.inf
    shifts: Mapping[str, int] = field(init=False)

    def __post_init__(self) -> None:
        units = self.units or {self.unit: 0}
        before = {**self.prefixes, **self.letters}
        prefixed = {prefix + unit: before[prefix] + units[unit] for prefix in before for unit in units}
        object.__setattr__(self, "units", units)
        object.__setattr__(self, "shifts", {**self.letters, **units, **prefixed})
        object.__setattr__(self, "title", f"a {self.title or self.name.replace('_', ' ')}")

    @property
    def typed(self) -> str:
        """Unit as messages suggest it."""
        return next(iter(self.units))

    @property
    def accepted(self) -> str:
        """What a field of this kind accepts, for messages."""
        return f"{self.title} such as {' or '.join(map(repr, self.examples))}"

    @property
    def printed(self) -> list[tuple[int, str]]:
        """Power of ten and text of each unit that may be printed, ascending."""
        prefixes = _PRINTED_PREFIXES if self.prefixes else [(self.units[self.unit], "")]
        return [(shift, prefix + self.unit) for shift, prefix in prefixes]


_ALL = (
    Kind(name="voltage", unit="V", prefixes=PREFIXES, examples=("12 V", "650 mV")),
    Kind(name="current", unit="A", prefixes=PREFIXES, examples=("2 mA", "500 µA")),
    Kind(
        name="resistance", unit="Ω", units=dict.fromkeys(("ohm", "Ohm", "ohms", "Ohms", "Ω"), 0),
        prefixes={**PREFIXES, "K": 3}, letters={"R": 0, "k": 3, "K": 3, "M": 6, "G": 9, "T": 12},
        minimum=0.0, examples=("4K7", "4700 ohm"),
    ),
    Kind(name="power", unit="W", prefixes=PREFIXES, minimum=0.0, examples=("125 mW", "0.25 W")),
    # The zero of the Celsius scale is exact by definition.
    Kind(
        name="temperature", unit="°C", units=dict.fromkeys((*_CELSIUS, "K"), 0),
        offsets=dict.fromkeys(_CELSIUS, Decimal("273.15")), minimum=0.0, examples=("25 °C", "298.15 K"),
    ),
    Kind(
        name="temperature_coefficient", unit="ppm/K", units=dict.fromkeys(("ppm/K", "ppm/°C", "ppm"), -6),
        examples=("100 ppm/K", "-50 ppm/K"),
    ),
    Kind(name="conductance", unit="S", prefixes=PREFIXES, minimum=0.0, examples=("80 mS", "1 S")),
    Kind(
        name="voltage_per_kelvin", unit="V/K", title="voltage per kelvin", prefixes=PREFIXES,
        units=dict.fromkeys(("V/K", "V/°C"), 0), examples=("-2 mV/K", "1.2 mV/K"),
    ),
    # From 1 on, a bare ratio is far more likely per cent whose sign was left out.
    Kind(name="ratio", unit="%", units={"%": -2, "": 0}, bare_below=1.0, examples=("1 %", "0.01")),
    Kind(name="gain", unit="", title="pure number", minimum=0.0, examples=("110", "0.5")),
    Kind(name="time", unit="s", prefixes=PREFIXES, minimum=0.0, examples=("1 s", "20 ms")),
    Kind(name="frequency", unit="Hz", prefixes=PREFIXES, minimum=0.0, examples=("1 kHz", "50 Hz")),
    Kind(
        name="capacitance", unit="F", prefixes=PREFIXES, minimum=0.0, examples=("10 µF", "4n7"),
        letters={"p": -12, "n": -9, "u": -6, "µ": -6, "m": -3},
    ),
    Kind(
        name="thermal_resistance", unit="K/W", units=dict.fromkeys(("K/W", "°C/W", "C/W"), 0), minimum=0.0,
        examples=("250 K/W", "500 °C/W"),
    ),
)  # fmt: skip
KINDS: Mapping[str, Kind] = MappingProxyType({kind.name: kind for kind in _ALL})


def kind_named(name: str) -> Kind:
    """Look a kind up by name."""
    if name not in KINDS:
        raise QuantityError("kind", name, "which is unknown", f"one of {', '.join(KINDS)}")
    return KINDS[name]
