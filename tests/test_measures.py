"""Quantities that limits ask for: their values by hand and by the node equations, their extremes against samples.

Signs are claimed of the network's premise only, and an extreme is true over the whole box: no sample may escape it. The
stages are invented.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from stages import active, circuit, point, random_box, samples, vertices

from synth.box import Box, Heat, Meter
from synth.measures import is_figure, sign
from synth.networks import NETWORKS
from synth.signal import Signal
from synth.spaces import spaces_of
from synth.stage import Stage

FIGURES = ("input_resistance", "output_resistance", "gain", "swing_to_cutoff", "gm", "r_pi", "r_intrinsic")
every_network = pytest.mark.parametrize("network", NETWORKS)


def names_of(box: Box) -> list[str]:
    stress = [f"{kind}_{role}" for role in box.parts for kind in ("p", "u", "i")]
    # A node that is wired to a rail differs from it by rounding only.
    nodes = [n for n in ("bcem" if box.network.reference == "needed" else "bce") if n not in box.network.tied]
    seen = [f"v_{node}_{ground}" for node in nodes for ground in ("negative", "positive", "middle", "common")]
    return [*stress, *seen, "p_q", "span", *(FIGURES if box.network.takes_signal else ())]


def is_sound(box: Box, p: dict[str, np.ndarray]) -> np.ndarray:
    """Where a network is a stage at all: active, current into the base, IC above ICBO, a reference that conducts."""
    q = box.solve(p, active_law=True)
    leak = p["icbo"] * box.transistor.leakage_factor(p["temperature"])
    sound = (q.ib > 0.0) & (q.ic > leak) & (q.vbe > 0.0) & (q.vce > 0.0)
    if box.reference is not None:
        sound = sound & (box.measure(("i_ref",), p, q) > 0.0)
    return np.asarray(sound)


def boxes(network: str, count: int) -> list[tuple[Box, np.random.Generator]]:
    """Random stages that hold the premise at every vertex and sample, with any signal."""
    found, number = [], 0
    while len(found) < count:
        rng = np.random.default_rng([77, sum(map(ord, network)), number])
        number += 1
        box = random_box(rng, 3, network=network)
        signal = Signal(
            bypass=("full", "none", "part")[number % 3],  # type: ignore[arg-type]
            unbypassed=30.0 if number % 3 == 2 else None,
            load=1e4 if number % 2 else None,
            source=float(rng.choice([0.0, 1e3])),
        )
        box = replace(box, signal=signal)
        everywhere = [vertices(box), samples(rng, box, 400, at_ends=0.6)]
        if all(is_sound(box, point(box, u)).all() for u in everywhere):
            found.append((box, rng))
        assert number < 400
    return found


@every_network
def test_no_sample_escapes_an_extreme(network: str) -> None:
    no_sample_escapes(network, 2)


@pytest.mark.long
@every_network
def test_no_sample_escapes_an_extreme_long(network: str) -> None:
    no_sample_escapes(network, 12)


def no_sample_escapes(network: str, count: int) -> None:
    for box, rng in boxes(network, count):
        clouds = [point(box, u) for u in (vertices(box), samples(rng, box, 3000, at_ends=0.5), samples(rng, box, 3000, at_ends=0.0))]
        solved = [(p, box.solve(p, active_law=True)) for p in clouds]
        for name in names_of(box):
            seen = np.concatenate([np.broadcast_to(box.measure((name,), p, q), (len(q.ic), 3)) for p, q in solved])
            for direction in (1, -1):
                extreme = box.extreme((name,), direction)
                best = (direction * seen).max(axis=0)
                # The worst case is exact to 1e-9 by contract; of a figure near zero that is rounding of its terms.
                room = 1e-9 * np.abs(extreme.value) + 1e-13 * np.abs(seen).max(axis=0)
                assert np.all(direction * extreme.value >= best - room), (name, direction)
                again = box.measure((name,), extreme.at, box.solve(extreme.at, active_law=True))
                assert_allclose(np.broadcast_to(again, (3,)), extreme.value, rtol=1e-11, atol=0, err_msg=name)


@every_network
def test_claimed_signs_hold_at_random_points(network: str) -> None:
    checked = 0
    for box, rng in boxes(network, 3):
        u = samples(rng, box, 500, at_ends=0.0)
        u = {axis: 0.98 * x for axis, x in u.items()}
        here = point(box, u)
        q = box.solve(here, active_law=True)
        for axis in box.axes:
            there = point(box, {**u, axis: u[axis] + 0.01})
            moved = box.solve(there, active_law=True)
            for name in names_of(box):
                claim = sign(name, axis, box.setting)
                if claim is None:
                    continue
                one, two = box.measure((name,), here, q), box.measure((name,), there, moved)
                change, small = two - one, 1e-11 * np.maximum(np.abs(one), np.abs(two))
                assert np.all(np.abs(change) <= small if claim == 0 else claim * change >= -small), (name, axis)
                checked += 1
    assert checked >= 100


@every_network
def test_stress_of_a_resistor_by_the_node_equations(network: str) -> None:
    (box, rng), *_ = boxes(network, 1)
    p = point(box, samples(rng, box, 300, at_ends=0.3))
    q = box.solve(p, active_law=True)
    found = active(network, box.transistor, circuit(box, p))
    for role in box.parts:
        if f"i_{role}" not in found:
            continue
        current = found[f"i_{role}"]
        # Currents are small differences of node voltages over resistances: some hundreds of ulps of the rail.
        slack = 1e-10 * np.abs(current * p[role]) + 1e-12
        assert np.all(np.abs(box.measure((f"u_{role}",), p, q) - current * p[role]) <= slack), role
        watts = current**2 * p[role]
        assert np.all(np.abs(box.measure((f"p_{role}",), p, q) - watts) <= 2.0 * slack * np.abs(current) + 1e-18), role
    assert_allclose(box.measure(("p_q",), p, q), found["vce"] * found["ic"] + found["vbe"] * found["ib"], rtol=1e-9, atol=0)


def test_greatest_dissipation_lies_at_half_the_rail() -> None:
    """A fact of the trade: P = VCE·IC on a load line is greatest at VCE = VCC/2, where it is VCC²/(4·R).

    12 V across 1 kohm: 36 mW, which no corner of 0.5 to 2 times the base drive has.
    """
    stage = Stage(
        network="fixed_base", supply="12 V", ic="6 mA", vce="6 V", hfe="50 : 100 : 150", vbe="0.65 V", vbe_model="fixed",
        temperature="25 °C", resistors_tcr="0 ppm/K", resistors_tolerance="0.000001 %",
        resistors_rb_values="189k167", resistors_rc_values="1k", limits_base_resistance="none",
    )  # fmt: skip
    (space,) = spaces_of(stage)
    box = space.box(np.zeros((1, 2), dtype=np.int32), Meter())
    worst = box.extreme(("p_q",), 1)
    # VBE·IB adds 0.65 V · 60 µA, 0.04 mW.
    ib = (12.0 - 0.65) / 189167.0
    assert_allclose(worst.value, 12.0**2 / 4.0 / 1e3 + 0.65 * ib, rtol=1e-4, atol=0)


def test_names_of_figures() -> None:
    assert is_figure("gain")
    assert not is_figure("p_q")


@pytest.mark.parametrize("network", ["divider", "fixed_base", "collector_feedback", "sink"])
def test_no_sample_escapes_an_extreme_with_self_heating(network: str) -> None:
    """Where each junction settles with its own heat, signs proved at one temperature no longer hold; the extreme does."""
    looked = 0
    for box, rng in boxes(network, 2):
        power = box.extreme(("p_q",), 1).value.max()
        # Some tens of kelvin at the point of most power.
        warm = replace(box.take([0, 1]), heat=Heat(float(30.0 / power), 473.15))
        clouds = [point(warm, u) for u in (vertices(warm), samples(rng, warm, 2000, at_ends=0.5), samples(rng, warm, 2000, at_ends=0.0))]
        solved = [(p, warm.solve(p, active_law=True)) for p in clouds]
        for name in ("ic", "vce"):
            seen = np.concatenate([np.broadcast_to(warm.measure((name,), p, q), (len(q.ic), 2)) for p, q in solved])
            for direction in (1, -1):
                value = warm.extreme((name,), direction).value
                best = (direction * seen).max(axis=0)
                settles = np.isfinite(value)
                assert np.all((direction * value >= best - 1e-9 * np.abs(value))[settles]), (name, direction)
                looked += int(settles.sum())
    assert looked >= 8


def test_heated_q_point_agrees_with_its_own_temperature() -> None:
    """TJ = TA + RthJA·P with the power of the very Q-point that is solved at TJ."""
    (box, rng), *_ = boxes("divider", 1)
    warm = replace(box, heat=Heat(800.0, 473.15))
    p = point(box, samples(rng, box, 300, at_ends=0.3))
    q = warm.solve(p, active_law=True)
    junction = p["temperature"] + 800.0 * np.maximum(q.vce * q.ic + q.vbe * q.ib, 0.0)
    again = box.solve(p, active_law=True, junction=junction)
    settled = np.isfinite(q.ic)
    assert settled.mean() > 0.5
    # A loop gain far below 1 leaves the tolerance of the iteration, 1e-12 of the temperature.
    assert_allclose(again.ic[settled], q.ic[settled], rtol=1e-8, atol=0)
