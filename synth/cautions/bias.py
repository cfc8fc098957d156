"""Warnings about the Q-point: gain, emitter voltage, bleeder, supply, leakage, signal."""

from __future__ import annotations

from collections.abc import Iterator
from math import pi

from synth.cautions.form import CautionRule, Seen, share
from synth.explain import cause_words, percent
from synth.quantities import format_quantity, format_resistance
from synth.transistor import CUT_OFF_CURRENT

GAIN_RATIO = 1.5
"""Greatest over least hFE from which fixed base bias is warned of [-]: common practice."""
VBE_SHARE = 0.2
"""Share of VE that the VBE spread may be [-]: common practice wants a volt against the usual 50 mV to 200 mV."""
FEEBLE, STIFF = 5.0, 30.0
"""Base currents that the bleeder should carry at least, and beyond which more buys little [-]: common practice is ten."""
SUPPLY_SHARE = 0.5
"""Share of the drift from which the supply dominates it [-]."""
LEAKAGE_SHARE = 0.1
"""Share of VE, or of IB where there is no re, that hot leakage may move [-]."""
OFF_TARGET = 0.3
"""Centring above which a candidate that no window forbids is warned of [-]: as wide as the widest usual window."""
CAPACITOR_RATIO = 3.0
"""Capacitance needed over that sized on re alone from which the difference is told [-]."""
SLIP = 100.0
"""Ratio to the target IC from which a resistor looks like a slip of the unit [-]."""
COMPLIANCE_ROOM = 0.1
"""Least margin of a sink's compliance [-]."""


def _fixed_base_gain(seen: Seen) -> Iterator[str]:
    hfe = seen.box.transistor.hfe
    ratio = hfe.high / hfe.low
    if seen.candidate.network == "fixed_base" and seen.grounded and ratio > GAIN_RATIO:
        yield (
            f"IB is fixed and the emitter grounded, so IC follows hFE from unit to unit: {ratio:.3g} to 1 over its range; a "
            "network with re holds IC."
        )


def _reading_differs(seen: Seen) -> Iterator[str]:
    for row in seen.candidate.comparisons:
        if row.verdict == "differs":
            low, high = (format_quantity(end, "voltage") for end in (row.expected[0], row.expected[2]))
            yield (
                f"{row.reading.upper()} was read as {format_quantity(row.measured[1], 'voltage')}, "
                f"{format_quantity(row.off, 'voltage')} outside the {low} to {high} of a sound stage on the bench."
            )


def _saturated(seen: Seen) -> Iterator[str]:
    if "saturated" in seen.candidate.regions:
        forced = seen.candidate.nominal.forced_gain
        own = "" if forced is None else f", forced gain {forced:.3g} at the nominal point"
        yield f"Within the box the transistor saturates: there the load line sets IC and hFE no longer governs it{own}."


def _cut_off(seen: Seen) -> Iterator[str]:
    if "cut off" in seen.candidate.regions:
        yield "Within the box the transistor is cut off: only leakage flows, and the base drive has no say."


def _emitter_voltage_small(seen: Seen) -> Iterator[str]:
    vbe, ve = seen.box.transistor.vbe, seen.candidate.roles["re"].drop if "re" in seen.candidate.roles else 0.0
    half = max(vbe.high - vbe.nominal, vbe.nominal - vbe.low)
    if ve > 0.0 and half > VBE_SHARE * ve and seen.candidate.nominal.region == "active":
        yield (
            f"VE is only {format_quantity(ve, 'voltage')}: the VBE spread of {format_quantity(half, 'voltage')} is "
            f"{percent(half / ve)} of it, and IC moves by about as much while that is small (ΔIC/IC ≈ ΔVBE/VE)."
        )


def _bleeder(seen: Seen) -> tuple[float, float] | None:
    """Current of the bleeder and greatest base current of the nominal IC [A]; None without a bleeder."""
    bleeder = seen.candidate.roles.get(seen.box.network.bleeder or "")
    return None if bleeder is None else (bleeder.current, seen.candidate.nominal.ic / seen.box.transistor.hfe.low)


def _bleeder_feeble(seen: Seen) -> Iterator[str]:
    known = _bleeder(seen)
    if known is not None and known[0] < FEEBLE * known[1]:
        current, base = (format_quantity(x, "current") for x in known)
        sag = format_quantity(known[1] * seen.candidate.base_feed, "voltage")
        yield (
            f"The bleeder carries {current}, less than five base currents of {base} at the least hFE: the base voltage sags "
            f"with gain, by IB·Rp = {sag} there."
        )


def _bleeder_stiff(seen: Seen) -> Iterator[str]:
    known = _bleeder(seen)
    if known is not None and known[0] > STIFF * known[1] and seen.box.reference is None:
        current, base = (format_quantity(x, "current") for x in known)
        yield (
            f"The bleeder carries {current}, {known[0] / known[1]:.0f} base currents of {base} at the least hFE: more than "
            f"{STIFF:g} buy little, cost supply current, and load the signal with "
            f"{format_resistance(float(f'{seen.candidate.base_feed:.3g}'))}."
        )


def _supply_dominates(seen: Seen) -> Iterator[str]:
    c = seen.candidate
    decides = c.drift.decides
    for part in c.budget.get(decides, ()):
        if part.cause in seen.box.rails and part.share > SUPPLY_SHARE * c.drift.q_point:
            more = ""
            if seen.box.network.bleeder and c.nominal.ve > 0.0 and seen.box.reference is None:
                factor = (c.nominal.ve + c.nominal.vbe) / c.nominal.ve
                more = f"; VB follows it, and since VBE is subtracted VE moves {factor:.2g} times as far in proportion"
            yield (
                f"The range of the {cause_words(part.cause)} makes {percent(part.share)} of the "
                f"{percent(c.drift.q_point)} by "
                f"which {decides.upper()} drifts{more}: a regulated feed of the base is the lever, not finer resistors."
            )


def _leakage_lift(seen: Seen) -> Iterator[str]:
    box, nominal = seen.box, seen.candidate.nominal
    hot = box.temperature.high
    leakage = box.transistor.icbo.high * float(box.transistor.leakage_factor(hot))
    at = format_quantity(hot, "temperature")
    if nominal.ve > 0.0:
        lift = leakage * seen.candidate.base_feed
        if lift > LEAKAGE_SHARE * nominal.ve:
            yield (
                f"At {at} the leakage of up to {format_quantity(leakage, 'current')} lifts the base by ICBO·Rp = "
                f"{format_quantity(lift, 'voltage')}, {percent(lift / nominal.ve)} of VE: a base network of lower resistance "
                "holds it down."
            )
    elif nominal.ib > 0.0 and leakage > LEAKAGE_SHARE * nominal.ib:
        yield (
            f"At {at} the leakage of up to {format_quantity(leakage, 'current')} is {percent(leakage / nominal.ib)} of the "
            "base "
            "current, and without re hFE multiplies it."
        )


def _off_target(seen: Seen) -> Iterator[str]:
    if seen.candidate.centring > OFF_TARGET:
        yield (
            f"The nominal Q-point is {percent(seen.candidate.centring)} off target, and no window forbids it: finer series, "
            "other "
            "limits or another network may come nearer; a window on ic or vce would refuse this."
        )


def _r_intrinsic_gain(seen: Seen) -> Iterator[str]:
    stage, network = seen.stage, seen.box.network
    asked = "limits.gain" in stage.given or any(path.startswith("signal.") for path in stage.given)
    figures = seen.candidate.signal.get("r_intrinsic")
    if not asked or figures is None or "c" in network.tied or not network.takes_signal:
        return
    whole = seen.candidate.resistors.get("re", 0.0)
    unbypassed = {"full": 0.0, "none": whole, "part": min(seen.space.signal.unbypassed or 0.0, whole)}[stage.signal.bypass]
    if unbypassed < figures[1]:
        ends = " to ".join(format_quantity(figures[k], "resistance") for k in (0, 2))
        own = "none of re" if unbypassed == 0.0 else f"{format_quantity(unbypassed, 'resistance')} of re"
        yield (
            f"The gain is set by r_intrinsic = VT/IE alone, {ends} over the box, since {own} carries the signal: it follows IC "
            "and temperature, and large signals distort; leave a part of re unbypassed to set it by resistors."
        )


def _bypass_capacitor(seen: Seen) -> Iterator[str]:
    sized, corner, ohms = seen.candidate.signal.get("bypass_capacitor"), seen.stage.corner, seen.candidate.resistors.get("re")
    if sized is None or corner is None or ohms is None:
        return
    # Of a re in two parts the capacitor lies across the lower one.
    lower = ohms - (seen.space.signal.unbypassed or 0.0)
    alone = 1.0 / (2.0 * pi * corner * lower) if lower > 0.0 else 0.0
    if sized[2] > CAPACITOR_RATIO * alone:
        need, small = (format_quantity(c, "capacitance") for c in (sized[2], alone))
        yield (
            f"The bypass capacitor sees r_intrinsic and the source through hFE, not re: {need} are needed for "
            f"{format_quantity(corner, 'frequency')}, where re alone would suggest {small}."
        )


def _unit_slip(seen: Seen) -> Iterator[str]:
    goal = seen.stage.ic.nominal or 0.0
    chain = [role for role in ("rc", "re") if role in seen.candidate.resistors]
    ohms = sum(seen.candidate.resistors[role] for role in chain)
    if chain:
        ratio = seen.span / ohms / goal
        if ratio > SLIP or ratio < 1.0 / SLIP:
            named = " and ".join(f"{role.upper()} {format_resistance(seen.candidate.resistors[role])}" for role in chain)
            yield (
                f"The rails over {named} give {format_quantity(seen.span / ohms, 'current')}, where "
                f"{format_quantity(goal, 'current')} is wanted: is the unit right (10 for 10k, A for mA)?"
            )
    known = _bleeder(seen)
    if known is not None and known[0] > SLIP * goal:
        yield (
            f"The bleeder carries {format_quantity(known[0], 'current')}, where an IC of {format_quantity(goal, 'current')} is "
            "wanted: is the unit of the divider right (10 for 10k)?"
        )


def _band_beyond_tolerance(seen: Seen) -> Iterator[str]:
    t = seen.box.temperature
    rise = max(abs(t.low - 298.15), abs(t.high - 298.15))
    worse: dict[tuple[float, float], list[str]] = {}
    for role, part in seen.box.parts.items():
        life = seen.stage.role(role).life
        tolerance = float(part.band[0]) - life
        whole = float(part.band[0]) + rise * max(abs(float(part.tcr_low[0])), abs(float(part.tcr_high[0])))
        if whole > 2.0 * tolerance:
            worse.setdefault((tolerance, whole), []).append(role.upper())
    for (tolerance, whole), roles in worse.items():
        yield (
            f"{', '.join(roles)}: a class of {percent(tolerance)} is a band of ±{percent(whole)} once temperature "
            "coefficient and "
            "life are added; the worst case counts the whole band, and a finer class alone gains little."
        )


def _sink_compliance(seen: Seen) -> Iterator[str]:
    for verdict in seen.candidate.limits:
        if verdict.name == "compliance" and verdict.margin < COMPLIANCE_ROOM:
            yield (
                f"The load may take {format_quantity(verdict.worst, 'voltage')} at worst before the sink saturates, against "
                "the "
                f"{format_quantity(float(str(verdict.limit)), 'voltage')} asked for: below its compliance it no longer "
                "holds IC."
            )


RULES = (
    CautionRule(
        name="reading_differs", told="candidate", of_candidate=_reading_differs,
        threshold="a reading and its uncertainty lie wholly outside what every sound unit shows there",
        reason="A part is faulty, or is not what the stage says; the table of faults may name it.",
    ),
    CautionRule(
        name="fixed_base_gain", told="candidate", of_candidate=_fixed_base_gain,
        threshold=f"fixed base bias without re and hFE max over hFE min above {GAIN_RATIO:g}",
        reason="With IB fixed IC follows hFE from unit to unit.",
    ),
    CautionRule(
        name="saturated", told="candidate", of_candidate=_saturated,
        threshold="VCE falls to VCE(sat) at a deciding point of the box",
        reason="In saturation the load line sets IC; hFE says nothing there.",
    ),
    CautionRule(
        name="cut_off", told="candidate", of_candidate=_cut_off,
        threshold=f"IC below {CUT_OFF_CURRENT * 1e9:g} nA + ICEO at a deciding point of the box",
        reason="Below that only leakage flows.",
    ),
    CautionRule(
        name="emitter_voltage_small", told="candidate", of_candidate=_emitter_voltage_small,
        threshold=f"VBE spread above {share(VBE_SHARE)} of VE",
        reason="re sets IC by the drop VE; what VBE differs from unit to unit is taken from it: ΔIC/IC ≈ ΔVBE/VE.",
    ),
    CautionRule(
        name="bleeder_feeble", told="candidate", of_candidate=_bleeder_feeble,
        threshold=f"bleeder below {FEEBLE:g} base currents at the least hFE",
        reason="The base current drops IB·Rp in the divider, and IB differs from unit to unit.",
    ),
    CautionRule(
        name="bleeder_stiff", told="candidate", of_candidate=_bleeder_stiff,
        threshold=f"bleeder above {STIFF:g} base currents at the least hFE",
        reason="Beyond that drift hardly falls, while the divider costs supply current and input resistance.",
    ),
    CautionRule(
        name="supply_dominates", told="candidate", of_candidate=_supply_dominates,
        threshold=f"the range of a rail makes more than {share(SUPPLY_SHARE)} of the deciding drift",
        reason="A divider passes the supply on to the base, and VE moves more than in proportion, since VBE is subtracted.",
    ),
    CautionRule(
        name="leakage_lift", told="candidate", of_candidate=_leakage_lift,
        threshold=f"hot ICBO·Rp above {share(LEAKAGE_SHARE)} of VE, without re hot ICBO above {share(LEAKAGE_SHARE)} of IB",
        reason="Leakage flows into the base network and lifts the base; it grows exponentially with temperature.",
    ),
    CautionRule(
        name="off_target", told="candidate", of_candidate=_off_target,
        threshold=f"nominal Q-point more than {share(OFF_TARGET)} off target",
        reason="Least drift may lie far from the target where limits are in the way and no window forbids it.",
    ),
    CautionRule(
        name="r_intrinsic_gain", told="candidate", of_candidate=_r_intrinsic_gain,
        threshold="a signal is asked for and what carries it of re is below r_intrinsic = VT/IE",
        reason="Such a gain follows IC and temperature and bends with the signal.",
    ),
    CautionRule(
        name="bypass_capacitor", told="candidate", of_candidate=_bypass_capacitor,
        threshold=f"the capacitor for signal.corner is more than {CAPACITOR_RATIO:g} times what re alone suggests",
        reason="The capacitor works against r_intrinsic and the source seen through hFE, in parallel with re.",
    ),
    CautionRule(
        name="unit_slip", told="candidate", of_candidate=_unit_slip,
        threshold=f"rails over rc + re, or the bleeder, {SLIP:g} times off the target IC",
        reason="Two decades off is rarely meant: 10 typed for 10k, A for mA.",
    ),
    CautionRule(
        name="band_beyond_tolerance", told="candidate", of_candidate=_band_beyond_tolerance,
        threshold="temperature coefficient over the ambient range plus life exceed the tolerance",
        reason="The class is the tolerance of a new part at 25 °C, not its band in service.",
    ),
    CautionRule(
        name="sink_compliance", told="candidate", of_candidate=_sink_compliance,
        threshold=f"compliance of a sink with a margin below {share(COMPLIANCE_ROOM)}",
        reason="A load that takes more voltage saturates the sink, and IC is no longer held.",
    ),
)  # fmt: skip
"""In the order in which they are told."""
