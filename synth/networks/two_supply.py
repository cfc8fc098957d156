"""Emitter bias from two supplies: base near 0 V through rb, emitter resistor to the negative rail.

Signs. At fixed IC and IB the base-loop residual VEE − (rb+re)·IB − re·IC − VBE falls with rb (−IB) and re (−IE) and rises
with VEE; VCC and rc do not enter. VCE = VCC + VBE + rb·IB − rc·IC, VC = VCC − rc·IC; the drop of re is VEE − rb·IB − VBE.
While IC and IB are held, VCE = VCC + VEE − rc·IC − re·IE feels both rails, rc and re.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    rb, rc, re, vee = r["rb"], r["rc"], r["re"], rails["vee"]
    return TwoPort(vee, rb + re, re, rails["vcc"] + vee, re, rc + re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc, vee = rails["vcc"], rails["vee"]
    ie = q.ib + q.ic
    above = r["re"] * ie
    ve = above - vee
    vb, vc = ve + q.vbe, ve + q.vce
    voltage: dict[str, Value] = {"rb": -vb, "rc": vcc - vc, "re": above}
    current: dict[str, Value] = {"rb": q.ib, "rc": q.ic, "re": ie}
    return Branches(voltage, current, {"vcc": q.ic, "vee": ie}, {"b": vb, "c": vc, "e": ve})


NETWORK = Network(
    name="two_supply",
    title="emitter bias from two supplies",
    summary="IC is set by VEE and re and hardly by hFE, with the base near 0 V and no divider; it takes a second rail.",
    rails=("vcc", "vee"),
    roles=(
        Role(name="rb", meaning="base resistor", nodes=("0", "b")),
        Role(name="rc", meaning="collector load", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter resistor to the second rail, sets IC", nodes=("e", "vee")),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 0, "vee": 1, "rb": -1, "rc": 0, "re": -1, "delta": -1, "hfe": 1, "icbo": 1},
        "vce": {"vcc": 1, "rb": 1, "rc": -1, "delta": 1},
        "vc": {"vcc": 1, "vee": -1, "rb": 1, "rc": -1, "re": 1, "delta": 1, "hfe": -1, "icbo": -1},
        "ve": {"vcc": 0, "vee": 1, "rb": -1, "rc": 0, "re": 1, "delta": -1},
        "i_rb": {"vcc": 0, "vee": 1, "rb": -1, "rc": 0, "re": -1, "delta": -1, "hfe": -1, "icbo": -1},
    },
    vce_held={"vcc": 1, "vee": 1, "rb": 0, "rc": -1, "re": -1},
    draws={"vcc": ("ic",), "vee": ("ic", "ib")},
    shared_rails=False,
    base_side=("rb",),
    carries={"rb": ("ib",), "rc": ("ic",), "re": ("ic", "ib")},
)
