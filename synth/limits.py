"""One registry of limits: what each is, which way it binds, where it is judged and what it measures.

Stage keys, options, verdicts and search all read `RULES`; a limit that is not here does not exist.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from synth.box import Box, Values
from synth.catalogue import Derating, ResistorStyle, derating
from synth.measures import POWER_OF_TRANSISTOR
from synth.networks.form import Array, Network, Value
from synth.quantities import Interval
from synth.reference import Reference
from synth.signal import CORNER, Signal
from synth.stress import TransistorRatings, allowed_dissipation, allowed_ic, allowed_power, allowed_vce, allowed_veb
from synth.transistor import CUT_OFF_CURRENT, T0

Sense = Literal[">=", "<="]
Judged = Literal["nominal", "box"]

SLACK = 1e-12
"""Relative slack of a comparison: equality passes, whatever the last bit of the arithmetic says."""


@dataclass(frozen=True, kw_only=True)
class Surroundings:
    """What a network is built from, as far as limits ask for it.

    Parameters
    ----------
    rails, roles : collection of str
        Rails given and roles used.
    reference : Reference, optional
        The reference element, where the network has one.
    vce_sat : float
        VCE(sat) [V].
    hot : float
        Hottest ambient [K].
    styles : mapping of str to ResistorStyle
        Style of each role that has one.
    paired : collection of str
        Roles that may have two parts, of which each has to bear its own share.
    ratings : TransistorRatings
        What is known of the transistor.
    derating : Derating, optional
        Policy that ratings are judged by; None judges none.
    signal : Signal
        What the signal meets.
    """

    rails: Collection[str]
    roles: Collection[str]
    reference: Reference | None = None
    vce_sat: float = 0.0
    hot: float = T0
    styles: Mapping[str, ResistorStyle] = field(default_factory=dict)
    paired: Collection[str] = ()
    ratings: TransistorRatings = field(default_factory=TransistorRatings)
    derating: Derating | None = None
    signal: Signal = field(default_factory=Signal)


@dataclass(frozen=True, kw_only=True)
class LimitRule:
    """One limit.

    Parameters
    ----------
    name, meaning : str
        Key in ``[limits]`` and option; one sentence.
    kind : str
        Kind of quantity, as `synth.quantities` names it.
    sense : {">=", "<="}
        What a bare value means.
    judged : {"nominal", "box"}
        A shape rule holds at nominal values, any other limit over the whole box.
    sums : callable, optional
        ``sums(network, around)``: the measured value is the worst of these sums of quantities (see `Box.measure`); empty
        where the limit does not apply.
    offset : callable, optional
        ``offset(around)``: what is subtracted from the sum [A or V].
    static : callable, optional
        ``static(network, r)`` for a limit on the resistances alone, with its signs in `static_signs`; None where it does
        not apply.
    static_signs : callable, optional
        ``static_signs(network)``: the sign of the measured value along each role that matters.
    parts : callable, optional
        ``parts(network, around)``: for a limit on the used share of several ratings, the rating of each with its name, kind,
        sum of quantities and allowed value.
    """

    name: str
    meaning: str
    kind: str
    sense: Sense
    judged: Judged
    sums: Callable[[Network, Surroundings], tuple[tuple[str, ...], ...]] | None = None
    offset: Callable[[Surroundings], float] | None = None
    static: Callable[[Network, Mapping[str, Value]], Value] | None = None
    static_signs: Callable[[Network], dict[str, int]] | None = None
    parts: Callable[[Network, Surroundings], tuple[Rating, ...]] | None = None


class Rating(NamedTuple):
    """One rating of a part: its name, kind of quantity, what is measured, what is allowed of it and what it is [W, V or A]."""

    name: str
    kind: str
    names: tuple[str, ...]
    allowed: float
    whole: float


def _resistor_ratings(network: Network, around: Surroundings) -> tuple[Rating, ...]:
    policy, found = around.derating, []
    for role in network.role_names:
        style = around.styles.get(role)
        if role in around.roles and style is not None and policy is not None:
            power, whole = (float(allowed_power(style, around.hot, p)) for p in (policy, derating("none")))
            of = ("pmax", "umax") if role in around.paired else ("p", "u")
            found.append(Rating(f"{role}.power", "power", (f"{of[0]}_{role}",), power, whole))
            # What the root of power times resistance allows is a limit on power, and a laxer one than that.
            volts = policy.resistor_voltage * style.max_working_voltage_v
            found.append(Rating(f"{role}.voltage", "voltage", (f"{of[1]}_{role}",), volts, style.max_working_voltage_v))
    return tuple(found)


def _transistor_ratings(network: Network, around: Surroundings) -> tuple[Rating, ...]:
    if around.derating is None:
        return ()
    ratings, policy = around.ratings, around.derating
    power, whole = (allowed_dissipation(ratings, around.hot, p) for p in (policy, derating("none")))
    watts = (math.nan, math.nan) if power is None or whole is None else (float(power), float(whole))
    every = (
        Rating("vceo", "voltage", ("span",), allowed_vce(ratings, policy) or math.nan, ratings.vceo or math.nan),
        Rating("veb", "voltage", ("ve",), (holds_emitter(network, around.signal) and allowed_veb(ratings, policy)) or math.nan,
               ratings.vebo or math.nan),
        Rating("ic", "current", ("ic",), allowed_ic(ratings, policy) or math.nan, ratings.ic_max or math.nan),
        Rating("power", "power", (POWER_OF_TRANSISTOR,), *watts),
    )
    return tuple(rating for rating in every if not math.isnan(rating.allowed))


def holds_emitter(network: Network, signal: Signal) -> bool:
    """Whether a capacitor keeps the emitter where it was when at switch-off the base falls with its rail: then VEB is VE.

    Parameters
    ----------
    network : Network
        The network.
    signal : Signal
        What bypasses re.

    Returns
    -------
    bool
        True where re leads to 0 V and is bypassed.
    """
    to_ground = any(role.name == "re" and set(role.nodes) == {"e", "0"} for role in network.roles)
    return network.takes_signal and signal.bypass != "none" and "c" not in network.tied and to_ground


def _figure(name: str) -> Callable[[Network, Surroundings], tuple[tuple[str, ...], ...]]:
    return lambda network, around: ((name,),) if network.takes_signal else ()


def _corner(network: Network, around: Surroundings) -> tuple[tuple[str, ...], ...]:
    """Only where a capacitor that is known bypasses re; the emitter of a follower is its output."""
    has_bypass = around.signal.bypass != "none" and "re" in around.roles and "c" not in network.tied
    return ((CORNER,),) if network.takes_signal and has_bypass and around.signal.capacitor is not None else ()


def _bleeder(network: Network, around: Surroundings) -> tuple[tuple[str, ...], ...]:
    return ((f"i_{network.bleeder}",),) if network.bleeder in around.roles else ()


def _supply(network: Network, around: Surroundings) -> tuple[tuple[str, ...], ...]:
    return tuple(network.rail_parts(around.rails).values())


def _reference(network: Network, around: Surroundings) -> tuple[tuple[str, ...], ...]:
    return (("i_ref",),) if around.reference is not None else ()


def _base_resistance(network: Network, r: Mapping[str, Value]) -> Value:
    conductance: Value = 0.0
    for role in (role for role in network.base_side if role in r):
        conductance = conductance + 1.0 / r[role]
    return 1.0 / conductance


def _share(network: Network, r: Mapping[str, Value]) -> Value:
    return r["rc"] / (r["rc"] + r["re"])


RULES: Mapping[str, LimitRule] = {
    rule.name: rule
    for rule in (
        LimitRule(
            name="bleeder_current",
            meaning="current in the lower divider resistor; more of it stiffens the base voltage and loads supply and signal",
            kind="current",
            sense="<=",
            judged="nominal",
            sums=_bleeder,
        ),
        LimitRule(
            name="collector_share",
            meaning="share of rc in rc + re, so that the emitter resistor does not take the voltage that the load needs",
            kind="ratio",
            sense=">=",
            judged="nominal",
            static=_share,
            static_signs=lambda network: {"rc": 1, "re": -1},
        ),
        LimitRule(
            name="base_resistance",
            meaning="resistance of the base feed, so that it loads the signal no more than the transistor does",
            kind="resistance",
            sense=">=",
            judged="nominal",
            static=_base_resistance,
            static_signs=lambda network: dict.fromkeys(network.base_side, 1),
        ),
        LimitRule(
            name="supply_current",
            meaning="largest current drawn from any one rail, bleeder included",
            kind="current",
            sense="<=",
            judged="box",
            sums=_supply,
        ),
        LimitRule(
            name="vce",
            meaning="collector-emitter voltage; the transistor stays active, above VCE(sat), at every point of the box",
            kind="voltage",
            sense=">=",
            judged="box",
            sums=lambda network, around: (("vce",),),
        ),
        LimitRule(
            name="compliance",
            meaning="voltage that the load of a sink may take of its rail while the transistor stays active",
            kind="voltage",
            sense=">=",
            judged="box",
            sums=lambda network, around: (("vce",),) if network.sinks else (),
            offset=lambda around: around.vce_sat,
        ),
        LimitRule(
            name="reference_current",
            meaning="current in the reference element, which below its knee no longer holds its voltage",
            kind="current",
            sense=">=",
            judged="box",
            sums=_reference,
        ),
        LimitRule(
            name="input_resistance",
            meaning="resistance that the signal meets at the base, bias feed included",
            kind="resistance",
            sense=">=",
            judged="box",
            sums=_figure("input_resistance"),
        ),
        LimitRule(
            name="output_resistance",
            meaning="resistance of the output, without the load",
            kind="resistance",
            sense=">=",
            judged="box",
            sums=_figure("output_resistance"),
        ),
        LimitRule(
            name="gain",
            meaning="voltage gain from the base to the output with the load, a magnitude",
            kind="gain",
            sense=">=",
            judged="box",
            sums=_figure("gain"),
        ),
        LimitRule(
            name="swing",
            meaning="peak of the output before the transistor saturates or cuts off, whichever comes first",
            kind="voltage",
            sense=">=",
            judged="box",
            sums=lambda network, around: (
                (("swing_to_cutoff",), ("swing_to_saturation",)) if network.takes_signal else ()
            ),
        ),
        LimitRule(
            name="lower_corner",
            meaning="frequency below which the bypass capacitor of re no longer serves",
            kind="frequency",
            sense="<=",
            judged="box",
            sums=_corner,
        ),
        LimitRule(
            name="resistor_stress",
            meaning="share used of what the style and the derating policy allow each resistor at the hot ambient",
            kind="ratio",
            sense="<=",
            judged="box",
            parts=_resistor_ratings,
        ),
        LimitRule(
            name="transistor_stress",
            meaning="share used of what the ratings and the derating policy allow the transistor at the hot ambient",
            kind="ratio",
            sense="<=",
            judged="box",
            parts=_transistor_ratings,
        ),
    )
}
"""Every limit by name, in the order of output."""


@dataclass(frozen=True, kw_only=True)
class Requirement:
    """A limit or window with its range, for one network.

    Parameters
    ----------
    name : str
        ``target.ic``, ``target.vce`` or the name of a rule.
    kind : str
        Kind of quantity.
    interval : Interval
        Allowed range [A, V, ohm or -]; open sides are infinite.
    judged : {"nominal", "box"}
        Where it is judged.
    sums : tuple of tuple of str
        Sums of quantities of which the worst counts; empty for a limit on resistances alone.
    rule : LimitRule, optional
        The rule behind it; None for a window.
    target : float, optional
        What the margin of a window is relative to [A or V].
    offset : float
        What is subtracted from the sum before it is compared [A or V].
    rated : float, optional
        For a part of a limit on used shares: what is allowed at 100 % [W, V or A].
    whole : float, optional
        The rating itself, without derating [W, V or A].
    """

    name: str
    kind: str
    interval: Interval
    judged: Judged
    sums: tuple[tuple[str, ...], ...] = ()
    rule: LimitRule | None = None
    target: float | None = None
    offset: float = 0.0
    rated: float | None = None
    whole: float | None = None

    @property
    def limit(self) -> str:
        """Name of the window or limit that this is, or is a part of."""
        return self.name if self.rule is None else self.rule.name

    @property
    def sides(self) -> tuple[int, ...]:
        """Directions that can fail: +1 for an upper end, −1 for a lower end."""
        upper = (1,) if self.interval.high < np.inf else ()
        return upper + ((-1,) if self.interval.low > -np.inf else ())

    def side(self, direction: int) -> Requirement:
        """The same requirement with one end only.

        Parameters
        ----------
        direction : {+1, -1}
            +1 keeps the upper end, −1 the lower.

        Returns
        -------
        Requirement
            Open on the other side.
        """
        low, high = self.interval.low, self.interval.high
        return replace(self, interval=Interval(-np.inf, high) if direction > 0 else Interval(low, np.inf))

    def passes(self, value: Array | float) -> NDArray[np.bool_]:
        """Whether measured values are allowed.

        Parameters
        ----------
        value : array_like
            Measured sum, before the offset [A, V, ohm or -].

        Returns
        -------
        ndarray of bool
            Of the same shape; NaN fails.
        """
        low, high = self.interval.low, self.interval.high
        v = np.asarray(value) - self.offset
        return np.asarray((v >= low - SLACK * abs(low)) & (v <= high + SLACK * abs(high)))

    def margin(self, value: Array | float) -> Array:
        """Margin of measured values, negative where they fail.

        Parameters
        ----------
        value : array_like
            Measured sum, before the offset [A, V, ohm or -].

        Returns
        -------
        ndarray
            Relative to the limit, or to the target for a window [-]; infinite against a limit of zero that passes.
        """
        v = np.asarray(value, dtype=float) - self.offset
        # What was not found has no margin.
        margin = np.where(np.isnan(v), np.nan, np.inf)
        for side, end in ((1, self.interval.high), (-1, self.interval.low)):
            if np.isinf(end):
                continue
            scale = abs(end if self.target is None else self.target)
            room = side * (end - v)
            # What passes as equal has no margin, not one of the sign of the last bit.
            room = np.where(np.abs(room) <= SLACK * abs(end), 0.0, room)
            relative = room / scale if scale > 0.0 else np.where(room < 0.0, -np.inf, np.where(np.isnan(v), np.nan, np.inf))
            margin = np.minimum(margin, relative)
        return margin


@dataclass(frozen=True)
class Judgement:
    """A requirement judged for n candidates.

    `worst` is the measured value [A, V, ohm or -], `at` the point that decides (empty for resistances alone), `margin` [-].
    """

    requirement: Requirement
    worst: Array
    at: Values
    margin: Array
    passed: NDArray[np.bool_]


def requirements(
    network: Network,
    around: Surroundings,
    limits: Mapping[str, Interval],
    given: Collection[str],
    windows: Mapping[str, tuple[Interval, float | None]],
) -> tuple[Requirement, ...]:
    """What a candidate of one network has to satisfy.

    Parameters
    ----------
    network : Network
        Its network.
    around : Surroundings
        What it is built from.
    limits : mapping of str to Interval
        Limits by name, SI.
    given : collection of str
        Names of the limits that the user gave; a default collector share binds only where rc and re share their rails.
    windows : mapping of str to (Interval, float or None)
        Windows of ``ic``, ``vce``, ``vc`` and ``ve`` with their targets [A, V].

    Returns
    -------
    tuple of Requirement
        Only those that apply.
    """
    found = [
        Requirement(
            name=f"target.{quantity}",
            kind={"ic": "current"}.get(quantity, "voltage"),
            interval=interval,
            judged="box",
            sums=((quantity,),),
            target=target,
        )
        for quantity, (interval, target) in windows.items()
        if interval.low > -np.inf or interval.high < np.inf
    ]
    wanted = {**limits}
    least = wanted.get("vce", Interval(-np.inf, np.inf))
    wanted["vce"] = Interval(max(least.low, around.vce_sat), least.high)
    for name, rule in RULES.items():
        interval = wanted.get(name)
        if interval is None or not applies(rule, network, around, name in given):
            continue
        if rule.parts is not None:
            found += [
                Requirement(
                    name=f"{name}.{part}",
                    kind=kind,
                    interval=Interval(*(end * allowed if math.isfinite(end) else end for end in (interval.low, interval.high))),
                    judged=rule.judged,
                    sums=(names,),
                    rule=rule,
                    rated=allowed,
                    whole=whole,
                )
                for part, kind, names, allowed, whole in rule.parts(network, around)
            ]
            continue
        found.append(
            Requirement(
                name=name,
                kind=rule.kind,
                interval=interval,
                judged=rule.judged,
                sums=rule.sums(network, around) if rule.sums else (),
                rule=rule,
                offset=rule.offset(around) if rule.offset else 0.0,
            )
        )
    return tuple(found)


def applies(rule: LimitRule, network: Network, around: Surroundings, given: bool) -> bool:
    """Whether a limit means anything for a network.

    Parameters
    ----------
    rule : LimitRule
        The limit.
    network : Network
        The network.
    around : Surroundings
        What it is built from.
    given : bool
        Whether the user gave the limit, rather than the default.

    Returns
    -------
    bool
        False means "not applicable", which is never an error.
    """
    if rule.name == "bleeder_current" and around.reference is not None and not given:
        # The current of the reference element has a limit of its own.
        return False
    if rule.sums is not None:
        return bool(rule.sums(network, around))
    if rule.parts is not None:
        return bool(rule.parts(network, around))
    if rule.name == "collector_share":
        return "rc" in around.roles and "re" in around.roles and (given or network.shared_rails)
    return (given or network.takes_signal) and any(role in around.roles for role in network.base_side)


def judge(box: Box, requirement: Requirement, worst: Callable[[Sequence[str], int], tuple[Array, Values]]) -> Judgement:
    """Judge one requirement for every candidate of a box.

    Parameters
    ----------
    box : Box
        The candidates.
    requirement : Requirement
        What is asked.
    worst : callable
        ``worst(names, direction)``: extreme of a sum of quantities over the box and its point; the caller chooses the law
        and shares results between requirements.

    Returns
    -------
    Judgement
        Shape (n,) throughout.
    """
    rule = requirement.rule
    if rule is not None and rule.static is not None:
        r = {role: part.nominal for role, part in box.parts.items()}
        value = np.broadcast_to(np.asarray(rule.static(box.network, r), dtype=float), (box.size,))
        return Judgement(requirement, value, {}, requirement.margin(value), requirement.passes(value))
    options: list[tuple[Array, Values]] = []
    if requirement.judged == "nominal":
        values = box.nominal()
        q = box.solve(values)
        for names in requirement.sums:
            options.append((np.broadcast_to(box.measure(names, values, q), (box.size,)), values))
    else:
        options = [worst(names, side) for names in requirement.sums for side in requirement.sides]
    value, at = options[0]
    value = np.array(value, dtype=float)
    at = {k: np.broadcast_to(v, (box.size,)).copy() for k, v in at.items()}
    margin = requirement.margin(value)
    for other, where in options[1:]:
        smaller = (requirement.margin(other) < margin) | np.isnan(other)
        value = np.where(smaller, other, value)
        margin = requirement.margin(value)
        at = {k: np.where(smaller, where[k], v) for k, v in at.items()}
    passed = requirement.passes(value)
    if requirement.name == "vce":
        # Active means more than not saturated: a cut-off transistor has all the VCE there is.
        passed = passed & (worst(("ic",), -1)[0] > CUT_OFF_CURRENT)
    return Judgement(requirement, value - requirement.offset, at, margin, passed)
