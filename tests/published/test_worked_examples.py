"""Worked examples of published texts.

The solver must give the figure derived for a constant VBE to its six digits, and the printed one as near as the source's
approximations and rounding allow. A test's id says whether its row was ``seen`` in a public text or is from ``memory``.
"""

import csv
import dataclasses
import itertools
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from worked_examples import (
    EXAMPLES,
    NO_BASE_CURRENT,
    NOMINAL,
    ROUNDED_FIRST,
    ROWS,
    SIX_DIGITS,
    SOLVED,
    check,
    checks,
    divider,
    stage,
    worst_case_box,
)

from synth.networks import NETWORKS
from synth.quantities import Spread
from synth.transistor import T0

ROOT = Path(__file__).resolve().parents[2]

every_figure = pytest.mark.parametrize(
    ("name", "key"),
    [
        pytest.param(name, key, id=f"{name}-{key}-{'memory' if ROWS[name].memory else 'seen'}")
        for name in SOLVED
        for key in ROWS[name].printed
    ],
)


@every_figure
def test_solver_gives_the_exact_figure(name: str, key: str) -> None:
    one = check(name, key)
    assert_allclose(one.computed, one.exact, rtol=SIX_DIGITS, atol=0)


@every_figure
def test_solver_differs_from_the_printed_figure_by_the_approximations_alone(name: str, key: str) -> None:
    one = check(name, key)
    assert abs(one.difference) <= one.allowed


@every_figure
def test_printed_figure_is_what_the_approximations_give(name: str, key: str) -> None:
    """Otherwise a wrong approximate figure would widen what the test above allows."""
    one = check(name, key)
    assert abs(one.approximate - float(one.printed)) <= one.rounding


@pytest.mark.parametrize(("name", "key"), ROUNDED_FIRST)
def test_no_rounding_on_the_way_is_granted_without_need(name: str, key: str) -> None:
    one = check(name, key)
    assert abs(one.approximate - float(one.printed)) > 0.5 * one.last_digit


@pytest.mark.parametrize(
    "name",
    ["ED-5.3", "ED-5.4", "ED-6.8", "EP-8.1", "EP-8.7", "EDCT-4.8", "EDCT-5.2", "SCA-5.11", "EDCT-CS", "EDCT-CSZ", "SCA-5.5"],
)
def test_without_base_current_the_solver_follows_the_source(name: str) -> None:
    """Divider unloaded and IC = IE: where that is all that the source leaves out, the solver can leave it out too."""
    gain = dict.fromkeys(("beta", "beta_dc", "beta_for_exact"), NO_BASE_CURRENT)
    row = dataclasses.replace(ROWS[name], given={**ROWS[name].given, **gain})
    found = SOLVED[name](row)
    for key, approximate in row.approximate.items():
        assert_allclose(found[key], approximate, rtol=SIX_DIGITS, atol=0)


def test_every_figure_can_fail() -> None:
    # Twice the six digits away from the derived figure.
    for one in checks():
        assert one.ok
        assert not dataclasses.replace(one, computed=one.computed * (1.0 + 2.0 * SIX_DIGITS)).ok


def test_every_row_is_used() -> None:
    assert set(ROWS) == set(SOLVED)
    assert sum(map(len, EXAMPLES.values())) == len(SOLVED)
    for row in ROWS.values():
        assert set(row.printed) == set(row.exact) == set(row.approximate), row.id


def test_every_network_with_a_published_example_is_covered() -> None:
    assert set(EXAMPLES) <= set(NETWORKS)
    assert {"divider", "fixed_base", "collector_feedback", "two_supply", "follower", "sink"} == set(EXAMPLES)


@pytest.mark.parametrize(("network", "name"), [(network, name) for network in EXAMPLES for name in EXAMPLES[network]])
def test_row_is_solved_by_the_network_it_is_counted_under(network: str, name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    asked: set[str] = set()

    class Watched(dict[str, object]):
        def __getitem__(self, wanted: str) -> object:
            asked.add(wanted)
            return super().__getitem__(wanted)

    monkeypatch.setattr("worked_examples.NETWORKS", Watched(NETWORKS))
    SOLVED[name](ROWS[name])
    assert asked == {network}


# ---------------------------------------------------------------------------------------------- the table


def table(*command: str) -> "subprocess.CompletedProcess[str]":
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "utf-8"}
    return subprocess.run(
        [sys.executable, *command], capture_output=True, text=True, encoding="utf-8", cwd=ROOT, env=environment
    )


def test_table_shows_every_figure_of_every_row() -> None:
    ran = table("-m", "tests.published")
    assert (ran.returncode, ran.stderr) == (0, "")
    lines = ran.stdout.splitlines()
    with (ROOT / "tests" / "data" / "worked_examples.csv").open(encoding="utf-8", newline="") as file:
        names = [row["id"] for row in csv.DictReader(file)]
    shown = [line.split()[0] for line in lines if line.endswith(" ok")]
    assert set(shown) == set(names)
    assert len(shown) == sum(len(row.printed) for row in ROWS.values())
    assert lines[-1].startswith(f"{len(names)} examples, {len(shown)} figures, 0 off: ")
    counts = dict(part.rsplit(" ", 1) for part in lines[-1].partition(": ")[2].split(", "))
    assert counts == {network: str(len(EXAMPLES.get(network, {}))) for network in NETWORKS}


def test_table_tells_a_figure_that_is_off() -> None:
    # ED-5.1 prints 6.94 V; two units more is off.
    script = (
        "import sys; from tests.published import worked_examples, __main__;"
        "worked_examples.ROWS['ED-5.1'].printed['VCE_V'] = '6.96'; sys.exit(__main__.main())"
    )
    ran = table("-c", script)
    assert (ran.returncode, ran.stderr) == (1, "")
    (off,) = [line for line in ran.stdout.splitlines() if line.endswith(" OFF")]
    assert off.split()[0] == "ED-5.1"
    assert ran.stdout.splitlines()[-1].startswith(
        f"{len(ROWS)} examples, {sum(len(r.printed) for r in ROWS.values())} figures, 1 off: "
    )


# ---------------------------------------------------------------------------------------------- what they teach


def test_what_the_source_of_lec_1_calls_emitter_current_is_the_exact_collector_current() -> None:
    # The source leaves the base current out of IE.
    row = ROWS["LEC-1"]
    found = stage("fixed_base", vcc=10.0, hfe=100.0, rb=910e3, rc=1e3)
    assert_allclose(found["IC"] / 1e-3, row.approximate["IE_mA_beta100"], rtol=SIX_DIGITS, atol=0)


def test_rule_of_thumb_of_an_unloaded_divider_is_a_quarter_off_in_vce() -> None:
    # ED-5.3 (seen): re carries ten times r2 as seen from the base, yet the exact VCE is 27 % above the printed one.
    row = ROWS["ED-5.3"]
    found = divider(row)
    assert found["VCE"] / float(row.printed["VCE_V"]) > 1.25
    assert found["IC"] / 1e-3 < 0.95 * row.approximate["IC_mA"]


def test_lec_7_printed_resistors_give_the_wanted_voltage_and_resistance() -> None:
    # With the printed 38.8 kohm: half a unit of it is 0.13 %, of which r1/(r1 + r2) reaches either figure.
    port = NETWORKS["divider"].two_port({"vcc": 10.0}, {"r1": 220e3, "r2": 38.8e3, "rc": 1e3, "re": 0.0}, T0)
    assert_allclose(np.array([port.e_b, port.z_bb]), np.array([1.5, 33e3]), rtol=0.05 / 38.8, atol=0)


def test_base_current_takes_a_tenth_from_the_follower_of_ae_ef() -> None:
    # AE-EF (memory): the chosen 130 and 150 kohm, gain 100. By hand: V = 15*150/280, Rp = 130*150/280 kohm,
    # IE = 101*(V - 0.6)/(Rp + 101*7.5 kohm) = 0.908 mA, VB = 0.6 + 7.5 kohm*IE = 7.41 V.
    found = stage("follower", vcc=15.0, vbe=0.6, hfe=100.0, r1=130e3, r2=150e3, re=7.5e3)
    v, rp = 15.0 * 150.0 / 280.0, 130e3 * 150.0 / 280.0
    ie = 101.0 * (v - 0.6) / (rp + 101.0 * 7.5e3)
    # A few roundings.
    assert_allclose([found["IE"], found["VB"]], [ie, 0.6 + 7.5e3 * ie], rtol=1e-14, atol=0)
    assert round(ie / 1e-3, 3) == 0.908
    assert found["VB"] < 0.92 * float(ROWS["AE-EF"].printed["VB_V"])


# ---------------------------------------------------------------------------------------------- worst case

WC = ROWS["MCD-WC"]
"""Worst case over tolerances of a four-resistor stage, from memory; base current neglected by the source."""


def corners(hfe: tuple[float, ...]) -> dict[str, np.ndarray]:
    """IC, VCE and the unloaded divider's voltage at every corner, by the textbook's linear solution.

    IC = hFE*(V - VBE)/(RB + (hFE + 1)*RE); with constant VBE each figure is monotone in each parameter alone.
    """
    ends = itertools.product((0.95 * 12.0, 1.05 * 12.0), *((0.9 * ohms, 1.1 * ohms) for ohms in NOMINAL.values()), hfe)
    vcc, r1, r2, rc, re, h = np.array(list(ends)).T
    v, rb = vcc * r2 / (r1 + r2), r1 * r2 / (r1 + r2)
    ic = (v - 0.7) / (rb / h + (1.0 + 1.0 / h) * re)
    return {"VEQ": v, "IC": ic, "VCE": vcc - ic * rc - ic * (1.0 + 1.0 / h) * re}


@pytest.mark.parametrize("direction", [1, -1])
def test_corner_of_the_worst_case_current(direction: int) -> None:
    found = worst_case_box(Spread.exact(NO_BASE_CURRENT)).extreme(("ic",), direction)
    # Largest with most supply, r2 large, r1 and re small (common practice).
    at = {name: float(value[0]) for name, value in found.at.items()}
    ends = {"vcc": 12.0 * (1 + 0.05 * direction), "r1": 36e3 * (1 - 0.1 * direction),
            "r2": 18e3 * (1 + 0.1 * direction), "re": 16e3 * (1 - 0.1 * direction)}  # fmt: skip
    for name, end in ends.items():
        # A mean of two ends, a few roundings.
        assert_allclose(at[name], end, rtol=1e-15, atol=0)


@pytest.mark.parametrize("direction", [1, -1])
def test_true_worst_vce_is_narrower_than_the_printed_mixture(direction: int) -> None:
    # The source takes the divider's voltage at one supply and the collector's at another; no stage has two supplies.
    found = worst_case_box(Spread.exact(NO_BASE_CURRENT)).extreme(("vce",), direction)
    exact = corners((NO_BASE_CURRENT,))["VCE"]
    # VCE near 1.3 V as a difference of 12 V: ten roundings of 1e-16 each.
    assert_allclose(found.value, exact.max() if direction > 0 else exact.min(), rtol=1e-13, atol=0)
    assert WC.approximate["VCE_min_V"] < found.value[0] < WC.approximate["VCE_max_V"]


@pytest.mark.parametrize("name", ["IC", "VCE"])
@pytest.mark.parametrize("direction", [1, -1])
def test_worst_case_with_the_gain_tolerance_counted(name: str, direction: int) -> None:
    # The source's gain of 75 with 50 % tolerance; every corner by the linear solution.
    exact = corners((37.5, 112.5))[name]
    found = worst_case_box(Spread(37.5, 75.0, 112.5)).extreme((name.lower(),), direction)
    assert_allclose(found.value, exact.max() if direction > 0 else exact.min(), rtol=1e-13, atol=0)
    if name == "IC":
        # Base current only ever takes from the divider's voltage.
        assert found.value[0] < WC.approximate["IC_max_uA" if direction > 0 else "IC_min_uA"] * 1e-6


# ---------------------------------------------------------------------------------------------- facts of the trade


def test_doubling_the_gain_doubles_the_current_of_fixed_base_bias() -> None:
    # Common practice, and why fixed base bias is avoided: IC = hFE*(VCC - VBE)/rb.
    one, two = (stage("fixed_base", vcc=12.0, hfe=h, rb=1e6, rc=1e3)["IC"] for h in (100.0, 200.0))
    # Doubling is exact in binary.
    assert_allclose(two / one, 2.0, rtol=1e-15, atol=0)


def test_doubling_the_gain_hardly_moves_a_stiff_divider() -> None:
    # Common practice: stiff means r1 || r2 at most a tenth of hFE*re. At the limit IC = (V - VBE)/(re*(0.1 + 1.01)).
    r = {"r1": 30e3, "r2": 15e3, "rc": 1e3, "re": 1e3}
    one, two = (stage("divider", vcc=12.0, hfe=h, **r)["IC"] for h in (100.0, 200.0))
    assert 1.0 < two / one < 1.10
    # By hand: (0.1 + 1.01)/(0.05 + 1.005).
    assert_allclose(two / one, 1.11 / 1.055, rtol=1e-14, atol=0)


def test_leakage_of_fixed_base_bias_is_multiplied_by_the_gain() -> None:
    # Common practice: ICEO = (hFE + 1)*ICBO, the stability factor of fixed base bias.
    one, two = (stage("fixed_base", vcc=12.0, hfe=100.0, icbo=i, rb=1e6, rc=1e3)["IC"] for i in (0.0, 1e-6))
    # A difference of 0.1 mA in 1 mA.
    assert_allclose(two - one, 101e-6, rtol=1e-13, atol=0)


def test_a_volt_across_the_emitter_resistor_leaves_a_fifth_per_cent_per_kelvin() -> None:
    # Common practice: VBE's 2 mV/K over the volts at re; a divider with negligible resistance, 1 V and 2 V at re.
    for volts in (1.0, 2.0):
        r = {"r1": 1.0 * (10.0 - 0.7 - volts), "r2": 1.0 * (0.7 + volts), "rc": 1e3, "re": 1e3}
        one, two = (stage("divider", vcc=10.0, vbe=v, hfe=1e6, **r)["IC"] for v in (0.700, 0.698))
        # The base current through ohms and the gain of 1e6 leave a millionth.
        assert_allclose(two / one - 1.0, 2e-3 / volts, rtol=1e-5, atol=0)
