"""What the signal meets."""

from __future__ import annotations

from synth.signal import Bypass, Signal
from synth.stage_resolve.request import Request


def read_signal(request: Request) -> Signal:
    """What the signal meets."""
    bypass: Bypass = request.value("signal.bypass") or "full"
    unbypassed = request.value("signal.unbypassed")
    if bypass == "part" and unbypassed is None:
        accepted = "the resistance of re that carries the signal, such as '100 ohm'"
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
    return Signal(bypass=bypass, unbypassed=unbypassed, load=load, source=source, capacitor=capacitor)


def read_corner(request: Request) -> float | None:
    """Frequency that the bypass capacitor is sized for."""
    corner: float | None = request.value("signal.corner")
    if corner is not None and corner <= 0.0:
        raise request.refusal("signal.corner", "which is no frequency", "a frequency above 0 Hz", "20 Hz")
    return corner
