"""Every key of a stage, table by table, in the order of the file."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from types import MappingProxyType
from typing import Any

from synth.limits import RULES
from synth.networks import NETWORKS
from synth.quantities import KINDS
from synth.stage_keys.form import Key
from synth.statistics import SPREADS

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
    "lower_corner": "20 Hz",
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
        path="transistor.hfe_rows", form="texts", example="0.1 mA = 40 : 300, 1 mA = 70 : 350, 10 mA = 100 : 300",
        meaning='In place of hfe: hFE at 25 °C against IC, interpolated log-log; "1 mA = >= 70" without a maximum.',
        otherwise="the type's where it has some; hFE does not go with IC",
    )  # fmt: skip
    yield Key(
        path="transistor.va", form="spread", kind="voltage", example="50 : 100 V",
        meaning="Early voltage from unit to unit: hFE goes as VA + VCE.", otherwise="hFE does not go with VCE",
    )  # fmt: skip
    yield Key(
        path="transistor.va_vce", form="quantity", kind="voltage", example="5 V", default="5 V",
        meaning="Collector-emitter voltage at which hFE holds; counts with va alone.", otherwise="the type's; 5 V",
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
        path="transistor.vce_sat_rows", form="texts", example="10 mA = 0.25 V, 100 mA = 0.6 V",
        meaning="In place of vce_sat: VCE(sat) against IC; the row at or above the greatest IC wanted counts.",
        otherwise="vce_sat counts",
    )  # fmt: skip
    yield Key(
        path="transistor.vceo", form="quantity", kind="voltage", example="45 V",
        meaning="Largest collector-emitter voltage; the whole rail counts against it, which stands there at cut-off.",
        otherwise="the type's; no verdict",
    )  # fmt: skip
    yield Key(
        path="transistor.vebo", form="quantity", kind="voltage", example="5 V",
        meaning="Largest reverse emitter-base voltage: at switch-off the base falls, a bypassed emitter stays.",
        otherwise="no verdict",
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
        "pairs", form="choice", choices=("no", "yes", "series", "parallel"), example="yes",
        meaning=f"Whether two parts{of} in series or parallel may take the place of one; true and false serve too.",
        otherwise="no pairs",
    )  # fmt: skip
    if not role:
        yield key(
            "on_board", form="quantities", kind="resistance", example="1k, 10k",
            meaning="Values that the board has already; of equals the candidate with the fewest others comes first.",
            otherwise="none",
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
        meaning="With bypass part: the upper part of re, which carries the signal.",
        otherwise="with a limit on gain both parts of re are chosen, else none",
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
        path="signal.capacitor", form="quantity", kind="capacitance", example="100 uF",
        meaning="Capacitor that bypasses re, for limits.lower_corner.", otherwise="not chosen",
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


def _distribution() -> Iterable[Key]:
    for name, what in SPREADS.items():
        accepted = "uniform, normal or nominal" if name == "reference" else (
            "uniform, normal, log_uniform, nominal, measured values with commas between, or a CSV file with a column value"
        )
        yield Key(
            path=f"distribution.{name}", form="texts", example="normal",
            meaning=f"Distribution {what}: {accepted}.", otherwise="log_uniform" if name == "hfe" else "uniform",
        )  # fmt: skip
    yield Key(
        path="distribution.units", form="quantity", kind="gain", short="units", example="65536",
        meaning="How many units Monte Carlo draws.", otherwise="65536",
    )  # fmt: skip
    yield Key(
        path="distribution.seed", form="quantity", kind="gain", short="seed", example="1",
        meaning="Seed of the draw; 0 is one like any other.", otherwise="1",
    )  # fmt: skip
    yield Key(
        path="distribution.points", form="choice", choices=("sobol", "random"), example="sobol",
        meaning="Scrambled Sobol points, which fill the box evenly, or pseudo-random ones.", otherwise="sobol",
    )  # fmt: skip


def _measured() -> Iterable[Key]:
    for role in ROLES:
        yield Key(
            path=f"measured.{role}", form="spread", kind="resistance", example="15.2 kohm ± 0.2 %",
            meaning=f"Measured resistance of {role} at 25 °C with its uncertainty, in place of its value and tolerance.",
            otherwise="not measured",
        )  # fmt: skip
    yield Key(
        path="measured.hfe", form="spread", kind="gain", example="312 ± 5",
        meaning="Measured DC current gain at 25 °C with its uncertainty, in place of the spread of the type.",
        otherwise="not measured",
    )  # fmt: skip
    yield Key(
        path="measured.vbe", form="spread", kind="voltage", example="0.63 V ± 2 mV",
        meaning="Measured base-emitter voltage at 25 °C and vbe_ic with its uncertainty.", otherwise="not measured",
    )  # fmt: skip
    for rail, of in (("vcc", ""), ("vee", "second "), ("vbb", "base "), ("vload", "load ")):
        yield Key(
            path=f"measured.{rail}", form="spread", kind="voltage", example="12.04 V ± 10 mV",
            meaning=f"Voltage of the {of}supply on the bench; for the readings alone.", otherwise="its nominal value",
        )  # fmt: skip
    yield Key(
        path="measured.temperature", form="spread", kind="temperature", rule="ambient", example="22 : 24 °C",
        meaning="Temperature on the bench; for the readings alone.", otherwise="25 °C",
    )  # fmt: skip
    for node, of in (("vb", "base"), ("ve", "emitter"), ("vc", "collector")):
        yield Key(
            path=f"measured.{node}", form="spread", kind="voltage", example="4.12 V ± 10 mV",
            meaning=f"Voltage of the {of} as a meter reads it against 0 V; compared with what it should be.",
            otherwise="not read",
        )  # fmt: skip


def _values() -> Iterable[Key]:
    for role in ROLES:
        yield Key(
            path=f"values.{role}", form="resistor", kind="resistance", short=role, example="15k8",
            meaning=f"Value fitted today as {role}, or a pair such as 33k + 1k5 or 10k || 22k: {_ROLE_MEANING[role]}.",
            otherwise="not fitted",
        )  # fmt: skip


def _replacement() -> Iterable[Key]:
    """The keys of ``[replacement]``: those of ``[transistor]``, for the one that is to take its place."""
    for key in _transistor():
        meaning = key.meaning[0].lower() + key.meaning[1:]
        yield _with(
            key, path=f"replacement.{key.leaf}", short="to" if key.leaf == "type" else f"to_{key.leaf}", default="",
            meaning=f"Of the transistor that refit puts in its place: {meaning}",
            otherwise="no other type" if key.leaf == "type" else "the type's; without another type as in [transistor]",
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
            *_replacement(),
            *_distribution(),
            *_measured(),
        ]
    )
)
"""Every key of a stage by path, in the order of the file."""

NAMES: Mapping[str, str] = MappingProxyType({name: key.path for key in KEYS.values() for name in key.names})
"""Every argument of `Stage` to the path of its key."""

TABLES: tuple[str, ...] = tuple(dict.fromkeys(filter(None, (key.table for key in KEYS.values()))))
"""Every table of a stage file, in the order of the file."""
