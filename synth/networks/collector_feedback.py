"""Base fed from the collector through one resistor: more IC lowers the collector, and with it the base current.

The current of rc is IE = IC + IB, and VCE = VBE + rb·IB: the transistor cannot saturate.

Signs. At fixed IC and IB the base-loop residual VCC − rb·IB − (rc+re)·IE − VBE falls with rb (−IB), rc and re (−IE).
VCE = VBE + rb·IB rises with IC while rb stays, so it rises with VCC and falls with rc and re; VCE = VCC − (rc+re)·IE rises
with rb and with VBE, which lower IC and IB.
VC = VCC − rc·IE = re·IE + VBE + rb·IB; the drop VE = VCC − rc·IE − rb·IB − VBE of re rises with re, as IC and IB fall.
While IC and IB are held, VCE = VCC − (rc+re)·IE feels all but rb.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    common = r["rc"] + r.get("re", 0.0)
    vcc = rails["vcc"]
    return TwoPort(vcc, r["rb"] + common, common, vcc, common, common)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc = rails["vcc"]
    ie = q.ib + q.ic
    ve = r.get("re", 0.0) * ie
    vb, vc = ve + q.vbe, ve + q.vce
    voltage: dict[str, Value] = {"rb": vc - vb, "rc": vcc - vc}
    current: dict[str, Value] = {"rb": q.ib, "rc": ie}
    if "re" in r:
        voltage["re"], current["re"] = ve, ie
    return Branches(voltage, current, {"vcc": ie}, {"b": vb, "c": vc, "e": ve})


NETWORK = Network(
    name="collector_feedback",
    title="collector feedback bias",
    summary="Two resistors hold IC better than fixed base bias and cannot saturate; VCE follows hFE, rb feeds signal back.",
    roles=(
        Role(name="rb", meaning="feedback resistor, collector to base", nodes=("c", "b")),
        Role(name="rc", meaning="collector load, also senses IC", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter resistor, feeds IC back", nodes=("e", "0"), optional=True),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "rb": -1, "rc": -1, "re": -1, "delta": -1, "hfe": 1, "icbo": 1},
        "vce": {"vcc": 1, "rb": 1, "rc": -1, "re": -1, "delta": 1},
        "vc": {"vcc": 1, "rb": 1, "rc": -1, "re": 1, "delta": 1},
        "ve": {"vcc": 1, "rb": -1, "rc": -1, "re": 1, "delta": -1},
        "i_rb": {"vcc": 1, "rb": -1, "rc": -1, "re": -1, "delta": -1, "hfe": -1, "icbo": -1},
    },
    vce_held={"vcc": 1, "rb": 0, "rc": -1, "re": -1},
    draws={"vcc": ("ic", "ib")},
    base_side=("rb",),
    carries={"rb": ("ib",), "rc": ("ic", "ib"), "re": ("ic", "ib")},
)
