"""Series and parallel pairs: the list of them, their bands, what each part carries, and the search over them.

Totals and duplicates are checked with exact fractions, ends and shares with both parts moved apart over their own bands,
searches with full enumeration. A pair of equal bands keeps that band: arithmetic, and common practice. Spaces are invented.
"""

import csv
import html
import io
import itertools
import json
from fractions import Fraction
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from enumeration import Row, enumerate_all, generator, random_spaces
from numpy.testing import assert_allclose, assert_array_equal
from test_search import check_brute, check_complete, small_steps

import synth
from synth.box import Box
from synth.networks import NETWORKS
from synth.parts import HALVES, Pairs, Parts
from synth.preferred import JOINS, PreferredError, ValueList, pair_up
from synth.preferred.pairs import PARALLEL, SERIES, SINGLE, read_parts
from synth.present.circuit import to_svg
from synth.present.export import to_csv, to_markdown
from synth.present.terminal import explanation, render
from synth.quantities import QuantityError, Spread, format_resistance, parse
from synth.search import search
from synth.spaces import Goal, Space, goal_of, spaces_of
from synth.stage import Stage, StageError
from synth.transistor import T0, Transistor

ROUNDING = 1e-14
"""A few operations on doubles: some tens of ulps."""
BOTH = frozenset(JOINS[1:])
REQUEST = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450"}


def made_by_fractions(values: list[float], joins: frozenset[str], low: float, high: float) -> dict[Fraction, int]:
    """Every total within a range to the least number of parts that makes it up; single values whatever their range."""
    found = {Fraction(value): 1 for value in values}
    for a, b in itertools.combinations_with_replacement(map(Fraction, values), 2):
        totals = [a + b] if "series" in joins else []
        totals += [a * b / (a + b)] if "parallel" in joins else []
        for total in totals:
            if Fraction(low) <= total <= Fraction(high):
                found.setdefault(total, 2)
    return found


def alike(values: list[float], tolerance: float = 0.05) -> ValueList:
    return ValueList.from_values(values, tolerance, 1e-4, 0.01)


# --- The list -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("joins", [BOTH, frozenset({"series"}), frozenset({"parallel"})], ids=lambda joins: "-".join(sorted(joins)))
@pytest.mark.parametrize("series", ["E6", "E12", "E24"])
def test_every_total_is_there_once_with_the_fewest_parts(series: str, joins: frozenset[str]) -> None:
    values = ValueList.from_series(series, 10.0, 2200.0, 0.05, 1e-4, 0.0)
    found = pair_up(values, joins, 10.0, 3300.0)
    expected = made_by_fractions(values.values.tolist(), joins, 10.0, 3300.0)
    assert len(found) == len(expected)
    assert_allclose(found.total, sorted(map(float, expected)), rtol=ROUNDING, atol=0.0)
    assert np.all(np.diff(found.total) > 0.0)
    parts = [expected[total] for total in sorted(expected)]
    assert_array_equal(1 + (found.join != SINGLE), parts)


def test_single_values_are_always_there() -> None:
    values = ValueList.from_series("E24", 10.0, 1e7, 0.05, 1e-4, 0.0)
    found = pair_up(values, BOTH, 10.0, 1e7)
    assert_array_equal(found.total[found.join == SINGLE], values.values)
    assert len(values) == 145
    assert found.total[0] == 10.0
    assert found.total[-1] == 1e7


def test_the_part_that_carries_more_comes_first() -> None:
    found = pair_up(alike([1500.0, 33000.0]), BOTH, 0.0, 1e9)
    made = {JOINS[j]: (a, b) for j, a, b in zip(found.join, found.values.values[found.first], found.values.values[found.second],
                                                strict=True) if a != b}  # fmt: skip
    assert made == {"series": (33000.0, 1500.0), "parallel": (1500.0, 33000.0)}


def test_of_equal_totals_the_more_even_pair_stays() -> None:
    """1 k + 2 k and 1.5 k + 1.5 k are 3 k; 2 k || 6 k and 3 k || 3 k are 1.5 k, which is there as one part."""
    found = pair_up(alike([1000.0, 1500.0, 2000.0]), frozenset({"series"}), 0.0, 1e9)
    at = int(np.flatnonzero(found.total == 3000.0)[0])
    assert (found.first[at], found.second[at]) == (1, 1)


def test_of_equal_totals_the_one_of_values_on_the_board_stays() -> None:
    found = pair_up(alike([1000.0, 1500.0, 2000.0]), frozenset({"series"}), 0.0, 1e9, on_board=(1000.0, 2000.0))
    at = int(np.flatnonzero(found.total == 3000.0)[0])
    assert (found.first[at], found.second[at]) == (2, 0)


def test_a_tighter_pair_stands_beside_a_loose_single_part() -> None:
    """1 k of 10 % in one part, or 500 ohm + 500 ohm of 1 % each: neither makes the other superfluous."""
    values = ValueList.from_values([500.0, 1000.0], [0.01, 0.1], 1e-4, 0.0)
    found = pair_up(values, BOTH, 0.0, 1e9)
    assert sorted(found.join[found.total == 1000.0]) == [SINGLE, SERIES]
    even = pair_up(alike([500.0, 1000.0]), BOTH, 0.0, 1e9)
    assert list(even.join[even.total == 1000.0]) == [SINGLE]


def test_where_each_part_has_to_bear_its_share_the_even_pair_stands_beside_the_single_part() -> None:
    values = alike([500.0, 1000.0, 2000.0])
    found = pair_up(values, BOTH, 0.0, 1e9, rated=True)
    # 2 k || 2 k takes half of the power off each part, 500 + 500 half of power and voltage.
    assert sorted(found.join[found.total == 1000.0]) == [SINGLE, SERIES]
    only = pair_up(values, frozenset({"parallel"}), 0.0, 1e9, rated=True)
    assert sorted(only.join[only.total == 1000.0]) == [SINGLE, PARALLEL]


def test_one_piece_makes_no_pair_with_itself() -> None:
    pieces = {"tolerance_low": 0.05, "tolerance_high": 0.05, "tcr": 1e-4, "life": 0.0, "quantities": (1, 2, None)}
    values = ValueList(values=[100.0, 220.0, 470.0], **pieces)  # type: ignore[arg-type]
    found = pair_up(values, frozenset({"series"}), 0.0, 1e9)
    assert found.total.tolist() == [100.0, 220.0, 320.0, 440.0, 470.0, 570.0, 690.0, 940.0]


def test_ten_thousand_random_totals_have_no_duplicate_closer_than_rounding() -> None:
    """No two totals of E96 in three decades lie within the rounding of one another: what merged was equal by fractions."""
    values = ValueList.from_series("E96", 100.0, 1000.0, 0.01, 1e-4, 0.0)
    found = pair_up(values, BOTH, 50.0, 2000.0)
    assert len(found) == len(made_by_fractions(values.values.tolist(), BOTH, 50.0, 2000.0))


# --- Bands --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("temperature", [218.15, T0, 343.15])
def test_a_pair_of_equal_bands_has_that_band(temperature: float) -> None:
    found = pair_up(alike([150.0, 330.0, 4700.0]), BOTH, 0.0, 1e9)
    n = len(found.values)
    base = Parts(nominal=found.values.values, band=np.full(n, 0.06), tcr_low=np.full(n, -2e-4), tcr_high=np.full(n, 1e-4))
    part = Parts.of_list(found, base)
    rise = temperature - T0
    low, high = part.ends(temperature)
    assert_allclose(low, found.total * (0.94 + min(-2e-4 * rise, 1e-4 * rise)), rtol=ROUNDING, atol=0.0)
    assert_allclose(high, found.total * (1.06 + max(-2e-4 * rise, 1e-4 * rise)), rtol=ROUNDING, atol=0.0)


def random_parts(rng: np.random.Generator) -> Parts:
    """All pairs of three values with bands and coefficients of their own."""
    base = Parts(
        nominal=10.0 ** rng.uniform(1.0, 5.0, 3),
        band=rng.choice([0.0, 0.01, 0.1, 0.2], 3),
        tcr_low=-rng.choice([0.0, 1e-4, 1e-3], 3),
        tcr_high=rng.choice([0.0, 1e-4, 1e-3], 3),
    )
    made = [(join, a, b) for join in (SERIES, PARALLEL) for a in range(3) for b in range(3)]
    join, first, second = np.array([*made, *((SINGLE, a, a) for a in range(3))]).T
    return Parts.of_pairs(Pairs(base=base, join=join, first=first, second=second))


def apart(part: Parts, temperature: float, steps: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """First part, second part and total of every pair, with both parts anywhere in their own bands."""
    u, v = (x.ravel()[:, None] for x in np.meshgrid(*[np.linspace(0.0, 1.0, steps)] * 2))
    one, two = (half.ends(temperature) for half in part.pairs.halves)  # type: ignore[union-attr]
    a, b = one[0] + (one[1] - one[0]) * u, two[0] + (two[1] - two[0]) * v
    join = part.pairs.join  # type: ignore[union-attr]
    return a, b, np.where(join == SINGLE, a, np.where(join == SERIES, a + b, 1.0 / (1.0 / a + 1.0 / b)))


@pytest.mark.parametrize("number", range(20))
@pytest.mark.parametrize("temperature", [233.15, T0, 398.15])
def test_the_ends_of_a_pair_are_those_that_its_parts_reach(number: int, temperature: float) -> None:
    part = random_parts(generator("ends", number))
    _, _, total = apart(part, temperature, 2)
    low, high = part.ends(temperature)
    assert_allclose(low, total.min(axis=0), rtol=ROUNDING, atol=0.0)
    assert_allclose(high, total.max(axis=0), rtol=ROUNDING, atol=0.0)


@pytest.mark.parametrize("number", range(20))
def test_no_part_carries_more_than_its_share_at_a_total_and_some_point_reaches_it(number: int) -> None:
    part = random_parts(generator("shares", number))
    a, b, total = apart(part, 343.15, 41)
    join = part.pairs.join  # type: ignore[union-attr]
    for half, own in enumerate((a, b)):
        power, volts = part.shares(half, total, np.asarray(343.15))
        whole = np.where(join == SINGLE, 1.0 - half, np.where(join == SERIES, own / total, total / own))
        # What rounding adds to a difference of resistances, such as the total less the least of the other part.
        assert np.all(whole <= power * (1.0 + 1e-12))
        assert_allclose(volts, np.where(join == PARALLEL, 1.0, power), rtol=ROUNDING, atol=0.0)
        reached = np.isclose(whole, power, rtol=1e-9, atol=0.0).any(axis=0)
        assert reached.all()


def test_parts_join_and_are_found_again() -> None:
    part = random_parts(generator("join"))
    single = Parts(nominal=np.array([123.0]), band=np.array([0.1]), tcr_low=np.zeros(1), tcr_high=np.zeros(1))
    both = single.joined(part)
    assert_allclose(both.ends(320.0)[0][1:], part.ends(320.0)[0], rtol=ROUNDING, atol=0.0)
    assert both.pieces(0) == (SINGLE, (123.0,))
    for k in range(part.nominal.size):
        assert both.pieces(k + 1) == part.pieces(k)
        join, ohms = part.pieces(k)
        found = part.position(float(part.nominal[k]), ohms if join != SINGLE else ())
        assert part.pieces(found)[1] == ohms


# --- What each part carries ---------------------------------------------------------------------------------------


def pair_box(join: int) -> Box:
    """A divider whose r1 and rc are pairs of unlike bands."""
    def pair(ohms: tuple[float, float]) -> Parts:
        base = Parts(nominal=np.array(ohms), band=np.array([0.1, 0.02]), tcr_low=np.full(2, -2e-4), tcr_high=np.full(2, 4e-4))
        one = np.zeros(1, dtype=np.int32)
        return Parts.of_pairs(Pairs(base=base, join=np.full(1, join, dtype=np.int8), first=one, second=one + 1))

    def single(ohms: float) -> Parts:
        return Parts(nominal=np.array([ohms]), band=np.array([0.05]), tcr_low=np.full(1, -1e-4), tcr_high=np.full(1, 1e-4))

    scale = 1.0 if join == SERIES else 4.0
    return Box(
        network=NETWORKS["divider"],
        transistor=Transistor(
            polarity="npn", material="silicon", hfe=Spread(100.0, 200.0, 400.0), vbe=Spread(0.6, 0.65, 0.7), vbe_ic=2e-3,
            vbe_model="junction", icbo=Spread.exact(0.0), icbo_hot=None, vce_sat=0.2,
        ),
        rails={"vcc": Spread(11.4, 12.0, 12.6)},
        temperature=Spread(273.15, 298.15, 343.15),
        parts={"r1": pair((22e3 * scale, 18e3 * scale)), "r2": single(20e3), "rc": pair((1.2e3 * scale, 1e3 * scale)),
               "re": single(1.8e3)},
    )  # fmt: skip


@pytest.mark.parametrize("join", [SERIES, PARALLEL])
@pytest.mark.parametrize("role", ["r1", "rc"])
def test_worst_power_and_voltage_of_a_part_are_reached_and_never_exceeded(join: int, role: str) -> None:
    """Half a million random units, both parts of the pair apart, by Kirchhoff's laws; the ends of their bands too."""
    box, rng, n = pair_box(join), generator("carries", join, role), 400_000
    halves = box.parts[role].pairs.halves  # type: ignore[union-attr]
    worst = {f"{kind}_{role}{half}": box.extreme((f"{kind}_{role}{half}",), 1).value[0] for kind in "pu" for half in HALVES}

    def ends(at: np.ndarray) -> np.ndarray:
        # Half of the draws sit at an end of the axis, where most extremes are.
        return np.where(rng.random(at.size) < 0.6, np.round(at), at)

    t = 273.15 + 70.0 * ends(rng.random(n))
    whole = Box(network=box.network, transistor=box.transistor, rails=box.rails, temperature=box.temperature,
                parts={name: part.take(np.zeros(n, dtype=int)) for name, part in box.parts.items()})  # fmt: skip
    coordinates = {axis: ends(rng.random(n)) for axis in box.axes}
    values = whole.values({**coordinates, "temperature": t})
    a, b = (low + (high - low) * ends(rng.random(n)) for low, high in (half.ends(t) for half in halves))
    values[role] = a + b if join == SERIES else 1.0 / (1.0 / a + 1.0 / b)
    q = whole.solve(values, active_law=True)
    branches = whole.branches(values, q)
    volts, current = branches.voltage[role], branches.current[role]
    for half, own in zip(HALVES, (a, b), strict=True):
        across = current * own if join == SERIES else volts
        for kind, drawn in (("u", across), ("p", across**2 / own)):
            most = worst[f"{kind}_{role}{half}"]
            assert drawn.max() <= most * (1.0 + 1e-9)
            # Random draws come near, no more.
            assert drawn.max() >= most * 0.985


def test_the_more_loaded_part_is_what_a_limit_on_stress_looks_at() -> None:
    box = pair_box(SERIES)
    for kind in "pu":
        each = [box.extreme((f"{kind}_rc{half}",), 1).value for half in HALVES]
        assert_allclose(box.extreme((f"{kind}max_rc",), 1).value, np.maximum(*each), rtol=ROUNDING, atol=0.0)


# --- Search -------------------------------------------------------------------------------------------------------

PAIRED = 8
"""Random spaces of each network with pairs, a quarter of them with limits on stress and signal."""


@cache
def paired_case(network: str, number: int) -> tuple[list[Space], Goal, int, list[Row]]:
    rng = generator("paired", network, number)
    names = [network]
    if network == "any":
        names = [str(name) for name in rng.choice(list(NETWORKS), int(rng.integers(2, 4)))]
    spaces, goal = random_spaces(rng, names, most=40 if number % 8 == 0 else 12, stressed=number % 4 == 1, paired=True)
    return spaces, goal, int(rng.integers(1, 7)), enumerate_all(spaces, goal)


@pytest.mark.parametrize("number", range(PAIRED))
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_search_over_pairs_equals_full_enumeration(network: str, number: int, monkeypatch: pytest.MonkeyPatch) -> None:
    spaces, goal, top, rows = paired_case(network, number)
    check_complete(search(spaces, goal, top=top), spaces, rows, top)
    if number % 4 == 2:
        small_steps(monkeypatch, number // 4)
        check_complete(search(spaces, goal, top=top), spaces, rows, top)


def test_the_paired_cases_are_of_every_kind() -> None:
    kinds = {"feasible": 0, "bent": 0, "pair first": 0}
    for network in NETWORKS:
        for number in range(PAIRED):
            spaces, _, _, rows = paired_case(network, number)
            lists = [part for part in spaces[0].lists.values() if part.pairs is not None]
            kinds["feasible"] += bool(rows)
            kinds["bent"] += any(part.pairs.bent.any() for part in lists if part.pairs is not None)
            kinds["pair first"] += bool(rows) and rows[0].key[3] > len(spaces[0].roles)  # type: ignore[operator]
    assert min(kinds.values()) >= 15, kinds


@pytest.mark.parametrize("network", ["divider", "collector_divider", "two_supply"])
def test_search_over_pairs_equals_enumeration_with_a_brute_force_worst_case(network: str) -> None:
    for number in range(100):
        spaces, goal = random_spaces(generator("brute pairs", network, number), [network], most=3, paired=True)
        if enumerate_all(spaces, goal):
            check_brute(spaces, goal, 3)
            return
    pytest.fail("no such space drawn")


@pytest.mark.long
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
@pytest.mark.parametrize("block", range(5))
def test_search_over_pairs_equals_full_enumeration_long(network: str, block: int, monkeypatch: pytest.MonkeyPatch) -> None:
    for number in range(1000 + 40 * block, 1040 + 40 * block):
        with monkeypatch.context() as patch:
            small_steps(patch, number)
            spaces, goal, top, rows = paired_case.__wrapped__(network, number)
            check_complete(search(spaces, goal, top=top), spaces, rows, top)


# --- Request and answer -------------------------------------------------------------------------------------------


def request(**changes: object) -> Stage:
    return Stage(**{**REQUEST, "series": "E6", "range": "470 ohm : 47 kohm", **changes})  # type: ignore[arg-type]


@cache
def paired_answer() -> synth.Answer:
    return synth.find(request(pairs=True), top=8)


@pytest.mark.parametrize(
    ("given", "joins"),
    [
        (True, {"single", "series", "parallel"}),
        ("yes", {"single", "series", "parallel"}),
        ("series", {"single", "series"}),
        ("Parallel", {"single", "parallel"}),
        (False, None),
        (None, None),
    ],
)
def test_pairs_are_asked_for_by_a_word_or_a_truth_value(given: object, joins: set[str] | None) -> None:
    (space,) = spaces_of(request(pairs=given))
    part = space.lists["r1"]
    assert (None if part.pairs is None else {JOINS[j] for j in part.pairs.join}) == joins
    # Roles that may be the same share one list.
    assert all(other is part for other in space.lists.values())


def test_a_role_may_have_pairs_of_its_own() -> None:
    (space,) = spaces_of(request(resistors_rc_pairs="series", resistors_re_values=["1k", "1k2"], resistors_re_pairs=True))
    assert {role: part.paired for role, part in space.lists.items()} == {"r1": False, "r2": False, "rc": True, "re": True}
    # By hand: 500, 545.45..., 600, 1000, 1200, 2000, 2200 and 2400 ohm; named values are bound by no range.
    assert_allclose(
        space.lists["re"].nominal, [500.0, 6000.0 / 11.0, 600.0, 1e3, 1.2e3, 2e3, 2.2e3, 2.4e3], rtol=ROUNDING, atol=0.0
    )


def test_a_stage_file_takes_a_truth_value(tmp_path: Path) -> None:
    text = '[supply]\nvcc = "12 V"\n[target]\nic = "2 mA"\nvce = "5 V"\n[transistor]\nhfe = "110 : 450"\n'
    path = tmp_path / "stage.toml"
    path.write_text(text + "[resistors]\npairs = true\n[resistors.re]\npairs = false\n", encoding="utf-8")
    stage = Stage.read(path)
    assert (stage.role("r1").pairs, stage.role("re").pairs) == ("yes", "no")
    again = tmp_path / "again.toml"
    again.write_text(stage.to_toml(), encoding="utf-8")
    assert Stage.read(again) == stage


@pytest.mark.parametrize(
    ("changes", "match"),
    [
        ({"pairs": "both"}, r"resistors\.pairs: read 'both', which is unknown, accepted is one of no, yes, series, parallel"),
        ({"on_board": ["0 ohm", "1k"]}, r"resistors\.on_board: read '0 ohm, 1k', which goes down to 0 ohm"),
        ({"network": True}, r"network: read 'True', which is no text"),
    ],
)
def test_what_is_no_such_request_is_refused(changes: dict[str, object], match: str) -> None:
    with pytest.raises(StageError, match=match):
        request(**changes)


def test_pairs_are_no_worse_than_single_parts() -> None:
    single = synth.find(request(), top=1).best
    best = paired_answer().best
    assert best is not None
    assert best.parts
    assert single is None or best.drift.q_point <= single.drift.q_point


def test_the_answer_tells_the_parts_of_each_pair() -> None:
    for c in paired_answer().candidates:
        for role, pair in c.parts.items():
            a, b = pair.ohms
            total = a + b if pair.join == "series" else a * b / (a + b)
            assert_allclose(c.resistors[role], total, rtol=ROUNDING, atol=0.0)
            assert (a >= b) == (pair.join == "series") or a == b
        expected = [who for role in c.resistors for who in ([f"{role}a", f"{role}b"] if role in c.parts else [role])]
        assert list(c.pieces) == expected
        assert set(c.stress) == set(expected)


def test_power_of_the_parts_adds_up_to_that_of_the_role_at_least() -> None:
    """Each at its own worst point: together no less than both at one point, and each no more than both."""
    for c in paired_answer().candidates:
        stage = request(**{f"resistors_{role}_values": [c.resistors[role]] for role in c.resistors})
        whole = synth.check(stage, **c.resistors).best
        assert whole is not None
        for role in c.parts:
            parts = [c.stress[f"{role}{half}"].power for half in HALVES]
            assert max(parts) < whole.stress[role].power <= sum(parts) * (1.0 + ROUNDING)


def test_candidates_with_the_same_drift_come_in_the_order_of_what_the_board_lacks() -> None:
    stage = request(pairs="series", resistors_r1_values=["20k", "22k"], resistors_rc_values=["1k5", "1k8"])
    plain = synth.find(stage, top=5).candidates
    board = tuple(dict.fromkeys(plain[-1].pieces.values()))
    again = synth.find(stage.replace(on_board=list(board)), top=5).candidates
    for c, d in itertools.pairwise(again):
        if f"{c.drift.q_point:.11e}" == f"{d.drift.q_point:.11e}":
            assert len(set(c.pieces.values()) - set(board)) <= len(set(d.pieces.values()) - set(board))


def test_of_two_equal_candidates_the_one_of_values_on_the_board_comes_first() -> None:
    """rc does not move the drift of a stage whose IC alone has a target; without a board the supply current decides."""
    stage = Stage(supply="12 V", ic="2 mA", vce=">= 1 V", hfe="110 : 450", tolerance="1 %", resistors_r1_values=["43k"],
                  resistors_r2_values=["24k"], resistors_re_values=["1k5"], resistors_rc_values=["1k6", "2k", "2k2"])  # fmt: skip
    for value in ("1k6", "2k", "2k2"):
        best = synth.find(stage.replace(on_board=["43k", "24k", "1k5", value]), top=3).best
        assert best is not None
        assert best.resistors["rc"] == parse(value, "resistance", "rc")


def test_json_csv_markdown_and_text_show_the_parts() -> None:
    found = paired_answer()
    best = found.candidates[0]
    role, pair = next(iter(best.parts.items()))
    body = json.loads(found.to_json())["candidates"][0]
    assert body["parts"][role] == {"join": pair.join, "ohms": list(pair.ohms)}
    words = (" + " if pair.join == "series" else " || ").join(map(format_resistance, pair.ohms))
    (row, *_) = csv.DictReader(io.StringIO(to_csv(found)))
    assert row[f"{role}_parts"] == words
    for text in (render(found), explanation(found, 1)):
        assert f"{role.upper()} {words}" in " ".join(text.split())
        assert all(len(line) <= 100 for line in text.splitlines())
    assert words.replace("|", r"\|") in to_markdown(found)


def test_neighbours_of_a_pair_tell_their_parts() -> None:
    best = paired_answer().candidates[0]
    shown = [n for n in best.neighbours if n.pair is not None]
    assert shown
    for n in shown:
        assert n.pair is not None
        a, b = n.pair.ohms
        assert_allclose(n.value, a + b if n.pair.join == "series" else a * b / (a + b), rtol=ROUNDING, atol=0.0)


@pytest.mark.parametrize(
    ("text", "join", "ohms"),
    [
        ("34k5", SINGLE, (34500.0,)),
        ("33k + 1k5", SERIES, (33000.0, 1500.0)),
        ("1k5+33k", SERIES, (33000.0, 1500.0)),
        ("22k || 10 kohm", PARALLEL, (10000.0, 22000.0)),
        ("1e+3 ohm", SINGLE, (1000.0,)),
        ("1e+3 ohm + 2.2e3 ohm", SERIES, (2200.0, 1000.0)),
    ],
)
def test_a_fitted_pair_is_read(text: str, join: int, ohms: tuple[float, ...]) -> None:
    assert read_parts(text, "values.r1") == (join, ohms)


@pytest.mark.parametrize(
    ("text", "error", "match"),
    [
        ("1k + 2k + 3k", PreferredError, r"values\.r1: read '1k \+ 2k \+ 3k', accepted is one resistance, or two above 0 ohm"),
        ("1k || 0 ohm", PreferredError, r"values\.r1: read '1k \|\| 0 ohm', accepted is one resistance, or two above 0 ohm"),
        ("1k + 2 mA", QuantityError, r"values\.r1: read '2 mA'"),
    ],
)
def test_what_is_no_pair_is_refused(text: str, error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        request(r1=text)


def test_a_check_of_a_pair_that_was_found_gives_the_same_figures() -> None:
    for found in paired_answer().candidates[:3]:
        words = {role: " + " if pair.join == "series" else " || " for role, pair in found.parts.items()}
        texts = {
            role: words[role].join(f"{ohm} ohm" for ohm in found.parts[role].ohms) if role in words else f"{ohms} ohm"
            for role, ohms in found.resistors.items()
        }
        best = synth.check(request(), **texts).best
        assert best is not None
        assert (best.resistors, best.parts) == (found.resistors, found.parts)
        assert best.drift == found.drift
        for who, stress in found.stress.items():
            assert_allclose(best.stress[who].power, stress.power, rtol=1e-12, atol=0.0)
        assert best.neighbours


def test_the_circuit_shows_both_parts() -> None:
    found = paired_answer()
    role, pair = next(iter(found.candidates[0].parts.items()))
    svg = html.unescape(to_svg(found, found.candidates[0]))
    for letter, ohms in zip("AB", pair.ohms, strict=True):
        assert f">{role.upper()}{letter}<" in svg
        assert f">{format_resistance(ohms)}<" in svg


def test_pairs_of_e24_in_every_role_are_proved() -> None:
    """The largest request: some 1e17 combinations. Aim: no more than a million solves."""
    stage = Stage(**REQUEST, series="E24", pairs=True)  # type: ignore[arg-type]
    outcome = search(spaces_of(stage), goal_of(stage), top=10)
    assert outcome.complete
    assert outcome.combinations > 1e17
    assert outcome.evaluated < 1e6
