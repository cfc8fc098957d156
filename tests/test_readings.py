"""Meter readings and load lines: by hand, by Kirchhoff's laws at samples of the box, and as a mirror image.

The stages are invented.
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from stages import point, samples

from synth.answer import Candidate
from synth.box import Meter
from synth.solve import check, find
from synth.spaces import fitted
from synth.stage import Stage

FIXED = {"transistor_vbe_model": "fixed", "transistor_vbe": "0.65 V", "temperature": "25 °C", "tolerance": "0.000001 %",
         "resistors_tcr": "0 ppm/K"}  # fmt: skip
BUOY = {"supply": "12 V ± 5 %", "ic": "1 mA", "vce": "5 V", "hfe": "100 : 200 : 400", "tolerance": "1 %", "series": "E24"}
VALUES = {"r1": "56k", "r2": "18k", "rc": "4k7", "re": "2k2"}


def judged(**keys: object) -> Candidate:
    best = check(Stage(**{**BUOY, **keys})).best  # type: ignore[arg-type]
    assert best is not None
    assert best.readings is not None
    return best


def test_readings_and_load_line_of_a_stiff_divider_by_hand() -> None:
    """VB = 10 V·2/(8+2) = 2 V less what IB takes of 1.6 kohm; VE = VB − 0.65 V; textbook procedure (common practice).

    With hFE 100 exactly: IB = (2 − 0.65)/(1.6k + 101·1k) = 13.158 µA, so IC 1.3158 mA, VE 1.32895 V, VB 1.97895 V, VC 7.3684 V;
    the line meets the axes at 10 V and 10 V/(2k + 1k·1.01).
    """
    c = judged(supply="10 V", hfe="100", r1="8k", r2="2k", rc="2k", re="1k", **FIXED)
    ib = (2.0 - 0.65) / (1600.0 + 101e3)
    expected = {"b": 0.65 + 101e3 * ib, "c": 10.0 - 2e5 * ib, "e": 101e3 * ib}
    assert c.readings is not None
    assert c.load_line is not None
    for node, volts in expected.items():
        # The tolerance of 1e-8 moves the extremes by as much.
        assert_allclose(c.readings.nodes[node], [volts] * 3, rtol=1e-6, atol=0, err_msg=node)
    assert_allclose(c.readings.drops["rc"], [2e5 * ib] * 3, rtol=1e-6, atol=0)
    assert_allclose([c.load_line.vce, c.load_line.ic], [10.0, 10.0 / 3010.0], rtol=1e-12, atol=0)


@pytest.mark.parametrize("ground", ["negative", "positive", "middle"])
def test_no_sample_of_the_box_reads_beyond_the_range(ground: str) -> None:
    stage = Stage(**BUOY, **VALUES, supply_ground=ground)  # type: ignore[arg-type]
    c = check(stage).best
    assert c is not None
    assert c.readings is not None
    box = fitted(stage).box(np.zeros((1, 4), dtype=np.int32), Meter())
    u = samples(np.random.default_rng(11), box, 20000, at_ends=0.7)
    p = point(box, u)
    q = box.solve(p)
    zero = {"negative": 0.0, "positive": p["vcc"], "middle": p["vcc"] / 2.0}[ground]
    # Kirchhoff from the collector current alone: VE = RE·(IC + IB), VC = VCC − RC·IC, VB = VE + VBE.
    ve = p["re"] * (q.ic + q.ib)
    seen = {"e": ve - zero, "b": ve + q.vbe - zero, "c": p["vcc"] - p["rc"] * q.ic - zero}
    for node, volts in seen.items():
        low, middle, high = c.readings.nodes[node]
        assert low <= middle <= high
        # Rounding of a difference of volts.
        assert low - 1e-12 <= volts.min()
        assert volts.max() <= high + 1e-12
        # The extremes are reached, not merely bounds: ends of every spread come near them.
        assert volts.max() - volts.min() > 0.85 * (high - low), node


def test_a_base_supply_of_its_own_is_no_part_of_the_collector_supply() -> None:
    """Against the positive pole the base falls as VCC rises, if its own supply does not: by hand VB − VCC at both ends."""
    c = judged(network="fixed_base", vbb="3.3 V", supply_ground="positive", rb="180k", rc="4k7", hfe="200", base_resistance="none",
               supply="10 : 12 : 15 V", **FIXED)  # fmt: skip
    assert c.readings is not None
    assert_allclose(c.readings.nodes["b"], [0.65 - 15.0, 0.65 - 12.0, 0.65 - 10.0], rtol=1e-6, atol=0)


def test_readings_of_a_pnp_stage_are_the_mirror_image() -> None:
    npn = judged(**VALUES, supply_ground="positive", transistor_polarity="npn").readings
    pnp = judged(**VALUES, supply_ground="negative", transistor_polarity="pnp").readings
    assert npn is not None
    assert pnp is not None
    for node, (low, middle, high) in npn.nodes.items():
        # The same sums with every sign turned.
        assert_allclose(pnp.nodes[node], (-high, -middle, -low), rtol=1e-12, atol=0)
    assert npn.drops == pnp.drops


def test_readings_hold_the_nominal_nodes_and_every_candidate_has_them() -> None:
    answer = find(Stage(**BUOY), top=4)  # type: ignore[arg-type]
    assert len(answer.candidates) == 4
    for c in answer.candidates:
        assert c.readings is not None
        assert c.load_line is not None
        assert_allclose([v[1] for v in c.readings.nodes.values()], list(c.nominal.nodes.values()), rtol=1e-12, atol=0)
        assert_allclose([v[1] for v in c.readings.drops.values()], [d.drop for d in c.roles.values()], rtol=1e-12, atol=0)
        # The Q-point lies on the line through its two ends.
        height = c.load_line.ic * (1.0 - c.nominal.vce / c.load_line.vce)
        assert_allclose(height, c.nominal.ic, rtol=1e-12, atol=0)


def test_a_saturated_stage_reads_its_true_range() -> None:
    """Saturated over part of the box, VC cannot fall below VE + VCE(sat)."""
    c = judged(r1="56k", r2="18k", rc="10k", re="1k5")
    assert c.verdict == "fail"
    assert c.readings is not None
    (vc_low, _, _), (ve_low, _, _) = c.readings.nodes["c"], c.readings.nodes["e"]
    assert vc_low > ve_low
    assert c.readings.nodes["c"][2] < 12.6
