"""The reference element of a base voltage: as given, with the usual figures of its kind in place of the rest."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from synth.networks import NETWORKS
from synth.quantities import Spread, format_exact, format_quantity
from synth.reference import TEST_CURRENT, Kind, Reference, usual_figures
from synth.stage_keys import KEYS
from synth.stage_resolve.request import Request
from synth.transistor import Transistor


def read_reference(
    request: Request, networks: Sequence[str], transistor: Transistor, current: float, rails: Mapping[str, Spread]
) -> Reference | None:
    """The reference element, if one is given and a network has a place for it."""
    given = [path for path in request.given if KEYS[path].table == "reference"]
    if not given or not any(NETWORKS[name].reference != "no" for name in networks):
        return None
    kind: Kind = request.take("reference.kind", "diode")
    count = int(request.take("reference.number"))
    own = TEST_CURRENT.get(kind)
    text, why = (own, "not given") if own else (format_exact(current / 10.0, "current"), "a tenth of the target IC")
    at: float = request.take("reference.current", text, why)
    if at <= 0.0:
        raise request.refusal("reference.current", "which is no current", "a current above 0 A", text)
    if kind != "diode" and "reference.voltage" not in request.given:
        example = "'1.8 V ± 0.1 V'" if kind == "led" else "'5.1 V ± 5 %'"
        accepted = f"the voltage of the {kind} at its test current, such as {example}"
        raise request.refusal("reference.voltage", f"which is not given and has no default for {kind}", accepted)
    usual = usual_figures(kind, transistor, at, request.value("reference.voltage"))
    voltage: Spread = request.take("reference.voltage", *usual["voltage"])
    tc: Spread = request.take("reference.tc", *usual["tc"])
    slope: Spread = request.take("reference.slope", *usual["slope"])
    if voltage.low <= 0.0:
        raise request.refusal("reference.voltage", "which goes down to 0 V", "a magnitude above 0 V")
    if count * voltage.low >= rails["vcc"].high:
        most_supply = format_quantity(rails["vcc"].high, "voltage")
        reason = f"which is not below the supply of at most {most_supply}: no current ever reaches the reference"
        raise request.refusal("reference.voltage", reason, f"less than {most_supply} for all of them together")
    if slope.low < 0.0:
        raise request.refusal("reference.slope", "which is negative", "a resistance of 0 ohm or more")
    return Reference(
        kind=kind,
        voltage=Spread(*(count * end for end in (voltage.low, voltage.nominal, voltage.high))),
        current=at,
        tc=Spread(*(count * end for end in (tc.low, tc.nominal, tc.high))),
        slope=Spread(*(count * end for end in (slope.low, slope.nominal, slope.high))),
        number=count,
    )
