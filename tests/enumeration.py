"""Full enumeration of small search spaces: the slow equivalent that the exact search is tested against.

Every combination is judged over its whole box and the qualifying ones are sorted by the order rule of section 6 of the
design; nothing is pruned. `random_spaces` draws the spaces, and `worst` is a second worst case by brute force that takes
the circuit from nodal analysis and solves it by Newton's method, so that it shares neither formula nor strategy with the
package. All figures are invented.
"""

from __future__ import annotations

import itertools
import zlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import nodal
import numpy as np
from numpy.typing import NDArray

from synth.box import Box, Meter
from synth.catalogue import ResistorStyle, derating, deratings, resistor_style
from synth.limits import Surroundings, judge, requirements
from synth.networks import NETWORKS, Network
from synth.parts import Pairs, Parts
from synth.quantities import Interval, Spread
from synth.reference import Reference
from synth.signal import Signal
from synth.spaces import Goal, Index, Space
from synth.stress import TransistorRatings
from synth.transistor import Transistor

Array = NDArray[np.float64]

K_OVER_Q = 1.380649e-23 / 1.602176634e-19
"""Both constants are exact in the SI of 2019 [V/K]."""
ROOM = 298.15
INF = float("inf")


# --- Enumeration --------------------------------------------------------------------------------------------------


@dataclass(frozen=True, kw_only=True)
class Row:
    """One qualifying combination, with what the order rule looks at."""

    space: int
    index: tuple[int, ...]
    drift: float
    drifts: Mapping[str, float]
    key: tuple[object, ...]


def every_index(space: Space) -> Index:
    """All combinations of list positions, shape (combinations, roles)."""
    sizes = [range(space.lists[role].nominal.size) for role in space.roles]
    return np.array(list(itertools.product(*sizes)), dtype=np.int32)


def drifts(worst: Mapping[tuple[str, int], Array], goal: Goal) -> dict[str, Array]:
    """Largest relative excursion from the target of every quantity that has one."""
    targets = {"ic": goal.ic, "vce": goal.vce, "vc": goal.vc, "ve": goal.ve}
    return {
        name: np.maximum(worst[name, 1] - target, target - worst[name, -1]) / target
        for name, target in targets.items()
        if target is not None
    }


def order_figures(space: Space, index: Index, goal: Goal) -> list[tuple[object, ...]]:
    """What follows drift in the order rule: centring, supply current, number of resistors and of distinct values,
    network name, values in role order."""
    box = space.box(index, Meter())
    values = box.nominal()
    q = box.solve(values)
    branches = box.branches(values, q)
    supply = np.max([np.broadcast_to(i, (box.size,)) for i in branches.rail.values()], axis=0)
    reached = {"ic": q.ic, "vce": q.vce, "vc": branches.nodes["c"], "ve": branches.voltage.get("re", 0.0)}
    targets = {"ic": goal.ic, "vce": goal.vce, "vc": goal.vc, "ve": goal.ve}
    every = [np.abs(reached[name] / target - 1.0) for name, target in targets.items() if target is not None]
    off = np.max(np.broadcast_arrays(*every), axis=0)
    ohms = np.stack([box.parts[role].nominal for role in space.roles], axis=1)
    bought = [[ohm for role in space.roles for ohm in _bought(box.parts[role], k)] for k in range(box.size)]
    return [
        (float(off[k]), float(supply[k]), len(bought[k]), len(set(bought[k])), space.network.name, tuple(row))
        for k, row in enumerate(ohms.tolist())
    ]


def _bought(part: Parts, k: int) -> list[float]:
    """Resistances of the one or two resistors that a candidate has in a role."""
    if part.pairs is None:
        return [float(part.nominal[k])]
    positions = [part.pairs.first[k], part.pairs.second[k]][: 1 if part.pairs.join[k] == 0 else 2]
    return [float(part.pairs.base.nominal[at]) for at in positions]


def enumerate_all(spaces: Sequence[Space], goal: Goal, *, brute: bool = False) -> list[Row]:
    """Every qualifying combination, best first; with `brute` the extremes of IC and VCE are those of `worst`."""
    rows: list[Row] = []
    for number, space in enumerate(spaces):
        index = every_index(space)
        box = space.box(index, Meter())
        extremes: dict[tuple[tuple[str, ...], int], tuple[Array, dict[str, Array]]] = {}

        def extreme(
            names: Sequence[str], side: int, box: Box = box, extremes: dict[Any, Any] = extremes
        ) -> tuple[Array, dict[str, Array]]:
            key = (tuple(names), side)
            if key not in extremes and brute and names[0] in ("ic", "vce", "vc", "ve") and len(names) == 1:
                extremes[key] = worst(box, names[0], side), {}
            elif key not in extremes:
                found = box.extreme(names, side)
                extremes[key] = found.value, found.at
            return extremes[key]

        aims = dict.fromkeys(("ic", "vce", *(name for name in ("vc", "ve") if getattr(goal, name) is not None)))
        ends = {(q, side): extreme((q,), side)[0] for q in aims for side in (1, -1)}
        found = drifts(ends, goal)
        passed = np.ones(len(index), dtype=bool)
        for need in space.requirements:
            passed &= judge(box, need, extreme).passed
        keep = np.flatnonzero(passed)
        if not keep.size:
            continue
        for k, figures in zip(keep, order_figures(space, index[keep], goal), strict=True):
            drift = float(max(d[k] for d in found.values()))
            rows.append(
                Row(
                    space=number,
                    index=tuple(int(i) for i in index[k]),
                    drift=drift,
                    drifts={name: float(d[k]) for name, d in found.items()},
                    key=(float(f"{drift:.11e}"), *figures),
                )
            )
    return sorted(rows, key=lambda row: row.key)


# --- Random spaces ------------------------------------------------------------------------------------------------

AMBIENTS = ((0.0, 70.0), (-40.0, 85.0), (-55.0, 125.0), (25.0, 70.0), (-20.0, 25.0), (40.0, 85.0), (25.0, 25.0))
BANDS = (0.0, 0.001, 0.01, 0.02, 0.05, 0.1, 0.2)
TCRS = ((-1e-4, 1e-4), (-4e-4, 4e-4), (0.0, 0.0), (-2e-4, 8e-4), (-1e-3, -2e-4))
LEAKAGES = ("none", "none", "limit", "limit", "least", "dominant")
"""No ICBO; a limit; never below a minimum; so much that at the hot end ICEO exceeds the target IC."""


def generator(*keys: object) -> np.random.Generator:
    """A generator for a named case, the same on every machine."""
    return np.random.default_rng(zlib.crc32(repr(keys).encode()))


def _spread(rng: np.random.Generator, nominal: float, widths: Sequence[float]) -> Spread:
    down, up = rng.choice(widths, 2)
    return Spread(nominal * (1.0 - down), nominal, nominal * (1.0 + up))


def random_surroundings(
    rng: np.random.Generator, ic: float, leakages: Sequence[str] = LEAKAGES
) -> tuple[Transistor, dict[str, Spread], Spread]:
    """Transistor, rails (vbb and vee included) and ambient for a target IC; the leakage is one of the kinds given."""
    germanium = rng.random() < 0.15
    low = 10.0 ** rng.uniform(1.3, 2.5)
    gain = Spread.exact(low) if rng.random() < 0.1 else Spread(low, low * 1.4, low * 10.0 ** rng.uniform(0.2, 0.7))
    cold, hot = AMBIENTS[rng.integers(len(AMBIENTS))]
    ambient = Spread(cold + 273.15, min(max(ROOM, cold + 273.15), hot + 273.15), hot + 273.15)
    growth = 2.0 ** (max(hot - 25.0, 0.0) / 10.0)
    kind = str(rng.choice(list(leakages)))
    limit = ic / gain.high / growth * 10.0 ** (rng.uniform(-0.3, 0.8) if kind == "dominant" else rng.uniform(-5.0, -1.5))
    icbo = {
        "none": Spread.exact(0.0),
        "limit": Spread(0.0, 0.0, limit),
        "least": Spread(0.3 * limit, 0.5 * limit, limit),
        "dominant": Spread(float(rng.choice([0.0, 0.5])) * limit, 0.5 * limit, limit),
    }[kind]
    vbe = 0.15 if germanium else 0.65
    printed = kind != "none" and rng.random() < 0.2
    device = Transistor(
        polarity="pnp" if rng.random() < 0.3 else "npn",
        material="germanium" if germanium else "silicon",
        hfe=gain,
        vbe=_spread(rng, vbe, (0.0, 0.03, 0.08)),
        vbe_ic=10.0 ** rng.uniform(-3.3, -2.0),
        vbe_model="fixed" if rng.random() < 0.25 else "junction",
        icbo=icbo,
        icbo_hot=(limit * growth * 2.0, max(hot, 75.0) + 273.15) if printed else None,
        vce_sat=float(rng.choice([0.1, 0.2, 0.3])),
    )
    vcc = float(rng.choice([5.0, 9.0, 12.0, 24.0]))
    rails = {"vcc": _spread(rng, vcc, (0.0, 0.02, 0.05, 0.1, 0.3))}
    if rng.random() < 0.25:
        rails["vcc"] = Spread(9.0, 12.0, 16.0)
    rails["vbb"] = _spread(rng, float(rng.choice([3.0, 5.0, 9.0])), (0.0, 0.02, 0.1))
    rails["vee"] = _spread(rng, float(rng.choice([3.0, 5.0, 12.0])), (0.0, 0.02, 0.1, 0.2))
    rails["vload"] = _spread(rng, float(rng.choice([5.0, 12.0, 24.0])), (0.0, 0.02, 0.1, 0.3))
    return device, rails, ambient


def saturation_current(device: Transistor, t: float) -> float:
    """IS(T) by section 4 of the design, which refuses a stage whose IC comes within ten times of it."""
    gap, vt = {"silicon": 1.17, "germanium": 0.744}[device.material], K_OVER_Q * t
    vbe = gap - (gap - device.vbe.nominal) * t / ROOM - 3.0 * vt * np.log(t / ROOM)
    return float(device.vbe_ic * np.exp(-vbe / vt))


def _laid_out(
    rng: np.random.Generator,
    network: Network,
    roles: Sequence[str],
    device: Transistor,
    rails: Mapping[str, Spread],
    ic: float,
    vce: float,
    reference: Reference | None = None,
) -> dict[str, float]:
    """Resistances near which the Q-point is met, by hand calculation; any resistance for an unknown network."""
    h, vcc = device.hfe.nominal, rails["vcc"].nominal
    ib, vbe = ic / h, device.vbe.nominal
    bleed = ib * 10.0 ** rng.uniform(0.3, 1.5)
    ve = rng.uniform(0.05, 0.8) * (vcc - vce)
    drop = vcc - ve - vce
    re = ve / (ic + ib)
    if network.name == "divider":
        vb = min(ve + vbe, 0.9 * vcc)
        return {"r1": (vcc - vb) / (bleed + ib), "r2": vb / bleed, "rc": drop / ic, "re": re}
    if network.name == "fixed_base":
        supply = rails.get("vbb", rails["vcc"]).nominal
        vb = min(ve + vbe, 0.8 * supply)
        return {"rb": (supply - vb) / ib, "rc": drop / ic, "re": max(vb - vbe, 0.05) / (ic + ib)}
    if network.name == "collector_feedback":
        return {"rb": max(vce - vbe, 0.1) / ib, "rc": drop / (ic + ib), "re": re}
    if network.name == "collector_divider":
        r1 = max(vce - vbe, 0.1) / (bleed + ib)
        return {"r1": r1, "r2": (ve + vbe) / bleed, "rc": drop / (ic + ib + bleed), "re": re}
    if network.name == "two_supply":
        vee, sag = rails["vee"].nominal, rng.uniform(0.02, 0.6)
        rest = vcc + sag + vbe - vce
        return {"rb": sag / ib, "rc": rest / ic, "re": max(vee - sag - vbe, 0.1) / (ic + ib)}
    if network.name == "follower":
        vb = min(vcc - vce + vbe, 0.95 * vcc)
        bleed = bleed if "r2" in roles else 0.0
        return {"r1": (vcc - vb) / (bleed + ib), "r2": vb / (bleed or ib), "re": (vcc - vce) / (ic + ib)}
    if network.name in ("diode_divider", "sink"):
        vb = min(ve + vbe, 0.8 * vcc)
        base = vb if reference is None else reference.voltage.nominal
        if network.name == "diode_divider":
            base = max(vb, base + 0.1)
        r2 = base / bleed if reference is None else max(base - reference.voltage.nominal, 0.05) / bleed
        r = {"r1": (vcc - base) / (bleed + ib), "r2": r2, "re": max(base - vbe, 0.1) / (ic + ib)}
        return {**r, "rc": drop / ic}
    return {role: vcc / ic * 10.0 ** rng.uniform(-1.0, 1.5) for role in network.role_names}


def random_reference(rng: np.random.Generator, ic: float, vcc: float) -> Reference:
    """A reference element for a target IC, with any coefficient and slope."""
    volts, at = vcc * rng.uniform(0.05, 0.4), ic * 10.0 ** rng.uniform(-1.2, 0.0)
    tc, stray = volts * rng.choice([-4e-3, -3e-4, 0.0, 8e-4]), volts * rng.choice([0.0, 2e-4, 1e-3])
    return Reference(
        kind="zener",
        voltage=_spread(rng, volts, (0.0, 0.02, 0.08)),
        current=at,
        tc=Spread(tc - stray, tc, tc + stray),
        slope=_spread(rng, volts / at * rng.uniform(0.005, 0.1), (0.0, 0.3, 0.9)),
    )


def _lengths(rng: np.random.Generator, roles: int, most: int) -> list[int]:
    """Lengths of the value lists: 1 to 12, or one list so long that the coarse pass thins it; at most `most` in all."""
    lengths = [int(n) for n in rng.integers(1, 13, roles)]
    if rng.random() < 0.25:
        lengths[rng.integers(roles)] = 1
    if rng.random() < 0.15:
        lengths = [int(n) for n in rng.integers(1, 3, roles)]
        lengths[rng.integers(roles)] = int(rng.integers(41, 61))
    while np.prod(lengths) > most:
        lengths[int(np.argmax(lengths))] -= 1
    return lengths


def _list(rng: np.random.Generator, around: float, length: int) -> Parts:
    """A drawer of values whose bands may overlap; a list of one sits near the value laid out."""
    wide = float(rng.choice([0.03, 0.1, 0.3, 1.0]))
    nominal = np.sort(around * 10.0 ** rng.uniform(-wide, wide, length))
    if length == 1:
        nominal = np.array([around * 10.0 ** rng.uniform(-0.04, 0.04)])
    tcr = np.array(TCRS)[rng.integers(len(TCRS), size=length)]
    return Parts(nominal=nominal, band=rng.choice(BANDS, length), tcr_low=tcr[:, 0], tcr_high=tcr[:, 1])


def _paired(rng: np.random.Generator, around: float, length: int) -> Parts:
    """Single resistors of unlike bands, and some of the series and parallel pairs that they make up."""
    single = _list(rng, around, int(rng.integers(2, 4)))
    if rng.random() < 0.5:
        # As a series has it: one band for all.
        single = replace(single, **{name: np.full(single.nominal.size, getattr(single, name)[0]) for name in BAND})
    n = range(single.nominal.size)
    made = [(0, a, a) for a in n] + [(join, a, b) for join in (1, 2) for a in n for b in n if a <= b]
    chosen = np.array([made[k] for k in rng.permutation(len(made))[:length]])
    join, first, second = chosen.T
    a, b = single.nominal[first], single.nominal[second]
    total = np.where(join == 0, a, np.where(join == 1, a + b, 1.0 / (1.0 / a + 1.0 / b)))
    order = np.argsort(total)
    return Parts.of_pairs(
        Pairs(base=single, join=join[order].astype(np.int8), first=first[order].astype(np.int32),
              second=second[order].astype(np.int32))
    )  # fmt: skip


BAND = ("band", "tcr_low", "tcr_high")


def _limits(
    rng: np.random.Generator, device: Transistor, goal: Goal, r: Mapping[str, float], vcc: float, stressed: bool
) -> dict[str, Interval]:
    """Some limits of each name, mostly such that something passes; now and then a range."""
    found: dict[str, Interval] = {}
    if rng.random() < 0.4:
        most = vcc / sum(r.get(role, 0.0) for role in ("r1", "r2", "rc")) * 10.0 ** rng.uniform(-0.2, 0.5)
        found["bleeder_current"] = Interval(float(rng.choice([-INF, 0.1 * most])), most)
    if rng.random() < 0.4:
        load = r.get("rc", r["re"])
        share = load / (load + r["re"])
        found["collector_share"] = Interval(share * rng.uniform(0.7, 0.99), float(rng.choice([INF, 0.5 * (1.0 + share)])))
    if rng.random() < 0.4:
        found["base_resistance"] = Interval(device.hfe.low * 0.0257 / goal.ic * 10.0 ** rng.uniform(-1.0, 0.3), INF)
    if rng.random() < 0.4:
        found["supply_current"] = Interval(float(rng.choice([-INF, goal.ic * 0.1])), goal.ic * rng.uniform(1.3, 4.0))
    if rng.random() < 0.5:
        found["compliance"] = Interval(vcc * rng.uniform(0.05, 0.6), INF)
    if stressed:
        load = r.get("rc", r["re"])
        gm = goal.ic / 0.0257
        if rng.random() < 0.3:
            found["gain"] = Interval(gm * load * 10.0 ** rng.uniform(-2.5, -0.4), float(rng.choice([INF, 2.0 * gm * load])))
        if rng.random() < 0.3:
            found["input_resistance"] = Interval(device.hfe.low / gm * 10.0 ** rng.uniform(-2.0, -0.3), INF)
        if rng.random() < 0.2:
            found["output_resistance"] = Interval(-INF, load * rng.uniform(0.8, 2.0))
        if rng.random() < 0.3:
            found["swing"] = Interval(vcc * rng.uniform(0.003, 0.1), INF)
        found["resistor_stress"] = found["transistor_stress"] = Interval(-INF, float(rng.choice([0.5, 1.0])))
    if rng.random() < 0.3:
        found["vce"] = Interval(vcc * rng.uniform(0.0, 0.15), float(rng.choice([INF, 0.95 * vcc])))
    return found


def _window(rng: np.random.Generator, target: float) -> Interval:
    if rng.random() < 0.6:
        return Interval(-INF, INF)
    return Interval(target * (1.0 - rng.uniform(0.2, 0.95)), target * (1.0 + rng.uniform(0.2, 1.5)))


def random_spaces(
    rng: np.random.Generator,
    networks: Sequence[str],
    *,
    most: int = 400,
    leakages: Sequence[str] = LEAKAGES,
    stressed: bool = False,
    paired: bool = False,
) -> tuple[list[Space], Goal]:
    """Spaces of some networks, one for each variant of rails and roles drawn, that share device, goal and windows."""
    ic = 10.0 ** rng.uniform(-5.0, -2.0)
    device, rails, ambient = random_surroundings(rng, ic, leakages)
    while device.vbe_model == "junction" and ic <= 10.0 * saturation_current(device, ambient.high):
        device, rails, ambient = random_surroundings(rng, ic, leakages)
    vcc = rails["vcc"].nominal
    vce = vcc * rng.uniform(0.2, 0.6)
    kind = str(rng.choice(["vce", "vce", "none", "vc", "ve"]))
    forms = [NETWORKS[name] for name in networks]
    if any(form.sinks or "vee" in form.rails or (kind == "vc" and "c" in form.tied) for form in forms):
        # Of a sink the load decides VCE; of two supplies VC and VE count from unlike ends.
        kind = "none" if any(form.sinks for form in forms) or kind in ("none", "vc") else "vce"
    ve = rng.uniform(0.05, 0.5) * (vcc - vce)
    goal = Goal(ic=ic, **{"none": {}, "vce": {"vce": vce}, "vc": {"vc": vce + ve}, "ve": {"ve": ve}}[kind])
    low, high = (_window(rng, vce).low, _window(rng, vce).high)
    one_sided = Interval(low, INF) if rng.random() < 0.5 else Interval(-INF, high)
    windows = {
        "ic": (_window(rng, ic), ic),
        "vce": (one_sided if goal.vce is None else _window(rng, vce), goal.vce),
        **{kind: (_window(rng, aim), aim) for kind, aim in goal.aims.items() if kind in ("vc", "ve")},
    }
    limits: dict[str, Interval] | None = None
    signal, ratings, policy = Signal(), TransistorRatings(), derating("none")
    if stressed:
        signal = _signal(rng, vcc, ic)
        watts = vcc * ic * 10.0 ** rng.uniform(-0.3, 1.3)
        known = {"vceo": vcc * rng.uniform(1.5, 5.0), "ic_max": ic * rng.uniform(1.5, 8.0), "ptot": watts}
        hot_limit = {"ptot_ambient": ROOM, "tj_max": ambient.high + rng.uniform(20.0, 100.0)}
        ratings = TransistorRatings(**{name: figure for name, figure in known.items() if rng.random() < 0.7}, **hot_limit)
        policy = derating(str(rng.choice(list(deratings()))))
    spaces = []
    for name in networks:
        network = NETWORKS[name]
        variants = list(nodal.variants(network))
        used, roles = variants[rng.integers(len(variants))]
        own = {rail: rails[rail] for rail in used if rail not in nodal.REFERENCE}
        reference = random_reference(rng, ic, vcc) if "vref" in used else None
        r = _laid_out(rng, network, roles, device, own, ic, vce, reference)
        if "ve" in goal.aims and "re" not in roles:
            roles = tuple(role for role in network.role_names if role in (*roles, "re"))
        if limits is None:
            limits = _limits(rng, device, goal, r, vcc, stressed)
        if reference is not None:
            limits = {**limits, "reference_current": Interval(reference.current * rng.uniform(0.05, 0.6), INF)}
        lengths = _lengths(rng, len(roles), most)
        lists = {role: _list(rng, r[role], n) for role, n in zip(roles, lengths, strict=True)}
        if paired:
            pairs = {role: n for role, n in zip(roles, lengths, strict=True) if rng.random() < 0.7}
            lists |= {role: _paired(rng, r[role], n) for role, n in pairs.items()}
        styles = {}
        if stressed:
            # A style such that its rating is somewhere near what the resistor has to carry.
            styles = {role: invented_style(ic**2 * r[role] * 10.0 ** rng.uniform(0.6, 2.5), vcc * rng.uniform(0.8, 4.0))
                      for role in roles if rng.random() < 0.6}  # fmt: skip
        spaces.append(
            Space(
                network=network,
                lists=lists,
                transistor=device,
                rails=own,
                temperature=ambient,
                requirements=requirements(
                    network,
                    Surroundings(rails=own, roles=roles, reference=reference, vce_sat=device.vce_sat, hot=ambient.high,
                                 styles=styles, ratings=ratings, derating=policy,
                                 paired=[role for role in roles if lists[role].pairs is not None]),
                    limits,
                    limits if rng.random() < 0.5 else (),
                    windows,
                ),
                reference=reference,
                signal=signal,
                styles=styles,
                derating=policy,
            )
        )
    return spaces, goal


def _signal(rng: np.random.Generator, vcc: float, ic: float) -> Signal:
    """Any condition of the signal: bypass, load and source."""
    bypass = str(rng.choice(["full", "full", "none", "part"]))
    unbypassed = 0.02 * vcc / ic * 10.0 ** rng.uniform(-1.0, 0.5) if bypass == "part" else None
    load = vcc / ic * 10.0 ** rng.uniform(-0.5, 1.0) if rng.random() < 0.6 else None
    return Signal(bypass=bypass, unbypassed=unbypassed, load=load, source=float(rng.choice([0.0, 100.0, 1e4])))  # type: ignore[arg-type]


def invented_style(power: float, volts: float) -> ResistorStyle:
    """A chip of any rating, made at any resistance; full power to 70 °C, none at 155 °C, as makers' sheets have it."""
    row = resistor_style("0805")
    return replace(row, power_w_conservative=power, max_working_voltage_v=volts, r_min_ohm=1e-3, r_max_ohm=1e12)


# --- Worst case by brute force ------------------------------------------------------------------------------------


def _device(device: Transistor, p: Mapping[str, Array]) -> tuple[Array, Array, Array, Array]:
    """VT, VBE of this unit at IC0, hFE and ICBO at temperature, by section 4 of the design."""
    t = p["temperature"]
    vt = K_OVER_Q * t
    vbe = device.vbe.nominal + 0.0 * t
    if device.vbe_model == "junction":
        gap = {"silicon": 1.17, "germanium": 0.744}[device.material]
        vbe = gap - (gap - device.vbe.nominal) * t / ROOM - 3.0 * vt * np.log(t / ROOM)
    gain = p["hfe"] * (t / ROOM) ** np.where(t >= ROOM, 1.5, 2.5)
    growth = np.log(2.0) / 10.0
    if device.icbo_hot is not None and device.icbo.high > 0.0:
        growth = np.log(device.icbo_hot[0] / device.icbo.high) / (device.icbo_hot[1] - ROOM)
    return vt, vbe + p["delta"], gain, p["icbo"] * np.exp(growth * (t - ROOM))


def q_point(network: Network, device: Transistor, p: Mapping[str, Array]) -> dict[str, Array]:
    """IC and VCE by the active-region law, of parameters of one common shape: the circuit by nodal analysis, the
    junction by Newton's method in ln IC from the right of its root, where it cannot overshoot."""
    shape = np.broadcast_shapes(*(np.shape(x) for x in p.values()))
    flat = {name: np.broadcast_to(x, shape).ravel() for name, x in p.items()}
    sources = (*network.rails, *network.optional_rails, *nodal.REFERENCE)
    rails = {name: flat[name] for name in sources if name in flat}
    circuit = nodal.Circuit(network, rails, {role: flat[role] for role in network.role_names if role in flat})
    vt, vbe, h, leak = _device(device, flat)
    e_b, e_c = circuit.open(0.0, 0.0)
    from_ib, from_ic = circuit.open(1.0, 0.0), circuit.open(0.0, 1.0)
    offset = leak * (1.0 + 1.0 / h)
    load = (e_b - from_ib[0]) / h + (e_b - from_ic[0])
    drive = e_b + (e_b - from_ib[0]) * offset - vbe
    if device.vbe_model == "fixed":
        ic = np.maximum(drive, 0.0) / load
    else:
        y = np.minimum(drive / vt, np.log(np.maximum(drive / (load * device.vbe_ic), 1.0)))
        for _ in range(60):
            current = load * device.vbe_ic * np.exp(y)
            step = (drive - vt * y - current) / (vt + current)
            y = y + step
            if np.max(np.abs(step)) < 1e-14:
                break
        ic = device.vbe_ic * np.exp(y)
    ib = ic / h - offset
    vce = e_c - (e_c - from_ib[1]) * ib - (e_c - from_ic[1]) * ic
    # Every network here has the far end of re at 0 V, or at the negative one of two supplies.
    ve = flat.get("re", 0.0) * (ic + ib)
    found = {"ic": ic, "vce": vce, "ve": ve, "vc": vce + ve - flat.get("vee", 0.0)}
    return {name: x.reshape(shape) for name, x in found.items()}


def place(box: Box, u: Mapping[str, Array]) -> dict[str, Array]:
    """Parameters at relative positions 0..1 along every axis of a box; temperature too is relative."""
    t = box.temperature.low + box.temperature.width * u["temperature"]
    vbe, rise = box.transistor.vbe, t - ROOM
    spreads = {**box.rails, "hfe": box.transistor.hfe, "icbo": box.transistor.icbo}
    found = {name: spread.low + spread.width * u[name] for name, spread in spreads.items()}
    found["delta"] = vbe.low + vbe.width * u["delta"] - vbe.nominal
    found["temperature"] = t
    if box.reference is not None:
        ref = box.reference
        slope = ref.slope.low + ref.slope.width * u["r_ref"]
        ends = (ref.tc.low * rise, ref.tc.high * rise)
        low, high = ref.voltage.low + np.minimum(*ends), ref.voltage.high + np.maximum(*ends)
        found["r_ref"], found["vref"] = slope, low + (high - low) * u["delta_ref"] - slope * ref.current
    for role, part in box.parts.items():
        low, high = _ends(part, rise)
        found[role] = low + (high - low) * u[role]
    return found


def _ends(part: Parts, rise: Array) -> tuple[Array, Array]:
    """Least and greatest resistance; of a pair from the conductances or resistances of its parts, each at its own end."""
    if part.pairs is not None:
        base = part.pairs.base
        halves = [_ends(base.take(at), rise) for at in (part.pairs.first, part.pairs.second)]
        (a, c), (b, d) = halves
        join = part.pairs.join
        low = np.where(join == 0, a, np.where(join == 1, a + b, 1.0 / (1.0 / a + 1.0 / b)))
        return low, np.where(join == 0, c, np.where(join == 1, c + d, 1.0 / (1.0 / c + 1.0 / d)))
    ends = (part.tcr_low * rise, part.tcr_high * rise)
    low, high = 1.0 - part.band + np.minimum(*ends), 1.0 + part.band + np.maximum(*ends)
    return part.nominal * low, part.nominal * high


def worst(box: Box, quantity: str, direction: int, temperatures: int = 5, rounds: int = 18) -> Array:
    """Extreme of IC or VCE of every candidate of a box: all vertices at a row of temperatures, then a zoom from the best
    vertex of each temperature.

    The zoom looks along one axis after the other around the best point so far, in ever smaller steps; it assumes nothing
    of which axis matters or which way.
    """
    spreads = {**box.rails, "delta": box.transistor.vbe, "hfe": box.transistor.hfe, "icbo": box.transistor.icbo}
    if box.reference is not None:
        spreads |= {"delta_ref": box.spreads["delta_ref"], "r_ref": box.reference.slope}
    wide = [name for name, spread in spreads.items() if spread.width > 0.0] + list(box.parts)
    still = {name: np.zeros(1) for name in spreads if name not in wide}
    ambient = box.temperature
    row = np.linspace(0.0, 1.0, temperatures) if ambient.width > 0.0 else np.zeros(1)
    if ambient.low < ROOM < ambient.high:
        row = np.append(row, (ROOM - ambient.low) / ambient.width)
    corners = np.array(list(itertools.product((0.0, 1.0), repeat=len(wide))))

    def height(u: Mapping[str, Array]) -> Array:
        return np.asarray(direction * q_point(box.network, box.transistor, place(box, u))[quantity])

    everywhere = {**still, **{axis: corners[:, j, None, None] for j, axis in enumerate(wide)}, "temperature": row[:, None]}
    heights = np.broadcast_to(height(everywhere), (len(corners), len(row), box.size))
    best, corner = heights.max(axis=0), heights.argmax(axis=0)
    at = {**still, **{axis: corners[corner, j] for j, axis in enumerate(wide)}}
    at["temperature"] = np.repeat(row[:, None], box.size, axis=1)
    step = 0.5
    for _ in range(rounds):
        for axis in (*wide, "temperature") if ambient.width > 0.0 else wide:
            tries = np.clip(at[axis] + step * np.linspace(-1.0, 1.0, 5)[:, None, None], 0.0, 1.0)
            heights = np.broadcast_to(height({**at, axis: tries}), tries.shape)
            better = heights.max(axis=0) > best
            best = np.where(better, heights.max(axis=0), best)
            at[axis] = np.where(better, np.take_along_axis(tries, heights.argmax(axis=0)[None], axis=0)[0], at[axis])
        step *= 0.5
    return direction * best.max(axis=0)
