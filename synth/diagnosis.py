"""What the readings of a meter say of a unit on the bench: IC, hFE, and what is to blame if they do not fit.

Interval arithmetic from the accuracy of the readings, the band of every resistor and the spread of the supply: each branch
current is a drop over a resistance, the currents obey Kirchhoff at base, collector and emitter, and a sound transistor obeys
its gain spread and the base-emitter law. A suspect explains the readings if, freed alone, it leaves no contradiction. An
interval may be wider than the truth: a sound unit is never called faulty, but a small fault may hide inside.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from synth.box import Meter
from synth.networks import NETWORKS
from synth.spaces import Space, fitted
from synth.stage import Stage, StageError
from synth.transistor import T0

ROUNDS = 200
"""Contractions after which the intervals are taken as they are [-]."""
READINGS = {"b": "vb", "c": "vc", "e": "ve"}
TRANSISTOR = "transistor"
ROUNDING = 1e-9
"""Relative room for rounding: far below any meter, far above the arithmetic [-]."""


class Span(NamedTuple):
    """An interval [V, A, ohm or -]; it is empty where the low end lies above the high one."""

    low: float
    high: float

    @property
    def empty(self) -> bool:
        """Whether nothing is inside."""
        return self.low > self.high

    def meet(self, other: Span) -> Span:
        """What both hold, with room for rounding.

        Parameters
        ----------
        other : Span
            The other interval, SI.

        Returns
        -------
        Span
            Empty where they share nothing.
        """
        room = ROUNDING * max((abs(x) for x in (*self, *other) if math.isfinite(x)), default=0.0)
        low, high = max(self.low, other.low), min(self.high, other.high)
        if low > high and low - high <= room:
            low = high = 0.5 * (low + high)
        return Span(low, high)

    def plus(self, other: Span) -> Span:
        """Sum of the two.

        Parameters
        ----------
        other : Span
            The other interval, SI.

        Returns
        -------
        Span
            Every sum of one number of each.
        """
        return Span(self.low + other.low, self.high + other.high)

    def __neg__(self) -> Span:
        return Span(-self.high, -self.low)

    def over(self, other: Span) -> Span:
        """Quotient by an interval above zero.

        Parameters
        ----------
        other : Span
            The other interval, SI.

        Returns
        -------
        Span
            Every quotient; an end is infinite where the divisor reaches 0.
        """
        ends = [a / b for a in self for b in other if b > 0.0 and math.isfinite(a)]
        if other.low <= 0.0:
            ends += [math.copysign(math.inf, a) for a in self if a]
        if not ends:
            return ANY
        return Span(min(ends), max(ends))


ANY = Span(-math.inf, math.inf)


def _forward(span: Span) -> Span:
    """What of an interval is not below zero."""
    return Span(max(span.low, 0.0), max(span.high, 0.0))


@dataclass(frozen=True, kw_only=True)
class Suspect:
    """One part that may be to blame.

    `name` is a role, a rail or "transistor"; `explains` tells whether it alone, at fault, fits the readings; `needed` is what
    it would have to be then [ohm or V], None of a transistor; `nominal` what it should be [ohm or V]; `text` says it in
    words.
    """

    name: str
    explains: bool
    needed: Span | None
    nominal: float | None
    text: str


@dataclass(frozen=True, kw_only=True)
class Diagnosis:
    """What the readings say.

    `sound` tells that they fit a unit without a fault; IC, IB [A] and VBE, VCE [V] are what the readings and resistors alone
    leave room for, hFE their ratio [-], `likely_hfe` that within the spread of the type; None where nothing is left.
    """

    sound: bool
    ic: Span | None
    ib: Span | None
    hfe: Span | None
    likely_hfe: Span | None
    vbe: Span | None
    vbe_expected: Span | None
    vce: Span | None
    suspects: tuple[Suspect, ...]

    @property
    def blamed(self) -> tuple[Suspect, ...]:
        """The suspects that explain the readings, none of a sound unit."""
        return () if self.sound else tuple(suspect for suspect in self.suspects if suspect.explains)


def diagnose(stage: Stage) -> Diagnosis:
    """Find what the readings of ``[measured]`` say of a unit.

    Parameters
    ----------
    stage : Stage
        With ``[values]``, the resistors fitted, and the readings ``vb``, ``vc`` and ``ve`` in ``[measured]``; the rails count
        as measured, else with their spread.

    Returns
    -------
    Diagnosis
        IC, hFE and every suspect.

    Raises
    ------
    StageError
        If fewer than two of the three voltages were read, or the network has a reference element or feeds a load of its own.
    """
    read = [name for name in READINGS.values() if name in stage.measured]
    if len(read) < 2:
        accepted = "at least two of measured.vb, measured.vc and measured.ve"
        raise StageError("measured", " ".join(read) or None, "which is too little to tell anything by", accepted)
    space = fitted(stage)
    if space.reference is not None or space.network.sinks:
        accepted = f"one of {', '.join(name for name, form in NETWORKS.items() if form.reference == 'no')}"
        reason = "whose reference element or load no reading of three nodes tells apart"
        raise StageError("network", space.network.name, reason, accepted)
    return _Unit(stage, space).diagnosis()


class _Unit:
    """Node voltages, resistances and laws of one unit, as intervals in NPN signs against 0 V of the network."""

    def __init__(self, stage: Stage, space: Space) -> None:
        self.space, self.device = space, space.transistor
        bench = stage.measured.get("temperature")
        self.t = Span(T0, T0) if bench is None else Span(bench.low, bench.high)
        spreads = {rail: stage.measured.get(rail, spread) for rail, spread in space.rails.items()}
        self.rails = {rail: Span(spread.low, spread.high) for rail, spread in spreads.items()}
        self.nodes = {"0": Span(0.0, 0.0), **self.rails}
        if "vee" in self.rails:
            self.nodes["vee"] = -self.rails["vee"]
        for rail in ("vbb", "vload"):
            self.nodes.setdefault(rail, self.rails["vcc"])
        # A role that is absent joins its two nodes, or parts them.
        self.same = {node: node for node in ("b", "c", "e", "m")}
        self.same["m"] = "0"
        for role in space.network.roles:
            if role.name not in space.roles and role.absent == "short":
                inner, outer = role.nodes if role.nodes[0] in self.same else role.nodes[::-1]
                self.same[inner] = outer
        self.same |= dict(space.network.tied)
        everywhere = Span(min(s.low for s in self.nodes.values()), max(s.high for s in self.nodes.values()))
        mirror = -1.0 if self.device.polarity == "pnp" else 1.0
        zero = self._zero(mirror)
        for node, name in READINGS.items():
            if name in stage.measured:
                ends = [mirror * end for end in (stage.measured[name].low, stage.measured[name].high)]
                self.nodes[node] = Span(min(ends), max(ends)).plus(zero)
            else:
                self.nodes[node] = self.nodes.get(self.same[node], everywhere)
        index = np.zeros((1, len(space.roles)), dtype=np.int32)
        parts = space.box(index, Meter()).parts
        self.ohms: dict[str, Span] = {}
        for name in space.roles:
            ends = [float(x[0]) for t in self.t for x in parts[name].ends(t)]
            self.ohms[name] = Span(min(ends), max(ends))

    def _zero(self, mirror: float) -> Span:
        """What the network calls 0 V, seen from where the meter's lead lies."""
        low = -self.rails["vee"] if "vee" in self.rails else Span(0.0, 0.0)
        ends = {"negative": low, "positive": self.rails["vcc"]}
        if mirror < 0.0:
            ends = {"negative": ends["positive"], "positive": ends["negative"]}
        middle = Span(*(0.5 * (a + b) for a, b in zip(low, self.rails["vcc"], strict=True)))
        return {**ends, "middle": middle, "common": Span(0.0, 0.0)}[self.space.ground]

    def at(self, node: str) -> Span:
        """Voltage of a node of the network."""
        return self.nodes[node]

    def drop(self, role: str) -> Span:
        """Voltage over a resistor from its first node to its second."""
        first, second = self.space.network.role(role).nodes
        return self.at("0" if first == "m" else first).plus(-self.at("0" if second == "m" else second))

    def currents(self, free: Collection[str], sound: bool) -> dict[str, Span] | None:
        """Every current that the readings leave room for; None if they contradict each other."""
        names = self.space.roles
        found = {role: ANY if role in free else self.drop(role).over(self.ohms[role]) for role in names}
        for role in free:
            d = self.drop(role)
            found[role] = Span(0.0 if d.low >= 0.0 else -math.inf, 0.0 if d.high <= 0.0 else math.inf)
        found |= {"ic": Span(-ROUNDING, math.inf), "ib": ANY, "ie": ANY}
        laws = [{"ie": 1.0, "ic": -1.0, "ib": -1.0}]
        for node, own, into in (("c", "ic", 1.0), ("b", "ib", 1.0), ("e", "ie", -1.0)):
            if self.same[node] != node:
                continue
            law = {own: -1.0}
            for role in names:
                first, second = self.space.network.role(role).nodes
                if node in (first, second):
                    law[role] = into * (1.0 if second == node else -1.0)
            laws.append(law)
        for _ in range(ROUNDS):
            before = dict(found)
            for law in laws:
                for name, sign in law.items():
                    rest = Span(0.0, 0.0)
                    for other, factor in law.items():
                        if other != name:
                            rest = rest.plus(found[other] if factor > 0.0 else -found[other])
                    found[name] = found[name].meet(-rest if sign > 0.0 else rest)
            if sound:
                found["ib"] = found["ib"].meet(self._base_current(found["ic"]))
                found["ic"] = found["ic"].meet(self._collector_current(found["ib"]))
            if any(span.empty for span in found.values()):
                return None
            if found == before:
                break
        if sound and self.vbe().meet(self.vbe_expected(found["ic"])).empty:
            return None
        return found

    def _gain(self) -> tuple[Span, float]:
        """HFE and the greatest ICBO on the bench."""
        factors = [float(self.device.gain_factor(t)) for t in self.t]
        hfe = Span(self.device.hfe.low * min(factors), self.device.hfe.high * max(factors))
        if self.device.gain_moves:
            # Rows and Early voltage may move the gain anywhere between their ends.
            least, most = self.device.gain_range(sum(spread.high for spread in self.rails.values()))
            hfe = Span(hfe.low * least, hfe.high * most)
        return hfe, self.device.icbo.high * max(float(self.device.leakage_factor(t)) for t in self.t)

    def _base_current(self, ic: Span) -> Span:
        hfe, icbo = self._gain()
        return Span(max(ic.low, 0.0) / hfe.high - (1.0 + 1.0 / hfe.high) * icbo, ic.high / hfe.low)

    def _collector_current(self, ib: Span) -> Span:
        hfe, icbo = self._gain()
        return Span(max(ib.low, 0.0) * hfe.low, max(ib.high, 0.0) * hfe.high + (hfe.high + 1.0) * icbo)

    def vbe(self) -> Span:
        """Base-emitter voltage as read."""
        return self.at("b").plus(-self.at("e"))

    def vbe_expected(self, ic: Span) -> Span:
        """What the base-emitter law asks for at a current."""
        spread = self.device.vbe
        ends = [max(end, 1e-12) for end in ic if math.isfinite(end)] or [self.device.vbe_ic]
        every = [
            float(self.device.vbe_at(current, t, unit - spread.nominal))
            for current in ends for t in self.t for unit in (spread.low, spread.high)
        ]  # fmt: skip
        return Span(min(every), max(every))

    def diagnosis(self) -> Diagnosis:
        """Everything together."""
        alone = self.currents((), sound=False)
        sound = self.currents((), sound=True) is not None
        suspects = [self._resistor(role) for role in self.space.roles]
        suspects += [self._rail(rail) for rail in self.rails]
        suspects.append(self._transistor(alone))
        best = alone
        if best is None:
            # Whichever of them it is, the truth lies in one of these.
            each = [self.currents([s.name], sound=True) for s in suspects if s.explains and s.name in self.space.roles]
            known = [found for found in each if found is not None]
            if known:
                best = {name: Span(min(f[name].low for f in known), max(f[name].high for f in known)) for name in ("ic", "ib")}
        ic, ib = (best["ic"], best["ib"]) if best is not None else (None, None)
        hfe = None if ic is None or ib is None else _forward(ic).over(_forward(ib))
        expected, _ = self._gain()
        likely = None if hfe is None or hfe.meet(expected).empty else hfe.meet(expected)
        return Diagnosis(
            sound=sound,
            ic=ic,
            ib=ib,
            hfe=hfe,
            likely_hfe=likely,
            vbe=self.vbe(),
            vbe_expected=None if ic is None else self.vbe_expected(ic),
            vce=self.at("c").plus(-self.at("e")),
            suspects=tuple(suspects),
        )

    def _resistor(self, role: str) -> Suspect:
        nominal = float(self.space.lists[role].nominal[0])
        found = self.currents([role], sound=True)
        needed = None
        if found is not None:
            drop, current = self.drop(role), found[role]
            if current.high < 0.0 or (current.low < 0.0 <= -drop.low):
                drop, current = -drop, -current
            needed = _forward(drop).over(_forward(current))
            if needed.low == math.inf or needed == ANY:
                needed = Span(0.0, math.inf)
        explains = needed is not None
        text = "cannot explain the readings" if needed is None else "explains the readings"
        return Suspect(name=role, explains=explains, needed=needed, nominal=nominal, text=text)

    def _rail(self, rail: str) -> Suspect:
        near = [rail, *(n for n in ("vbb", "vload") if rail == "vcc" and n not in self.rails)]
        roles = [role for role in self.space.roles if set(near) & set(self.space.network.role(role).nodes)]
        nominal = self.space.rails[rail].nominal
        found = self._at_any_rail(roles, near)
        needed: Span | None = Span(0.0, math.inf)
        for role in roles:
            if found is None or needed is None:
                needed = None
                break
            first, second = self.space.network.role(role).nodes
            product = [i * r for i in found[role] for r in self.ohms[role] if math.isfinite(i)]
            drop = Span(min(product), max(product)) if len(product) == 4 else ANY
            volts = self.at(second).plus(drop) if first in near else self.at(first).plus(-drop)
            needed = needed.meet(volts if rail != "vee" else -volts)
            needed = None if needed.empty else needed
        if found is None or not roles:
            needed = None
        text = "cannot explain the readings" if needed is None else "explains the readings"
        return Suspect(name=rail, explains=needed is not None, needed=needed, nominal=nominal, text=text)

    def _at_any_rail(self, roles: Collection[str], near: Collection[str]) -> dict[str, Span] | None:
        kept = dict(self.nodes)
        for node in near:
            self.nodes[node] = ANY
        try:
            return self.currents(roles, sound=True)
        finally:
            self.nodes = kept

    def _transistor(self, alone: Mapping[str, Span] | None) -> Suspect:
        if alone is None:
            text = "cannot explain the readings: the currents of the resistors contradict each other whatever it does"
            return Suspect(name=TRANSISTOR, explains=False, needed=None, nominal=None, text=text)
        vbe, expected = self.vbe(), self.vbe_expected(alone["ic"])
        text = "explains the readings"
        if vbe.low > expected.high:
            text += ": VBE is higher than a junction allows, so base or emitter is open"
        elif vbe.high < expected.low and alone["ic"].high > 0.0:
            text += ": VBE is lower than this current needs, so it leaks or is shorted"
        elif self.currents((), sound=True) is None:
            text += ": its hFE lies outside the spread"
        return Suspect(name=TRANSISTOR, explains=True, needed=None, nominal=None, text=text)
