"""Base divider fed from the collector: collector feedback whose VCE is near VBE·(1 + r1/r2).

Signs. With IB ≥ 0 every resistor carries current in its normal direction, and at fixed IC and IB the base node moves with
each resistance by its own current times the current that a unit injected at the base would send through it: down with r1
and rc, up with r2; re takes IE. So IC falls with r1, rc, re and rises with r2 and VCC, and IB with it.
VCE = VBE·(1 + r1/r2) + r1·IB + (r1/r2)·re·IE rises with IC while r1, r2, re stay: up with VCC, down with rc. With r1 the
collector node rises at fixed currents and both currents fall, so VCE rises. With r2 the loop
rc·(I1 + IC) + VCE + re·IE = VCC gives dVCE/dIC = [rc·VT/IC − r1·(rc + re + re/h)]/(rc + r1), negative while r1·IC ≥ VT.
The loop rc·(I1 + IC) + r1·I1 + VB = VCC with I1 = IB + VB/r2 gives the currents: with r2 both IC and VB rise, so I1 and
I2 = I1 − IB fall; with re or VBE both IC and IB fall, so VB has to rise, and VE with it.
VC = VCC − rc·(I1 + IC) = VB + r1·I1.
While IC and IB are held, VCE rises with VCC, falls with rc and re, and rises with r1 and r2, which carry current from it to
0 V; along r1 the base loop and VCE then pull IC apart.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    r1, r2, rc, re, vcc = r["r1"], r["r2"], r["rc"], r.get("re", 0.0), rails["vcc"]
    share, load = r2 / (r1 + r2 + rc), rc / (r1 + r2 + rc)
    mutual = r2 * load + re
    return TwoPort(vcc * share, share * (r1 + rc) + re, mutual, vcc * (1.0 - load), mutual, load * (r1 + r2) + re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc = rails["vcc"]
    ie = q.ib + q.ic
    ve = r.get("re", 0.0) * ie
    vb, vc = ve + q.vbe, ve + q.vce
    voltage: dict[str, Value] = {"r1": vc - vb, "r2": vb, "rc": vcc - vc}
    current: dict[str, Value] = {"r1": vb / r["r2"] + q.ib, "r2": vb / r["r2"]}
    current["rc"] = q.ic + current["r1"]
    if "re" in r:
        voltage["re"], current["re"] = ve, ie
    return Branches(voltage, current, {"vcc": current["rc"]}, {"b": vb, "c": vc, "e": ve})


NETWORK = Network(
    name="collector_divider",
    title="collector feedback with base divider",
    summary="Collector feedback that fixes VCE at a multiple of VBE and depends less on hFE, at the cost of a bleeder current.",
    roles=(
        Role(name="r1", meaning="feedback resistor, collector to base", nodes=("c", "b")),
        Role(name="r2", meaning="divider resistor from the base to the emitter's rail", nodes=("b", "0")),
        Role(name="rc", meaning="collector load, also senses IC", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter resistor, feeds IC back", nodes=("e", "0"), optional=True),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "r1": -1, "r2": 1, "rc": -1, "re": -1, "delta": -1, "hfe": 1, "icbo": 1},
        "vce": {"vcc": 1, "r1": 1, "rc": -1, "delta": 1},
        "vc": {"vcc": 1, "r1": 1, "rc": -1},
        "ve": {"vcc": 1, "r1": -1, "r2": 1, "rc": -1, "re": 1, "delta": -1},
        "i_r1": {"vcc": 1, "r1": -1, "r2": -1, "rc": -1},
        "i_r2": {"vcc": 1, "r1": -1, "r2": -1, "rc": -1, "re": 1, "delta": 1},
    },
    signs_while={("vce", "r2"): (-1, "r1")},
    vce_held={"vcc": 1, "r1": 1, "r2": 1, "rc": -1, "re": -1},
    draws={"vcc": ("ic", "ib", "i_r2")},
    bleeder="r2",
    base_side=("r1", "r2"),
    carries={"r1": ("ib", "i_r2"), "rc": ("ic", "i_r1"), "re": ("ic", "ib")},
)
