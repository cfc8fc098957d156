"""One registry of the keys of a stage: what each is called, how it is written, what it means.

The reader of stage files, the arguments of `Stage`, the options of the command line, the file that ``--save`` writes
and the empty stage file all read `KEYS`; a key that is not here does not exist.
"""

from __future__ import annotations

import difflib
import os
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, Literal

from synth.limits import RULES
from synth.networks import NETWORKS
from synth.quantities import (
    KINDS,
    Interval,
    RestpointError,
    Spread,
    Target,
    format_exact,
    format_limit,
    format_spread,
    format_target,
    parse,
    parse_limit,
    parse_spread,
    parse_target,
)

Form = Literal["spread", "target", "limit", "quantity", "quantities", "text", "choice", "texts"]
Given = str | float | Spread | Interval | Target | os.PathLike[str] | Sequence[str | float] | None
"""What `Stage` takes for a key: text, number in SI units, value of `synth.quantities`, path, list of texts or numbers.

None counts as not given.
"""

NONE = "none"
"""Text that switches a limit off."""

NEAREST_SHOWN = 3
LONGEST_NUMBER = 1024
"""Length above which a whole number is beyond the floating-point range [bit]."""


class StageError(RestpointError):
    """A stage that contradicts itself, or a key that no stage has.

    Parameters
    ----------
    field : str
        Name of the field, as the user knows it.
    read : object
        What was read; None where something is missing.
    reason : str
        Why it is refused, as a clause that follows "read ...,".
    accepted : str
        What the field accepts.
    nearest : tuple of str
        Nearest choices that are accepted; may be empty.
    """

    def __init__(self, field: str, read: object, reason: str, accepted: str, nearest: Iterable[str] = ()) -> None:
        # All arguments go to the base, so that the error survives the way home from a worker process.
        super().__init__(field, read, reason, accepted, tuple(nearest))
        self.field = field
        self.read = read
        self.reason = reason
        self.accepted = accepted
        self.nearest = tuple(nearest)

    def __str__(self) -> str:
        nearest = f", nearest is {' or '.join(map(repr, self.nearest))}" if self.nearest else ""
        ending = f"accepted is {self.accepted}{nearest}"
        if self.read is None:
            return f"{self.field} {self.reason.removeprefix('which ')}, {ending}"
        return f"{self.field}: read {str(self.read)[:200]!r}, {self.reason}, {ending}"


@dataclass(frozen=True, kw_only=True)
class Key:
    """One key of a stage.

    Parameters
    ----------
    path : str
        Table and key, as in "supply.vcc".
    form : {"spread", "target", "limit", "quantity", "quantities", "text", "choice", "texts"}
        How its value is written; "quantities" and "texts" are lists, "choice" is one of `choices`.
    kind : str
        Kind of quantity, a key of `synth.quantities.KINDS`; "" for words.
    rule : str
        Of a spread, where the nominal value of two ends lies (see `parse_spread`), besides "ceiling": a single value is
        the upper end of a spread from zero, and "symmetric": a single value stands for plus and minus. Of a limit, its
        natural sense.
    short : str
        Short name, as an argument and, with hyphens, as an option; "" if there is none.
    choices : tuple of str
        Words accepted by a "choice", and by "texts" that come from a short list.
    meaning : str
        One sentence.
    example : str
        A text that is accepted; the items of a list have commas between them.
    default : str
        Text that stands for the key when it is not given; "" if that is nothing, or depends on other keys.
    otherwise : str
        What holds when the key is not given, in words; `default` if that says it.
    needed : bool
        Whether every stage has to give it.
    names : tuple of str
        Names as an argument of `Stage`, the preferred one first.
    """

    path: str
    form: Form
    kind: str = ""
    rule: str = "mean"
    short: str = ""
    choices: tuple[str, ...] = ()
    meaning: str
    example: str
    default: str = ""
    otherwise: str = ""
    needed: bool = False
    names: tuple[str, ...] = ()

    @property
    def table(self) -> str:
        """Table that the key stands in, "" for the top of the file."""
        return self.path.rpartition(".")[0]

    @property
    def leaf(self) -> str:
        """Name of the key inside its table."""
        return self.path.rpartition(".")[2]

    @property
    def flat(self) -> str:
        """Path as one word, as in "supply_vcc": the argument that every key has."""
        return self.path.replace(".", "_")

    @property
    def options(self) -> tuple[str, ...]:
        """Names as an option of the command line, the short form first."""
        words = dict.fromkeys(filter(None, (self.short, self.flat)))
        return tuple(f"--{word.replace('_', '-')}" for word in words)

    @property
    def many(self) -> bool:
        """Whether the value is a list."""
        return self.form in ("quantities", "texts")

    def read(self, text: str) -> Any:
        """Value of a text.

        Parameters
        ----------
        text : str
            Text as a file, an option or `text` gives it; a list has commas between its items.

        Returns
        -------
        Spread, Target, Interval, float, str or tuple
            By form; SI units. A limit of "none" is None.

        Raises
        ------
        QuantityError
            If the text is not the quantity it should be.
        StageError
            If a word is none of the choices or cannot be printed.
        """
        if self.form == "spread":
            return self._spread(text)
        if self.form == "target":
            return parse_target(text, self.kind, self.path)
        if self.form == "limit":
            is_off = self.table == "limits" and text.strip().casefold() == NONE
            return None if is_off else parse_limit(text, self.kind, self.path, self.rule)
        if self.form == "quantity":
            return parse(text, self.kind, self.path)
        if self.form == "quantities":
            return tuple(parse(item, self.kind, self.path) for item in self.items(text))
        if self.form == "texts":
            return tuple(dict.fromkeys(self._word(item) for item in self.items(text)))
        return self._word(text)

    def write(self, value: Any) -> str:
        """Text of a value; `read` gives the value back.

        Parameters
        ----------
        value : Spread, Target, Interval, float, str or tuple
            As `read` returns it.

        Returns
        -------
        str
            The text.
        """
        if self.form == "spread":
            return self._spread_text(value)
        if self.form == "target":
            return format_target(value, self.kind)
        if self.form == "limit":
            is_open = value is None or (value.low == -float("inf") and value.high == float("inf"))
            return NONE if is_open else format_limit(value, self.kind)
        if self.form == "quantity":
            return format_exact(value, self.kind)
        if self.form == "quantities":
            return ", ".join(format_exact(item, self.kind) for item in value)
        return ", ".join(value) if self.form == "texts" else str(value)

    def text(self, given: object) -> str:
        """Text of whatever a program gives for this key.

        Parameters
        ----------
        given : str, float, Spread, Interval, Target, path or sequence
            See `Given`.

        Returns
        -------
        str
            A text stays as it is.

        Raises
        ------
        QuantityError
            If a number or value does not suit the key.
        StageError
            If it is of another type.
        """
        if isinstance(given, str):
            return given
        if self.many and isinstance(given, Sequence):
            return ", ".join(self._item_text(item) for item in given)
        if self.many and self.kind:
            return self._item_text(given)
        if not self.kind:
            if isinstance(given, os.PathLike):
                return str(os.fspath(given))
            raise StageError(self.path, given, "which is no text", self.accepted, [self.example])
        if self.form == "spread":
            spread = parse_spread(given, self.kind, self.path)  # type: ignore[arg-type]
            # A number alone, unlike a spread, means what a single value means to this key.
            return self.write(spread) if isinstance(given, Spread) else format_exact(spread.nominal, self.kind)
        if self.form == "target":
            return self.write(parse_target(given, self.kind, self.path))  # type: ignore[arg-type]
        if self.form == "limit":
            return self.write(parse_limit(given, self.kind, self.path, self.rule))  # type: ignore[arg-type]
        return format_exact(parse(given, self.kind, self.path), self.kind)  # type: ignore[arg-type]

    def text_of_toml(self, value: object) -> str:
        """Text of a value in a stage file, where a bare number stands for a pure number only.

        Parameters
        ----------
        value : object
            As the reader of TOML gives it.

        Returns
        -------
        str
            The text.

        Raises
        ------
        StageError
            If it is neither a text nor, where a pure number is meant, a number; shows how to write it.
        """
        items = value if isinstance(value, list) and self.many else [value]
        return ", ".join(self._toml_item(item) for item in items)

    def _toml_item(self, item: object) -> str:
        if isinstance(item, str):
            return item
        if isinstance(item, int) and item.bit_length() > LONGEST_NUMBER:
            raise StageError(self.path, None, "is a number beyond every quantity", self.accepted)
        is_number = isinstance(item, int | float) and not isinstance(item, bool)
        if is_number and self.kind and "" in KINDS[self.kind].units:
            return repr(item)
        title = {bool: "a truth value", dict: "a table", list: "a list"}.get(type(item), "a date or time")
        if is_number and self.kind:
            title, write = "a number without a unit", f'"{item} {KINDS[self.kind].typed}"'
        else:
            title = "a number" if is_number else title
            examples = [f'"{example}"' for example in self.items(self.example)]
            write = f"[{', '.join(examples)}]" if len(examples) > 1 else examples[0]
        raise StageError(self.path, item, f"which is {title}", f"{self.accepted}: write {write}")

    @property
    def accepted(self) -> str:
        """What the key accepts, for messages and help."""
        if self.choices:
            return f"one of {', '.join(self.choices)}"
        return KINDS[self.kind].accepted if self.kind else f"a text such as {self.example!r}"

    def _spread(self, text: str) -> Spread:
        if self.rule == "symmetric":
            alone = text.strip().removeprefix("±").removeprefix("+-").removeprefix("+/-")
            if ":" not in alone and "±" not in alone and "+-" not in alone and "+/-" not in alone:
                width = parse(alone, self.kind, self.path)
                if width < 0.0:
                    both = f"{format_exact(width, self.kind)} : {format_exact(0.0, self.kind)}"
                    accepted = "one value without a sign, which counts plus and minus, or low : high"
                    raise StageError(self.path, text, "which is negative", accepted, [alone.lstrip("-−"), both])
                return Spread(-width, 0.0, width)
        if self.rule == "ceiling" and ":" not in text:
            spread = parse_spread(text, self.kind, self.path)
            is_single = spread.width == 0.0 and spread.high > 0.0
            return Spread(0.0, 0.0, spread.high) if is_single else spread
        named = self.rule if self.rule in ("geometric", "ambient") else "mean"
        return parse_spread(text, self.kind, self.path, named)

    def _spread_text(self, value: Spread) -> str:
        if self.rule == "symmetric" and -value.low == value.high and value.nominal == 0.0:
            return format_exact(value.high, self.kind)
        if self.rule in ("symmetric", "ceiling") and value.width == 0.0 and value.high != 0.0:
            # One value alone would be read as a wider spread.
            return " : ".join([format_exact(value.high, self.kind)] * 2)
        if self.rule == "geometric" and value.width:
            ends = format_limit(Interval(value.low, value.high), self.kind)
            if self._spread(ends) == value:
                return ends
        return format_spread(value, self.kind)

    def items(self, text: str) -> list[str]:
        """Items of the text of a list; a text that is no list is its only item.

        Parameters
        ----------
        text : str
            Text of the key.

        Returns
        -------
        list of str
            The items without blanks around them.
        """
        # "4,7k" is one resistance: there only a comma with a gap behind it, or a semicolon, parts two items.
        separator = ", " if self.form == "quantities" else ","
        items = text.replace(";", separator).split(separator) if self.many else [text]
        return [item.strip() for item in items]

    def _item_text(self, item: object) -> str:
        if isinstance(item, str):
            return item
        if not self.kind:
            raise StageError(self.path, item, "which is no text", self.accepted, [self.example])
        return format_exact(parse(item, self.kind, self.path), self.kind)  # type: ignore[arg-type]

    def _word(self, text: str) -> str:
        word = text.strip()
        if not word.isprintable() or not word:
            reason = "which is empty" if not word else "which has characters that cannot be printed"
            raise StageError(self.path, text, reason, self.accepted, [self.example])
        if not self.choices:
            return word
        known = {choice.casefold(): choice for choice in self.choices}
        found = known.get(word.casefold().replace("-", "_")) or known.get(word.casefold())
        if found is None:
            raise StageError(self.path, word, "which is unknown", self.accepted, nearest(word, self.choices))
        return found


def nearest(read: str, known: Iterable[str]) -> tuple[str, ...]:
    """Known names that are likely meant.

    Parameters
    ----------
    read : str
        What was read.
    known : iterable of str
        Names that are accepted.

    Returns
    -------
    tuple of str
        Names with the same last part if there are any, else the nearest in spelling; never empty if any is known.
    """
    names = list(known)
    leaf = read.rpartition(".")[2].casefold()
    same = [name for name in names if name.rpartition(".")[2].casefold() == leaf]
    close = difflib.get_close_matches(read, names, NEAREST_SHOWN, 0.6)
    return tuple((same or close or difflib.get_close_matches(read, names, 1, 0.0))[:NEAREST_SHOWN])


# --- The keys -----------------------------------------------------------------------------------------------------

ROLES: tuple[str, ...] = tuple(sorted({role for network in NETWORKS.values() for role in network.role_names}))
"""Every role of every network."""

_ROLE_MEANING = {
    role.name: role.meaning
    # The usual network last, so that its words win.
    for network in sorted(NETWORKS.values(), key=lambda network: network.name == "divider")
    for role in network.roles
}
_LIMIT_OTHERWISE = {
    "bleeder_current": "a tenth of the target IC",
    "collector_share": "0.5 where rc and re hang between the same two rails",
    "base_resistance": "hFE min times VT over the target IC",
    "vce": "VCE stays above VCE(sat) in any case",
    "compliance": "a third of the rail of the load",
    "reference_current": "half of reference.current",
    "resistor_stress": "100 % where a style is given",
    "transistor_stress": "100 % of the ratings that are known",
}
_LIMIT_EXAMPLE = {
    "bleeder_current": "200 uA",
    "reference_current": "2.5 : 10 mA",
    "compliance": "8 V",
    "input_resistance": "1.5 kohm",
    "output_resistance": "<= 2 kohm",
    "swing": "1.5 V",
    "resistor_stress": "100 %",
    "transistor_stress": "100 %",
    "current": "3 mA",
    "ratio": "0.4",
    "resistance": "15 kohm",
    "voltage": "1 V",
    "gain": "150",
}


def _top() -> Iterable[Key]:
    yield Key(
        path="name", form="text", example="tide-gauge hydrophone, first stage",
        meaning="What the stage is, for reports.", otherwise="the name of the file",
    )  # fmt: skip
    yield Key(
        path="network", form="texts", choices=(*NETWORKS, "any"), default="divider", example="divider",
        meaning="How the resistors are connected: one network, a list of them, or any.",
    )  # fmt: skip
    yield Key(
        path="derating", form="text", default="half_power", example="half_power",
        meaning="How much of each rating may be used, a row of the table of derating policies.",
    )  # fmt: skip


def _supply() -> Iterable[Key]:
    yield Key(
        path="supply.vcc", form="spread", kind="voltage", short="supply", example="12 V ± 5 %", needed=True,
        meaning="Supply of the collector, a magnitude.",
    )  # fmt: skip
    yield Key(
        path="supply.vee", form="spread", kind="voltage", short="vee", example="12 V ± 5 %",
        meaning="Second supply beyond 0 V, a magnitude, for networks that return the emitter to it.",
        otherwise="no second supply",
    )  # fmt: skip
    yield Key(
        path="supply.vbb", form="spread", kind="voltage", short="vbb", example="5 V ± 2 %",
        meaning="Supply of the base, a magnitude.", otherwise="the base is fed from vcc itself",
    )  # fmt: skip
    yield Key(
        path="supply.vload", form="spread", kind="voltage", short="vload", example="24 V ± 5 %",
        meaning="Supply of the load of a sink, a magnitude.", otherwise="the load hangs on vcc",
    )  # fmt: skip
    yield Key(
        path="supply.ground", form="choice", choices=("negative", "positive", "middle"), example="negative",
        meaning="Which rail is 0 V; node voltages are reported against it.",
        otherwise="negative, or middle when vee is given",
    )  # fmt: skip


def _target() -> Iterable[Key]:
    yield Key(
        path="target.ic", form="target", kind="current", short="ic", example="2 mA ± 15 %", needed=True,
        meaning="Wanted collector current, with its window if there is one.",
    )  # fmt: skip
    yield Key(
        path="target.vce", form="target", kind="voltage", short="vce", example="5 V",
        meaning='Wanted collector-emitter voltage, with its window if there is one; ">= 3 V" is a window alone.',
        otherwise="vc or ve has to be given in its place; a sink has none",
    )  # fmt: skip
    yield Key(
        path="target.vc", form="target", kind="voltage", short="vc", example="7.5 V",
        meaning="In place of vce: wanted collector voltage, a magnitude against the end of re, of two supplies against 0 V.",
        otherwise="vce is given",
    )  # fmt: skip
    yield Key(
        path="target.ve", form="target", kind="voltage", short="ve", example="1.2 V",
        meaning="In place of vce: wanted drop of the emitter resistor, a magnitude.", otherwise="vce is given",
    )  # fmt: skip


def _transistor() -> Iterable[Key]:
    yield Key(
        path="transistor.type", form="text", short="type", example="BC847B",
        meaning="Registered type from the table of transistors; the keys below override what it brings.",
        otherwise="the transistor is given by its figures",
    )  # fmt: skip
    yield Key(
        path="transistor.polarity", form="choice", choices=("npn", "pnp"), short="polarity", example="npn",
        meaning="Conductivity type.", default="npn",
    )  # fmt: skip
    yield Key(
        path="transistor.material", form="choice", choices=("silicon", "germanium"), example="silicon",
        meaning="Semiconductor.", default="silicon",
    )  # fmt: skip
    yield Key(
        path="transistor.hfe", form="spread", kind="gain", rule="geometric", short="hfe", example="200 : 450",
        meaning='DC current gain at 25 °C from unit to unit, ">= 40" without a maximum; needed unless a type is given.',
        otherwise="the type's; there is no default",
    )  # fmt: skip
    yield Key(
        path="transistor.vbe", form="spread", kind="voltage", short="vbe", example="0.65 V ± 50 mV",
        meaning="Base-emitter voltage at 25 °C and vbe_ic from unit to unit.", default="0.65 V ± 50 mV",
        otherwise="the type's; 0.65 V ± 50 mV, germanium 0.15 V ± 50 mV",
    )  # fmt: skip
    yield Key(
        path="transistor.vbe_ic", form="quantity", kind="current", example="2 mA", default="2 mA",
        meaning="Collector current at which vbe holds.", otherwise="the type's; 2 mA, germanium 1 mA",
    )  # fmt: skip
    yield Key(
        path="transistor.vbe_model", form="choice", choices=("junction", "fixed"), example="junction",
        meaning="Whether VBE follows current and temperature (junction) or is constant, as in hand calculation (fixed).",
        default="junction",
    )  # fmt: skip
    yield Key(
        path="transistor.icbo", form="spread", kind="current", rule="ceiling", example="15 nA", default="0 A",
        meaning="Collector-base leakage at 25 °C; one value is its upper limit.", otherwise="the type's; none",
    )  # fmt: skip
    yield Key(
        path="transistor.vce_sat", form="quantity", kind="voltage", example="0.2 V", default="0.2 V",
        meaning="Collector-emitter voltage of the saturated transistor.",
        otherwise="the type's; 0.2 V, germanium 0.1 V",
    )  # fmt: skip
    yield Key(
        path="transistor.vceo", form="quantity", kind="voltage", example="45 V",
        meaning="Largest collector-emitter voltage; the whole rail counts against it, which stands there at cut-off.",
        otherwise="the type's; no verdict",
    )  # fmt: skip
    yield Key(
        path="transistor.ic_max", form="quantity", kind="current", example="100 mA",
        meaning="Largest collector current.", otherwise="the type's; no verdict",
    )  # fmt: skip
    yield Key(
        path="transistor.ptot", form="quantity", kind="power", example="0.25 W",
        meaning="Largest power at 25 °C ambient.", otherwise="the type's; no verdict",
    )  # fmt: skip
    yield Key(
        path="transistor.tj_max", form="quantity", kind="temperature", example="150 °C",
        meaning="Largest junction temperature.", otherwise="the type's; no verdict",
    )  # fmt: skip
    yield Key(
        path="transistor.rth_ja", form="quantity", kind="thermal_resistance", example="250 K/W",
        meaning="Thermal resistance from junction to ambient of this mounting.",
        otherwise="the type's, else what its power at 25 °C implies; no junction temperature",
    )  # fmt: skip


def _reference() -> Iterable[Key]:
    yield Key(
        path="reference.kind", form="choice", choices=("diode", "led", "zener"), example="diode",
        meaning="Element below the base that holds a voltage: junctions, a light-emitting diode or a Zener diode.",
        otherwise="no reference element, unless one of its other keys is given",
    )  # fmt: skip
    yield Key(
        path="reference.number", form="choice", choices=("1", "2", "3"), default="1", example="2",
        meaning="How many of them in series; the keys below hold for one.",
    )  # fmt: skip
    yield Key(
        path="reference.voltage", form="spread", kind="voltage", example="0.6 V ± 50 mV",
        meaning="Voltage of one at 25 °C and reference.current, from unit to unit.",
        otherwise="of a diode, that of the base-emitter law; anything else has no default",
    )  # fmt: skip
    yield Key(
        path="reference.current", form="quantity", kind="current", example="5 mA",
        meaning="Current at which voltage and slope hold.",
        otherwise="a tenth of the target IC for a diode, 2 mA for an LED, 5 mA for a Zener diode",
    )  # fmt: skip
    yield Key(
        path="reference.tc", form="spread", kind="voltage_per_kelvin", example="-2.2 : -2 : -1.8 mV/K",
        meaning="Temperature coefficient of the voltage of one.",
        otherwise="of a diode, that of the base-emitter law; of others a usual range for their voltage",
    )  # fmt: skip
    yield Key(
        path="reference.slope", form="spread", kind="resistance", example="0 : 60 ohm",
        meaning="Slope resistance of one, dV/dI.",
        otherwise="VT over reference.current for a diode, 0 : 30 ohm for an LED, 0 : 60 ohm for a Zener diode",
    )  # fmt: skip


def _resistors(role: str) -> Iterable[Key]:
    """The keys of ``[resistors]``, or of its table for one role."""
    table = f"resistors.{role}" if role else "resistors"
    of = f" of {role}" if role else ""

    def key(leaf: str, default: str = "", otherwise: str = "", **rest: Any) -> Key:
        short = leaf if leaf in ("series", "stock", "tolerance", "tcr", "range") and not role else ""
        return Key(
            path=f"{table}.{leaf}", short=short, default="" if role else default,
            otherwise="as in [resistors]" if role else otherwise, **rest,
        )  # fmt: skip

    if role:
        yield Key(
            path=f"{table}.values", form="quantities", kind="resistance", example="1k8, 2k",
            meaning=f"Only values that {role} may have: {_ROLE_MEANING[role]}.", otherwise="any value of the list",
        )  # fmt: skip
        yield Key(
            path=f"{table}.use", form="choice", choices=("yes", "no", "either"), example="yes",
            meaning=f"Whether {role} is used where the network can do without it.",
            otherwise="no; tried both ways under any network; yes where values are given",
        )  # fmt: skip
    yield key(
        "series", form="texts", choices=("E3", "E6", "E12", "E24", "E48", "E96", "E192"), example="E24, E96",
        meaning=f"Series of preferred values{of}, one or several together.",
        otherwise="the one that goes with the tolerance",
    )  # fmt: skip
    yield key(
        "stock", form="text", example="drawer.csv",
        meaning=f"File of the values at hand{of}, in place of a series; a tolerance of its own in a row wins.",
        otherwise="values come from the series",
    )  # fmt: skip
    yield key(
        "tolerance", form="quantity", kind="ratio", example="1 %", meaning=f"Tolerance{of}, plus and minus.",
        otherwise="the one that goes with the coarsest series; 1 %",
    )  # fmt: skip
    yield key(
        "tcr", form="spread", kind="temperature_coefficient", rule="symmetric", example="100 ppm/K",
        default="100 ppm/K",
        meaning=f"Temperature coefficient{of}; one value counts plus and minus.",
    )  # fmt: skip
    yield key(
        "life", form="quantity", kind="ratio", example="1 %", default="0 %",
        meaning=f"Change{of} over life, plus and minus.",
    )  # fmt: skip
    yield key(
        "style", form="text", example="0805", meaning=f"Resistor style{of}, a row of the table of resistor styles.",
        otherwise="no style",
    )  # fmt: skip
    yield key(
        "range", form="limit", kind="resistance", rule=">=", example="10 ohm : 10 Mohm", default="10 ohm : 10 Mohm",
        meaning=f"Range of values{of} that the search may take.",
    )  # fmt: skip


def _ambient() -> Iterable[Key]:
    yield Key(
        path="ambient.temperature", form="spread", kind="temperature", rule="ambient", short="temperature",
        example="0 : 25 : 70 °C", default="0 : 25 : 70 °C", meaning="Temperature around the stage.",
    )  # fmt: skip


def _signal() -> Iterable[Key]:
    yield Key(
        path="signal.bypass", form="choice", choices=("full", "none", "part"), default="full", example="full",
        meaning="How much of re a capacitor bypasses for the signal.",
    )  # fmt: skip
    yield Key(
        path="signal.unbypassed", form="quantity", kind="resistance", example="100 ohm",
        meaning="With bypass part: the upper part of re, which carries the signal.", otherwise="none",
    )  # fmt: skip
    yield Key(
        path="signal.load", form="quantity", kind="resistance", example="10 kohm",
        meaning="Load of the output for the signal.", otherwise="no load",
    )  # fmt: skip
    yield Key(
        path="signal.source", form="quantity", kind="resistance", default="0 ohm", example="1 kohm",
        meaning="Resistance of the source of the signal.",
    )  # fmt: skip
    yield Key(
        path="signal.corner", form="quantity", kind="frequency", example="20 Hz",
        meaning="Frequency down to which the bypass capacitor of re has to serve; the answer sizes it.", otherwise="not sized",
    )  # fmt: skip


def _limits() -> Iterable[Key]:
    for rule in RULES.values():
        meaning = rule.meaning[0].upper() + rule.meaning[1:]
        yield Key(
            path=f"limits.{rule.name}", form="limit", kind=rule.kind, rule=rule.sense, short=rule.name,
            meaning=f"{meaning.rstrip('.')}.",
            example=_LIMIT_EXAMPLE.get(rule.name) or _LIMIT_EXAMPLE.get(rule.kind, KINDS[rule.kind].examples[0]),
            otherwise=_LIMIT_OTHERWISE.get(rule.name, "no limit"),
        )  # fmt: skip


def _values() -> Iterable[Key]:
    for role in ROLES:
        yield Key(
            path=f"values.{role}", form="quantity", kind="resistance", short=role, example="15k8",
            meaning=f"Value fitted today as {role}: {_ROLE_MEANING[role]}.", otherwise="not fitted",
        )  # fmt: skip


def _named(keys: Iterable[Key]) -> dict[str, Key]:
    """The keys by path, each with its names; of two keys that want one name the first has it."""
    found = {key.path: key for key in keys}
    owner: dict[str, str] = {key.flat: path for path, key in found.items()}
    for path, key in found.items():
        if key.short and owner.setdefault(key.short, path) != path:
            found[path] = _with(key, short="")
    for path, key in found.items():
        if key.table.count(".") == 0:
            owner.setdefault(key.leaf, path)
    return {
        path: _with(key, names=tuple(dict.fromkeys(
            word for word in (key.short, key.flat, key.leaf) if word and owner.get(word) == path
        )))
        for path, key in found.items()
    }  # fmt: skip


def _with(key: Key, **changes: Any) -> Key:
    return Key(**(vars(key) | changes))


KEYS: Mapping[str, Key] = MappingProxyType(
    _named(
        [
            *_top(),
            *_supply(),
            *_target(),
            *_transistor(),
            *_reference(),
            *_resistors(""),
            *(key for role in ROLES for key in _resistors(role)),
            *_ambient(),
            *_signal(),
            *_limits(),
            *_values(),
        ]
    )
)
"""Every key of a stage by path, in the order of the file."""

NAMES: Mapping[str, str] = MappingProxyType({name: key.path for key in KEYS.values() for name in key.names})
"""Every argument of `Stage` to the path of its key."""

TABLES: tuple[str, ...] = tuple(dict.fromkeys(filter(None, (key.table for key in KEYS.values()))))
"""Every table of a stage file, in the order of the file."""
