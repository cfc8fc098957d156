"""Emitter follower: the collector on the rail, the base fed by a divider or by one resistor.

Signs. As the divider network without rc: at fixed IC the base-loop residual falls with r1 and re and rises with r2 and VCC.
VE = e_b − Rp·IB − VBE: with re both IB and VBE fall, so VE rises and VCE = VCC − VE falls.
While IC and IB are held, VCE = VCC − re·IE feels VCC and re alone.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    r1, re, vcc = r["r1"], r["re"], rails["vcc"]
    share = r["r2"] / (r1 + r["r2"]) if "r2" in r else 1.0
    return TwoPort(vcc * share, r1 * share + re, re, vcc, re, re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc = rails["vcc"]
    ve = r["re"] * (q.ib + q.ic)
    vb = ve + q.vbe
    voltage: dict[str, Value] = {"r1": vcc - vb}
    current: dict[str, Value] = {"r1": q.ib}
    if "r2" in r:
        voltage["r2"], current["r2"] = vb, vb / r["r2"]
        current["r1"] = q.ib + current["r2"]
    voltage["re"], current["re"] = ve, q.ib + q.ic
    return Branches(voltage, current, {"vcc": q.ic + current["r1"]}, {"b": vb, "c": ve + q.vce, "e": ve})


NETWORK = Network(
    name="follower",
    title="emitter follower",
    summary="Low output resistance and a gain just below one; re sets IC, and VCE is what the emitter leaves of the rail.",
    roles=(
        Role(name="r1", meaning="feeds the base from the collector's rail", nodes=("vcc", "b")),
        Role(
            name="r2",
            meaning="divider resistor from the base to the emitter's rail",
            nodes=("b", "0"),
            optional=True,
            absent="open",
        ),
        Role(name="re", meaning="emitter resistor, sets IC and carries the output", nodes=("e", "0")),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "r1": -1, "r2": 1, "re": -1, "delta": -1, "hfe": 1, "icbo": 1},
        "vce": {"r1": 1, "r2": -1, "re": -1, "delta": 1},
        "ve": {"vcc": 1, "r1": -1, "r2": 1, "re": 1, "delta": -1},
        "i_r1": {"vcc": 1, "r1": -1, "r2": -1, "re": -1, "delta": -1, "hfe": -1, "icbo": -1},
        "i_r2": {"vcc": 1, "r1": -1, "r2": -1, "re": 1, "delta": 1, "hfe": 1, "icbo": 1},
    },
    vce_held={"vcc": 1, "r1": 0, "r2": 0, "re": -1},
    draws={"vcc": ("ic", "i_r1")},
    tied={"c": "vcc"},
    bleeder="r2",
    base_side=("r1", "r2"),
)
