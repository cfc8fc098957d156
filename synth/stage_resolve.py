"""From the texts of a stage to its resolved values: defaults, tables, refusals, and what had to be assumed."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Any, Literal

from synth import catalogue
from synth.catalogue import Derating, TransistorRow
from synth.limits import RULES
from synth.networks import NETWORKS
from synth.preferred import ValueList
from synth.quantities import (
    Interval,
    RestpointError,
    Spread,
    Target,
    format_exact,
    format_quantity,
    format_resistance,
    format_spread,
    parse,
)
from synth.reference import TEST_CURRENT, Reference, usual_figures
from synth.reference import Kind as ReferenceKind
from synth.signal import Bypass, Signal
from synth.stage_keys import KEYS, ROLES, StageError, nearest
from synth.stress import TransistorRatings, transistor_ratings
from synth.transistor import GAP_VOLTAGE, T0, Transistor, thermal_voltage

LARGEST_TOLERANCE = 0.5
HOTTEST = 473.15
"""End of the temperatures at which the laws of the transistor are taken to hold, 200 °C [K]."""

OPEN_GAIN = 5.0
"""Greatest over least gain where only the least is known [-]: common practice for one type without gain bins."""

JUNCTION_ROOM = 10.0
"""Least ratio of the collector current to the saturation current at which the junction law holds [-]."""

FAR_CURRENT = 10.0
"""Ratio of currents from which a printed gain says little about the gain at the stage's own current [-]."""

_GERMANIUM = {"vbe": "0.15 V ± 50 mV", "vbe_ic": "1 mA", "vce_sat": "0.1 V"}
_RAILS = ("vcc", "vee", "vbb", "vload")

_VOLTAGES = ("vce", "vc", "ve")
"""Targets of which a stage has one besides IC."""

_RATINGS = ("vceo", "ic_max", "ptot", "tj_max", "rth_ja")

Use = Literal["yes", "no", "either"]


@dataclass(frozen=True, kw_only=True)
class Assumption:
    """A value that was not given: its key and text as in a stage file, and why it was taken."""

    key: str
    value: str
    why: str


@dataclass(frozen=True, kw_only=True)
class StageWarning:
    """A named warning with its reason."""

    name: str
    text: str


@dataclass(frozen=True, kw_only=True)
class RoleSetting:
    """What the resistor of one role may be.

    Parameters
    ----------
    use : {"yes", "no", "either"}
        Whether the role is used where a network can do without it.
    series : tuple of str
        Series of preferred values; empty where a stock list replaces them.
    stock : Path or None
        Stock list.
    tolerance, life : float
        Tolerance and change over life, plus and minus [-].
    tcr : Spread
        Temperature coefficient [1/K].
    style : str or None
        Resistor style.
    range : Interval
        Range of values that a search may take, both ends finite [ohm].
    values : tuple of float
        Only values that the role may have [ohm]; empty for any.
    """

    use: Use
    series: tuple[str, ...]
    stock: Path | None
    tolerance: float
    tcr: Spread
    life: float
    style: str | None
    range: Interval
    values: tuple[float, ...]


def rival(path: str) -> str | None:
    """The key that cannot be given beside this one.

    Parameters
    ----------
    path : str
        Dotted path of a key.

    Returns
    -------
    str or None
        The other's path, None if there is no such key.
    """
    table, _, leaf = path.rpartition(".")
    other = {"series": "stock", "stock": "series"}.get(leaf)
    return f"{table}.{other}" if other else None


def no_role(name: str, role: str, networks: Sequence[str]) -> StageError:
    """The error that says that no network has a role.

    Parameters
    ----------
    name : str
        Field in which the role was named.
    role : str
        The role.
    networks : sequence of str
        Networks chosen.

    Returns
    -------
    StageError
        To be raised.
    """
    roles = dict.fromkeys(known for network in networks for known in NETWORKS[network].role_names)
    reason = f"which is no role of {' or '.join(networks)}"
    return StageError(name, role, reason, f"one of {', '.join(roles)}", nearest(role, roles))


def needing(role: str, networks: Sequence[str], has_reference: bool) -> list[str]:
    """Networks that have a role and cannot do without it.

    Parameters
    ----------
    role : str
        Name of a role.
    networks : sequence of str
        Where to look.
    has_reference : bool
        Whether a reference element is given.

    Returns
    -------
    list of str
        Their names.
    """
    forms = {name: NETWORKS[name] for name in networks}
    return [
        name
        for name, form in forms.items()
        if any(part.name == role and not form.optional(part, has_reference) for part in form.roles)
    ]


def band(setting: RoleSetting) -> tuple[float, float, float]:
    """Band of a resistor as three figures.

    Parameters
    ----------
    setting : RoleSetting
        What it may be.

    Returns
    -------
    tuple of float
        Tolerance [-], largest temperature coefficient of either sign [1/K] and change over life [-].
    """
    return setting.tolerance, max(abs(setting.tcr.low), abs(setting.tcr.high)), setting.life


def resolve(given: Mapping[str, str], folder: Path) -> dict[str, Any]:
    """The content of a stage.

    Parameters
    ----------
    given : mapping of str to str
        Text of every key given, by dotted path.
    folder : Path
        Where the paths in it start.

    Returns
    -------
    dict
        Every attribute of `synth.stage.Stage` by name, SI.

    Raises
    ------
    StageError
        If the stage contradicts itself.
    """
    return _Resolver(given, folder).resolve()


class _Resolver:
    """Turns the texts given into the content of a stage, and notes what it had to assume."""

    def __init__(self, given: Mapping[str, str], folder: Path) -> None:
        self.given = given
        self.folder = folder
        self.assumed: dict[str, Assumption] = {}
        self.notes: list[Assumption] = []
        self.warnings: list[StageWarning] = []

    @property
    def has_reference(self) -> bool:
        """Whether a reference element is given."""
        return any(KEYS[path].table == "reference" for path in self.given)

    def resolve(self) -> dict[str, Any]:
        """Content of every attribute of the stage."""
        rails = self.rails()
        networks, any_network = self.networks(rails)
        ic, voltages = self.targets(networks, rails)
        # Never 0: `targets` refuses a stage without a target for IC.
        current = ic.nominal or 0.0
        temperature = self.temperature()
        transistor = self.transistor(current)
        self.check_junction(transistor, current, temperature.high)
        vce = voltages.get("vce")
        if vce is not None and vce.nominal is not None and vce.nominal <= transistor.vce_sat:
            least = format_quantity(transistor.vce_sat, "voltage")
            reason = f"which is no more than VCE(sat) = {least}: a saturated switch is set by forced gain, not by a Q-point"
            raise self.refusal("target.vce", reason, f"more than {least}")
        reference = self.reference(networks, transistor, current, rails)
        load_rail = rails.get("vload", rails["vcc"]) if any(NETWORKS[name].sinks for name in networks) else None
        roles = self.roles(networks, any_network, temperature)
        ratings = self.ratings()
        has_styles = any(setting.style for setting in roles.values())
        return {
            "name": self.value("name") or "stage",
            "networks": networks,
            "any_network": any_network,
            "rails": MappingProxyType(rails),
            "ground": self.take("supply.ground", "middle" if "vee" in rails else "negative"),
            "ic": ic,
            "voltages": MappingProxyType(voltages),
            "transistor": transistor,
            "reference": reference,
            "ratings": ratings,
            "derating": self.policy(has_styles or ratings != TransistorRatings()),
            "signal": self.signal(),
            "corner": self.corner(),
            "temperature": temperature,
            "limits": MappingProxyType(self.limits(current, transistor, reference, load_rail, has_styles, ratings)),
            "values": MappingProxyType(self.fitted()),
            "roles": MappingProxyType(roles),
            "assumed": (*(self.assumed[path] for path in KEYS if path in self.assumed), *self.notes),
            "warnings": tuple(self.warnings),
            "given": MappingProxyType({path: self.given[path] for path in KEYS if path in self.given}),
            "folder": self.folder,
            "_stock": MappingProxyType(self.stock_lists(roles)),
        }

    def value(self, path: str) -> Any:
        """Value of a key, None where it is not given."""
        return KEYS[path].read(self.given[path]) if path in self.given else None

    def take(self, path: str, text: str = "", why: str = "not given") -> Any:
        """Value of a key, by default that of a text, which is then listed as assumed."""
        if path in self.given:
            return self.value(path)
        self.assumed[path] = Assumption(key=path, value=text or KEYS[path].default, why=why)
        return KEYS[path].read(self.assumed[path].value)

    def assume(self, path: str, value: Any, why: str) -> Any:
        """A value as listed under assumed, whether or not the key is given."""
        self.assumed[path] = Assumption(key=path, value=KEYS[path].write(value), why=why)
        return value

    def refusal(self, path: str, reason: str, accepted: str, *near: str) -> StageError:
        return StageError(path, self.given.get(path), reason, accepted, near)

    # Supply, networks, targets

    def rails(self) -> dict[str, Spread]:
        if "supply.vcc" not in self.given:
            raise self.refusal("supply.vcc", "which is not given", KEYS["supply.vcc"].accepted)
        rails: dict[str, Spread] = {rail: self.value(f"supply.{rail}") for rail in _RAILS if f"supply.{rail}" in self.given}
        for rail, spread in rails.items():
            if spread.low <= 0.0:
                reason = f"which goes down to {format_exact(spread.low, 'voltage')}"
                raise self.refusal(f"supply.{rail}", reason, "a magnitude above 0 V")
        return rails

    def networks(self, rails: Mapping[str, Spread]) -> tuple[tuple[str, ...], bool]:
        path = "network"
        named: tuple[str, ...] = self.take(path)
        fits = {name: [rail for rail in NETWORKS[name].rails if rail not in rails] for name in NETWORKS}
        has_voltage = any(f"target.{quantity}" in self.given for quantity in _VOLTAGES)
        unused = [role for role in ROLES if self.value(f"resistors.{role}.use") == "no"]
        if "any" not in named:
            found = named
        elif len(named) > 1:
            raise self.refusal(path, "which names others beside any", "any alone, or a list without it", "any")
        else:
            found = tuple(name for name, missing in fits.items() if not missing)
            found = tuple(name for name in found if not any(needing(role, [name], self.has_reference) for role in unused))
            # A sink leaves VCE to its load: it meets a request for IC alone, and no other network does.
            found = tuple(name for name in found if NETWORKS[name].sinks != has_voltage)
            if "target.vc" in self.given:
                found = tuple(name for name in found if "c" not in NETWORKS[name].tied)
            found = tuple(name for name in found if self.has_reference or NETWORKS[name].reference != "needed")
        for name in found:
            for rail in fits[name]:
                needed = KEYS[f"supply.{rail}"]
                raise StageError(needed.path, None, f"is not given, but network {name} needs it", needed.accepted)
            if NETWORKS[name].reference == "needed" and not self.has_reference:
                accepted = '[reference] and below it kind = "diode", or another network'
                raise StageError("reference.kind", None, f"is not given, but network {name} needs it", accepted)
        if self.has_reference and not any(NETWORKS[name].reference != "no" for name in found):
            text = f"[reference] is given, but {' or '.join(found)} does not use it."
            self.warnings.append(StageWarning(name="unused_reference", text=text))
        for role in unused:
            if (needed_by := needing(role, found or tuple(NETWORKS), self.has_reference)) or not found:
                reason = f"without which {' or '.join(needed_by)} cannot do"
                raise self.refusal(f"resistors.{role}.use", reason, "yes, or a network that can do without it", "yes")
        for rail in rails:
            if not any(rail in (*NETWORKS[name].rails, *NETWORKS[name].optional_rails) for name in found):
                text = f"supply.{rail} is given, but {' or '.join(found)} does not use it"
                self.warnings.append(StageWarning(name="unused_rail", text=text))
        self.check_roles(tuple(NETWORKS) if "any" in named else found)
        return found, "any" in named

    def check_roles(self, networks: Sequence[str]) -> None:
        """Refuse keys for roles that none of the networks has."""
        known = {role for name in networks for role in NETWORKS[name].role_names}
        for path in self.given:
            key = KEYS[path]
            role = key.leaf if key.table == "values" else key.table.removeprefix("resistors.")
            if role in ROLES and role not in known:
                raise no_role(path, role, networks)

    def targets(self, networks: Sequence[str], rails: Mapping[str, Spread]) -> tuple[Target, dict[str, Target]]:
        if "target.ic" not in self.given:
            raise self.refusal("target.ic", "which is not given", KEYS["target.ic"].accepted)
        voltages = {quantity: self.value(f"target.{quantity}") for quantity in _VOLTAGES if f"target.{quantity}" in self.given}
        ic = self.value("target.ic")
        sinks = [name for name in networks if NETWORKS[name].sinks]
        if len(voltages) > 1:
            first, second = list(voltages)[:2]
            raise self.refusal(f"target.{second}", f"but target.{first} is given too", "one of vce, vc and ve")
        tied = [name for name in networks if "c" in NETWORKS[name].tied]
        if "vc" in voltages and tied:
            raise self.refusal("target.vc", f"but the collector of {tied[0]} sits on its rail", "target.vce or target.ve")
        if sinks and len(sinks) < len(networks):
            accepted = "a sink alone, or networks without one"
            raise self.refusal("network", f"of which {' and '.join(sinks)} leaves VCE to its load", accepted)
        if sinks and "vce" in voltages:
            accepted = "target.ic alone or with target.ve, and limits.compliance for what the load may take"
            raise self.refusal("target.vce", f"which means nothing for {sinks[0]}: the load decides it", accepted)
        if not voltages and not sinks:
            raise self.refusal("target.vce", "which is not given", KEYS["target.vce"].accepted)
        if ic.nominal is None:
            raise self.refusal("target.ic", "which is a window without a target", "a target such as '2 mA' or '2 mA ± 15 %'")
        for path, target in {"target.ic": ic, **{f"target.{quantity}": t for quantity, t in voltages.items()}}.items():
            kind = KEYS[path].kind
            least = target.high if target.nominal is None else target.nominal
            if least <= 0.0 or -math.inf < target.low < 0.0:
                worst = min(value for value in (target.low, least) if value > -math.inf)
                reason = f"which goes down to {format_exact(worst, kind)}"
                accepted = f"a magnitude above 0 {'A' if kind == 'current' else 'V'}, for an npn and a pnp alike"
                raise self.refusal(path, reason, accepted)
        span = max(sum(rails[rail].nominal for rail in NETWORKS[name].rails) for name in networks)
        for quantity, target in voltages.items():
            wanted = target.low if target.nominal is None else target.nominal
            if wanted >= span:
                reason = f"which is not below the {format_quantity(span, 'voltage')} between the rails"
                accepted = f"less than {format_quantity(span, 'voltage')}, or a higher supply"
                raise self.refusal(f"target.{quantity}", reason, accepted)
        return ic, voltages

    def temperature(self) -> Spread:
        path = "ambient.temperature"
        spread: Spread = self.take(path)
        if spread.low <= 0.0 or spread.high > HOTTEST:
            inside = Spread(*(min(max(value, 218.15), HOTTEST) for value in (spread.low, spread.nominal, spread.high)))
            reason = "which goes beyond the temperatures at which the laws hold"
            raise self.refusal(path, reason, "above -273.15 °C and up to 200 °C", format_spread(inside, "temperature"))
        return spread

    # Transistor

    def transistor(self, current: float) -> Transistor:
        kind = self.value("transistor.type")
        row = None if kind is None else catalogue.transistor(kind)
        material = self.word("material", row)
        polarity = self.word("polarity", row)
        usual = _GERMANIUM if material == "germanium" else {}
        hfe = self.gain(row, current)
        vbe, vbe_ic = self.base_emitter(row, usual)
        model: Literal["junction", "fixed"] = self.take("transistor.vbe_model")
        icbo: Spread = self.figure("icbo", row and row.icbo_spread, row, "icbo_max_a")
        vce_sat: float = self.figure("vce_sat", row and row.vce_sat_max_v, row, "vce_sat_max_v", text=usual.get("vce_sat", ""))
        if vce_sat < 0.0:
            raise self.refusal("transistor.vce_sat", "which is negative", "a magnitude of 0 V or more")
        if model == "junction" and vbe.high >= GAP_VOLTAGE[material]:
            gap = format_exact(GAP_VOLTAGE[material], "voltage")
            reason = f"which reaches the {gap} of the gap of {material}, where the junction law ends"
            raise self.refusal("transistor.vbe", reason, f"less than {gap}, or transistor.vbe_model 'fixed'")
        return Transistor(
            polarity=polarity,
            material=material,
            hfe=hfe,
            vbe=vbe,
            vbe_ic=vbe_ic,
            vbe_model=model,
            icbo=icbo,
            icbo_hot=self.hot_limit(row, icbo),
            vce_sat=vce_sat,
            type="" if row is None else row.type,
        )

    def word(self, leaf: str, row: TransistorRow | None) -> Any:
        """Polarity or material, which a type fixes."""
        path = f"transistor.{leaf}"
        if row is None:
            return self.take(path)
        fixed = getattr(row, leaf)
        if self.value(path) not in (None, fixed):
            raise self.refusal(path, f"but {row.type} is {fixed}", f"{fixed}, or another type", fixed)
        return self.take(path, fixed, _from_table(row, leaf))

    def figure(self, leaf: str, printed: Any, row: TransistorRow | None, *fields: str, text: str = "") -> Any:
        """A figure of the transistor: as given, else as the table prints it, else of a text."""
        path = f"transistor.{leaf}"
        if row is None:
            return self.take(path, text)
        if printed is None:
            return self.take(path, text, f"not given, and the table of transistors sets none for {row.type}")
        return self.take(path, KEYS[path].write(printed), _from_table(row, *fields))

    def gain(self, row: TransistorRow | None, current: float) -> Spread:
        path = "transistor.hfe"
        text = self.given.get(path, "").strip().replace("≥", ">=")
        hfe: Spread
        if text.startswith(">="):
            hfe = self.open_gain(parse(text[2:], "gain", path), "no maximum given")
        elif text:
            hfe = self.value(path)
        elif row is None:
            accepted = f"a gain such as {KEYS[path].example!r}, or a transistor.type such as 'BC847B'"
            raise self.refusal(path, "which is not given and has no default", accepted)
        else:
            self.warn_of_far_gain(row, current)
            greatest: float | None = row.hfe_max
            if greatest is None:
                hfe = self.open_gain(row.hfe_min, f"no maximum printed for {row.type}")
            else:
                hfe = self.take(path, format_spread(row.hfe_spread, "gain"), _from_table(row, "hfe_min", "hfe_max"))
        if hfe.low <= 0.0:
            raise self.refusal(path, f"whose least gain is {hfe.low:g}", "a least gain above 0", KEYS[path].example)
        return hfe

    def open_gain(self, least: float, why: str) -> Spread:
        key = KEYS["transistor.hfe"]
        hfe: Spread = key.read(" : ".join(format_exact(end, key.kind) for end in (least, least * OPEN_GAIN)))
        self.assume(key.path, hfe, f"{why}: up to {OPEN_GAIN:g} times the minimum")
        return hfe

    def warn_of_far_gain(self, row: TransistorRow, current: float) -> None:
        printed = [row.hfe_ic_a, *(point.ic_a for point in catalogue.hfe_points(row.type))]
        close = min(printed, key=lambda tested: abs(math.log(tested / current)))
        if max(close / current, current / close) >= FAR_CURRENT:
            near, own = format_quantity(close, "current"), format_quantity(current, "current")
            text = f"the table prints hFE of {row.type} at {near}, far from {own}: give transistor.hfe at that current"
            self.warnings.append(StageWarning(name="gain_test_current", text=text))

    def base_emitter(self, row: TransistorRow | None, usual: Mapping[str, str]) -> tuple[Spread, float]:
        """VBE and the current at which it holds."""
        printed = row and row.vbe_spread
        given = ["transistor.vbe" in self.given, "transistor.vbe_ic" in self.given]
        if row is not None and printed is not None and given == [False, True]:
            at = format_exact(row.vbe_ic_a, "current")
            reason = f"but VBE comes from the table of transistors, at {at}"
            raise self.refusal("transistor.vbe_ic", reason, "this key together with transistor.vbe", at)
        vbe = self.figure("vbe", printed, row, "vbe_min_v", "vbe_max_v", text=usual.get("vbe", ""))
        at_current = None if row is None or printed is None else row.vbe_ic_a
        vbe_ic = self.figure("vbe_ic", at_current, row, "vbe_ic_a", text=usual.get("vbe_ic", ""))
        return vbe, vbe_ic

    def hot_limit(self, row: TransistorRow | None, icbo: Spread) -> tuple[float, float] | None:
        """Printed hot limit of the leakage, unless the leakage given is above it."""
        if row is None or row.icbo_hot is None:
            return None
        limit, temperature = row.icbo_hot
        text = f"{format_exact(limit, 'current')} at {format_exact(temperature, 'temperature')}"
        if icbo.high > limit:
            text = f"the leakage given exceeds the hot limit of {row.type}, {text}, so it is taken to double per 10 K"
            self.warnings.append(StageWarning(name="hot_leakage", text=text))
            return None
        why = f"hot limit {_from_table(row, 'icbo_hot_max_a', 'icbo_hot_k')}"
        self.notes.append(Assumption(key="transistor.icbo", value=text, why=why))
        return row.icbo_hot

    def check_junction(self, transistor: Transistor, current: float, hottest: float) -> None:
        saturation = float(transistor.saturation_current(hottest))
        if transistor.vbe_model == "junction" and current <= JUNCTION_ROOM * saturation:
            at = format_quantity(hottest, "temperature")
            least = format_quantity(JUNCTION_ROOM * saturation, "current")
            raise self.refusal(
                "target.ic",
                f"which is within {JUNCTION_ROOM:g} times of the saturation current,"
                f" {format_quantity(saturation, 'current')} at {at}: the junction law does not hold",
                f"more than {least}, or an ambient.temperature that stays below {at}",
            )

    def reference(
        self, networks: Sequence[str], transistor: Transistor, current: float, rails: Mapping[str, Spread]
    ) -> Reference | None:
        """The reference element, if one is given and a network has a place for it."""
        given = [path for path in self.given if KEYS[path].table == "reference"]
        if not given or not any(NETWORKS[name].reference != "no" for name in networks):
            return None
        kind: ReferenceKind = self.take("reference.kind", "diode")
        count = int(self.take("reference.number"))
        own = TEST_CURRENT.get(kind)
        text, why = (own, "not given") if own else (format_exact(current / 10.0, "current"), "a tenth of the target IC")
        at: float = self.take("reference.current", text, why)
        if at <= 0.0:
            raise self.refusal("reference.current", "which is no current", "a current above 0 A", text)
        if kind != "diode" and "reference.voltage" not in self.given:
            example = "'1.8 V ± 0.1 V'" if kind == "led" else "'5.1 V ± 5 %'"
            accepted = f"the voltage of the {kind} at its test current, such as {example}"
            raise self.refusal("reference.voltage", f"which is not given and has no default for {kind}", accepted)
        usual = usual_figures(kind, transistor, at, self.value("reference.voltage"))
        voltage: Spread = self.take("reference.voltage", *usual["voltage"])
        tc: Spread = self.take("reference.tc", *usual["tc"])
        slope: Spread = self.take("reference.slope", *usual["slope"])
        if voltage.low <= 0.0:
            raise self.refusal("reference.voltage", "which goes down to 0 V", "a magnitude above 0 V")
        if count * voltage.low >= rails["vcc"].high:
            most_supply = format_quantity(rails["vcc"].high, "voltage")
            reason = f"which is not below the supply of at most {most_supply}: no current ever reaches the reference"
            raise self.refusal("reference.voltage", reason, f"less than {most_supply} for all of them together")
        if slope.low < 0.0:
            raise self.refusal("reference.slope", "which is negative", "a resistance of 0 ohm or more")
        return Reference(
            kind=kind,
            voltage=Spread(*(count * end for end in (voltage.low, voltage.nominal, voltage.high))),
            current=at,
            tc=Spread(*(count * end for end in (tc.low, tc.nominal, tc.high))),
            slope=Spread(*(count * end for end in (slope.low, slope.nominal, slope.high))),
        )

    def ratings(self) -> TransistorRatings:
        """What is known of the transistor's ratings: the type's, with the keys given in their place."""
        kind = self.value("transistor.type")
        given = {leaf: self.value(f"transistor.{leaf}") for leaf in _RATINGS if f"transistor.{leaf}" in self.given}
        for leaf, figure in given.items():
            if figure <= 0.0:
                example = KEYS[f"transistor.{leaf}"].example
                raise self.refusal(f"transistor.{leaf}", "which is no rating", "a rating above 0", example)
        found = TransistorRatings()
        if kind is not None:
            found = transistor_ratings(catalogue.transistor(kind), given.get("rth_ja"))
        if "ptot" in given:
            given["ptot_ambient"] = T0
        if (hottest := given.get("tj_max", found.tj_max)) is not None and hottest <= T0:
            raise self.refusal("transistor.tj_max", "which is no more than 25 °C", "a temperature above that", "150 °C")
        return dataclasses.replace(found, **given)

    def policy(self, is_needed: bool) -> Derating:
        """The derating policy; assumed only where a rating asks for one."""
        key = KEYS["derating"]
        name: str = self.take("derating") if is_needed else self.value("derating") or key.default
        try:
            return catalogue.derating(name)
        except RestpointError:
            near = nearest(name, catalogue.deratings())
            accepted = f"one of {', '.join(catalogue.deratings())}"
            raise self.refusal("derating", "which is unknown", accepted, *near) from None

    def signal(self) -> Signal:
        """What the signal meets."""
        bypass: Bypass = self.value("signal.bypass") or "full"
        unbypassed = self.value("signal.unbypassed")
        if bypass == "part" and unbypassed is None:
            accepted = "the resistance of re that carries the signal, such as '100 ohm'"
            raise self.refusal("signal.unbypassed", "which is not given, but signal.bypass is part", accepted)
        if bypass != "part" and unbypassed is not None:
            raise self.refusal("signal.unbypassed", f"but signal.bypass is {bypass}", "this key with bypass part alone")
        for leaf, figure in (("unbypassed", unbypassed), ("load", self.value("signal.load"))):
            if figure is not None and figure <= 0.0:
                raise self.refusal(f"signal.{leaf}", "which is no resistance", "a resistance above 0 ohm")
        return Signal(
            bypass=bypass, unbypassed=unbypassed, load=self.value("signal.load"), source=self.value("signal.source") or 0.0
        )

    def corner(self) -> float | None:
        """Frequency that the bypass capacitor is sized for."""
        corner: float | None = self.value("signal.corner")
        if corner is not None and corner <= 0.0:
            raise self.refusal("signal.corner", "which is no frequency", "a frequency above 0 Hz", "20 Hz")
        return corner

    # Resistors, limits, values

    def roles(self, networks: Sequence[str], any_network: bool, temperature: Spread) -> dict[str, RoleSetting]:
        common = self.resistor("", None)
        roles = {name for network in networks for name in NETWORKS[network].role_names}
        settings = {}
        for role in filter(roles.__contains__, ROLES):
            values: tuple[float, ...] = self.value(f"resistors.{role}.values") or ()
            if values and min(values) <= 0.0:
                raise self.refusal(f"resistors.{role}.values", "which goes down to 0 ohm", "resistances above 0 ohm")
            forms = [(NETWORKS[name], part) for name in networks for part in NETWORKS[name].roles if part.name == role]
            optional = any(form.optional(part, self.has_reference) for form, part in forms)
            use: Use = self.use(role, bool(values), any_network) if optional else "yes"
            setting: RoleSetting = dataclasses.replace(self.resistor(role, common), use=use, values=values)
            rise = max(abs(temperature.low - T0), abs(temperature.high - T0))
            tolerance, tcr, life = band(setting)
            if tolerance + life + tcr * rise >= 1.0:
                raise self.refusal(
                    self.source(role, "tcr") or "resistors.tcr",
                    f"which with tolerance and life takes {role} down to 0 ohm over the temperatures",
                    "a band of less than 100 % in all",
                )
            settings[role] = setting
        return settings

    def use(self, role: str, has_values: bool, any_network: bool) -> Any:
        if role == "re" and "target.ve" in self.given:
            use = self.take("resistors.re.use", "yes", "target.ve is given")
            if use != "yes":
                raise self.refusal("resistors.re.use", "but target.ve is the drop of re", "yes, or a target.vce", "yes")
            return use
        if has_values:
            return self.take(f"resistors.{role}.use", "yes", "its values are given")
        if any_network:
            return self.take(f"resistors.{role}.use", "either", "any network was asked for")
        return self.take(f"resistors.{role}.use", "no")

    def source(self, role: str, leaf: str) -> str:
        """Path of the key that sets something for a role: its own, else the common one; "" where neither is given."""
        for table in (f"resistors.{role}", "resistors") if role else ("resistors",):
            path = f"{table}.{leaf}"
            if path in self.given:
                return path
            if rival(path) in self.given:
                return ""
        return ""

    def resistor(self, role: str, common: RoleSetting | None) -> RoleSetting:
        """What ``[resistors]`` says, for one role or (role "") for all; `common` is what it says for all."""
        table = f"resistors.{role}" if role else "resistors"

        def setting(leaf: str) -> Any:
            if path := self.source(role, leaf):
                return self.value(path)
            return self.take(f"{table}.{leaf}") if common is None else getattr(common, leaf)

        def inferred(leaf: str, value: Any, why: str) -> Any:
            # A role takes over what was inferred for all: listed once.
            is_known = common is not None and getattr(common, leaf) == value
            return value if is_known else self.assume(f"{table}.{leaf}", value, why)

        if f"{table}.series" in self.given and f"{table}.stock" in self.given:
            raise self.refusal(f"{table}.stock", f"but {table}.series is given too", "one of the two")
        series: tuple[str, ...] = self.value(self.source(role, "series")) or ()
        stock: str | None = self.value(self.source(role, "stock"))
        tolerance: float | None = self.value(path := self.source(role, "tolerance"))
        if tolerance is None and series:
            coarsest = max(series, key=catalogue.series_tolerance)
            tolerance = inferred("tolerance", catalogue.series_tolerance(coarsest), f"goes with {coarsest}")
        elif tolerance is None:
            tolerance = inferred("tolerance", 0.01, "not given")
        elif not 0.0 < tolerance <= LARGEST_TOLERANCE:
            raise self.refusal(path, "which is out of range", "above 0 % and up to 50 %", "1 %")
        if not series and stock is None:
            why = f"goes with a tolerance of {format_exact(tolerance, 'ratio')}" if path else "not given"
            series = inferred("series", (catalogue.tolerance_series(tolerance),), why)
        life: float = setting("life")
        if not 0.0 <= life <= LARGEST_TOLERANCE:
            raise self.refusal(self.source(role, "life"), "which is out of range", "0 % to 50 %", "0 %")
        return RoleSetting(
            use="yes",
            series=series,
            stock=None if stock is None else self.folder / stock,
            tolerance=tolerance,
            tcr=setting("tcr"),
            life=life,
            style=self.style(self.source(role, "style")),
            range=self.range(setting("range"), self.source(role, "range")),
            values=(),
        )

    def style(self, path: str) -> str | None:
        if not path:
            return None
        known = catalogue.resistor_styles()
        try:
            return catalogue.resistor_style(self.value(path)).name
        except RestpointError:
            near = nearest(self.given[path], known)
            raise self.refusal(path, "which is unknown", "a row of the table of resistor styles", *near) from None

    def range(self, given: Interval, path: str) -> Interval:
        """The range with its open ends closed."""
        usual: Interval = KEYS["resistors.range"].read(KEYS["resistors.range"].default)
        low = given.low if given.low > -math.inf else usual.low
        high = given.high if given.high < math.inf else usual.high
        if not 0.0 < low <= high:
            closed = f"{format_resistance(low)} : {format_resistance(high)}"
            reason = f"which with its open end closed is {closed}" if low > high else "which goes down to 0 ohm"
            raise self.refusal(path, reason, "low : high, above 0 ohm", KEYS["resistors.range"].default)
        return Interval(low, high)

    def stock_lists(self, roles: Mapping[str, RoleSetting]) -> dict[str, ValueList]:
        """The whole stock list of each role that has one; a list that roles share is read once."""
        read: dict[tuple[Path, float, float, float], ValueList] = {}
        lists = {}
        for role, setting in roles.items():
            if setting.stock is not None:
                tolerance, tcr, life = figures = band(setting)
                if (key := (setting.stock, *figures)) not in read:
                    read[key] = ValueList.from_stock(setting.stock, tolerance=tolerance, tcr=tcr, life=life)
                lists[role] = read[key]
        return lists

    def limits(
        self,
        current: float,
        transistor: Transistor,
        reference: Reference | None,
        load_rail: Spread | None,
        has_styles: bool,
        ratings: TransistorRatings,
    ) -> dict[str, Interval]:
        least_base = transistor.hfe.low * float(thermal_voltage(T0)) / current
        usual = {
            "bleeder_current": (Interval(-math.inf, current / 10.0), "a tenth of the target IC"),
            "collector_share": (Interval(0.5, math.inf), "half the voltage of rc and re"),
            "base_resistance": (Interval(least_base, math.inf), "hFE min times VT over the target IC"),
        }
        if load_rail is not None:
            usual["compliance"] = (Interval(load_rail.nominal / 3.0, math.inf), "a third of the load's rail")
        if reference is not None:
            most = 2.0 if reference.kind == "diode" else 5.0
            line = Interval(reference.current / 2.0, reference.current * most)
            usual["reference_current"] = (line, f"half to {most:g} times its test current, where its straight line holds")
        whole = Interval(-math.inf, 1.0)
        if has_styles:
            usual["resistor_stress"] = (whole, "all that the derating policy allows")
        if ratings != TransistorRatings():
            usual["transistor_stress"] = (whole, "all that the derating policy allows")
        limits: dict[str, Interval] = {}
        for name in RULES:
            path = f"limits.{name}"
            limit: Interval | None = self.value(path)
            if path not in self.given and name in usual:
                value, why = usual[name]
                limit = self.take(path, _rounded(value, KEYS[path].kind), f"not given: {why}") and value
            if limit is not None:
                limits[name] = limit
        return limits

    def fitted(self) -> dict[str, float]:
        values = {role: self.value(f"values.{role}") for role in ROLES if f"values.{role}" in self.given}
        for role, ohm in values.items():
            if ohm <= 0.0:
                raise self.refusal(f"values.{role}", "which is no resistor", "a resistance above 0 ohm")
        return values


def _rounded(limit: Interval, kind: str) -> str:
    if math.isfinite(limit.low) and math.isfinite(limit.high):
        return " : ".join(format_quantity(end, kind) for end in (limit.low, limit.high))
    is_least = math.isinf(limit.high)
    return f"{'>=' if is_least else '<='} {format_quantity(limit.low if is_least else limit.high, kind)}"


def _from_table(row: TransistorRow, *fields: str) -> str:
    evidence = "memory" if "memory" in map(row.evidence_of, fields) else "seen"
    return f"from the table of transistors (evidence: {evidence})"
