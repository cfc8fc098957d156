"""Base divider with emitter resistor: the network of most discrete stages.

With Rp = r1·r2/(r1+r2) the base sees VCC·r2/(r1+r2) behind Rp, and re feeds the emitter current back into the base loop.

Signs. At fixed IC the base-loop residual e_b − z_bb·IB − z_bc·IC − VBE has the derivatives
−r2²(VCC/r2 + IB)/(r1+r2)² in r1, r1(VCC − r1·IB)/(r1+r2)² in r2 (the bracket is (1 + r1/r2)·VB at the solution, and
VB = VBE + re·IE is positive), −IE in re, and r2/(r1+r2) in VCC; it falls with IC. So IC falls with r1 and re and rises
with r2 and VCC. VCE = VCC − rc·IC − re·IE falls with every increase of IC that leaves rc, re and VCC alone. The node
voltage VB rises with VCC, r2 and re, falls with r1, and the currents of r1 and r2 follow from it. VC = VCC − rc·IC, and
the drop VE = VB − VBE of re rises with re, since VB rises and IC falls.
While IC and IB are held, VCE = VCC − rc·IC − re·IE feels VCC, rc and re alone.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    r1, r2, rc, re = r["r1"], r["r2"], r["rc"], r["re"]
    share = r2 / (r1 + r2)
    return TwoPort(rails["vcc"] * share, r1 * share + re, re, rails["vcc"], re, rc + re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    ve = r["re"] * (q.ib + q.ic)
    vb = ve + q.vbe
    vc = ve + q.vce
    vcc = rails["vcc"]
    voltage: dict[str, Value] = {"r1": vcc - vb, "r2": vb, "rc": vcc - vc, "re": ve}
    current: dict[str, Value] = {role: v / r[role] for role, v in voltage.items()}
    return Branches(voltage, current, {"vcc": q.ic + current["r1"]}, {"b": vb, "c": vc, "e": ve})


NETWORK = Network(
    name="divider",
    title="base divider with emitter resistor",
    summary="IC is set by the divider and re and hardly by hFE; the divider draws its own current.",
    roles=(
        Role(name="r1", meaning="divider resistor that feeds the base from the collector's rail", nodes=("vcc", "b")),
        Role(name="r2", meaning="divider resistor from the base to the emitter's rail", nodes=("b", "0")),
        Role(name="rc", meaning="collector load", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter resistor, feeds IC back", nodes=("e", "0")),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "r1": -1, "r2": 1, "rc": 0, "re": -1, "delta": -1, "hfe": 1, "icbo": 1},
        "vce": {"r1": 1, "r2": -1, "rc": -1, "delta": 1},
        "vc": {"r1": 1, "r2": -1, "rc": -1, "re": 1, "delta": 1, "hfe": -1, "icbo": -1},
        "ve": {"vcc": 1, "r1": -1, "r2": 1, "rc": 0, "re": 1, "delta": -1},
        "i_r1": {"vcc": 1, "r1": -1, "r2": -1, "rc": 0, "re": -1, "delta": -1, "hfe": -1, "icbo": -1},
        "i_r2": {"vcc": 1, "r1": -1, "r2": -1, "rc": 0, "re": 1, "delta": 1, "hfe": 1, "icbo": 1},
    },
    vce_held={"vcc": 1, "r1": 0, "r2": 0, "rc": -1, "re": -1},
    draws={"vcc": ("ic", "i_r1")},
    bleeder="r2",
    base_side=("r1", "r2"),
)
