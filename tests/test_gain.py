"""Gain that goes with IC and VCE: Q-point, proved signs, worst case, bounds of blocks and the search itself.

The independent solver takes the node equations of `stages` with a constant gain and finds the gain by bisection: the
product of log-log interpolation, written out again here, and of (VA + VCE)/(VA + VCE of the test). Devices are invented.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from enumeration import enumerate_all, every_index, generator, random_spaces
from numpy.testing import assert_allclose
from stages import SOLVED, Numbers, active, circuit, quantities, random_box
from test_search import check_complete, members, random_blocks, random_point

from synth.box import Box, Meter
from synth.measures import FIGURES, PARAMETERS_OF_SIGNAL
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.quantities import Spread
from synth.search import search
from synth.search.corners import Corners
from synth.spaces import Space
from synth.transistor import GainRows, Transistor, TransistorError

SOLVER = 1e-9
"""The bisection leaves 1e-13 of the gain, and some figures are differences that lose four digits of it."""

every_network = pytest.mark.parametrize("network", SOLVED)


def moving(rng: np.random.Generator, device: Transistor, ic: float, how: str) -> Transistor:
    """The device with rows around a current, an Early voltage, or both."""
    rows, va = None, None
    hfe = device.hfe
    if how in ("rows", "both"):
        count = int(rng.integers(2, 6))
        x = np.sort(rng.uniform(-5.0, 5.0, count)) + np.arange(count) * 0.3
        low = np.cumsum(np.concatenate([[0.0], np.diff(x) * rng.uniform(-1.2, 0.9, count - 1)]))
        wide = rng.uniform(0.05, 1.5, count)
        # Of the upper curve no piece may rise more steeply than the lower by more than its own width allows.
        high = low + wide
        for k in range(1, count):
            high[k] = min(high[k], high[k - 1] + 0.9 * (x[k] - x[k - 1]))
            high[k] = max(high[k], low[k] + 0.01)
        current = ic * np.exp(x)
        shape = {"current": tuple(current), "low": tuple(np.exp(low)), "high": tuple(np.exp(high))}
        trial = GainRows(at=ic, **shape)
        scale = hfe.nominal / np.sqrt(trial.ends[0] * trial.ends[1])
        shape = {"current": shape["current"], "low": tuple(scale * np.exp(low)), "high": tuple(scale * np.exp(high))}
        rows = GainRows(at=ic, **shape)
        hfe = Spread(rows.ends[0], float(np.sqrt(rows.ends[0] * rows.ends[1])), rows.ends[1])
    if how in ("early", "both"):
        low_va = 10.0 ** rng.uniform(1.1, 2.2)
        va = Spread(low_va, low_va * rng.uniform(1.0, 1.5), low_va * rng.uniform(1.5, 3.0))
    return replace(device, hfe=hfe, hfe_rows=rows, va=va, va_vce=float(rng.choice([1.0, 5.0, 10.0])))


def moving_box(rng: np.random.Generator, network: str, size: int, how: str) -> Box:
    box = random_box(rng, size, network=network)
    ic = float(np.median(active(network, box.transistor, circuit(box, box.nominal()))["ic"]))
    return replace(box, transistor=moving(rng, box.transistor, max(ic, 1e-7), how))


def _curve(u: Numbers, x: Numbers, y: Numbers) -> Numbers:
    """Linear between knots, constant beyond."""
    found = np.full(np.shape(u), y[0])
    for k in range(len(x) - 1):
        inside = u > x[k]
        share = np.clip((u - x[k]) / (x[k + 1] - x[k]), 0.0, 1.0)
        found = np.where(inside, y[k] + share * (y[k + 1] - y[k]), found)
    return found


def independent(box: Box, p: Mapping[str, Numbers]) -> dict[str, Numbers]:
    """Every quantity, the gain found by bisection around node equations of constant gain."""
    device = box.transistor
    plain = replace(device, hfe_rows=None, va=None)
    shape = np.broadcast_shapes(*(np.shape(v) for v in p.values()))

    def wanted(ln_h: Numbers) -> Numbers:
        found = active(box.network.name, plain, {**p, "hfe": p["hfe"] * np.exp(ln_h)})
        total = np.zeros(shape)
        if device.hfe_rows is not None:
            rows = device.hfe_rows
            x, low, high = (np.log(np.array(c)) for c in (rows.current, rows.low, rows.high))
            own = np.log(np.array(rows.at))
            ends = [float(_curve(own, x, curve)) for curve in (low, high)]
            place = (np.log(p["hfe"]) - ends[0]) / (ends[1] - ends[0])
            with np.errstate(divide="ignore"):
                u = np.log(found["ic"])
            total = total + (1.0 - place) * (_curve(u, x, low) - ends[0]) + place * (_curve(u, x, high) - ends[1])
        if device.va is not None:
            total = total + np.log((p["va"] + np.maximum(found["vce"], 0.0)) / (p["va"] + device.va_vce))
        return total

    least, most = np.full(shape, -12.0), np.full(shape, 12.0)
    for _ in range(60):
        middle = 0.5 * (least + most)
        up = wanted(middle) > middle
        least, most = np.where(up, middle, least), np.where(up, most, middle)
    return active(box.network.name, plain, {**p, "hfe": p["hfe"] * np.exp(0.5 * (least + most))})


def anywhere(rng: np.random.Generator, box: Box, count: int, at_ends: float) -> dict[str, Numbers]:
    """Random coordinates of a box, temperature in kelvin."""
    shape = (count, box.size)
    x: dict[str, Numbers] = {}
    for axis in (*box.axes, "temperature"):
        u, end = rng.random(shape), rng.random(shape)
        x[axis] = np.where(end < 0.5 * at_ends, 0.0, np.where(end < at_ends, 1.0, u))
    x["temperature"] = box.temperature.low + box.temperature.width * x["temperature"]
    return x


def holds(box: Box, values: dict[str, Numbers], q: Any) -> Numbers:
    """Where the premise of the proved signs holds."""
    leak = values["icbo"] * box.transistor.leakage_factor(values["temperature"])
    good = (q.ib >= 0.0) & (q.ic >= leak) & (q.vbe >= 0.0)
    if box.reference is not None:
        good = good & (box.measure(("i_ref",), values, q) >= 0.0)
    if box.transistor.va is not None:
        good = good & ~box.early_too_strong(values)
    return np.asarray(good)


@every_network
@pytest.mark.parametrize("how", ["rows", "early", "both"])
def test_q_point_agrees_with_node_equations_and_bisection(network: str, how: str) -> None:
    for number in range(2):
        rng = generator("gain", network, how, number)
        box = moving_box(rng, network, 3, how)
        values = box.values(anywhere(rng, box, 20, 0.3))
        q = box.solve(values, active_law=True)
        p = {k: v for k, v in circuit(box, values).items() if k != "va"}
        if "va" in values:
            p["va"] = values["va"]
        expected = independent(box, p)
        scale = sum(s.high for s in box.rails.values())
        assert_allclose(q.ic, expected["ic"], rtol=SOLVER, atol=0.0)
        # Voltages and the base current are differences: their grain is the rail's, and what the rail drives into the base.
        assert_allclose(q.vce, expected["vce"], rtol=SOLVER, atol=SOLVER * scale)
        assert_allclose(q.ib, expected["ib"], rtol=1e-7, atol=SOLVER * float(np.max(np.abs(expected["ib"]))))


def sums(box: Box) -> list[tuple[str, ...]]:
    figures = () if not box.network.takes_signal else (*FIGURES, *PARAMETERS_OF_SIGNAL)
    return [*quantities(box), *((name,) for name in figures if name != "swing")]


@every_network
@pytest.mark.parametrize("how", ["rows", "early", "both"])
def test_proved_signs_hold_along_every_axis(network: str, how: str) -> None:
    """Each quantity at ten steps along an axis, everything else anywhere in the box, wherever the premise holds."""
    looked = 0
    for number in range(2):
        rng = generator("signs", network, how, number)
        box = moving_box(rng, network, 20, how)
        for axis in box.axes:
            x = {a: v[:1] for a, v in anywhere(rng, box, 1, 0.3).items()}
            x[axis] = np.linspace(0.0, 1.0, 11)[:, None]
            values = box.values(x)
            q = box.solve(values, active_law=True)
            good = np.broadcast_to(holds(box, values, q) & (q.vce > 0.0), (11, box.size)).all(axis=0)
            for names in sums(box):
                sign = box.sign(names, axis)
                if sign is None:
                    continue
                value = np.broadcast_to(box.measure(names, values, q), (11, box.size))[:, good]
                step = np.diff(value, axis=0)
                grain = 1e-9 * np.abs(value).max(axis=0, initial=0.0)
                if names[0] in ("vce", "vc", "ve"):
                    grain = grain + 1e-11 * sum(s.high for s in box.rails.values())
                elif not set(names) & {*FIGURES, *PARAMETERS_OF_SIGNAL, "ic"}:
                    # A base current is what the rail drives into the base.
                    feed = min(float(part.nominal.min()) for role, part in box.parts.items() if role in box.network.base_side)
                    grain = grain + 1e-11 * box.rails["vcc"].high / feed
                assert np.all(sign * step >= -grain if sign else np.abs(step) <= grain), (names, axis, number, sign)
                looked += good.sum() > 0
    assert looked > 20


@every_network
@pytest.mark.parametrize("how", ["rows", "early", "both"])
def test_worst_case_is_never_less_than_any_sample(network: str, how: str) -> None:
    """Every vertex at seven temperatures, and two hundred points anywhere, none beyond the extremes."""
    number = 0
    rng = generator("worst", network, how, number)
    box = moving_box(rng, network, 2, how)
    corners = np.array(list(itertools.product((0.0, 1.0), repeat=len(box.axes))))
    vertex = {axis: corners[:, j, None, None] for j, axis in enumerate(box.axes)}
    vertex["temperature"] = np.linspace(box.temperature.low, box.temperature.high, 7)[None, :, None]
    heights = {}
    inside = anywhere(rng, box, 200, 0.6)
    for name, x in (("vertex", vertex), ("inside", inside)):
        values = box.values(x)
        heights[name] = (values, box.solve(values, active_law=True))
    for names in quantities(box):
        for direction in (1, -1):
            found = direction * box.extreme(names, direction).value
            for values, q in heights.values():
                value = np.asarray(direction * box.measure(names, values, q))
                top = value.reshape(-1, value.shape[-1]).max(axis=0)
                room = 1e-9 * np.abs(found) + (1e-10 * box.rails["vcc"].high if names[0].startswith("v") else 0.0)
                assert np.all(top <= found + room), (names, direction)


# --- Search -------------------------------------------------------------------------------------------------------


def moving_space(rng: np.random.Generator, space: Space, ic: float, how: str) -> Space:
    return replace(space, transistor=moving(rng, space.transistor, ic, how))


def check_blocks(network: str, how: str, numbers: range) -> None:
    """Bounds of blocks against every member, of every quantity and figure."""
    for number in numbers:
        rng = generator("gain block", network, how, number)
        (space,), goal = random_spaces(rng, [network], most=10, stressed=True)
        space = moving_space(rng, space, goal.ic, how)
        point = random_point(rng, space)
        if how != "rows":
            point["va"] = float(rng.random())
        lo, hi = random_blocks(rng, space, 8)
        corners = Corners(space, point, Meter())
        box = space.box(every_index(space), Meter())
        values = box.values(point)
        q = box.solve(values, active_law=True)
        base = [f"i_{role}" for role in space.roles]
        figures = [name for name in FIGURES if name != "swing"] if space.network.takes_signal else []
        for quantity in ("ic", "vce", "ib", "vc", "ve", "p_q", *base, *figures):
            value = np.broadcast_to(box.measure((quantity,), values, q), (box.size,))
            # A bound counts members whose reference conducts: the others fail a limit that always holds.
            counts = np.ones(box.size, dtype=bool)
            if space.reference is not None:
                counts = np.broadcast_to(box.measure(("i_ref",), values, q) >= 0.0, (box.size,))
            if quantity in figures or quantity == "p_q":
                # Figures are those of an active stage with current.
                counts = counts & np.broadcast_to((q.ib > 0.0) & (q.vbe > 0.0) & (q.vce > 0.0), (box.size,))
            for direction in (1, -1):
                corners.begin(lo, hi)
                least = corners.least(quantity, direction)
                for k, inside in enumerate(members(space, lo, hi)):
                    inside = inside[counts[inside] & np.isfinite(value[inside])]
                    if inside.size:
                        true = (direction * value[inside]).min()
                        assert least[k] <= true + 1e-10 * abs(true) + 1e-12, (quantity, direction, number, k)


@pytest.mark.parametrize("network", NETWORKS)
@pytest.mark.parametrize("how", ["rows", "early", "both"])
def test_bound_of_a_block_is_below_every_member(network: str, how: str) -> None:
    check_blocks(network, how, range(2))


@pytest.mark.long
@pytest.mark.parametrize("network", NETWORKS)
@pytest.mark.parametrize("how", ["rows", "early", "both"])
def test_bound_of_a_block_is_below_every_member_long(network: str, how: str) -> None:
    check_blocks(network, how, range(2, 60))


def check_search(network: str, how: str, numbers: range) -> None:
    for number in numbers:
        rng = generator("gain search", network, how, number)
        spaces, goal = random_spaces(rng, [network], most=18, leakages=["none", "limit"])
        spaces = [moving_space(rng, space, goal.ic, how) for space in spaces]
        check_complete(search(spaces, goal, top=3), spaces, enumerate_all(spaces, goal), 3)


@pytest.mark.parametrize("network", NETWORKS)
@pytest.mark.parametrize("how", ["rows", "both"])
def test_search_equals_full_enumeration(network: str, how: str) -> None:
    check_search(network, how, range(1))


@pytest.mark.long
@pytest.mark.parametrize("network", NETWORKS)
@pytest.mark.parametrize("how", ["rows", "early", "both"])
def test_search_equals_full_enumeration_long(network: str, how: str) -> None:
    check_search(network, how, range(1, 20))


@pytest.mark.parametrize(("slope", "rc"), [(-1.2, 4e4), (0.9, 1.7e3)])
def test_bound_over_re_holds_where_gain_bends_the_line(slope: float, rc: float) -> None:
    """VCE over re is no concave function of IC once hFE goes with IC: a weak base feed of low gain shows it.

    With hFE near 6 the base current drops volts in 100 kohm, and IC spans more than a decade with re. IB goes as IC to the power
    1 − slope, so Rp·IB and rc·IC balance, and VCE turns, near rc = Rp·(1 − slope)/hFE.
    """
    x = np.array([-7.0, 7.0])
    low = 6.0 * np.exp(slope * x)
    rows = GainRows(at=1e-4, current=tuple(1e-4 * np.exp(x)), low=tuple(low), high=tuple(1.5 * low))
    device = Transistor(hfe=Spread(6.0, 7.0, 9.0), vbe=Spread.exact(0.65), vbe_ic=2e-3, hfe_rows=rows)
    values = {"r1": [2e5], "r2": [2e5], "rc": [rc], "re": list(np.geomspace(10.0, 1e6, 60))}
    zero = {role: np.zeros(len(r)) for role, r in values.items()}
    space = Space(
        network=NETWORKS["divider"],
        lists={r: Parts(nominal=np.array(v), band=zero[r], tcr_low=zero[r], tcr_high=zero[r]) for r, v in values.items()},
        transistor=device,
        rails={"vcc": Spread.exact(12.0)},
        temperature=Spread.exact(298.15),
        requirements=(),
    )
    lo = np.array([[0, 0, 0, a] for a in range(0, 50, 5)], dtype=np.int32)
    hi = np.array([[0, 0, 0, a + 9] for a in range(0, 50, 5)], dtype=np.int32)
    box = space.box(every_index(space), Meter())
    vce = box.solve(box.nominal(), active_law=True).vce
    corners, bent = Corners(space, {}, Meter()), 0
    for direction in (1, -1):
        corners.begin(lo, hi)
        least = corners.least("vce", direction)
        for k, (a, b) in enumerate(zip(lo[:, 3], hi[:, 3], strict=True)):
            inside = direction * vce[a : b + 1]
            assert least[k] <= inside.min() + 1e-12
            bent += inside.min() < min(inside[0], inside[-1]) - 1e-9
    assert bent


@pytest.mark.parametrize("how", ["rows", "early"])
def test_bound_of_a_single_member_is_nearly_its_own_value(how: str) -> None:
    """Without that nothing excludes a candidate before it is assessed, and the search degenerates."""
    for number in range(8):
        rng = generator("gain single", how, number)
        (space,), goal = random_spaces(rng, ["divider"], most=10, leakages=["none"])
        space = moving_space(rng, space, goal.ic, how)
        index = every_index(space)
        box = space.box(index, Meter())
        q = box.solve(box.nominal(), active_law=True)
        active_ones = (q.vce > 0.5) & (q.ib > 0.0)
        corners = Corners(space, {}, Meter())
        for quantity in ("ic", "vce"):
            for direction in (1, -1):
                corners.begin(index, index)
                least = corners.least(quantity, direction)
                own = np.broadcast_to(direction * getattr(q, quantity), least.shape)
                # Rows are solved exactly; the range of the Early effect is narrowed twice, each time some tenfold.
                assert_allclose(least[active_ones], own[active_ones], rtol=1e-10 if how == "rows" else 5e-3, atol=0.0)


# --- Rows themselves ----------------------------------------------------------------------------------------------


def test_log_log_interpolation_by_hand() -> None:
    """Between 40 at 0.1 mA and 70 at 1 mA, half-way in ln IC (0.3162 mA): the geometric mean, 52.915."""
    rows = GainRows(at=1e-3, current=(1e-4, 1e-3, 1e-2), low=(40.0, 70.0, 100.0), high=(200.0, 350.0, 300.0))
    assert_allclose(rows.ends, (70.0, 350.0), rtol=1e-12, atol=0.0)
    half = 1e-4 * np.sqrt(10.0)
    assert_allclose(70.0 * np.exp(rows.lift(70.0, half)), 52.91502622129181, rtol=1e-12, atol=0.0)
    assert_allclose(350.0 * np.exp(rows.lift(350.0, half)), np.sqrt(200.0 * 350.0), rtol=1e-12, atol=0.0)
    # A unit half-way between the curves stays there; beyond the rows the last one holds.
    middle = np.sqrt(70.0 * 350.0)
    assert_allclose(middle * np.exp(rows.lift(middle, 1e-2)), np.sqrt(100.0 * 300.0), rtol=1e-12, atol=0.0)
    assert_allclose(70.0 * np.exp(rows.lift(70.0, [1e-6, 1.0])), [40.0, 100.0], rtol=1e-12, atol=0.0)


@pytest.mark.parametrize(
    ("shape", "message"),
    [
        ({"current": (1e-3, 1e-3)}, "read 0.001 A after 0.001 A, accepted are currents that ascend"),
        ({"low": (70.0, 400.0), "high": (350.0, 300.0)}, "read hFE 400 : 300, accepted is least : greatest"),
        ({"low": (1.0, 20.0), "high": (40.0, 300.0)}, r"rises as IC to the 1\.30, accepted is a power of at most 0\.95"),
        ({"low": (70.0, 80.0), "high": (70.0, 90.0)}, "rows without a spread at 0.001 A and with one elsewhere"),
    ],
)
def test_rows_that_contradict_themselves_are_refused(shape: dict[str, Any], message: str) -> None:
    given = {"at": 1e-3, "current": (1e-3, 1e-2), "low": (70.0, 100.0), "high": (350.0, 300.0)}
    with pytest.raises(TransistorError, match=message):
        GainRows(**{**given, **shape})
