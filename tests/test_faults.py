"""Single open and short faults, against a nodal analysis that shares nothing with the package and against hand figures.

A fault is put to `nodal` as a resistance that is too large or too small to matter; with a constant VBE both then solve one linear
circuit, whatever the region.
"""

from __future__ import annotations

import nodal
import numpy as np
import pytest
from numpy.testing import assert_allclose
from stages import SOLVED, random_box

import synth
from synth.box import Box, Meter
from synth.catalogue import resistor_style
from synth.faults import single_faults
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.quantities import Spread
from synth.spaces import fitted
from synth.stress import TransistorRatings
from synth.transistor import T0, Transistor

FAULTED = {"open": 1e13, "short": 1e-4}
"""Resistances that are as good as a fault [ohm]."""


def faulted(box: Box, role: str, kind: str) -> tuple[nodal.Solution, bool]:
    r = {name: part.nominal for name, part in box.parts.items()} | {role: np.array([FAULTED[kind]])}
    rails = {name: np.array([s.nominal]) for name, s in box.rails.items()}
    if box.reference is not None:
        rails |= {name: np.atleast_1d(v) for name, v in box.reference.line(0.0, box.reference.slope.nominal, T0).items()}
    circuit = nodal.Circuit(box.network, rails, r)
    h = np.array([box.transistor.hfe.nominal])
    found, saturated = nodal.solve(circuit, box.transistor, h, 0.0 * h, 0.0 * h, np.array([T0]))
    return found, bool(saturated[0])


@pytest.mark.parametrize("network", SOLVED)
def test_fault_is_what_nodal_analysis_says(network: str) -> None:
    rng = np.random.default_rng(11)
    device = Transistor(hfe=Spread(100.0, 200.0, 400.0), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed")
    seen = set()
    for _ in range(4):
        box = random_box(rng, 1, network=network, transistor=device, temperature=Spread.exact(T0))
        for fault in single_faults(box, TransistorRatings(), {}, "common"):
            seen.add(fault.region)
            if fault.region in ("destroyed", "cut off"):
                continue
            found, saturated = faulted(box, fault.role, fault.kind)
            assert fault.region == ("saturated" if saturated else "active")
            assert fault.ic is not None
            assert fault.vce is not None
            rail = sum(s.nominal for s in box.rails.values())
            # A fault of 1e13 or 1e-4 ohm leaves some 1e-6 of the largest resistance or the least, and the condition of the matrix.
            assert_allclose(fault.ic, found.ic[0], rtol=1e-4, atol=1e-10)
            assert_allclose(fault.vce, found.vce[0], rtol=0, atol=1e-4 * rail)
            for node, v in fault.nodes.items():
                assert_allclose(v, found.node[node][0], rtol=0, atol=1e-4 * rail)
    assert seen & {"active", "saturated"}


def test_faults_of_a_divider_by_hand() -> None:
    """VBE held at 0.65 V, hFE 200: 12 V, 39 kΩ and 10 kΩ, RC 2.2 kΩ, RE 1 kΩ; every figure from Ohm's law."""
    none = np.zeros(1)
    values = {"r1": 39e3, "r2": 10e3, "rc": 2.2e3, "re": 1e3}
    box = Box(
        network=NETWORKS["divider"],
        transistor=Transistor(hfe=Spread.exact(200.0), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed"),
        rails={"vcc": Spread(12.0, 12.0, 30.0)},
        temperature=Spread.exact(T0),
        parts={k: Parts(nominal=np.array([v]), band=none, tcr_low=none, tcr_high=none) for k, v in values.items()},
    )
    styles = {"rc": resistor_style("0402"), "re": resistor_style("0402")}
    found = {(f.role, f.kind): f for f in single_faults(box, TransistorRatings(), styles)}
    # Base without feed, or wired to 0 V: cut off, no current, the collector at the rail.
    for fault in (found["r1", "open"], found["r2", "short"]):
        assert (fault.region, fault.ic) == ("cut off", 0.0)
        assert_allclose(fault.nodes["c"], 12.0, rtol=1e-6, atol=0)
    # Collector on the rail: IB = (VBB − VBE)/(RB + 201·RE), VBB = 12/4.9, RB = 39·10/49 kΩ.
    ib = (120.0 / 49.0 - 0.65) / (390e3 / 49.0 + 201e3)
    assert found["rc", "short"].region == "active"
    assert_allclose(found["rc", "short"].ic, 200.0 * ib, rtol=1e-7, atol=0)
    assert_allclose(found["rc", "short"].vce, 12.0 - 201e3 * ib, rtol=1e-7, atol=0)
    # Base on the rail: VE = 12 − 0.65, IC = (12 − VE − 0.2)/RC: saturated.
    assert found["r1", "short"].region == "saturated"
    assert_allclose(found["r1", "short"].ic, (0.65 - 0.2) / 2.2e3, rtol=1e-7, atol=0)
    assert_allclose(found["r1", "short"].nodes["e"], 11.35, rtol=1e-7, atol=0)
    # Emitter without a path: nothing flows, and neither its voltage nor VCE is anything.
    assert (found["re", "open"].region, found["re", "open"].floats, found["re", "open"].vce) == ("cut off", ("e",), None)
    assert "e" not in found["re", "open"].nodes
    assert_allclose(found["re", "open"].nodes["b"], 120.0 / 49.0, rtol=1e-6, atol=0)
    # At 30 V the whole rail less 0.65 V stands across re: 0.86 W, where 0402 stands 1/16 W and 50 V.
    assert "RE power" in found["r1", "short"].over
    assert "RE voltage" not in found["r1", "short"].over
    assert found["r1", "open"].over == ()


def test_base_wired_across_the_rail_is_destroyed() -> None:
    stage = synth.Stage(
        network="fixed_base", supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", rb="1M", rc="3k3"
    )
    space = fitted(stage)
    found = {(f.role, f.kind): f for f in single_faults(space.box(np.zeros((1, 2), dtype=np.int32), Meter()), stage.ratings, {})}
    fault = found["rb", "short"]
    assert (fault.region, fault.ic, fault.vce) == ("destroyed", None, None)
    assert fault.over == ("transistor: nothing limits its base current",)


def test_nodes_stand_against_what_is_ground_and_mirror_a_pnp() -> None:
    keys = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}

    def nodes(**more: str) -> dict[str, float]:
        stage = synth.Stage(**keys, **more)
        space = fitted(stage)
        box = space.box(np.zeros((1, 4), dtype=np.int32), Meter())
        return dict(next(f for f in single_faults(box, stage.ratings, {}, space.ground) if f.role == "rc" and f.kind == "short").nodes)

    npn, pnp, positive = nodes(), nodes(polarity="pnp"), nodes(ground="positive")
    # A PNP stage stands below its positive rail by as much as the NPN one stands above 0 V.
    for node, v in npn.items():
        assert_allclose(pnp[node], 12.0 - v, rtol=1e-12, atol=0)
        assert_allclose(positive[node], v - 12.0, rtol=1e-12, atol=1e-12)
