"""What a review asks of a candidate besides its drift: stress of every part, and small-signal figures over the box."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np

from synth.answer import Candidate, Caution, Load, Stress
from synth.box import Box, Extreme, Heat, Values
from synth.catalogue import Derating, ResistorStyle, resistor_styles
from synth.explain import percent
from synth.measures import BYPASS, POWER_OF_TRANSISTOR
from synth.networks.form import Array
from synth.quantities import format_quantity, format_resistance
from synth.signal import corner_capacitance
from synth.stress import (
    JUNCTION_STATES,
    Junction,
    TransistorRatings,
    allowed_dissipation,
    allowed_ic,
    allowed_power,
    allowed_vce,
    allowed_voltage,
    carries,
    junction_temperature,
    smallest_style,
    string_length,
    temperature_rise,
)

SHOWN = ("gm", "r_pi", "r_intrinsic", "input_resistance", "output_resistance", "gain", "swing")
"""Small-signal figures of an answer: [S], [ohm], [ohm], [ohm], [ohm], [-], [V]."""
HOTTEST = 473.15
"""Junction temperature at which the laws end where no TJ max is known, 200 °C [K]."""
GAIN_TO_TELL, SHIFT_TO_TELL = 0.5, 0.01
"""Thermal loop gain, and shift of the nominal IC by self-heating, from which they are worth a caution [-]."""
WARM = 10.0
"""Rise of a resistor's own temperature from which it is worth a caution [K]."""


Law = Callable[[Sequence[str], int], Extreme]


def stresses(
    box: Box, styles: Mapping[str, ResistorStyle], policy: Derating, law: Law | None = None
) -> list[dict[str, Stress]]:
    """Worst power and voltage of every resistor, each at its own point of the box, against its style.

    Parameters
    ----------
    box : Box
        n candidates.
    styles : mapping of str to ResistorStyle
        Style of each role that has one.
    policy : Derating
        Derating policy.
    law : callable, optional
        ``law(names, side)``: extreme of a sum of quantities; that of the active region when not given.

    Returns
    -------
    list of dict
        Role to stress, one mapping for each candidate [W, V].
    """
    hot, law = box.temperature.high, law or box.extreme
    found: list[dict[str, Stress]] = [{} for _ in range(box.size)]
    for role, part in box.parts.items():
        power = law((f"p_{role}",), 1).value
        volts = np.maximum(law((f"u_{role}",), 1).value, -law((f"u_{role}",), -1).value)
        style = styles.get(role)
        mounting = "chip" if style is None else style.style
        among = [row for row in resistor_styles().values() if row.style == mounting]
        for k in range(box.size):
            ohms = float(part.nominal[k])
            needed = smallest_style(power[k], volts[k], ohms, hot, policy, among=among)
            number = None
            if style is not None and not bool(carries(style, power[k], volts[k], ohms, hot, policy)):
                number = string_length(style, power[k], volts[k], ohms, hot, policy, band=float(part.band[k]))
            found[k][role] = Stress(
                power=float(power[k]),
                voltage=float(volts[k]),
                style=None if style is None else style.name,
                power_allowed=None if style is None else float(allowed_power(style, hot, policy)),
                voltage_allowed=None if style is None else float(allowed_voltage(style, ohms, policy)),
                smallest=None if needed is None else needed.name,
                string=number,
            )
    return found


def loads(box: Box, ratings: TransistorRatings, policy: Derating, law: Law | None = None) -> list[Load]:
    """What the transistor carries at worst, and where its junction gets at the hot ambient.

    Parameters
    ----------
    box : Box
        n candidates.
    ratings : TransistorRatings
        What is known of the transistor.
    policy : Derating
        Derating policy.
    law : callable, optional
        As in `stresses`.

    Returns
    -------
    list of Load
        One for each candidate [W, V, A, K, K/W].
    """
    law = law or box.extreme
    worst = law((POWER_OF_TRANSISTOR,), 1)
    rail, ic = (law((name,), 1).value for name in ("span", "ic"))
    hot, rth = box.temperature.high, ratings.thermal_resistance
    most = allowed_dissipation(ratings, hot, policy)
    known = {
        "power": None if most is None else float(most),
        "vceo": allowed_vce(ratings, policy),
        "ic": allowed_ic(ratings, policy),
    }
    allowed = {name: limit for name, limit in known.items() if limit is not None}
    settled = None if rth is None else _settled(box, worst.at | {"temperature": np.full(box.size, hot)}, rth, ratings)
    nominal = None if rth is None else _settled(box, box.nominal(), rth, ratings)
    return [
        Load(
            power=float(worst.value[k]),
            vceo=float(rail[k]),
            ic=float(ic[k]),
            allowed=allowed,
            thermal_resistance=rth,
            junction=None if settled is None else _known(settled.temperature[k]),
            loop_gain=None if settled is None else _known(settled.loop_gain[k]),
            state=None if settled is None else JUNCTION_STATES[int(settled.status[k])],
            heating=None if nominal is None else _known(_shift(box, nominal.temperature)[k]),
            too_hot=rth is not None and hot + rth * float(worst.value[k]) > (ratings.tj_max or HOTTEST),
        )
        for k in range(box.size)
    ]


def heated(box: Box, load: Load, ratings: TransistorRatings) -> Load:
    """A load with the worst case of a candidate that warms itself.

    Parameters
    ----------
    box : Box
        Of one candidate.
    load : Load
        Its load, with a thermal resistance [K/W].
    ratings : TransistorRatings
        What is known of the transistor.

    Returns
    -------
    Load
        With least and greatest IC [A] and VCE [V] over the box.

    Notes
    -----
    At every point the junction temperature is solved with the Q-point; since the proved signs hold at one temperature,
    every vertex, edge and temperature is looked at.
    """
    if load.thermal_resistance is None or load.state != JUNCTION_STATES[0]:
        return load
    warm = replace(box, heat=Heat(load.thermal_resistance, max(ratings.tj_max or HOTTEST, box.temperature.high + 1.0)))
    ends = {name: tuple(float(warm.extreme((name,), side).value[0]) for side in (-1, 1)) for name in ("ic", "vce")}
    return replace(load, worst={name: (low, high) for name, (low, high) in ends.items() if np.isfinite([low, high]).all()})


def _known(x: float) -> float | None:
    return float(x) if np.isfinite(x) else None


def _settled(box: Box, values: Values, rth: float, ratings: TransistorRatings) -> Junction:
    """Where the junctions settle at one point of the box each, power and Q-point solved together."""

    def power_of(t: Array) -> Array:
        return np.maximum(np.broadcast_to(box.solve(values, junction=t).power, t.shape), 0.0)

    ambient = np.broadcast_to(np.asarray(values["temperature"], dtype=float), (box.size,))
    limit = max(ratings.tj_max or HOTTEST, float(ambient.max()) + 1.0)
    return junction_temperature(power_of, ambient, rth, limit)


def _shift(box: Box, junction: Array) -> Array:
    """How far self-heating moves the nominal IC [-]."""
    values = box.nominal()
    cold = box.solve(values).ic
    return np.broadcast_to(box.solve(values, junction=junction).ic / cold - 1.0, (box.size,))


def signals(box: Box, corner: float | None = None) -> list[dict[str, tuple[float, float, float]]]:
    """Small-signal figures: least, nominal and greatest over the box.

    Parameters
    ----------
    box : Box
        n candidates, active over the whole box.
    corner : float, optional
        Frequency that the bypass capacitor is sized for [Hz].

    Returns
    -------
    list of dict
        Figure to its three values [S, ohm, - or V]; empty for a network that takes no signal.
    """
    if not box.network.takes_signal:
        return [{} for _ in range(box.size)]
    values = box.nominal()
    q = box.solve(values)
    found: list[dict[str, tuple[float, float, float]]] = [{} for _ in range(box.size)]
    for name in SHOWN:
        middle = np.broadcast_to(box.measure((name,), values, q), (box.size,))
        if name == "swing":
            sides = ("swing_to_cutoff", "swing_to_saturation")
            low = np.minimum.reduce([box.extreme((side,), -1).value for side in sides])
            # The greatest of the smaller of two is no corner of either: only the least is told.
            high = np.full(box.size, np.nan)
        else:
            low, high = (box.extreme((name,), side).value for side in (-1, 1))
        for k in range(box.size):
            found[k][name] = (float(low[k]), float(middle[k]), float(high[k]))
    # The emitter of a follower is its output.
    has_bypass = box.signal.bypass != "none" and "re" in box.parts and "c" not in box.network.tied
    if corner is not None and has_bypass:
        ohms = (box.extreme((BYPASS,), 1).value, box.measure((BYPASS,), values, q), box.extreme((BYPASS,), -1).value)
        sizes = [np.broadcast_to(corner_capacitance(r, corner), (box.size,)) for r in ohms]
        for k in range(box.size):
            found[k]["bypass_capacitor"] = (float(sizes[0][k]), float(sizes[1][k]), float(sizes[2][k]))
    return found


def stress_cautions(
    candidate: Candidate, box: Box, styles: Mapping[str, ResistorStyle], policy: Derating
) -> tuple[Caution, ...]:
    """Cautions about resistors: what they carry when the transistor fails, and how warm they make themselves.

    Parameters
    ----------
    candidate : Candidate
        With its stress.
    box : Box
        Its box, of one candidate.
    styles : mapping of str to ResistorStyle
        Style of each role that has one.
    policy : Derating
        Derating policy.

    Returns
    -------
    tuple of Caution
        In the order of the roles.
    """
    found = _thermal_cautions(candidate)
    hot = box.temperature.high
    # With the transistor shorted, or saturated, the rails stand across rc and re alone.
    chain = [role for role in ("rc", "re") if role in box.parts and not box.network.sinks]
    span = box.rails["vcc"].high + (box.rails["vee"].high if "vee" in box.rails else 0.0)
    total = sum(candidate.resistors[role] for role in chain)
    for role in chain:
        style = styles.get(role)
        if style is None:
            continue
        ohms = candidate.resistors[role]
        power, volts = (span / total) ** 2 * ohms, span * ohms / total
        if not bool(carries(style, power, volts, ohms, hot, policy)):
            least = format_quantity(float(allowed_power(style, hot, policy)), "power")
            found.append(
                Caution(
                    name="resistor_when_shorted",
                    text=f"With the transistor shorted or saturated {role.upper()} {format_resistance(ohms)} carries "
                    f"{format_quantity(power, 'power')} at {format_quantity(volts, 'voltage')}, more than the {least} that "
                    f"style {style.name} may have here: it gets hot or burns open.",
                )
            )
    for role, stress in candidate.stress.items():
        style = styles.get(role)
        rise = 0.0 if style is None else float(temperature_rise(style, stress.power))
        if rise > WARM:
            part = box.parts[role]
            more = rise * max(abs(float(part.tcr_low[0])), abs(float(part.tcr_high[0])))
            found.append(
                Caution(
                    name="resistor_self_heating",
                    text=f"{role.upper()} heats itself by up to {rise:.0f} K, which with its temperature coefficient adds "
                    f"{percent(more)} to its band; the worst case counts the ambient only.",
                )
            )
    return tuple(found)


def _thermal_cautions(candidate: Candidate) -> list[Caution]:
    """What self-heating does, where a thermal resistance is known."""
    load = candidate.transistor
    if load is None or load.thermal_resistance is None:
        return []
    at = format_quantity(load.thermal_resistance, "thermal_resistance")
    if load.state != JUNCTION_STATES[0] and load.too_hot:
        return [
            Caution(
                name="junction_too_hot",
                text=f"With {at} to the ambient {format_quantity(load.power, 'power')} take the junction beyond its limit: "
                "cool it better, or let the transistor dissipate less.",
            )
        ]
    if load.state != JUNCTION_STATES[0]:
        return [
            Caution(
                name="thermal_runaway",
                text=f"With {at} to the ambient the junction finds no rest below its limit at the point of most power: heat "
                "raises IC and IC raises heat. Cool it better, or let the resistors limit the power.",
            )
        ]
    found = []
    if load.loop_gain is not None and load.loop_gain > GAIN_TO_TELL:
        found.append(
            Caution(
                name="thermal_loop_gain",
                text=f"The thermal loop gain is {load.loop_gain:.2f} at the point of most power, where 1 is runaway.",
            )
        )
    if load.heating is not None and abs(load.heating) > SHIFT_TO_TELL:
        ends = [format_quantity(end, "current") for end in load.worst.get("ic", ())]
        with_it = f"with it IC spans {ends[0]} to {ends[1]}" if ends else "with it some corner does not settle"
        found.append(
            Caution(
                name="self_heating",
                text=f"Self-heating with {at} moves the nominal IC by {percent(load.heating)}; the worst case above counts the "
                f"ambient alone, {with_it}.",
            )
        )
    for verdict in candidate.limits:
        quantity = verdict.name.partition(".")[2]
        if verdict.verdict == "pass" and verdict.name.startswith("target.") and quantity in load.worst:
            low, high = verdict.limit if isinstance(verdict.limit, tuple) else (
                (-np.inf, verdict.limit) if verdict.sense == "<=" else (verdict.limit, np.inf)
            )  # fmt: skip
            if load.worst[quantity][0] < low or load.worst[quantity][1] > high:
                ends = [format_quantity(end, verdict.kind) for end in load.worst[quantity]]
                found.append(
                    Caution(
                        name="self_heating_window",
                        text=f"With self-heating {quantity.upper()} spans {ends[0]} to {ends[1]} and leaves its window: cool "
                        "the transistor better, or narrow the window by as much and search again.",
                    )
                )
    return found
