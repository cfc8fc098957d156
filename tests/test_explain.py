"""Budget, neighbours, duties, node voltages and sentences against computations of their own.

The budget is compared with the mean over every order of moving the causes (the definition of the Shapley value: Shapley,
A value for n-person games, 1953), each Q-point of it solved by nodal analysis and Newton's method in `enumeration`.
"""

import itertools
import re as regex
from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import pytest
from enumeration import every_index, generator, q_point, random_spaces
from numpy.testing import assert_allclose
from numpy.typing import NDArray
from stages import circuit

import synth
from synth.answer import Share
from synth.box import Box, Meter
from synth.explain import budgets, cause_words, duties, neighbours, nominal_points, percent, point_words, sentences
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.quantities import Spread
from synth.spaces import fitted, goal_of, spaces_of
from synth.stage import Stage
from synth.transistor import Transistor

Array = NDArray[np.float64]
SUM = 1e-12
"""A drift of a few per cent to a few units is a sum of about ten shares of its own size."""
SOLVER = 1e-9
"""A share is a difference of Q-points that Newton's method leaves within some ulps: nine digits of a share above 1e-5."""

CAUSE = {"delta": "vbe", "icbo": "leakage", "delta_ref": "reference", "r_ref": "reference_slope"}
"""Parameters whose cause has another name."""

every_network = pytest.mark.parametrize("network", NETWORKS)


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


CONTRACT = {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}


# --- Budget -------------------------------------------------------------------------------------------------------


def shapley(box: Box, at: Mapping[str, Array], quantity: str, direction: int, goal: float, k: int) -> dict[str, float]:
    """Mean gain of each cause over every order of moving it from nominal to the deciding point, candidate k."""
    start = {name: float(np.broadcast_to(v, (box.size,))[k]) for name, v in box.nominal().items()}
    end = {name: float(np.broadcast_to(v, (box.size,))[k]) for name, v in at.items()}
    causes = [name for name in start if start[name] != end[name]]
    assert len(causes) <= 5
    mixtures = list(itertools.product((False, True), repeat=len(causes)))
    points = {name: np.array([value] * len(mixtures)) for name, value in start.items()}
    for j, cause in enumerate(causes):
        points[cause] = np.array([end[cause] if mixture[j] else start[cause] for mixture in mixtures])
    value = direction * q_point(box.network, box.transistor, circuit(box, points))[quantity] / goal
    reached = dict(zip(mixtures, value, strict=True))
    gains: dict[str, list[float]] = {cause: [] for cause in causes}
    for order in itertools.permutations(range(len(causes))):
        moved = [False] * len(causes)
        for j in order:
            before = reached[tuple(moved)]
            moved[j] = True
            gains[causes[j]].append(reached[tuple(moved)] - before)
    shares = {CAUSE.get(cause, cause): float(np.mean(gain)) for cause, gain in gains.items()}
    return {**shares, "centring": float(value[0]) - direction}


def narrow(rng: np.random.Generator, box: Box, axes: int) -> Box:
    """The box with only a few axes that have a width, so that every order can be tried."""
    names = [*box.rails, "vbe", "hfe", "icbo", *box.parts, "temperature"]
    # A reference element brings two causes at once.
    kept = set(rng.choice(names, axes, replace=False).tolist())
    if box.reference is not None and axes > 2:
        kept = {*list(kept)[: axes - 2], "r_ref"}

    def spread(name: str, s: Spread) -> Spread:
        return s if name in kept else Spread.exact(s.nominal)

    device, reference = box.transistor, box.reference
    if reference is not None:
        spreads = {name: Spread.exact(getattr(reference, name).nominal) for name in ("voltage", "tc", "slope")}
        reference = replace(reference, **({} if "r_ref" in kept else spreads))
    parts = {}
    for role, part in box.parts.items():
        still = np.zeros(box.size)
        # A coefficient makes every resistor move with temperature: keep the budget to causes that were chosen.
        parts[role] = Parts(
            nominal=part.nominal, band=np.full(box.size, 0.05) if role in kept else still, tcr_low=still, tcr_high=still
        )
    names_of = {name: spread(name, getattr(device, name)) for name in ("vbe", "hfe", "icbo")}
    return Box(
        network=box.network,
        transistor=Transistor(**{**vars(device), **names_of}),
        rails={rail: spread(rail, s) for rail, s in box.rails.items()},
        temperature=spread("temperature", box.temperature),
        parts=parts,
        reference=reference,
    )


@every_network
def test_budget_is_the_mean_over_every_order(network: str) -> None:
    compared = 0
    for number in range(6):
        rng = generator("budget", network, number)
        (space,), goal = random_spaces(rng, [network], most=3)
        box = narrow(rng, space.box(every_index(space), Meter()), int(rng.integers(2, 6)))
        for quantity, aim in (("ic", goal.ic), ("vce", goal.vce or 5.0)):
            for direction in (1, -1):
                at = box.extreme((quantity,), direction).at
                for k, shares in enumerate(budgets(box, at, quantity, direction, aim)):
                    expected = shapley(box, at, quantity, direction, aim, k)
                    found = {share.cause: share.share for share in shares}
                    assert set(found) <= set(expected)
                    for cause, share in expected.items():
                        # Zero is scaled to a share that would be printed as 0.00 %.
                        assert_allclose(found.get(cause, 0.0), share, rtol=SOLVER, atol=1e-12)
                        compared += cause != "centring" and abs(share) > 1e-5
    assert compared >= 20


@every_network
def test_budget_adds_up_and_descends(network: str) -> None:
    for number in range(4):
        (space,), goal = random_spaces(generator("sum", network, number), [network], most=6)
        box = space.box(every_index(space), Meter())
        for quantity, aim in (("ic", goal.ic), ("vce", goal.vce or 5.0)):
            for direction in (1, -1):
                extreme = box.extreme((quantity,), direction)
                for k, shares in enumerate(budgets(box, extreme.at, quantity, direction, aim)):
                    values = [share.share for share in shares]
                    assert values == sorted(values, reverse=True)
                    scale = max(map(abs, values))
                    total = direction * (extreme.value[k] / aim - 1.0)
                    assert_allclose(sum(values), total, rtol=SUM, atol=SUM * scale)


def test_budget_of_an_answer_adds_up_to_its_drift() -> None:
    answer = synth.find(stage(ic="2 mA", temperature="-20 : 25 : 70 °C", icbo="15 nA"), top=5)
    for candidate in answer.candidates:
        for quantity, shares in candidate.budget.items():
            assert_allclose(sum(s.share for s in shares), getattr(candidate.drift, quantity), rtol=SUM, atol=0.0)
            assert {s.cause for s in shares} <= {"centring", "vbe", "hfe", "temperature", "leakage", *candidate.resistors}


def one_box(
    network: str, r: Mapping[str, float], bands: Mapping[str, float], rails: Mapping[str, Spread], **device: Spread
) -> Box:
    zero = np.zeros(1)
    given = {"hfe": Spread.exact(200.0), "vbe": Spread.exact(0.65), **device}
    return Box(
        network=NETWORKS[network],
        transistor=Transistor(vbe_ic=2e-3, **given),  # type: ignore[arg-type]
        rails=rails,
        temperature=Spread.exact(298.15),
        parts={
            role: Parts(nominal=np.array([ohm]), band=np.array([bands.get(role, 0.0)]), tcr_low=zero, tcr_high=zero)
            for role, ohm in r.items()
        },
    )


def shares_of(box: Box, quantity: str, direction: int, goal: float) -> dict[str, float]:
    at = box.extreme((quantity,), direction).at
    return {share.cause: share.share for share in budgets(box, at, quantity, direction, goal)[0]}


@pytest.mark.parametrize("quantity", ["ic", "vce"])
@pytest.mark.parametrize("direction", [1, -1])
def test_resistors_in_series_bring_the_same_share(quantity: str, direction: int) -> None:
    """In collector feedback rc and re enter only as their sum, so equal parts are interchangeable."""
    box = one_box(
        "collector_feedback",
        {"rb": 470e3, "rc": 1500.0, "re": 1500.0},
        {"rb": 0.1, "rc": 0.05, "re": 0.05},
        {"vcc": Spread(11.0, 12.0, 13.0)},
        hfe=Spread(110.0, 200.0, 450.0),
    )
    shares = shares_of(box, quantity, direction, 2e-3 if quantity == "ic" else 5.0)
    assert_allclose(shares["rc"], shares["re"], rtol=1e-10, atol=0.0)
    assert shares["rc"] > 1e-3


@pytest.mark.parametrize("quantity", ["ic", "vce"])
@pytest.mark.parametrize("direction", [1, -1])
def test_base_supply_and_vbe_bring_the_same_share(quantity: str, direction: int) -> None:
    """Only the difference of VBB and the VBE of this unit enters: 50 mV of either is the same."""
    box = one_box(
        "fixed_base",
        {"rb": 100e3, "rc": 1800.0, "re": 1500.0},
        {"re": 0.05},
        {"vcc": Spread.exact(12.0), "vbb": Spread(4.95, 5.0, 5.05)},
        vbe=Spread(0.60, 0.65, 0.70),
        hfe=Spread(110.0, 200.0, 450.0),
    )
    shares = shares_of(box, quantity, direction, 2e-3 if quantity == "ic" else 5.0)
    # 5 V and 50 mV have their last bits a hundredfold apart: the nominal difference is exact to 1e-14 of 50 mV.
    assert_allclose(shares["vcc" if "vcc" in shares else "vbb"], shares["vbe"], rtol=1e-10, atol=0.0)
    assert abs(shares["vbe"]) > 1e-3


@pytest.mark.parametrize("direction", [1, -1])
def test_a_single_cause_brings_the_whole_drift(direction: int) -> None:
    box = one_box(
        "divider",
        {"r1": 43e3, "r2": 24e3, "rc": 1800.0, "re": 1800.0},
        {},
        {"vcc": Spread.exact(12.0)},
        hfe=Spread(110.0, 200.0, 450.0),
    )
    goal = float(box.solve(box.nominal()).ic[0])
    extreme = box.extreme(("ic",), direction)
    (share,) = budgets(box, extreme.at, "ic", direction, goal)[0]
    assert share.cause == "hfe"
    assert_allclose(share.share, direction * (extreme.value[0] / goal - 1.0), rtol=SUM, atol=0.0)


def test_a_cause_without_effect_is_left_out() -> None:
    """rc does not enter IC of a divider."""
    box = one_box(
        "divider",
        {"r1": 43e3, "r2": 24e3, "rc": 1800.0, "re": 1800.0},
        {"rc": 0.2, "re": 0.01},
        {"vcc": Spread.exact(12.0)},
    )
    assert set(shares_of(box, "ic", 1, 2e-3)) == {"centring", "re"}


# --- Neighbours ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"network": "fixed_base", "series": "E12", "tolerance": "5 %"},
        {"network": "collector_feedback", "series": "E12", "tolerance": "5 %", "ic": "2 mA ± 60 %"},
        {"network": "two_supply", "vee": "12 V", "collector_share": "0.3"},
        {"vce": ">= 4 V", "ic": "2 mA ± 20 %"},
    ],
    ids=["divider", "fixed_base", "collector_feedback", "two_supply", "window"],
)
def test_neighbours_agree_with_a_fresh_check(changes: dict[str, object]) -> None:
    given = stage(**changes)
    best = synth.find(given, top=1).best
    assert best is not None
    assert len(best.neighbours) > len(best.resistors)
    for neighbour in best.neighbours:
        fresh = synth.check(given, **{**best.resistors, neighbour.role: neighbour.value}).best
        assert fresh is not None
        assert neighbour.verdict == fresh.verdict
        assert set(neighbour.fails) == {v.name for v in fresh.limits if v.verdict == "fail"}
        if neighbour.drift is None:
            assert "saturated" in fresh.regions
        else:
            assert_allclose(neighbour.drift, fresh.drift.q_point, rtol=1e-12, atol=0.0)
    assert {n.verdict for n in best.neighbours} <= {"pass", "fail"}


def test_neighbours_are_one_preferred_value_down_and_up() -> None:
    """E24 around the contract's candidate, from the table of IEC 60063."""
    best = synth.find(stage(), top=1).best
    assert best is not None
    steps = {(n.role, n.step): n.value for n in best.neighbours}
    assert steps == {
        ("r1", -1): 39e3, ("r1", 1): 47e3,
        ("r2", -1): 22e3, ("r2", 1): 27e3,
        ("rc", -1): 1600.0, ("rc", 1): 2000.0,
        ("re", -1): 1600.0, ("re", 1): 2000.0,
    }  # fmt: skip


def test_a_value_at_the_end_of_its_list_has_one_neighbour_and_a_pinned_one_none() -> None:
    given = stage(resistors_re_values=["1k8", "2k"], resistors_rc_values="1k8")
    best = synth.find(given, top=1).best
    assert best is not None
    assert best.resistors["re"] == 1800.0
    assert [(n.step, n.value) for n in best.neighbours if n.role == "re"] == [(1, 2000.0)]
    assert [n for n in best.neighbours if n.role == "rc"] == []


def test_a_space_of_one_has_no_neighbours() -> None:
    given = stage(**{f"values_{role}": value for role, value in CONTRACT.items()})
    assert neighbours(fitted(given), np.zeros((1, 4), dtype=np.int32), goal_of(given)) == [()]


def test_a_neighbour_that_saturates_has_no_drift() -> None:
    given = stage(resistors_rc_values=["1k8", "18k"])
    best = synth.find(given, top=1).best
    assert best is not None
    (up,) = (n for n in best.neighbours if n.role == "rc")
    assert (up.value, up.drift, up.verdict) == (18e3, None, "fail")
    assert "vce" in up.fails


# --- Nominal figures ----------------------------------------------------------------------------------------------


@every_network
def test_nominal_figures_obey_kirchhoff_and_ohm(network: str) -> None:
    """Drop = resistance times current, between the two nodes that the role hangs between."""
    checked = 0
    for number in range(5):
        (space,), _ = random_spaces(generator("duty", network, number), [network], most=4)
        box = space.box(every_index(space), Meter())
        sign = -1.0 if box.transistor.polarity == "pnp" else 1.0
        ground = "common" if "vee" in box.rails else "positive" if sign < 0.0 else "negative"
        for k, (point, work) in enumerate(zip(nominal_points(box, ground), duties(box), strict=True)):
            known = {"0": 0.0} | {rail: s.nominal for rail, s in box.rails.items()}
            known |= {node: sign * v for node, v in point.nodes.items()}
            known["vee"] = -known.get("vee", 0.0)
            known.setdefault("vbb", known["vcc"])
            known.setdefault("m", 0.0)
            for role, duty in work.items():
                one, two = (known[node] for node in box.network.role(role).nodes)
                # Differences of node voltages of up to 24 V: an absolute 1e-12 V is some hundreds of ulps.
                assert_allclose(duty.drop, one - two, rtol=1e-12, atol=1e-12)
                assert_allclose(duty.drop, box.parts[role].nominal[k] * duty.current, rtol=1e-9, atol=1e-12)
                assert duty.meaning == box.network.role(role).meaning
                checked += 1
            assert_allclose(known["b"] - known["e"], point.vbe, rtol=1e-9, atol=1e-12)
            assert_allclose(known["c"] - known["e"], point.vce, rtol=1e-9, atol=1e-12)
    assert checked >= 10


@pytest.mark.parametrize(
    ("ground", "zero"), [("negative", 0.0), ("positive", 12.0), ("middle", 6.0)], ids=["negative", "positive", "middle"]
)
def test_node_voltages_stand_against_the_rail_that_is_ground(ground: str, zero: float) -> None:
    """By definition a voltage against another point differs by the voltage of that point."""
    best = synth.check(stage(ground=ground), **CONTRACT).best
    plain = synth.check(stage(), **CONTRACT).best
    assert best is not None
    assert plain is not None
    for node, voltage in plain.nominal.nodes.items():
        assert_allclose(best.nominal.nodes[node], voltage - zero, rtol=1e-14, atol=1e-14)


def test_two_supplies_have_their_common_point_as_ground() -> None:
    """Base at 0 V less the drop in rb: by hand VB = −rb·IB."""
    given = stage(network="two_supply", vee="12 V")
    best = synth.check(given, rb="10k", rc="3k3", re="5k6").best
    assert best is not None
    assert_allclose(best.nominal.nodes["b"], -10e3 * best.nominal.ib, rtol=1e-9, atol=0.0)
    low = synth.check(given.replace(ground="negative"), rb="10k", rc="3k3", re="5k6").best
    assert low is not None
    assert_allclose(low.nominal.nodes["b"], best.nominal.nodes["b"] + 12.0, rtol=1e-12, atol=0.0)


# --- Words --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("fraction", "text"),
    [
        (0.149269, "14.9 %"),
        (0.00845, "0.84 %"),
        (1.0, "100 %"),
        (2.5, "250 %"),
        (-0.0027, "-0.27 %"),
        (0.9994, "99.9 %"),
        (0.0, "0 %"),
    ],
)
def test_per_cent_has_three_figures(fraction: float, text: str) -> None:
    assert percent(fraction) == text


def test_causes_in_words() -> None:
    assert [cause_words(c) for c in ("vbe", "hfe", "vcc", "re")] == ["VBE spread", "hFE spread", "supply", "RE"]


def test_a_point_of_the_box_in_words() -> None:
    at = {"temperature": 343.15, "vcc": 12.6, "delta": -0.05, "hfe": 450.0, "icbo": 0.0, "re": 1782.0}
    words = point_words(at, skip=("re",))
    assert words == "70 °C, VCC 12.6 V, VBE -50 mV, hFE 450"
    assert point_words({"delta": 0.05, "icbo": 15e-9, "r1": 4700.0}) == "VBE +50 mV, ICBO 15 nA at 25 °C, R1 4.7 kΩ"


def numbers(text: str) -> list[tuple[float, float]]:
    """Quantities and percentages of a sentence, SI, each with half of its last printed digit."""
    scale = {"": 1.0, "n": 1e-9, "µ": 1e-6, "m": 1e-3, "k": 1e3, "M": 1e6, "%": 1e-2}
    found = regex.findall(r"([-−]?\d+(?:\.(\d+))?) (%|[nµmkM]?)(?=[AVΩ;:,. )]|$)", text)
    return [
        (float(value.replace("−", "-")) * scale[prefix], 0.5 * 10.0 ** -len(decimals) * scale[prefix])
        for value, decimals, prefix in found
    ]


def test_every_figure_of_the_sentences_stands_in_the_candidate() -> None:
    given = stage()
    best = synth.find(given, top=1).best
    assert best is not None
    lines = sentences(best, NETWORKS["divider"])
    assert lines == best.explanation
    known = [best.nominal.ic, best.nominal.vce, *best.worst["ic"], *best.worst["vce"], best.centring]
    known += [best.drift.ic, best.drift.vce]
    known += [x for duty in best.roles.values() for x in (duty.drop, duty.current)]
    known += [s.share for shares in best.budget.values() for s in shares]
    known += [n.drift for n in best.neighbours if n.drift is not None]
    for v in best.limits:
        known += [v.worst, v.margin, *(v.limit if isinstance(v.limit, tuple) else (v.limit,))]
    figures = np.array(known, dtype=float)
    seen = [x for line in lines[1:] for x in numbers(line)]
    assert len(seen) >= 25
    for x, half in seen:
        assert np.any(np.abs(figures - x) <= half * (1.0 + 1e-9)), x


def test_the_sentences_name_the_deciding_quantity_and_its_largest_cause() -> None:
    best = synth.find(stage(), top=1).best
    assert best is not None
    text = "\n".join(best.explanation)
    assert "VCE decides the Q-point drift: it drifts 14.9 % at worst (IC 13.6 %)" in text
    assert regex.search(r"Budget of VCE \(14\.9 %\): hFE spread 5\.7 %", text)
    assert "RC 1K6: drift 21.7 %, fails collector_share" in text


def test_without_a_vce_target_ic_decides() -> None:
    best = synth.find(stage(vce=">= 4 V", ic="2 mA ± 20 %"), top=1).best
    assert best is not None
    assert best.drift.vce is None
    assert any(line.startswith("IC decides the Q-point drift") for line in best.explanation)
    assert set(best.budget) == {"ic"}


def test_budget_of_a_share_is_sorted_data() -> None:
    space = spaces_of(stage(resistors_re_values="1k8"))[0]
    box = space.box(np.array([[0, 0, 0, 0]], dtype=np.int32), Meter())
    at = box.extreme(("ic",), 1).at
    assert all(isinstance(share, Share) for share in budgets(box, at, "ic", 1, 2e-3)[0])
