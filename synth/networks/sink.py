"""Current sink (as PNP a source): the base on a divider or a reference element, re sets IC, the load on its own rail.

The load is somebody else's: VCE is counted without it, at the whole of the load's rail, and what the load may take of it
while the transistor stays active is the compliance.

Signs. As the divider with compensating junctions, without rc: IC falls with r1 and re and rises with r2, VCC and vref.
VCE = VLOAD − re·IE, and VE = re·IE rises with re, as in the follower.
While IC and IB are held, VCE feels re and the load's rail, which may be VCC.
"""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _lower(rails: Rails, r: Resistances) -> tuple[Value, Value]:
    """Source and resistance from the base to 0 V."""
    return rails.get("vref", 0.0), r.get("r2", 0.0) + rails.get("r_ref", 0.0)


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    r1, re, vcc = r["r1"], r["re"], rails["vcc"]
    source, lower = _lower(rails, r)
    share = lower / (r1 + lower)
    return TwoPort(vcc * share + source * (1.0 - share), r1 * share + re, re, rails.get("vload", vcc), re, re)


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    vcc = rails["vcc"]
    ie = q.ib + q.ic
    ve = r["re"] * ie
    vb = ve + q.vbe
    source, lower = _lower(rails, r)
    feed = (vcc - vb) / r["r1"]
    # Without any resistance in the lower leg its current is what the base leaves of the feed.
    with_r2 = "r2" in r
    bleeder = (vb - source) / lower if with_r2 else feed - q.ib
    voltage: dict[str, Value] = {"r1": vcc - vb, **({"r2": r["r2"] * bleeder} if with_r2 else {}), "re": ve}
    current: dict[str, Value] = {"r1": feed, **({"r2": bleeder} if with_r2 else {}), "re": ie}
    nodes: dict[str, Value] = {"b": vb, "c": ve + q.vce, "e": ve}
    if "vref" in rails:
        current["ref"] = bleeder
        voltage["ref"] = nodes["m"] = source + rails["r_ref"] * bleeder if with_r2 else vb
    rail: dict[str, Value] = {"vcc": feed, "vload": q.ic} if "vload" in rails else {"vcc": feed + q.ic}
    return Branches(voltage, current, rail, nodes)


NETWORK = Network(
    name="sink",
    title="current sink",
    summary="Holds the current of a load that hangs on its own rail; re and the voltage at the base set it.",
    optional_rails=("vload",),
    roles=(
        Role(name="r1", meaning="feeds the base and its reference from the supply", nodes=("vcc", "b")),
        Role(name="r2", meaning="lower resistor of the base voltage", nodes=("b", "m"), optional="reference"),
        Role(name="re", meaning="emitter resistor, sets IC", nodes=("e", "0")),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={
        "ic": {"vcc": 1, "vload": 0, "r1": -1, "r2": 1, "re": -1, "delta": -1, "hfe": 1, "icbo": 1, "delta_ref": 1},
        "vce": {"vload": 1, "r1": 1, "r2": -1, "re": -1, "delta": 1, "delta_ref": -1},
        "ve": {"vcc": 1, "vload": 0, "r1": -1, "r2": 1, "re": 1, "delta": -1, "delta_ref": 1},
        "i_r1": {
            "vcc": 1, "vload": 0, "r1": -1, "r2": -1, "re": -1, "delta": -1, "hfe": -1, "icbo": -1, "delta_ref": -1,
        },
        "i_r2": {"vcc": 1, "vload": 0, "r1": -1, "r2": -1, "re": 1, "delta": 1, "hfe": 1, "icbo": 1, "delta_ref": -1},
        "i_ref": {"vcc": 1, "vload": 0, "r1": -1, "r2": -1, "re": 1, "delta": 1, "hfe": 1, "icbo": 1, "delta_ref": -1},
    },
    vce_held={"vcc": 1, "vload": 1, "r1": 0, "r2": 0, "re": -1},
    draws={"vcc": ("i_r1",), "vload": ("ic",)},
    tied={"c": "vload"},
    shared_rails=False,
    bleeder="r2",
    base_side=("r1", "r2"),
    reference="optional",
    takes_signal=False,
    sinks=True,
)  # fmt: skip
