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
    for leaf, figure in (("unbypassed", unbypassed), ("load", request.value("signal.load"))):
        if figure is not None and figure <= 0.0:
            raise request.refusal(f"signal.{leaf}", "which is no resistance", "a resistance above 0 ohm")
    return Signal(
        bypass=bypass, unbypassed=unbypassed, load=request.value("signal.load"), source=request.value("signal.source") or 0.0
    )


def read_corner(request: Request) -> float | None:
    """Frequency that the bypass capacitor is sized for."""
    corner: float | None = request.value("signal.corner")
    if corner is not None and corner <= 0.0:
        raise request.refusal("signal.corner", "which is no frequency", "a frequency above 0 Hz", "20 Hz")
    return corner
