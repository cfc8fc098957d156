"""Base fed through one resistor from its own supply or from VCC; the emitter grounded or on an emitter resistor.

Without re, IB = (VBB − VBE)/rb is fixed and IC follows hFE from unit to unit.

Signs. At fixed IC the base-loop residual VBB − (rb+re)·IB − re·IC − VBE falls with rb (−IB) and re (−IE) and rises with
VBB. VCE = VCC − rc·IC − re·IE, VC = VCC − rc·IC; the drop VE = VBB − rb·IB − VBE of re rises with re, as IC and IB fall.
While IC and IB are held, VCE feels VCC, rc and re alone.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    rb, rc, re = r["rb"], r["rc"], r.get("re", 0.0)
    return TwoPort(rails.get("vbb", rails["vcc"]), rb + re, re, rails["vcc"], re, rc + re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc = rails["vcc"]
    ve = r.get("re", 0.0) * (q.ib + q.ic)
    vb = ve + q.vbe
    vc = ve + q.vce
    voltage: dict[str, Value] = {"rb": rails.get("vbb", vcc) - vb, "rc": vcc - vc}
    current: dict[str, Value] = {"rb": q.ib, "rc": q.ic}
    if "re" in r:
        voltage["re"], current["re"] = ve, q.ib + q.ic
    rail: dict[str, Value] = {"vcc": q.ic, "vbb": q.ib} if "vbb" in rails else {"vcc": q.ic + q.ib}
    return Branches(voltage, current, rail, {"b": vb, "c": vc, "e": ve})


NETWORK = Network(
    name="fixed_base",
    title="fixed base bias",
    summary="Two resistors suffice and the supply current is least, but without re IC follows hFE one to one.",
    optional_rails=("vbb",),
    roles=(
        Role(name="rb", meaning="base resistor", nodes=("vbb", "b")),
        Role(name="rc", meaning="collector load", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter resistor, feeds IC back", nodes=("e", "0"), optional=True),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "vbb": 1, "rb": -1, "rc": 0, "re": -1, "delta": -1, "hfe": 1, "icbo": 1},
        "vce": {"vbb": -1, "rb": 1, "rc": -1, "delta": 1},
        "vc": {"vbb": -1, "rb": 1, "rc": -1, "re": 1, "delta": 1, "hfe": -1, "icbo": -1},
        "ve": {"vcc": 1, "vbb": 1, "rb": -1, "rc": 0, "re": 1, "delta": -1},
        "i_rb": {"vcc": 1, "vbb": 1, "rb": -1, "rc": 0, "re": -1, "delta": -1, "hfe": -1, "icbo": -1},
    },
    vce_held={"vcc": 1, "vbb": 0, "rb": 0, "rc": -1, "re": -1},
    draws={"vcc": ("ic",), "vbb": ("i_rb",)},
    base_side=("rb",),
)
