"""Base divider whose lower leg has junctions in series with r2, which follow the temperature of the transistor.

The reference element is the straight line vref + r_ref·I, so with R2 = r2 + r_ref the base sees
(VCC·R2 + vref·r1)/(r1+R2) behind Rp = r1·R2/(r1+R2).

Signs. At fixed IC the base-loop residual has the derivatives −R2(VCC − vref + R2·IB)/(r1+R2)² in r1, r1·I2/(r1+R2) in R2
(I2, the current of the reference, is positive while it conducts, and its sign is that of VB − vref, whatever R2), −IE in
re, R2/(r1+R2) in VCC and r1/(r1+R2) in vref. So IC falls with r1 and re and rises with r2, VCC and vref, and IB with it;
VCE = VCC − rc·IC − re·IE falls with every increase of IC that leaves rc, re and VCC alone. VB rises with VCC, r2, re, VBE
and vref and falls with r1; I1 = (VCC − VB)/r1 = I2 + IB and I2 = (VB − vref)/R2 follow: with R2 both VB and IB rise, so I1
and I2 fall; with vref VB and IB rise, so I1 falls and I2 = I1 − IB with it.
While IC and IB are held, VCE feels VCC, rc and re alone.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    r1, rc, re, vcc = r["r1"], r["rc"], r["re"], rails["vcc"]
    lower = r["r2"] + rails["r_ref"]
    share = lower / (r1 + lower)
    return TwoPort(vcc * share + rails["vref"] * (1.0 - share), r1 * share + re, re, vcc, re, rc + re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc = rails["vcc"]
    ve = r["re"] * (q.ib + q.ic)
    vb = ve + q.vbe
    vc = ve + q.vce
    bleeder = (vb - rails["vref"]) / (r["r2"] + rails["r_ref"])
    voltage: dict[str, Value] = {"r1": vcc - vb, "r2": r["r2"] * bleeder, "rc": vcc - vc, "re": ve}
    current: dict[str, Value] = {role: v / r[role] for role, v in voltage.items()}
    current["ref"] = bleeder
    voltage["ref"] = rails["vref"] + rails["r_ref"] * bleeder
    return Branches(voltage, current, {"vcc": q.ic + current["r1"]}, {"b": vb, "c": vc, "e": ve, "m": voltage["ref"]})


NETWORK = Network(
    name="diode_divider",
    title="base divider with compensating junctions",
    summary="As the divider, but the junctions below r2 follow the temperature of the transistor and cancel the drift of VBE.",
    roles=(
        Role(name="r1", meaning="divider resistor that feeds the base from the collector's rail", nodes=("vcc", "b")),
        Role(name="r2", meaning="divider resistor from the base to the compensating junctions", nodes=("b", "m")),
        Role(name="rc", meaning="collector load", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter resistor, feeds IC back", nodes=("e", "0")),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "r1": -1, "r2": 1, "rc": 0, "re": -1, "delta": -1, "hfe": 1, "icbo": 1, "delta_ref": 1},
        "vce": {"r1": 1, "r2": -1, "rc": -1, "delta": 1, "delta_ref": -1},
        "vc": {"r1": 1, "r2": -1, "rc": -1, "re": 1, "delta": 1, "hfe": -1, "icbo": -1, "delta_ref": -1},
        "ve": {"vcc": 1, "r1": -1, "r2": 1, "rc": 0, "re": 1, "delta": -1, "delta_ref": 1},
        "i_r1": {"vcc": 1, "r1": -1, "r2": -1, "rc": 0, "re": -1, "delta": -1, "hfe": -1, "icbo": -1, "delta_ref": -1},
        "i_r2": {"vcc": 1, "r1": -1, "r2": -1, "rc": 0, "re": 1, "delta": 1, "hfe": 1, "icbo": 1, "delta_ref": -1},
        "i_ref": {"vcc": 1, "r1": -1, "r2": -1, "rc": 0, "re": 1, "delta": 1, "hfe": 1, "icbo": 1, "delta_ref": -1},
    },
    vce_held={"vcc": 1, "r1": 0, "r2": 0, "rc": -1, "re": -1},
    draws={"vcc": ("ic", "i_r1")},
    bleeder="r2",
    base_side=("r1", "r2"),
    reference="needed",
)
