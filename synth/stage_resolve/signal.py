"""What the signal meets."""

from __future__ import annotations

from collections.abc import Mapping

from synth.quantities import Spread, format_quantity
from synth.signal import Bypass, Signal
from synth.stage_resolve.request import Assumption, Request
from synth.transistor import T0, thermal_voltage


def read_signal(request: Request) -> Signal:
    """What the signal meets."""
    bypass: Bypass = request.value("signal.bypass") or "full"
    unbypassed = request.value("signal.unbypassed")
    split = bypass == "part" and unbypassed is None and request.value("limits.gain") is not None
    if bypass == "part" and unbypassed is None and not split:
        accepted = "the resistance of re that carries the signal, such as '100 ohm', or limits.gain to choose both parts by"
        raise request.refusal("signal.unbypassed", "which is not given, but signal.bypass is part", accepted)
    if bypass != "part" and unbypassed is not None:
        raise request.refusal("signal.unbypassed", f"but signal.bypass is {bypass}", "this key with bypass part alone")
    load, capacitor = request.value("signal.load"), request.value("signal.capacitor")
    for leaf, figure in (("unbypassed", unbypassed), ("load", load)):
        if figure is not None and figure <= 0.0:
            raise request.refusal(f"signal.{leaf}", "which is no resistance", "a resistance above 0 ohm")
    if capacitor is not None and capacitor <= 0.0:
        raise request.refusal("signal.capacitor", "which is no capacitance", "a capacitance above 0 F", "100 uF")
    if capacitor is None and request.value("limits.lower_corner") is not None:
        accepted = "the capacitor that bypasses re, such as '100 uF', or signal.corner in place of the limit"
        raise request.refusal("signal.capacitor", "which is not given, but limits.lower_corner needs it", accepted)
    source = request.value("signal.source") or 0.0
    return Signal(bypass=bypass, unbypassed=unbypassed, split=split, load=load, source=source, capacitor=capacitor)


def upper_range(ic: float, rails: Mapping[str, Spread], least_gain: float) -> tuple[float, float]:
    """What the upper part of a re in two parts is chosen from.

    Parameters
    ----------
    ic : float
        Target [A].
    rails : mapping of str to Spread
        Rails given [V].
    least_gain : float
        Lower end of the limit on gain [-]; minus infinity where there is none.

    Returns
    -------
    low, high : float
        From a quarter of VT over the target IC, below which it does little for the gain, to where the least gain asked for
        would need more than the whole supply across rc, since the gain is below rc over the upper part [ohm].
    """
    supply = sum(rails[rail].high for rail in ("vcc", "vee") if rail in rails)
    return float(thermal_voltage(T0)) / ic / 4.0, supply / ic / max(least_gain, 1.0)


def note_upper(request: Request, ic: float, rails: Mapping[str, Spread]) -> None:
    """Tell what the upper part of re is chosen from."""
    low, high = (format_quantity(end, "resistance") for end in upper_range(ic, rails, request.value("limits.gain").low))
    why = "not given: both parts of re are chosen, the upper one, which carries the signal, from this range"
    request.notes.append(Assumption(key="signal.unbypassed", value=f"{low} : {high}", why=why))


def read_corner(request: Request) -> float | None:
    """Frequency that the bypass capacitor is sized for."""
    corner: float | None = request.value("signal.corner")
    if corner is not None and corner <= 0.0:
        raise request.refusal("signal.corner", "which is no frequency", "a frequency above 0 Hz", "20 Hz")
    return corner
