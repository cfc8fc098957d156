"""Random boxes for the tests, and a second way to solve them that shares nothing with the package.

The laws are written out again from section 4 of the design, as the node equations of each circuit rather than as a
two-port, and solved by Newton's method rather than by a special function. All of it also takes complex numbers, so that
a complex step gives derivatives to the last bit.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from synth.box import Box
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.quantities import Spread
from synth.reference import Reference
from synth.transistor import Transistor

Numbers = NDArray[Any]

SOLVED = (
    "collector_divider", "collector_feedback", "diode_divider", "divider", "fixed_base", "follower", "sink", "two_supply",
)  # fmt: skip
"""Networks whose node equations are written out here."""
SATURATING = ("diode_divider", "divider", "fixed_base", "two_supply")
"""Those of them that can saturate: the collector neither feeds the base nor sits on the rail."""

K_OVER_Q = 1.380649e-23 / 1.602176634e-19
"""Both constants are exact in the SI of 2019 [V/K]."""
ROOM = 298.15
GAP = {"silicon": 1.17, "germanium": 0.744}


def position(box: Box) -> tuple[str, ...]:
    """Every coordinate of a box, in a fixed order, whether it has a width or not."""
    reference = ("delta_ref", "r_ref") if box.reference is not None else ()
    return (*box.rails, "delta", "hfe", "icbo", *reference, *box.parts, "temperature")


def _between(spread: Spread, u: Numbers) -> Numbers:
    return spread.low + (spread.high - spread.low) * u


def point(box: Box, u: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Parameters at relative positions 0..1 along every coordinate; temperature too is relative."""
    vbe = box.transistor.vbe
    t = _between(box.temperature, u["temperature"])
    found: dict[str, Numbers] = {"temperature": t}
    for rail, spread in box.rails.items():
        found[rail] = _between(spread, u[rail])
    found["delta"] = vbe.low - vbe.nominal + (vbe.high - vbe.low) * u["delta"]
    found["hfe"] = _between(box.transistor.hfe, u["hfe"])
    found["icbo"] = _between(box.transistor.icbo, u["icbo"])
    rise = t - ROOM
    warm = np.real(rise) >= 0.0
    if box.reference is not None:
        ref = box.reference
        found["r_ref"] = _between(ref.slope, u["r_ref"])
        # A unit of its own voltage and its own coefficient, each anywhere in its spread.
        least = ref.voltage.low + np.where(warm, ref.tc.low, ref.tc.high) * rise
        most = ref.voltage.high + np.where(warm, ref.tc.high, ref.tc.low) * rise
        volts = least + (most - least) * u["delta_ref"]
        found["delta_ref"] = volts - (ref.voltage.nominal + ref.tc.nominal * rise)
        found["vref"] = volts - ref.current * found["r_ref"]
    for role, part in box.parts.items():
        least = -part.band + np.where(warm, part.tcr_low, part.tcr_high) * rise
        most = part.band + np.where(warm, part.tcr_high, part.tcr_low) * rise
        found[role] = part.nominal * (1.0 + least + (most - least) * u[role])
    return found


def circuit(box: Box, values: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Parameters of a box as the node equations take them: a reference element by its voltage without current."""
    if box.reference is None:
        return dict(values)
    ref = box.reference
    volts = ref.voltage.nominal + ref.tc.nominal * (values["temperature"] - ROOM) + values["delta_ref"]
    return {**values, "vref": volts - ref.current * values["r_ref"]}


def _device(device: Transistor, p: Mapping[str, Numbers]) -> tuple[Numbers, Numbers, Numbers, Numbers]:
    """VT, VBE of this unit at IC0, hFE and ICBO at temperature."""
    t = p["temperature"]
    vt = K_OVER_Q * t
    ratio = t / ROOM
    if device.vbe_model == "fixed":
        vbe = device.vbe.nominal + p["delta"] + 0.0 * t
    else:
        gap = GAP[device.material]
        vbe = gap - (gap - device.vbe.nominal) * ratio - 3.0 * vt * np.log(ratio) + p["delta"]
    exponent = np.where(np.real(t) >= ROOM, 1.5, 2.5)
    gain = p["hfe"] * np.exp(exponent * np.log(ratio))
    if device.icbo_hot is None:
        growth = np.log(2.0) / 10.0
    else:
        growth = np.log(device.icbo_hot[0] / device.icbo.high) / (device.icbo_hot[1] - ROOM)
    return vt, vbe, gain, p["icbo"] * np.exp(growth * (t - ROOM))


def _feed(network: str, p: Mapping[str, Numbers]) -> tuple[Numbers, Numbers, Numbers, bool]:
    """Source, conductance from it to the base, conductance of the lower leg, and whether the source is the collector.

    The lower leg goes to 0 V, or to the source of a reference element.

    Voltages count from the far end of re: 0 V, or the negative rail of a stage with two supplies.
    """
    none = np.zeros(())
    if network in ("divider", "follower", "diode_divider", "sink"):
        lower = p.get("r2", 0.0) + p.get("r_ref", 0.0)
        return p["vcc"], 1.0 / p["r1"], 1.0 / lower if np.any(lower) else none, False
    if network == "fixed_base":
        return p.get("vbb", p["vcc"]), 1.0 / p["rb"], none, False
    if network == "two_supply":
        return p["vee"], 1.0 / p["rb"], none, False
    if network == "collector_feedback":
        return p["vcc"], 1.0 / p["rb"], none, True
    assert network == "collector_divider", network
    return p["vcc"], 1.0 / p["r1"], 1.0 / p["r2"], True


def _report(network: str, p: Mapping[str, Numbers], ic: Numbers, ib: Numbers, vb: Numbers) -> dict[str, Numbers]:
    """Every quantity, by Ohm's law from the transistor's currents and the base voltage."""
    source, g1, g2, from_collector = _feed(network, p)
    ve = p.get("re", 0.0) * (ic + ib)
    feed = ib + (vb - p.get("vref", 0.0)) * g2
    vc = p.get("vload", p["vcc"]) + p.get("vee", 0.0) - p.get("rc", 0.0) * (ic + feed if from_collector else ic)
    found = {"ic": ic, "ib": ib, "vbe": vb - ve, "vce": vc - ve}
    found["i_r1" if "r1" in p else "i_rb"] = ((vc if from_collector else source) - vb) * g1
    if "r2" in p:
        found["i_r2"] = (vb - p.get("vref", 0.0)) * g2
    if "vref" in p:
        found["i_ref"] = (vb - p["vref"]) * g2
    found["ve"] = ve + 0.0 * ic
    # Of two supplies the collector counts from their common point.
    found["vc"] = vc - p.get("vee", 0.0)
    return found


def active(network: str, device: Transistor, p: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Every quantity by the active-region law, from Kirchhoff's current law at the base.

    (VS − VB)·G1 − VB·G2 = IB with VB = VBE + re·(IC + IB), IB = (IC − (h+1)·ICBO)/h and IC = IC0·exp(y); a feed from the
    collector comes from VS − rc·IC through rc and its resistor in series. The residual falls and is concave in y, so
    Newton's method from the right of its root never overshoots.
    """
    vt, vbe0, h, leak = _device(device, p)
    source, g1, g2, from_collector = _feed(network, p)
    re = p.get("re", 0.0)
    if from_collector:
        g1 = g1 / (1.0 + p["rc"] * g1)
    g = g1 + g2
    offset = leak * (1.0 + 1.0 / h)
    # Residual = drive − g·(VBE − vbe0) − load·IC.
    below = p.get("vref", 0.0) * g2
    drive = source * g1 + below - g * (vbe0 - re * offset) + offset
    load = g * re * (1.0 + 1.0 / h) + 1.0 / h + (p["rc"] * g1 if from_collector else 0.0)
    if device.vbe_model == "fixed":
        ic = np.where(np.real(drive) > 0.0, drive / load, 0.0 * drive)
    else:
        ic0 = device.vbe_ic
        real = np.real(drive), np.real(g * vt), np.real(load * ic0)
        bound = np.log(np.maximum(real[0] / real[2], 1.0))
        y: Numbers = np.minimum(real[0] / real[1], bound)
        if any(np.iscomplexobj(x) for x in (drive, g, vt, load)):
            y = y.astype(complex)
        for _ in range(100):
            current = ic0 * np.exp(y)
            step = (drive - g * vt * y - load * current) / (g * vt + load * current)
            y = y + step
            if np.max(np.abs(step)) < 1e-14:
                break
        ic = ic0 * np.exp(y)
    ib = ic / h - offset
    # The feed alone sets the base: under a fixed drop that blocks, VBE is what is left over.
    vb = (source * g1 + below - ib - (p["rc"] * g1 * ic if from_collector else 0.0)) / g
    return _report(network, p, ic, ib, vb)


def saturated(network: str, device: Transistor, p: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Every quantity with VCE held at VCE(sat), from Kirchhoff's current law at the emitter; NaN without a solution.

    VE = re·(IC + IB) with VE = VCC − VCE(sat) − rc·IC and IB from the base feed, which must not come from the collector.
    The residual is concave in IC; right of its peak it falls, so the larger root, the physical one, is where Newton's
    method ends that starts on the right.
    """
    vt, vbe0, _, _ = _device(device, p)
    assert network in SATURATING, network
    source, g1, g2, _ = _feed(network, p)
    rc, re = p["rc"], p.get("re", 0.0)
    log_slope = vt if device.vbe_model == "junction" else 0.0 * vt
    top = p["vcc"] + p.get("vee", 0.0) - device.vce_sat

    def state(ic: Numbers) -> tuple[Numbers, Numbers, Numbers]:
        vb = top - rc * ic + vbe0 + log_slope * np.log(ic / device.vbe_ic)
        ib = (source - vb) * g1 - (vb - p.get("vref", 0.0)) * g2
        return top - rc * ic - re * (ic + ib), vb, ib

    def slope(ic: Numbers) -> Numbers:
        return np.asarray(-rc - re + re * (g1 + g2) * (log_slope / ic - rc))

    peak = re * (g1 + g2) * log_slope / (rc + re + re * (g1 + g2) * rc)
    ic: Numbers = np.array(top / rc + 0.0 * (vbe0 + re + source))
    nothing = state(np.maximum(peak, 1e-30))[0] <= 0.0
    for _ in range(100):
        step = np.where(nothing, 0.0, state(ic)[0] / slope(ic))
        ic = ic - step
        if np.max(np.abs(step) / np.abs(ic)) < 1e-15:
            break
    ic = np.where(nothing, np.nan, ic)
    _, vb, ib = state(ic)
    return _report(network, p, ic, ib, vb)


def any_region(network: str, device: Transistor, p: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Every quantity of the real stage: saturated where the active law would put VCE below VCE(sat) and gain is not what
    holds IC back, else active."""
    found = active(network, device, p)
    below = found["vce"] < device.vce_sat
    if network not in SATURATING or not np.any(below):
        return found
    held = saturated(network, device, p)
    below = below & ~(held["ic"] > found["ic"])
    return {name: np.where(below, held[name], value) for name, value in found.items()}


def total(names: Sequence[str], found: Mapping[str, Numbers]) -> Numbers:
    """Sum of some quantities."""
    return np.asarray(sum(found[name] for name in names))


def grain(names: Sequence[str], p: Mapping[str, Numbers]) -> Numbers:
    """Rounding of a sum of quantities: some ulps of the rail or the feed current that it is the difference of."""
    rail = p["vcc"] + p.get("vee", 0.0) + p.get("vbb", 0.0) + p.get("vload", 0.0) + np.abs(p.get("vref", 0.0))
    size: Numbers = np.zeros(())
    for name in names:
        if name in ("vce", "vc", "ve"):
            size = size + rail
        elif name != "ic":
            size = size + rail / p.get("r1", p.get("rb", 1.0)) + (rail / p["r2"] if "r2" in p else 0.0)
            size = size + (rail / p["r_ref"] if "r_ref" in p and "r2" not in p else 0.0)
    return np.asarray(1e-14 * size)


def room_temperature(box: Box) -> float | None:
    """Relative position of 25 °C inside the ambient range, None where it is not inside."""
    low, high = box.temperature.low, box.temperature.high
    return (ROOM - low) / (high - low) if low < ROOM < high else None


def vertices(box: Box, moments: Sequence[float] | None = None) -> dict[str, Numbers]:
    """Relative positions of every vertex at the ends of the ambient range and at 25 °C, or at other moments."""
    axes = [axis for axis in position(box) if axis != "temperature"]
    wide = [axis for axis in axes if axis not in box.spreads or box.spreads[axis].high > box.spreads[axis].low]
    if moments is None:
        room = room_temperature(box)
        moments = (0.0, 1.0) if room is None else (0.0, room, 1.0)
    corners = np.array(list(itertools.product((0.0, 1.0), repeat=len(wide)))).reshape(-1, len(wide))
    u = {axis: np.zeros((len(corners) * len(moments), 1)) for axis in axes}
    for j, axis in enumerate(wide):
        u[axis] = np.repeat(corners[:, j], len(moments))[:, None]
    u["temperature"] = np.tile(np.asarray(moments, dtype=float), len(corners))[:, None]
    return u


def samples(rng: np.random.Generator, box: Box, count: int, at_ends: float) -> dict[str, Numbers]:
    """Random relative positions, each coordinate at one of its ends with a given probability; 25 °C is among them."""
    shape = (count, box.size)
    u: dict[str, Numbers] = {}
    for axis in position(box):
        x, end = rng.random(shape), rng.random(shape)
        u[axis] = np.where(end < 0.5 * at_ends, 0.0, np.where(end < at_ends, 1.0, x))
    room = room_temperature(box)
    if room is not None:
        u["temperature"] = np.where(rng.random(shape) < 0.1, room, u["temperature"])
    return u


def law(box: Box, u: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Every quantity at relative positions, by the active-region law."""
    return active(box.network.name, box.transistor, point(box, u))


class Landscape:
    """One quantity of one stage over its box, with gradients by complex step, for a polish from outside the package."""

    STEP = 1e-30

    def __init__(self, box: Box, names: Sequence[str], direction: int, scale: float) -> None:
        self.box, self.names, self.factor = box, names, -direction / scale
        self.axes = position(box)

    def __call__(self, x: Numbers) -> tuple[float, Numbers]:
        n = len(self.axes)
        steps = np.vstack([np.zeros(n), np.eye(n)]) * (1j * self.STEP) + x
        value = self.factor * total(self.names, law(self.box, {axis: steps[:, j] for j, axis in enumerate(self.axes)}))
        return float(value[0].real), np.asarray(value[1:].imag / self.STEP)

    def polish(self, start: dict[str, float], ends: tuple[float, float]) -> float:
        x0 = np.array([start[axis] for axis in self.axes])
        bounds = [ends if axis == "temperature" else (0.0, 1.0) for axis in self.axes]
        x0[-1] = min(max(x0[-1], ends[0]), ends[1])
        options = {"maxiter": 80, "ftol": 1e-16, "gtol": 1e-12}
        result = minimize(self, x0, jac=True, method="L-BFGS-B", bounds=bounds, options=options)
        return float(result.fun) / self.factor


def scan_and_polish(box: Box, rng: np.random.Generator, names: Sequence[str], direction: int, starts: int = 3) -> float:
    """Best of a dense scan (vertices at eleven temperatures and random points), climbed from its best points on each side
    of 25 °C, where the laws are smooth."""
    room = room_temperature(box)
    sides = [(0.0, 1.0)] if room is None else [(0.0, room), (room, 1.0)]
    moments = np.unique(np.concatenate([np.linspace(low, high, 6) for low, high in sides]))
    corners, points = vertices(box, moments), samples(rng, box, 1500, at_ends=0.7)
    u = {axis: np.vstack([corners[axis], points[axis]])[:, 0] for axis in corners}
    height = direction * total(names, law(box, u))
    best = float(height.max())
    ground = Landscape(box, names, direction, abs(best) or 1.0)
    for low, high in sides:
        inside = np.flatnonzero((u["temperature"] >= low) & (u["temperature"] <= high))
        order = inside[np.argsort(-height[inside])]
        # The best point, and the best of the random ones: they start from other faces of the box.
        chosen = [*order[: starts - 1], *order[order >= len(corners["temperature"])][:1]]
        for k in chosen:
            best = max(best, direction * ground.polish({axis: float(x[k]) for axis, x in u.items()}, (low, high)))
    return direction * best


AMBIENTS = (
    (0.0, 70.0),
    (-40.0, 85.0),
    (-55.0, 125.0),
    (25.0, 70.0),
    (-20.0, 25.0),
    (35.0, 90.0),
    (-40.0, 15.0),
    (24.0, 26.0),
    (25.0, 25.0),
    (10.0, 10.0),
)
"""Ambients that straddle, touch or miss 25 °C, or have no width [°C]."""
TCRS = ((-1e-4, 1e-4), (-4e-4, 4e-4), (-1e-3, 1e-3), (0.0, 0.0), (-2e-4, 8e-4), (1e-4, 3e-4), (-1e-3, -2e-4))
"""Ends of the temperature coefficient [1/K]; carbon parts reach −1000 ppm/K."""
BANDS = (0.0, 0.001, 0.01, 0.02, 0.05, 0.1, 0.2)


def random_spread(rng: np.random.Generator, nominal: float, widths: Sequence[float]) -> Spread:
    """A spread around a value whose two sides are drawn apart, each from relative widths."""
    down, up = rng.choice(widths, 2)
    return Spread(nominal * (1.0 - down), nominal, nominal * (1.0 + up))


def random_transistor(rng: np.random.Generator, **fixed: Any) -> Transistor:
    """A transistor of any temper: either material, either VBE law, leakage absent, a limit, or never below a minimum."""
    germanium = rng.random() < 0.15
    hfe = 10.0 ** rng.uniform(1.2, 2.7)
    gain = Spread(hfe, hfe * rng.uniform(1.0, 1.5), hfe * 10.0 ** rng.choice([0.2, 0.35, 0.6, 0.9]))
    if rng.random() < 0.1:
        gain = Spread.exact(hfe)
    limit = 10.0 ** (rng.uniform(-7.0, -5.0) if germanium else rng.uniform(-9.5, -6.5))
    kind = rng.integers(4)
    icbo = (Spread.exact(0.0), Spread(0.0, 0.0, limit), Spread(0.3 * limit, 0.5 * limit, limit), Spread.exact(limit))[kind]
    hot = (limit * 10.0 ** rng.uniform(0.3, 2.5), ROOM + float(rng.choice([50.0, 100.0, 125.0])))
    settings: dict[str, Any] = {
        "material": "germanium" if germanium else "silicon",
        "hfe": gain,
        "vbe": random_spread(rng, 0.15 if germanium else 0.65, (0.0, 0.03, 0.08, 0.15)),
        "vbe_ic": 10.0 ** rng.uniform(-3.3, -2.0),
        "vbe_model": "fixed" if rng.random() < 0.2 else "junction",
        "icbo": icbo,
        "icbo_hot": hot if kind and rng.random() < 0.3 else None,
        "vce_sat": float(rng.choice([0.1, 0.2, 0.3])),
    }
    return Transistor(**{**settings, **fixed})


def random_box(rng: np.random.Generator, size: int, *, network: str | None = None, **fixed: Any) -> Box:
    """A box around `size` stages of one network that share transistor and surroundings.

    The resistors are laid out for a random Q-point by the rules of thumb of the trade and then scattered by up to 30 %,
    so that nominal stages are active but corners may be anywhere. `fixed` pins rails, temperature or transistor.
    """
    name = network or str(rng.choice(SOLVED))
    device: Transistor = fixed.get("transistor") or random_transistor(rng)
    vcc = 10.0 ** rng.uniform(0.6, 1.6)
    rails = {"vcc": random_spread(rng, vcc, (0.0, 0.01, 0.05, 0.1, 0.3))}
    if rng.random() < 0.25:
        rails = {"vcc": Spread(9.0, 12.0, 16.0)}
        vcc = 12.0
    if name == "fixed_base" and rng.random() < 0.4:
        rails["vbb"] = random_spread(rng, 10.0 ** rng.uniform(0.3, 1.5), (0.0, 0.02, 0.1))
    if name == "two_supply":
        rails["vee"] = random_spread(rng, 10.0 ** rng.uniform(0.5, 1.3), (0.0, 0.02, 0.1, 0.3))
    if name == "sink" and rng.random() < 0.6:
        rails["vload"] = random_spread(rng, 10.0 ** rng.uniform(0.6, 1.6), (0.0, 0.05, 0.3))
    rails = fixed.get("rails", rails)
    vcc = rails["vcc"].nominal
    vbb = rails.get("vbb", rails["vcc"]).nominal
    cold, hot = AMBIENTS[rng.integers(len(AMBIENTS))]
    ambient = Spread(cold + 273.15, min(max(298.15, cold + 273.15), hot + 273.15), hot + 273.15)

    reference = None
    h = device.hfe.nominal
    ic = 10.0 ** rng.uniform(-4.5, -1.7, size)
    ve = vcc * rng.uniform(0.03, 0.35, size)
    vce = vcc * rng.uniform(0.12, 0.55, size)
    vbe = np.maximum(0.05, device.vbe.nominal + 0.0257 * np.log(ic / device.vbe_ic))
    vb = np.minimum(ve + vbe, 0.9 * vcc)
    bleed = ic / h * 10.0 ** rng.uniform(0.0, 1.7, size)
    r: dict[str, Numbers] = {"rc": (vcc - ve - vce) / ic, "re": ve / (ic * (1.0 + 1.0 / h))}
    if name not in ("divider", "diode_divider", "two_supply", "follower", "sink") and rng.random() < 0.4:
        del r["re"]
        ve, vb = 0.0 * ve, vbe
    if name == "follower":
        # The base stands anywhere between the rails, fed by a divider or through r1 alone.
        vb = vcc * rng.uniform(0.3, 0.8, size) + 0.5 * vbe
        r = {"r1": (vcc - vb) / (bleed + ic / h), "r2": vb / bleed, "re": np.maximum(vb - vbe, 0.1 * vcc) / ic}
        if rng.random() < 0.4:
            r["r1"] = (vcc - vb) * h / ic
            del r["r2"]
    elif name == "diode_divider" or (name == "sink" and rng.random() < 0.6):
        # The base stands a little to much above the reference, and r2 takes the difference.
        reference = random_reference(rng, vb, bleed)
        drop = np.maximum(vb - reference.voltage.nominal, 0.02 * vcc) if name == "diode_divider" else 0.2 * vb
        r["r1"] = np.maximum(vcc - vb, 0.1 * vcc) / (bleed + ic / h)
        if name == "diode_divider" or rng.random() < 0.5:
            r["r2"] = drop / bleed
        r["re"] = np.maximum(reference.voltage.nominal + drop - vbe, 0.03 * vcc) / ic
    elif name in ("divider", "sink"):
        r["r1"], r["r2"] = (vcc - vb) / (bleed + ic / h), vb / bleed
    elif name == "fixed_base":
        r["rb"] = np.maximum(vbb - vb, 0.2 * vbb) * h / ic
    elif name == "two_supply":
        vee = rails["vee"].nominal
        drop = rng.uniform(0.02, 0.3, size) * (vee - vbe)
        r["rb"], r["re"] = drop * h / ic, (vee - vbe - drop) / ic
    elif name == "collector_feedback":
        vce = np.maximum(vce, 1.5 * vbe)
        r["rb"] = (vce - vbe) * h / ic
    else:
        vce = np.maximum(vce, 1.5 * vbe)
        r["r1"], r["r2"] = (ve + vce - vb) / (bleed + ic / h), vb / bleed
        r["rc"] = r["rc"] * ic / (ic + bleed)
    scatter = float(rng.choice([0.0, 0.05, 0.3]))
    parts = {}
    for role in (role for role in NETWORKS[name].role_names if role in r):
        tcr = np.array(TCRS)[rng.integers(len(TCRS), size=size)]
        parts[role] = Parts(
            nominal=np.asarray(r[role]) * (1.0 + scatter * rng.uniform(-1.0, 1.0, size)),
            band=rng.choice(BANDS, size),
            tcr_low=tcr[:, 0],
            tcr_high=tcr[:, 1],
        )
    return Box(
        network=NETWORKS[name],
        transistor=device,
        rails=rails,
        temperature=fixed.get("temperature", ambient),
        parts=parts,
        reference=reference,
    )


def random_reference(rng: np.random.Generator, vb: Numbers, current: Numbers) -> Reference:
    """A reference element below some base voltages, with any coefficient and slope."""
    volts = float(np.min(vb)) * rng.uniform(0.3, 0.9)
    at = float(np.median(current))
    tc = volts * rng.choice([-4e-3, -3e-4, 0.0, 8e-4])
    stray = volts * rng.choice([0.0, 2e-4, 1e-3])
    slope = volts / at * rng.uniform(0.005, 0.2)
    return Reference(
        kind="zener",
        voltage=random_spread(rng, volts, (0.0, 0.02, 0.08)),
        current=at,
        tc=Spread(tc - stray, tc, tc + stray),
        slope=random_spread(rng, slope, (0.0, 0.3, 0.9)),
    )


def leaky_box(rng: np.random.Generator, size: int) -> Box:
    """A random box whose leakage, when hot, is a tenth to ten times the base current: IB turns round inside the box."""
    box = random_box(rng, size)
    base = np.median(np.abs(active(box.network.name, box.transistor, circuit(box, box.nominal()))["ib"]))
    limit = float(base) * 2.0 ** ((ROOM - box.temperature.high) / 10.0) * 10.0 ** rng.uniform(-1.0, 1.0)
    icbo = (Spread(0.0, 0.0, limit), Spread(0.2 * limit, 0.5 * limit, limit), Spread.exact(limit))[rng.integers(3)]
    return replace(box, transistor=replace(box.transistor, icbo=icbo, icbo_hot=None))


def level_box(rng: np.random.Generator, size: int) -> Box:
    """A random box whose VCE, where all else favours it, is level against VCC at a rail inside its range.

    VCE = VCC − rc·IC − re·IE has no slope at rc = (1 − re·dIE/dVCC)/(dIC/dVCC); IC does not depend on rc here.
    """
    favours = {"delta": 1.0, "r1": 1.0, "rb": 1.0}
    while True:
        rails = {"vcc": Spread(9.0, 12.0, 16.0)}
        box = random_box(rng, size, network=str(rng.choice(["divider", "fixed_base"])), rails=rails)
        moment = rng.choice([0.0, 0.5, 1.0])
        u = {axis: np.array(favours.get(axis, 0.0)) for axis in position(box)}
        p = point(box, {**u, "re": np.array(rng.choice([0.0, 1.0])), "temperature": np.array(moment)})
        slope = active(box.network.name, box.transistor, {**p, "vcc": rng.uniform(9.5, 15.5, size) + 1e-30j})
        rise_c, rise_e = slope["ic"].imag / 1e-30, (slope["ic"] + slope["ib"]).imag / 1e-30
        flat = (1.0 - p.get("re", np.zeros(size)) * rise_e) / np.where(rise_c > 0.0, rise_c, np.nan)
        found = active(box.network.name, box.transistor, {**p, "rc": flat, "vcc": np.array(12.0)})
        with np.errstate(invalid="ignore"):
            kept = np.flatnonzero((flat > 0.0) & (found["vce"] > box.transistor.vce_sat))
        if kept.size:
            nominal = (flat * box.parts["rc"].nominal / p["rc"])[kept]
            box = box.take(np.resize(kept, size))
            return replace(box, parts={**box.parts, "rc": replace(box.parts["rc"], nominal=np.resize(nominal, size))})


def edge_box(rng: np.random.Generator, size: int) -> Box:
    """A random box around stages that a little more drive saturates; never fed from the collector, which cannot."""
    box = random_box(rng, size, network=str(rng.choice(SATURATING)))
    nominal = active(box.network.name, box.transistor, circuit(box, box.nominal()))
    wanted = box.transistor.vce_sat + box.rails["vcc"].nominal * rng.uniform(0.0, 0.15, size)
    rc = box.parts["rc"]
    moved = rc.nominal + (nominal["vce"] - wanted) / np.maximum(nominal["ic"], 1e-9)
    parts = {**box.parts, "rc": replace(rc, nominal=np.where(moved > 0.0, moved, rc.nominal))}
    return replace(box, parts=parts)


def quantities(box: Box) -> tuple[tuple[str, ...], ...]:
    """Every sum of quantities that the worst case is asked for: IC, VCE, currents of the base feed and of each rail."""
    currents = tuple((f"i_{role}",) for role in box.parts if role in ("r1", "r2", "rb"))
    currents += (("i_ref",),) if box.reference is not None else ()
    rails = tuple(parts for parts in box.network.rail_parts(box.rails).values() if len(parts) > 1)
    volts = (("vc",), *([("ve",)] if "re" in box.parts else []))
    return (("ic",), ("vce",), *volts, *currents, *rails)
