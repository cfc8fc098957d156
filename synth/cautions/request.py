"""Warnings about the request itself, and about another transistor in the place of the one fitted."""

from __future__ import annotations

from collections.abc import Iterator

from synth.catalogue import transistors
from synth.cautions.form import CautionRule
from synth.quantities import format_quantity
from synth.stage import Stage
from synth.stage_resolve.gain import FAR_CURRENT, OPEN_GAIN

FIXED_VBE_SPAN = 10.0
"""Width of the ambient range over which a constant VBE is warned of [K]: 2 mV/K make 20 mV of it."""
SWITCH_ROOM = 2.0
"""VCE target over VCE(sat) below which a request reads like a switch [-]."""


def _gain_maximum_assumed(stage: Stage) -> Iterator[str]:
    for note in stage.assumed:
        if note.key in ("transistor.hfe", "transistor.hfe_rows") and "times the minimum" in note.why:
            what = note.value if note.key == "transistor.hfe" else "the greatest hFE of some rows"
            yield (
                f"No greatest hFE is known, so {what} is assumed; high gain breaks a stage as low gain does: give the "
                "maximum of the data sheet, or choose a gain bin."
            )


def _vbe_fixed(stage: Stage) -> Iterator[str]:
    span = stage.temperature.high - stage.temperature.low
    if stage.transistor.vbe_model == "fixed" and span > FIXED_VBE_SPAN:
        yield (
            f"VBE is held constant over {span:.0f} K of ambient, though a junction falls by about 2 mV/K, "
            f"{format_quantity(2e-3 * span, 'voltage')} here: transistor.vbe_model junction counts it."
        )


def _switch_like(stage: Stage) -> Iterator[str]:
    vce = stage.vce
    if vce is not None and vce.nominal is not None and vce.nominal < SWITCH_ROOM * stage.transistor.vce_sat:
        yield (
            f"A VCE of {format_quantity(vce.nominal, 'voltage')} is less than twice VCE(sat) = "
            f"{format_quantity(stage.transistor.vce_sat, 'voltage')}: if a switch is meant, a forced gain of about ten sets "
            "its base "
            "current, not a Q-point; if an amplifier is meant, give VCE room to swing."
        )


def pinout(before: str, after: str) -> str | None:
    """Warning about the pins of another transistor in the place of the one fitted.

    Parameters
    ----------
    before, after : str
        Registered types; "" where one is known by its figures only.

    Returns
    -------
    str or None
        The warning; None where both are the same type. No unit.
    """
    if before and before.casefold() == after.casefold():
        return None
    rows = {name.casefold(): row for name, row in transistors().items()}
    known = [rows[name.casefold()].package if name.casefold() in rows else None for name in (before, after)]
    if known[0] and known[1] and known[0] != known[1]:
        how = f"{before} comes in {known[0]} and {after} in {known[1]}"
    else:
        how = "types of one outline differ in the order of emitter, base and collector, some even between makers"
    return (
        f"Check the pins before fitting {after or 'another type'}: {how}; turned round, a transistor breaks down early and "
        "hardly amplifies."
    )


RULES = (
    CautionRule(
        name="gain_test_current", told="reading",
        threshold=f"every printed hFE is at a current {FAR_CURRENT:g} times away from the target IC or more",
        reason="hFE falls off at low and at high currents; a figure far away says little.",
    ),
    CautionRule(
        name="gain_beyond_rows", told="reading",
        threshold="the target IC is less than the first or more than the last row of hFE",
        reason="Beyond its rows the gain is held, though it falls off at both ends.",
    ),
    CautionRule(
        name="vce_sat_test_current", told="reading",
        threshold="the window of IC, or the target, goes beyond the current at which VCE(sat) is known",
        reason="VCE(sat) rises with IC.",
    ),
    CautionRule(
        name="hot_leakage", told="reading",
        threshold="the leakage given at 25 °C is above the hot limit of the type",
        reason="The exponential through both would fall with temperature; leakage is taken to double per 10 K.",
    ),
    CautionRule(
        name="measured_outside", told="reading",
        threshold="a measured figure of the transistor lies outside the spread of its type or of the stage",
        reason="Another part may be fitted, or the measurement is off; the measured figure counts.",
    ),
    CautionRule(
        name="unused_rail", told="reading", threshold="a rail is given that no network of the request uses",
        reason="It changes nothing, which may not be what was meant.",
    ),
    CautionRule(
        name="unused_reference", told="reading", threshold="a reference element is given that no network of the request uses",
        reason="It changes nothing, which may not be what was meant.",
    ),
    CautionRule(
        name="limit_not_applicable", told="reading", threshold="a limit is given that means nothing for the networks",
        reason="It was not judged.",
    ),
    CautionRule(
        name="gain_maximum_assumed", told="request", of_request=_gain_maximum_assumed,
        threshold=f"no greatest hFE is stated; {OPEN_GAIN:g} times the least is assumed",
        reason="IC rises with hFE: the greatest gain decides half of the worst case.",
    ),
    CautionRule(
        name="vbe_fixed", told="request", of_request=_vbe_fixed,
        threshold=f"VBE fixed over an ambient range wider than {FIXED_VBE_SPAN:g} K",
        reason="VBE falls by about 2 mV/K at constant current.",
    ),
    CautionRule(
        name="switch_like", told="request", of_request=_switch_like,
        threshold=f"VCE target below {SWITCH_ROOM:g} times VCE(sat)",
        reason="Near saturation the load line sets IC, and a switch is sized by its forced gain.",
    ),
    CautionRule(
        name="pinout", told="substitution", threshold="another type takes the place of the one fitted",
        reason="Outline and order of pins differ between types; an emitter junction breaks down at 5 V to 7 V.",
    ),
)  # fmt: skip
"""In the order in which they are told."""
