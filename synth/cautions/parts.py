"""Warnings about what parts carry: voltage, power and heat, of the transistor and of the resistors."""

from __future__ import annotations

from collections.abc import Iterator
from functools import partial

import numpy as np

from synth.answer import Candidate
from synth.catalogue import ResistorStyle, derating, resistor_styles
from synth.cautions.form import CautionRule, Seen, share
from synth.explain import dissipation, percent
from synth.quantities import format_quantity, format_resistance
from synth.stress import JUNCTION_STATES, allowed_dissipation, allowed_power, carries, temperature_rise

VCEO_SHARE = 0.8
"""Share of VCEO from which the rail is warned of [-]: common practice leaves a fifth."""
HALF = 0.5
"""Share of a rating from which use of it is told [-]: common practice for long life."""
POWER_TO_TELL = 0.1
"""Dissipation worth a warning where no rating is known [W]."""
DANGEROUS = 50.0
"""Rail from which the usual cautions for voltage are given [V]."""
LEAST_WORKING = 50.0
"""Voltage across a resistor of no known style from which its working voltage is to be looked up [V]: that of small chips."""
FULL_POWER = 343.15
"""Ambient up to which resistors have their full power, 70 °C [K]."""
WARM_JUNCTION, USUAL_RTH = 5.0, 250.0
"""Rise of the junction of a transistor without re that is worth a warning [K]: VT over 2 mV/K is 13 K, where a stiff base runs
away; and the thermal resistance of a small plastic package, common practice where none is known [K/W]."""
GAIN_TO_TELL, SHIFT_TO_TELL = 0.5, 0.01
"""Thermal loop gain, and shift of the nominal IC by self-heating, from which they are worth a warning [-]."""
WARM_RESISTOR = 10.0
"""Rise of a resistor's own temperature that is worth a warning [K]."""

_RATED = partial(derating, "none")


def _vceo(seen: Seen) -> Iterator[str]:
    vceo, span = seen.stage.ratings.vceo, seen.span
    if vceo is not None and span > VCEO_SHARE * vceo:
        yield (
            f"At cut-off the whole rail of {format_quantity(span, 'voltage')} stands across "
            f"{seen.box.transistor.type or 'the transistor'}, whose VCEO is {format_quantity(vceo, 'voltage')}: more than "
            f"{percent(VCEO_SHARE)} of it; choose a type with more."
        )


def _ic_max(seen: Seen) -> Iterator[str]:
    limit, most = seen.stage.ratings.ic_max, seen.candidate.worst.ic[1]
    if limit is not None and most > HALF * limit:
        yield (
            f"IC reaches {format_quantity(most, 'current')}, {percent(most / limit)} of the "
            f"{format_quantity(limit, 'current')} "
            f"that {seen.box.transistor.type or 'the transistor'} may carry: up there hFE falls and VCE(sat) rises."
        )


def _dissipation(seen: Seen) -> Iterator[str]:
    power, hot = dissipation(seen.candidate), seen.box.temperature.high
    allowed = allowed_dissipation(seen.stage.ratings, hot, _RATED())
    worst = format_quantity(power, "power")
    if allowed is None and power > POWER_TO_TELL:
        yield (
            f"The transistor may dissipate up to {worst}, and no rating is known: check it at the hot ambient in the data "
            "sheet; "
            "hot parts burn."
        )
    elif allowed is not None and power > HALF * float(allowed):
        yield (
            f"The transistor may dissipate up to {worst}, more than half of the {format_quantity(float(allowed), 'power')} "
            "that "
            f"it is rated for at {format_quantity(hot, 'temperature')}: check the data sheet; hot parts burn."
        )


def _no_re_heat(seen: Seen) -> Iterator[str]:
    rth = seen.stage.ratings.thermal_resistance
    rise = dissipation(seen.candidate) * (rth or USUAL_RTH)
    if seen.grounded and not seen.box.network.sinks and rise > WARM_JUNCTION:
        by = "" if rth is not None else f", taking {USUAL_RTH:g} K/W for a small package"
        yield (
            f"Without re nothing resists heat: the junction rises by up to {rise:.0f} K{by}, VBE falls by about 2 mV/K and hFE "
            "and leakage grow, so IC climbs with its own heat."
        )


def _high_voltage(seen: Seen) -> Iterator[str]:
    rail = max(spread.high for spread in seen.box.rails.values())
    if rail > DANGEROUS:
        yield (
            f"A rail of {format_quantity(rail, 'voltage')} can injure: follow the local electrical code, have it checked by a "
            "licensed person, and discharge capacitors before touching."
        )


def _styles(seen: Seen) -> Iterator[tuple[str, ResistorStyle | None]]:
    """Designator and style of every resistor that was looked at."""
    for who, role in seen.candidate.designators.items():
        if who in seen.candidate.stress:
            yield who, seen.space.styles.get(role)


def _resistor_half(seen: Seen) -> Iterator[str]:
    if any(v.name.startswith("resistor_stress") and v.verdict == "fail" for v in seen.candidate.limits):
        return
    hot = seen.box.temperature.high
    for role, style in _styles(seen):
        stress = seen.candidate.stress[role]
        if style is None:
            continue
        power, volts = float(allowed_power(style, hot, _RATED())), style.max_working_voltage_v
        used = (("carries", stress.power, power, "power"), ("holds", stress.voltage, volts, "voltage"))
        for what, worst, rated, kind in used:
            if worst > HALF * rated:
                yield (
                    f"{role.upper()} {what} up to {format_quantity(worst, kind)}, more than half of the "
                    f"{format_quantity(rated, kind)} that style {style.name} may have at {format_quantity(hot, 'temperature')}."
                )


def _working_voltage(seen: Seen) -> Iterator[str]:
    for role, style in _styles(seen):
        volts = seen.candidate.stress[role].voltage
        if style is None and volts > LEAST_WORKING:
            yield (
                f"{role.upper()} {format_resistance(seen.candidate.pieces[role])} holds up to "
                f"{format_quantity(volts, 'voltage')} and no style is given: of high values the working voltage counts, not "
                "the "
                f"power, and that of small chips ends at {format_quantity(LEAST_WORKING, 'voltage')}."
            )


def _hot_resistor(seen: Seen) -> Iterator[str]:
    hot = seen.box.temperature.high
    least = min(resistor_styles().values(), key=lambda row: row.power_w_conservative)
    allowed = float(allowed_power(least, hot, _RATED()))
    powers = {role: seen.candidate.stress[role].power for role, style in _styles(seen) if style is None}
    warm = {role.upper(): power for role, power in powers.items() if hot > FULL_POWER and power > HALF * allowed}
    if warm:
        most = format_quantity(max(warm.values()), "power")
        yield (
            f"At {format_quantity(hot, 'temperature')} up to {most} heat {' and '.join(warm)}, and no style is given: above "
            "70 °C a resistor's rating falls to nothing at 125 °C or 155 °C."
        )


def _resistor_when_shorted(seen: Seen) -> Iterator[str]:
    hot, c = seen.box.temperature.high, seen.candidate
    # With the transistor shorted, or saturated, the rails stand across rc and re alone.
    chain = [role for role in ("rc", "re") if role in seen.box.parts and not seen.box.network.sinks]
    total = sum(c.resistors[role] for role in chain)
    for role in chain:
        style, policy = seen.space.styles.get(role), seen.space.derating
        if style is None:
            continue
        for who, ohms, volts in _drops(c, role, seen.span / total):
            power = volts**2 / ohms
            if not bool(carries(style, power, volts, ohms, hot, policy)):
                least = format_quantity(float(allowed_power(style, hot, policy)), "power")
                yield (
                    f"With the transistor shorted or saturated {who.upper()} {format_resistance(ohms)} carries "
                    f"{format_quantity(power, 'power')} at {format_quantity(volts, 'voltage')}, more than the {least} that "
                    f"style {style.name} may have here: it gets hot or burns open."
                )


def _drops(candidate: Candidate, role: str, current: float) -> Iterator[tuple[str, float, float]]:
    """Designator, resistance and voltage of each part of a role that a current flows through, at nominal values."""
    whole, pair = candidate.resistors[role], candidate.parts.get(role)
    for who, of in candidate.designators.items():
        if of == role:
            ohms = candidate.pieces[who]
            yield who, ohms, current * (ohms if pair is not None and pair.join == "series" else whole)


def _resistor_self_heating(seen: Seen) -> Iterator[str]:
    for role, style in _styles(seen):
        rise = 0.0 if style is None else float(temperature_rise(style, seen.candidate.stress[role].power))
        if rise > WARM_RESISTOR:
            part = seen.box.parts[seen.candidate.designators[role]]
            more = rise * max(abs(float(part.tcr_low[0])), abs(float(part.tcr_high[0])))
            yield (
                f"{role.upper()} heats itself by up to {rise:.0f} K, which with its temperature coefficient adds "
                f"{percent(more)} "
                "to its band; the worst case counts the ambient only."
            )


def _junction_too_hot(seen: Seen) -> Iterator[str]:
    load = seen.candidate.transistor
    if load is not None and load.thermal_resistance is not None and load.state != JUNCTION_STATES[0] and load.too_hot:
        yield (
            f"With {format_quantity(load.thermal_resistance, 'thermal_resistance')} to the ambient "
            f"{format_quantity(load.power, 'power')} take the junction beyond its limit: cool it better, or let the transistor "
            "dissipate less."
        )


def _thermal_runaway(seen: Seen) -> Iterator[str]:
    load = seen.candidate.transistor
    if load is not None and load.thermal_resistance is not None and load.state != JUNCTION_STATES[0] and not load.too_hot:
        yield (
            f"With {format_quantity(load.thermal_resistance, 'thermal_resistance')} to the ambient the junction finds no rest "
            "below its limit at the point of most power: heat raises IC and IC raises heat. Cool it better, or let the "
            "resistors "
            "limit the power."
        )


def _thermal_loop_gain(seen: Seen) -> Iterator[str]:
    load = seen.candidate.transistor
    settled = load is not None and load.state == JUNCTION_STATES[0]
    if load is not None and settled and load.loop_gain is not None and load.loop_gain > GAIN_TO_TELL:
        yield f"The thermal loop gain is {load.loop_gain:.2f} at the point of most power, where 1 is runaway."


def _self_heating(seen: Seen) -> Iterator[str]:
    load = seen.candidate.transistor
    if load is None or load.thermal_resistance is None or load.state != JUNCTION_STATES[0]:
        return
    if load.heating is not None and abs(load.heating) > SHIFT_TO_TELL:
        ends = [format_quantity(end, "current") for end in load.worst.get("ic", ())]
        with_it = f"with it IC spans {ends[0]} to {ends[1]}" if ends else "with it some corner does not settle"
        yield (
            f"Self-heating with {format_quantity(load.thermal_resistance, 'thermal_resistance')} moves the nominal IC by "
            f"{percent(load.heating)}; the worst case above counts the ambient alone, {with_it}."
        )


def _self_heating_window(seen: Seen) -> Iterator[str]:
    load = seen.candidate.transistor
    if load is None or load.state != JUNCTION_STATES[0]:
        return
    for verdict in seen.candidate.limits:
        quantity = verdict.name.partition(".")[2]
        if verdict.verdict == "pass" and verdict.name.startswith("target.") and quantity in load.worst:
            low, high = verdict.limit if isinstance(verdict.limit, tuple) else (
                (-np.inf, verdict.limit) if verdict.sense == "<=" else (verdict.limit, np.inf)
            )  # fmt: skip
            if load.worst[quantity][0] < low or load.worst[quantity][1] > high:
                ends = [format_quantity(end, verdict.kind) for end in load.worst[quantity]]
                yield (
                    f"With self-heating {quantity.upper()} spans {ends[0]} to {ends[1]} and leaves its window: cool the "
                    "transistor better, or narrow the window by as much and search again."
                )


RULES = (
    CautionRule(
        name="vceo", told="candidate", of_candidate=_vceo,
        threshold=f"greatest rail above {share(VCEO_SHARE)} of VCEO",
        reason="At cut-off the whole rail stands across the transistor, not VCE.",
    ),
    CautionRule(
        name="ic_max", told="candidate", of_candidate=_ic_max,
        threshold=f"worst IC above {share(HALF)} of IC max",
        reason="Near its largest current a transistor loses gain and its VCE(sat) rises.",
    ),
    CautionRule(
        name="high_voltage", told="candidate", of_candidate=_high_voltage,
        threshold=f"a rail above {DANGEROUS:g} V",
        reason="Such voltages injure.",
    ),
    CautionRule(
        name="dissipation", told="candidate", of_candidate=_dissipation,
        threshold=f"worst power above {share(HALF)} of the rating when hot, {POWER_TO_TELL * 1e3:g} mW if none is known",
        reason="Power has its worst point off nominal, and a rating at 25 °C shrinks with the ambient.",
    ),
    CautionRule(
        name="no_re_heat", told="candidate", of_candidate=_no_re_heat,
        threshold=f"no re, nor feedback from the collector, and a junction rise above {WARM_JUNCTION:g} K",
        reason="VBE, hFE and leakage all raise IC with the junction's own heat, and nothing opposes it.",
    ),
    CautionRule(
        name="resistor_half", told="candidate", of_candidate=_resistor_half,
        threshold=f"a resistor above {share(HALF)} of its power at the hot ambient or of its working voltage",
        reason="Above half of its rating a resistor drifts and ages faster.",
    ),
    CautionRule(
        name="working_voltage", told="candidate", of_candidate=_working_voltage,
        threshold=f"above {LEAST_WORKING:g} V across a resistor without a style",
        reason="Of high values the working voltage of the body counts long before the power.",
    ),
    CautionRule(
        name="hot_resistor", told="candidate", of_candidate=_hot_resistor,
        threshold=f"above 70 °C, no style, and more than {share(HALF)} of what the smallest style may dissipate there",
        reason="The power rating holds up to 70 °C and falls to nothing at 125 °C or 155 °C.",
    ),
    CautionRule(
        name="resistor_when_shorted", told="candidate", of_candidate=_resistor_when_shorted,
        threshold="rc or re beyond what the derating policy allows with the transistor shorted",
        reason="A shorted or saturated transistor leaves the whole rail to rc and re.",
    ),
    CautionRule(
        name="resistor_self_heating", told="candidate", of_candidate=_resistor_self_heating,
        threshold=f"a resistor warms itself by more than {WARM_RESISTOR:g} K",
        reason="Its own rise counts for its temperature coefficient; the worst case takes the ambient.",
    ),
    CautionRule(
        name="junction_too_hot", told="candidate", of_candidate=_junction_too_hot,
        threshold="worst power takes the junction beyond TJ max at the hot ambient",
        reason="TJ = TA + RthJA·P.",
    ),
    CautionRule(
        name="thermal_runaway", told="candidate", of_candidate=_thermal_runaway,
        threshold="thermal loop gain reaches 1 below TJ max",
        reason="Heat raises IC and IC raises heat faster than the mounting removes it.",
    ),
    CautionRule(
        name="thermal_loop_gain", told="candidate", of_candidate=_thermal_loop_gain,
        threshold=f"thermal loop gain above {GAIN_TO_TELL:g}",
        reason="At 1 the junction runs away.",
    ),
    CautionRule(
        name="self_heating", told="candidate", of_candidate=_self_heating,
        threshold=f"self-heating moves the nominal IC by more than {share(SHIFT_TO_TELL)}",
        reason="The junction is warmer than the ambient that the worst case counts.",
    ),
    CautionRule(
        name="self_heating_window", told="candidate", of_candidate=_self_heating_window,
        threshold="with self-heating a window is left that holds without",
        reason="As above, and here it decides.",
    ),
)  # fmt: skip
"""In the order in which they are told."""
