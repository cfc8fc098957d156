"""Worked examples of published texts, and what this project computes for them.

`data/worked_examples.csv` holds what the sources give and print, and two figures derived beside them: under the source's
own approximations, and exact for a constant VBE, by the hand formula of the loop. Source, locator and evidence stand in
each row; ``memory`` means recalled, not read. `EXAMPLES` says how each row is put to the code, network by network.
"""

import csv
import itertools
import json
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from decimal import Decimal
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from synth.box import Box
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.q_point import SATURATED, solve
from synth.quantities import Spread
from synth.statistics import factors, gain_change
from synth.transistor import T0, Transistor

SIX_DIGITS = 5.1e-6
"""Derived figures are written with six significant digits: half a unit of the last, at worst of a leading 1."""
NO_BASE_CURRENT = 1e9
"""A gain that neglects the base current, as several sources do."""


@dataclass(frozen=True)
class Row:
    """One example: what is given, what is printed, and what was derived."""

    id: str
    source: str
    given: dict[str, Any]
    printed: dict[str, str]
    approximate: dict[str, float]
    exact: dict[str, float]
    memory: bool


def load() -> dict[str, Row]:
    path = Path(__file__).parents[1] / "data" / "worked_examples.csv"
    with path.open(encoding="utf-8", newline="") as file:
        return {
            r["id"]: Row(
                r["id"],
                r["source"],
                json.loads(r["given_json"]),
                json.loads(r["printed_json"]),
                json.loads(r["same_approximations_json"]),
                json.loads(r["exact_model_json"]),
                r["evidence"] == "memory",
            )
            for r in csv.DictReader(file)
        }


ROWS = load()
Answers = dict[str, float]
Example = Callable[[Row], Answers]

# ---------------------------------------------------------------------------------------------- from a row to the code


def stage(
    network: str,
    *,
    vbe: float = 0.7,
    hfe: float,
    icbo: float = 0.0,
    vcc: float,
    vbb: float | None = None,
    vee: float | None = None,
    vref: float | None = None,
    **r: float,
) -> Answers:
    """Every figure of one stage with a constant VBE, in volts, amperes and ohms."""
    transistor = Transistor(hfe=Spread.exact(hfe), vbe=Spread.exact(vbe), vbe_ic=1e-3, vbe_model="fixed")
    # A reference element is one voltage here, whatever its current.
    r_ref = None if vref is None else 0.0
    rails = {name: v for name, v in {"vcc": vcc, "vbb": vbb, "vee": vee, "vref": vref, "r_ref": r_ref}.items() if v is not None}
    form = NETWORKS[network]
    q = solve(form, transistor, rails, r, hfe=hfe, icbo=icbo, delta=0.0, temperature=T0)
    # A hot stage may carry less than ICEO and then counts as cut off, though the active law governs it.
    assert q.region != SATURATED
    nodes = form.branches(rails, r, q).nodes
    port = form.two_port(rails, r, T0)
    return {
        "IC": float(q.ic), "IB": float(q.ib), "IE": float(q.ic + q.ib), "VCE": float(q.vce),
        "VB": float(nodes["b"]), "VC": float(nodes["c"]), "VE": float(nodes["e"]),
        "feed_V": float(port.e_b), "feed_R": float(port.z_bb - port.z_bc),
    }  # fmt: skip


UNITS = {"V": 1.0, "mA": 1e-3, "uA": 1e-6, "kohm": 1e3, "ohm": 1.0}
FEED_V = ("VBB_V", "V_V", "VEQ_V", "Vth_V")
FEED_R = ("RBB_kohm", "RB_kohm", "REQ_kohm", "Rth_kohm")
"""Names that the sources give to the open-circuit voltage and the resistance of the divider."""


def read(row: Row, found: Answers, suffix: str = "") -> Answers:
    """The printed answers of one stage, in their own units; `suffix` marks those of this stage."""
    answers: Answers = {}
    for key in row.printed:
        if suffix and not key.endswith(suffix):
            continue
        name, unit = key.removesuffix(suffix).rsplit("_", 1)
        name = "feed_V" if key in FEED_V else "feed_R" if key in FEED_R else {"VEC": "VCE", "I": "IC"}.get(name, name)
        if name in found and unit in UNITS:
            answers[key] = found[name] / UNITS[unit]
    return answers


def ohms(row: Row, name: str) -> float:
    """A resistance that the row gives in kilohms or in ohms."""
    given = row.given
    return float(given[f"{name}_ohm"]) if f"{name}_ohm" in given else 1e3 * float(given[f"{name}_kohm"])


def given_stage(row: Row, network: str, names: str, **changes: float) -> Answers:
    """The stage that a row gives; `names` pairs roles with the source's names for them, as in ``rb=RF rc=RC``."""
    g = row.given
    r = {role: ohms(row, name) for role, name in (pair.split("=") for pair in names.split())}
    # Rails are magnitudes here, and a PNP is its mirror image.
    form = NETWORKS[network]
    rails = {
        name: abs(float(g[f"{name.upper()}_V"])) for name in (*form.rails, *form.optional_rails) if f"{name.upper()}_V" in g
    }
    device = {"vbe": float(g.get("VBE_V", g.get("VEB_V", 0.0))), "hfe": float(g.get("beta", g.get("hFE", NO_BASE_CURRENT)))}
    return stage(network, **{**device, **rails, **r, **changes})


def plain(network: str, names: str, **changes: float) -> Example:
    return lambda row: read(row, given_stage(row, network, names, **changes))


def value_for(wanted: float, figure: Callable[[float], float], low: float, high: float) -> float:
    """The resistance between two others at which a figure of a stage is as wanted."""
    return float(brentq(lambda r: figure(r) - wanted, low, high, xtol=1e-12 * low, rtol=1e-14))


def intrinsic(found: Answers) -> Answers:
    return {"re_ohm": 26e-3 / found["IE"]}


# ---------------------------------------------------------------------------------------------- divider


def divider(row: Row, upper: str = "R1_kohm", lower: str = "R2_kohm", **changes: float) -> Answers:
    g = row.given
    re = 1e3 * g["RE_kohm"] if "RE_kohm" in g else g.get("RE_ohm", 1e3 * g.get("RE_total_kohm", 0.0))
    r = {"r1": 1e3 * g[upper], "r2": 1e3 * g[lower], "rc": 1e3 * g.get("RC_kohm", 3.6), "re": re}
    hfe = g.get("beta", g.get("beta_for_exact", NO_BASE_CURRENT))
    return stage("divider", **{"vcc": g.get("VCC_V", g.get("VEE_V", 0.0)), "vbe": g["VBE_V"], "hfe": hfe, **r, **changes})


def plain_divider(row: Row) -> Answers:
    return read(row, divider(row))


# A PNP with its emitter towards the positive rail is the mirror image: the rail at the emitter is the divider's 0 V.
def pnp_divider(row: Row) -> Answers:
    found = divider(row, upper="R1_lower_kohm", lower="R2_upper_kohm")
    against_ground = {node: row.given["VEE_V"] - found[node] for node in ("VB", "VC", "VE")}
    return read(row, {**found, **against_ground})


def four_resistor(row: Row) -> Answers:
    return read(row, divider(row, upper="R_upper_kohm", lower="R_lower_kohm"))


def two_gains(row: Row) -> Answers:
    first, second = divider(row, hfe=55.0), divider(row, hfe=200.0)
    feed = read(row, {"feed_V": first["feed_V"], "feed_R": first["feed_R"]})
    return {**feed, **read(row, first, "_beta55"), **read(row, second, "_beta200")}


def range_of_gains(row: Row) -> Answers:
    answers = read(row, divider(row, hfe=NO_BASE_CURRENT), "_approx")
    for hfe in row.given["hFE"]:
        answers |= read(row, divider(row, hfe=float(hfe)), f"_hFE{hfe}")
    return answers


def between_two_supplies(row: Row) -> Answers:
    # Divider and emitter resistor end at the negative rail: one supply of the whole span.
    return read(row, divider(row, vcc=row.given["VCC_V"] - row.given["VEE_V"]))


def split_emitter_resistor(row: Row) -> Answers:
    g = row.given
    return read(row, divider(row, hfe=g["beta_dc"], re=g["RE1_ohm"] + g["RE2_ohm"]))


def divider_from_a_feed(row: Row) -> Answers:
    vth, rth = row.given["Vth_V"], 1e3 * row.given["Rth_kohm"]

    def port(r1: float, r2: float) -> tuple[float, float]:
        found = NETWORKS["divider"].two_port({"vcc": row.given["VCC_V"]}, {"r1": r1, "r2": r2, "rc": 1e3, "re": 0.0}, T0)
        return float(found.e_b), float(found.z_bb)

    def lower(r1: float) -> float:
        return value_for(rth, lambda r2: port(r1, r2)[1], rth, 10 * rth)

    upper = value_for(vth, lambda r1: port(r1, lower(r1))[0], 2 * rth, 20 * rth)
    return {"R1_kohm": upper / 1e3, "R2_kohm": lower(upper) / 1e3}


NOMINAL = {"r1": 36e3, "r2": 18e3, "rc": 22e3, "re": 16e3}
"""The four resistors of the worst-case example."""


def worst_case_box(hfe: Spread) -> Box:
    none = np.zeros(1)
    return Box(
        network=NETWORKS["divider"],
        transistor=Transistor(hfe=hfe, vbe=Spread.exact(0.7), vbe_ic=1e-3, vbe_model="fixed"),
        rails={"vcc": Spread(0.95 * 12.0, 12.0, 1.05 * 12.0)},
        temperature=Spread.exact(T0),
        parts={
            role: Parts(nominal=np.array([value]), band=np.array([0.1]), tcr_low=none, tcr_high=none)
            for role, value in NOMINAL.items()
        },
    )


def worst_case(row: Row) -> Answers:
    box = worst_case_box(Spread.exact(NO_BASE_CURRENT))
    feed = [
        float(np.squeeze(NETWORKS["divider"].two_port({"vcc": p["vcc"]}, p, T0).e_b))
        for x in itertools.product((0.0, 1.0), repeat=3)
        for p in [box.values(dict(zip(("vcc", "r1", "r2"), x, strict=True)))]
    ]
    answers = {"VEQ_max_V": max(feed), "VEQ_min_V": min(feed)}
    for end, direction in (("max", 1), ("min", -1)):
        answers[f"IC_{end}_uA"] = float(box.extreme(("ic",), direction).value[0]) / 1e-6
        answers[f"VCE_{end}_V"] = float(box.extreme(("vce",), direction).value[0])
    return answers


# ---------------------------------------------------------------------------------------------- fixed base


def fixed_base_two_gains(row: Row) -> Answers:
    g = row.given
    emitter = {"re": ohms(row, "RE")} if "RE_ohm" in g else {}

    # The source gives no collector resistor: 1 kohm from 10 V (invented) keeps it active.
    def found(hfe: float, rb: float) -> Answers:
        return stage("fixed_base", vcc=10.0, vbb=g["VBB_V"], hfe=hfe, rb=rb, rc=1e3, **emitter)

    chosen = ohms(row, "RB_chosen")
    answers = {**read(row, found(100.0, chosen), "_beta100"), **read(row, found(300.0, chosen), "_beta300")}
    exact = value_for(1e-3 * g["IE_target_mA"], lambda rb: found(100.0, rb)["IE"], 0.5 * chosen, 2.0 * chosen)
    return {**answers, "RB_kohm": exact / 1e3}


def warm_and_cold(row: Row) -> Answers:
    cold = stage("fixed_base", vcc=12.0, vbe=0.7, hfe=85.0, rb=100e3, rc=560.0)
    warm = stage("fixed_base", vcc=12.0, vbe=0.6, hfe=100.0, rb=100e3, rc=560.0)
    return {f"d{name}_percent": 100.0 * (warm[name] / cold[name] - 1.0) for name in ("IC", "VCE")}


def stiff_base(row: Row) -> Answers:
    # "Base voltage fixed" is a base resistor that does not matter.
    return read(row, stage("fixed_base", vcc=10.0, vbb=4.0, hfe=100.0, rb=1e-9, rc=4.7e3, re=3.3e3))


def emitter_bias(row: Row) -> Answers:
    one, two = (stage("fixed_base", vcc=20.0, hfe=h, rb=430e3, rc=2e3, re=1e3) for h in (50.0, 100.0))
    return {**read(row, one), **read(row, two, "_beta100")}


def intrinsic_fixed_base(row: Row) -> Answers:
    return intrinsic(stage("fixed_base", vcc=20.0, hfe=120.0, rb=470e3, rc=2.2e3, re=560.0))


def drift_over_temperature(row: Row) -> Answers:
    # ICO at -65 °C is 1 nA halved nine times: too little to show in the exact figure.
    rb, re, ic = 7.75e3, 4.7e3, 1.5e-3
    gain = {k: float(v) for k, v in row.given["beta"].items()}
    leak = {k: 1e-9 * v for k, v in row.given["ICO_nA"].items()}
    drop = {k: float(v) for k, v in row.given["VBE_V"].items()}
    # Base loop by hand at 25 °C: VBB = VBE + rb*IB + re*(IB + IC) with IC = hFE*IB + (hFE + 1)*ICO.
    ib = (ic - (gain["25C"] + 1.0) * leak["25C"]) / gain["25C"]
    vbb = drop["25C"] + rb * ib + re * (ib + ic)
    # Collector circuit of the book's next example: 30 V and 2 kohm.
    found = {
        k: stage("fixed_base", vcc=30.0, vbb=vbb, vbe=drop[k], hfe=gain[k], icbo=leak[k], rb=rb, re=re, rc=2e3)["IC"]
        for k in gain
    }
    # IC at 25 °C comes back to rounding: a few terms of volts.
    assert_allclose(found["25C"], ic, rtol=1e-13, atol=0)
    return {f"dIC_mA_{k}": (found[k] - found["25C"]) / 1e-3 for k in ("175C", "-65C")}


# The stability examples give ratios only: re = 1 kohm and the rails are invented, the ratios do not depend on them. Factors come
# from the closed forms, changes of IC from the solver.
def stability_of(network: str, hfe: float, ic: float = 1e-3, **r: float) -> tuple[float, float]:
    """dIC/dICO and dIC/dVBE with VBE held."""
    port = NETWORKS[network].two_port({"vcc": 20.0}, r, T0)
    ico, vbe, _ = factors(port, hfe=hfe, ic=ic)
    return float(ico), float(vbe)


def leakage_stability(row: Row) -> Answers:
    answers: Answers = {}
    for ratio in ("250", "10", "0.01"):
        r = {"rb": float(ratio) * 1e3, "re": 1e3, "rc": 1e3}
        one, two = (stage("fixed_base", vcc=30.0, vbb=6.0, hfe=50.0, icbo=i0, **r)["IC"] for i0 in (0.1e-9, 20e-9))
        answers[f"S_ICO_{ratio}"] = stability_of("fixed_base", 50.0, **r)[0]
        answers[f"dIC_uA_{ratio}"] = (two - one) / 1e-6
    return answers


def leakage_stability_of(network: str) -> Example:
    return lambda row: {
        "S_ICO": stability_of(network, float(row.given["hFE"]), rb=ohms(row, "RB"), rc=ohms(row, "RC"))[0]
    }


def vbe_stability(row: Row) -> Answers:
    answers: Answers = {}
    for name, r in (("fixed", {}), ("emitter", {"re": 1e3})):
        every = {"rb": 240e3, "rc": 1e3, **r}
        one, two = (stage("fixed_base", vcc=20.0, vbe=v, hfe=100.0, **every)["IC"] for v in (0.65, 0.48))
        answers[f"S_VBE_{name}_A_per_V"] = stability_of("fixed_base", 100.0, **every)[1]
        answers[f"dIC_uA_{name}"] = (two - one) / 1e-6
    return answers


def gain_stability(row: Row) -> Answers:
    rb = 1e3 * row.given["RB_over_RE"]
    # VBB by hand for IC = 2 mA at hFE 50: VBE + rb*IB + re*(IB + IC).
    vbb = 0.7 + rb * 40e-6 + 1e3 * 2.04e-3
    one, two = (stage("fixed_base", vcc=30.0, vbb=vbb, hfe=h, rb=rb, re=1e3, rc=1e3)["IC"] for h in (50.0, 80.0))
    port = NETWORKS["fixed_base"].two_port({"vcc": 30.0, "vbb": vbb}, {"rb": rb, "re": 1e3, "rc": 1e3}, T0)
    factor = float(gain_change(port, before=50.0, after=80.0, ic=2e-3))
    answers = {"S_beta_A": factor, "dIC_mA": (two - one) / 1e-3, "IC_mA_100C": two / 1e-3}
    return {key: answers[key] for key in row.printed}


def vbe_drift(row: Row) -> Answers:
    # Stiff base; supply and collector circuit are invented, the change of IE does not depend on them.
    g = row.given
    fall = 1e-3 * g["dVBE_mV_per_C"] * (g["T2_C"] - g["T1_C"])
    cold, warm = (
        stage("fixed_base", vcc=15.0, vbb=5.0, vbe=v, hfe=100.0, rb=1e-9, rc=1e3, re=ohms(row, "RE"))["IE"]
        for v in (0.7, 0.7 - fall)
    )
    return {"dIE_uA": (warm - cold) / 1e-6}


def thermal_25_mv() -> float:
    """The temperature at which VT is the 25 mV of the sources, from the exact constants of the SI."""
    return 25e-3 / (1.380649e-23 / 1.602176634e-19)


def from_saturation_current(row: Row) -> Answers:
    g = row.given
    # IS is the current at which the law gives no voltage; the difference of two currents leaves VT*ln(IC/IS) alone.
    q = Transistor(hfe=Spread.exact(100.0), vbe=Spread.exact(0.7), vbe_ic=1e-3)
    t, rc = thermal_25_mv(), ohms(row, "RC")

    def vbe(ic: float) -> float:
        return float(q.vbe_at(ic, t) - q.vbe_at(g["IS_A"], t))

    # The base is fed from VCC with a gain of 100 (both invented) by what gives the wanted VCE.
    def found(rb: float) -> Answers:
        return stage("fixed_base", vcc=g["VCC_V"], vbe=0.7, hfe=100.0, rb=rb, rc=rc)

    ic = found(value_for(g["VCE_V"], lambda rb: found(rb)["VCE"], 700e3, 2e6))["IC"]
    return {"IC_mA": ic / 1e-3, "VBE_mV": vbe(ic) / 1e-3}


# ---------------------------------------------------------------------------------------------- collector feedback


def feedback_resistor(row: Row) -> Answers:
    g = row.given
    ic = 1e-3 * g["IC_mA"]
    # RC carries IC and the base current.
    rc = (g["VCC_V"] - g["VCE_V"]) / (ic + ic / g["hFE"])

    def current(rb: float) -> float:
        return given_stage(row, "collector_feedback", "", rb=rb, rc=rc)["IC"]

    return {"RB_kohm": value_for(ic, current, 10e3, 1e6) / 1e3}


def intrinsic_feedback(row: Row) -> Answers:
    found = given_stage(row, "collector_feedback", "rb=RF rc=RC")
    return {**read(row, found), **intrinsic(found)}


# ---------------------------------------------------------------------------------------------- two supplies

BASE_GROUNDED = 1e-9
"""A base resistor that does not matter."""


def two_supplies_warm_and_cold(row: Row) -> Answers:
    g = row.given
    one, two = (given_stage(row, "two_supply", "rb=RB rc=RC re=RE", hfe=g[f"beta_{k}"], vbe=g[f"VBE_{k}_V"]) for k in (1, 2))
    change = {f"d{name}_percent": 100.0 * (two[name] / one[name] - 1.0) for name in ("IC", "VCE")}
    return {"VCE1_V": one["VCE"], "VCE2_V": two["VCE"], **change}


def two_supplies_by_design(row: Row) -> Answers:
    g = row.given
    t, ic = thermal_25_mv(), 1e-3 * g["IC_mA"]
    q = Transistor(hfe=Spread.exact(100.0), vbe=Spread.exact(0.7), vbe_ic=1e-3)
    vbe = g["VBE_at_1mA_V"] + float(q.vbe_at(ic, t) - q.vbe_at(1e-3, t))

    def found(re: float, rc: float) -> Answers:
        return given_stage(row, "two_supply", "", vbe=vbe, rb=BASE_GROUNDED, re=re, rc=rc)

    re = value_for(ic, lambda r: found(r, 1e3)["IC"], 5e3, 10e3)
    rc = value_for(g["VC_V"], lambda r: found(re, r)["VC"], 1e3, 6e3)
    return {"RC_kohm": rc / 1e3, "VBE_V": vbe, "IE_mA": found(re, rc)["IE"] / 1e-3, "RE_kohm": re / 1e3}


# ---------------------------------------------------------------------------------------------- follower


def follower_below_ground(row: Row) -> Answers:
    # Collector and base resistor at 0 V, emitter resistor at VEE: the supply is VEE's magnitude.
    return read(row, given_stage(row, "follower", "r1=RB re=RE", vcc=-row.given["VEE_V"]))


def intrinsic_follower(row: Row) -> Answers:
    found = given_stage(row, "follower", "r1=RB re=RE")
    return {**read(row, found), **intrinsic(found)}


def follower_by_design(row: Row) -> Answers:
    g = row.given
    r1 = ohms(row, "R1_chosen")

    def found(r2: float, re: float) -> Answers:
        return given_stage(row, "follower", "", hfe=NO_BASE_CURRENT, r1=r1, r2=r2, re=re)

    r2 = value_for(g["VE_V"], lambda r: found(r, 7.5e3)["VE"], r1, 2 * r1)
    re = value_for(1e-3 * g["IQ_mA"], lambda r: found(r2, r)["IE"], 1e3, 100e3)
    return {"R2_over_R1": r2 / r1, "VB_V": found(r2, re)["VB"], "RE_kohm": re / 1e3}


# ---------------------------------------------------------------------------------------------- current sink


def sink_below_ground(row: Row) -> Answers:
    # The divider and the collector's load end at 0 V, re at VEE, which is the 0 V of the network.
    span = -row.given["VEE_V"]
    found = given_stage(row, "sink", "r1=R1 r2=R2 re=RE", vcc=span)
    return read(row, {**found, **{node: found[node] - span for node in ("VB", "VE")}})


def sink_on_a_reference(row: Row) -> Answers:
    # The source gives neither supply nor feed: 15 V and 1 kohm are invented, the current does not depend on them.
    return read(row, given_stage(row, "sink", "re=RE", vcc=15.0, vref=row.given["VZ_V"], r1=1e3))


def sink_with_its_load(row: Row) -> Answers:
    # The feed of the reference is invented, 1 kohm; the load is no part of the network: its drop is taken off by hand.
    found = given_stage(row, "sink", "re=RE", vref=row.given["Vref_base_V"], r1=1e3)
    return {"VC_V": row.given["VCC_V"] - ohms(row, "RC") * found["IC"]}


# ---------------------------------------------------------------------------------------------- the rows

EXAMPLES: dict[str, dict[str, Example]] = {
    "divider": {
        "LEC-7": divider_from_a_feed,
        "ED-5.3": plain_divider,
        "ED-5.4": pnp_divider,
        "ED-6.8": split_emitter_resistor,
        "EP-8.1": plain_divider,
        "EP-8.3": plain_divider,
        "EP-8.7": pnp_divider,
        "MC-5.10": plain_divider,
        "EDCT-4.7a": plain_divider,
        "EDCT-4.7b": plain_divider,
        "EDCT-4.8": plain_divider,
        "EDCT-5.2": lambda row: intrinsic(divider(row)),
        "IE-9.1": two_gains,
        "E84-F05": plain_divider,
        "MCD-4R": four_resistor,
        "MCD-WC": worst_case,
        "ECAD-3.14": plain_divider,
        "EDC-5.7": range_of_gains,
        "EDC1-5.5": between_two_supplies,
    },
    "fixed_base": {
        "LEC-1": fixed_base_two_gains,
        "LEC-6": fixed_base_two_gains,
        "ED-5.1": plain("fixed_base", "rb=RB rc=RC"),
        "ED-5.6": warm_and_cold,
        "EP-6.8": plain("fixed_base", "rb=RB rc=RC"),
        "MC-5.2": from_saturation_current,
        "MC-5.4": stiff_base,
        "MC-5.14": plain("fixed_base", "rb=RBB rc=RC"),
        "EDCT-4.4": emitter_bias,
        "EDCT-5.3": intrinsic_fixed_base,
        "ECAD-3.6": plain("fixed_base", "rb=RB rc=RC re=RE"),
        "IE-9.3a": drift_over_temperature,
        "EDCT-S1": leakage_stability,
        "EDCT-S2": vbe_stability,
        "EDCT-S3": gain_stability,
        "EDC1-5.11": gain_stability,
        "EDC-5.19": vbe_drift,
        "EDC-5.17a": leakage_stability_of("fixed_base"),
    },
    "collector_feedback": {
        "ED-5.8": plain("collector_feedback", "rb=RB rc=RC"),
        "EDCT-4.11a": plain("collector_feedback", "rb=RF rc=RC re=RE"),
        "EDCT-4.11b": plain("collector_feedback", "rb=RF rc=RC re=RE"),
        "EDCT-5.9": intrinsic_feedback,
        "EDC-5.5": plain("collector_feedback", "rb=RB rc=RC"),
        "EDC-5.12": feedback_resistor,
        "EDC-5.17b": leakage_stability_of("collector_feedback"),
    },
    "two_supply": {
        "ED-5.7": two_supplies_warm_and_cold,
        "MC-5.1": two_supplies_by_design,
        "SCA-5.11": plain("two_supply", "rc=RC re=RE", rb=BASE_GROUNDED),
        "ECAD-3.7": plain("two_supply", "rc=RC re=RE", rb=BASE_GROUNDED),
        "ECAD-4.8": plain("two_supply", "rb=RB rc=RC re=RE"),
    },
    "follower": {
        "EDCT-4.16": follower_below_ground,
        "EDCT-5.7": intrinsic_follower,
        "AE-EF": follower_by_design,
    },
    "sink": {
        "EDCT-CS": sink_below_ground,
        "EDCT-CSZ": sink_on_a_reference,
        "SCA-5.5": sink_with_its_load,
    },
}
"""How each row is put to the code, by network; a network that is not here has no worked example in our sources."""
NETWORK = {name: network for network, examples in EXAMPLES.items() for name in examples}
SOLVED = {name: example for examples in EXAMPLES.values() for name, example in examples.items()}

ROUNDED_FIRST = {
    # Half a unit of the printed IC times the resistance that it flows through.
    ("EDCT-4.4", "VCE_V"): 0.005e-3 * 3e3,
    ("EDCT-4.4", "VC_V"): 0.005e-3 * 2e3,
    ("EDCT-4.4", "VCE_V_beta100"): 0.005e-3 * 3e3,
    ("IE-9.1", "VCE_V_beta200"): 0.005e-3 * 6.6e3,
    ("MCD-4R", "VCE_V"): 0.5e-6 * 38e3,
    # Half a unit of IB, 2.69 uA, times the gain of 75 (the text works from rounded figures).
    ("MCD-4R", "IC_uA"): 0.005 * 75,
    # Half a unit of the printed IC through the RC of that corner, and of the printed VEQ.
    ("MCD-WC", "VCE_max_V"): 0.5e-6 * 0.9 * 22e3 + 0.005,
    ("MCD-WC", "VCE_min_V"): 0.5e-6 * 1.1 * 22e3 + 0.005,
    # Cut off at the last printed figure, which may take a whole unit of it; the change of VCE from two such figures.
    ("ED-5.7", "VCE1_V"): 0.005,
    ("ED-5.7", "dVCE_percent"): 0.005 + 100.0 * 0.01 / 14.61,
    # Half a unit of the printed IB times 101, and that with half a unit of the printed IE in 26 mV/IE.
    ("EDCT-5.7", "IE_mA"): 0.005e-3 * 101,
    ("EDCT-5.7", "re_ohm"): 12.61 * (0.0005 + 0.005e-3 * 101) / 2.062,
    ("EDCT-5.9", "re_ohm"): 11.21 * 0.005 / 2.32,
    # Half a unit of the printed stability factor times the 0.17 V of change, in microamperes.
    ("EDCT-S2", "dIC_uA_fixed"): 0.5e-6 * 0.17 / 1e-6,
    # A sum of three terms that are printed to 1 uA.
    ("IE-9.3a", "dIC_mA_175C"): 3 * 0.0005,
    ("IE-9.3a", "dIC_mA_-65C"): 3 * 0.0005,
}
"""What the source's rounding of an intermediate figure may move an answer by, in the answer's unit."""


@dataclass(frozen=True)
class Check:
    """One printed figure beside the computed one; every number in the unit that the key names."""

    row: Row
    network: str
    key: str
    computed: float

    @property
    def printed(self) -> str:
        return self.row.printed[self.key]

    @property
    def exact(self) -> float:
        return self.row.exact[self.key]

    @property
    def approximate(self) -> float:
        return self.row.approximate[self.key]

    @property
    def last_digit(self) -> float:
        """One unit of the last printed figure."""
        return float(Decimal(1).scaleb(int(Decimal(self.printed).as_tuple().exponent)))

    @property
    def rounding(self) -> float:
        """What the source's rounding allows between the printed figure and its own approximation."""
        # A derived figure has six digits of its own.
        return 0.5 * self.last_digit + ROUNDED_FIRST.get((self.row.id, self.key), 0.0) + SIX_DIGITS * abs(self.approximate)

    @property
    def approximation(self) -> float:
        """What the source's approximation leaves out: the exact circuit against the source's own rule."""
        return self.exact - self.approximate

    @property
    def allowed(self) -> float:
        """What rounding and approximation allow between the printed figure and the exact circuit."""
        return self.rounding + abs(self.approximation)

    @property
    def difference(self) -> float:
        return self.computed - float(self.printed)

    @property
    def ok(self) -> bool:
        """As exact as the derived figure is written, and as near the printed one as the source allows."""
        return abs(self.computed - self.exact) <= SIX_DIGITS * abs(self.exact) and abs(self.difference) <= self.allowed


@cache
def answers(name: str) -> Answers:
    """Everything that the code computes for a row, in the units of its keys."""
    return SOLVED[name](ROWS[name])


def check(name: str, key: str) -> Check:
    return Check(ROWS[name], NETWORK[name], key, answers(name)[key])


def checks() -> Iterator[Check]:
    """Every printed figure, network by network."""
    for name in SOLVED:
        for key in ROWS[name].printed:
            yield check(name, key)
