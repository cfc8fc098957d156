"""The exact search against full enumeration, its proved bound, and the bounds of its blocks.

Expected values come from `enumeration`: every combination judged and sorted, nothing pruned, by the order rule of section
6 of the design. Spaces are random and invented; a failing case is repeated by its number.
"""

import importlib
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from itertools import pairwise

import numpy as np
import pytest
from enumeration import LEAKAGES, Row, drifts, enumerate_all, every_index, generator, random_spaces
from numpy.testing import assert_allclose
from numpy.typing import NDArray

import synth
from synth.box import Box, Meter
from synth.limits import Requirement, Surroundings, judge, requirements
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.quantities import Interval, Spread
from synth.search import Outcome, best_first, pools, search
from synth.search.blocks import Room
from synth.search.corners import Corners
from synth.signal import CORNER, Signal
from synth.spaces import Goal, Space, goal_of, spaces_of, wanted
from synth.stage import Stage
from synth.transistor import Transistor

Array = NDArray[np.float64]
home = importlib.import_module(synth.find.__module__)

ROUNDING = 1e-12
"""Search and enumeration ask the same worst case of unlike batches, whose last bits may differ: some tens of ulps."""
POLISH = 1e-10
"""What a golden section that stops at 3e-8 of its interval may leave below an interior extreme."""
ZOOM = 2e-6
"""What the brute-force zoom may leave below an interior extreme: steps of 1e-5 of an axis, one axis at a time."""

CASES, MIXED = 34, 20
"""Random spaces of each network, and random sets of spaces of several networks."""
NAMES = [*[(name, k) for name in NETWORKS for k in range(CASES)], *[("any", k) for k in range(MIXED)]]
EVERY = [pytest.param(name, k, id=f"{name}-{k}") for name, k in NAMES]

every_network = pytest.mark.parametrize("network", NETWORKS)
every_case = pytest.mark.parametrize(("network", "number"), EVERY)


@cache
def case(network: str, number: int) -> tuple[list[Space], Goal, int, list[Row]]:
    """Spaces, goal, how many to list, and every qualifying combination, best first."""
    rng = generator("exact", network, number)
    names = [network]
    if network == "any":
        names = [str(name) for name in rng.choice(list(NETWORKS), int(rng.integers(2, 5)))]
    spaces, goal = random_spaces(rng, names, most=120 if number % 20 == 0 else 18)
    return spaces, goal, int(rng.integers(1, 11)), enumerate_all(spaces, goal)


@cache
def solved(network: str, number: int) -> Outcome:
    spaces, goal, top, _ = case(network, number)
    return search(spaces, goal, top=top)


def small_steps(monkeypatch: pytest.MonkeyPatch, number: int) -> None:
    """Let a small space go through what only large ones do: many batches, a coarse pass, assessment in portions."""
    for name, sizes in {"BATCH": (3, 8, 32), "COARSE": (2, 3, 5), "FIRST": (1, 2, 16), "ASSESS": (2, 8, 128)}.items():
        monkeypatch.setattr(best_first, name, sizes[number % 3])


def places(outcome: Outcome, spaces: list[Space]) -> list[tuple[int, tuple[int, ...]]]:
    numbers = {id(space): k for k, space in enumerate(spaces)}
    return [(numbers[id(f.space)], f.index) for f in outcome.found]


def check_found(outcome: Outcome, spaces: list[Space], rows: list[Row], rtol: float = ROUNDING) -> None:
    """Whatever was found qualifies and has the drift that enumeration gives it, in ascending order."""
    known = {(row.space, row.index): row for row in rows}
    for place, f in zip(places(outcome, spaces), outcome.found, strict=True):
        row = known[place]
        assert set(f.drifts) == set(row.drifts)
        for quantity, drift in f.drifts.items():
            assert_allclose(drift, row.drifts[quantity], rtol=rtol, atol=0.0, err_msg=quantity)
    found = [f.drift for f in outcome.found]
    assert found == sorted(found)


def check_bound(outcome: Outcome, spaces: list[Space], rows: list[Row], top: int) -> None:
    """Nothing beyond the first `top` found drifts less than the bound."""
    listed = set(places(outcome, spaces)[:top])
    rest = [row.drift for row in rows if (row.space, row.index) not in listed]
    assert outcome.bound <= min(rest, default=np.inf) * (1.0 + ROUNDING)


def check_complete(outcome: Outcome, spaces: list[Space], rows: list[Row], top: int) -> None:
    """A search that ran to its end lists the best `top`, and besides them only ties."""
    assert outcome.complete
    assert outcome.status == ("optimal" if rows else "infeasible")
    assert outcome.combinations == sum(len(every_index(space)) for space in spaces)
    check_found(outcome, spaces, rows)
    assert {(row.space, row.index) for row in rows[:top]} <= set(places(outcome, spaces))
    check_bound(outcome, spaces, rows, top)
    if len(rows) < top:
        assert outcome.bound == np.inf
    else:
        assert outcome.bound >= rows[top - 1].drift * (1.0 - ROUNDING)
        assert all(f.drift <= rows[top - 1].drift * (1.0 + 2.0 * pools.TIE) for f in outcome.found)


# --- Exactness ----------------------------------------------------------------------------------------------------


@every_case
def test_search_equals_full_enumeration(network: str, number: int, monkeypatch: pytest.MonkeyPatch) -> None:
    spaces, goal, top, rows = case(network, number)
    check_complete(solved(network, number), spaces, rows, top)
    if number % 4 == 1:
        small_steps(monkeypatch, number // 4)
        check_complete(search(spaces, goal, top=top), spaces, rows, top)


STRESSED = 13
"""Random spaces of each network with limits on stress and signal."""


@cache
def stressed_case(network: str, number: int) -> tuple[list[Space], Goal, int, list[Row]]:
    """As `case`, with random styles, ratings, derating policy and signal, and limits on all of them."""
    rng = generator("stressed", network, number)
    names = [network]
    if network == "any":
        names = [str(name) for name in rng.choice(list(NETWORKS), int(rng.integers(2, 4)))]
    spaces, goal = random_spaces(rng, names, most=60 if number % 8 == 0 else 12, stressed=True)
    return spaces, goal, int(rng.integers(1, 7)), enumerate_all(spaces, goal)


@pytest.mark.parametrize("number", range(STRESSED))
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_search_with_limits_on_stress_and_signal_equals_full_enumeration(
    network: str, number: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    spaces, goal, top, rows = stressed_case(network, number)
    check_complete(search(spaces, goal, top=top), spaces, rows, top)
    if number % 4 == 1:
        small_steps(monkeypatch, number // 4)
        check_complete(search(spaces, goal, top=top), spaces, rows, top)


def test_the_stressed_cases_are_of_every_kind() -> None:
    """They would prove little if their limits never failed anything, or failed everything."""
    feasible, deciding = 0, set()
    for network in NETWORKS:
        for number in range(STRESSED):
            spaces, goal, _, rows = stressed_case(network, number)
            feasible += bool(rows)
            free = [replace(s, requirements=tuple(n for n in s.requirements if not is_stress_or_signal(n))) for s in spaces]
            if len(enumerate_all(free, goal)) > len(rows):
                deciding.add(network)
    assert feasible >= 15
    assert deciding == set(NETWORKS)


def is_stress_or_signal(need: Requirement) -> bool:
    return need.limit in ("gain", "input_resistance", "output_resistance", "swing", "resistor_stress", "transistor_stress")


@pytest.mark.parametrize(("network", "number"), EVERY[::4])
def test_candidates_stand_in_the_order_of_the_written_rule(network: str, number: int) -> None:
    _, goal, top, rows = case(network, number)
    # Of the request itself only ratings matter here, and none are known.
    request = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450")
    candidates = home.candidates_of(solved(network, number), goal, top, request)
    assert [(c.network, tuple(c.resistors.values())) for c in candidates] == [row.key[5:] for row in rows[:top]]
    assert [c.rank for c in candidates] == list(range(1, len(candidates) + 1))
    assert_allclose([c.centring for c in candidates], [row.key[1] for row in rows[:top]], rtol=1e-9, atol=1e-15)


@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_the_cases_are_of_every_kind(network: str) -> None:
    """The random cases would prove little if nothing qualified, or everything did."""
    count = dict.fromkeys(("feasible", "infeasible", "tied", "short of places", "leaky", "fixed"), 0)
    for number in range(MIXED if network == "any" else CASES):
        spaces, _, top, rows = case(network, number)
        device = spaces[0].transistor
        count["feasible" if rows else "infeasible"] += 1
        count["tied"] += any(a.key[0] == b.key[0] for a, b in pairwise(rows))
        count["short of places"] += 0 < len(rows) < top
        count["leaky"] += device.icbo.high > 0.0
        count["fixed"] += device.vbe_model == "fixed"
    least = 2 if network == "any" else 4
    assert min(count["feasible"], count["infeasible"], count["leaky"], count["fixed"]) >= least, count
    assert count["short of places"] >= 1, count
    if network not in ("collector_divider", "collector_feedback", "follower", "sink"):
        # Without a VCE target the drift of IC does not depend on rc.
        assert count["tied"] >= 1, count


def test_what_lies_beyond_the_list_is_bounded_by_the_next_drift() -> None:
    """The bound is not idle: in a run to the end without block bounds in the way it is the (top + 1)-th drift itself."""
    tight = 0
    for network in NETWORKS:
        for number in range(CASES):
            _, _, top, rows = case(network, number)
            if len(rows) > top:
                bound = solved(network, number).bound
                tight += bound >= 0.5 * (rows[top - 1].drift + rows[top].drift)
    assert tight >= 20


# --- Stopping -----------------------------------------------------------------------------------------------------


def stop_after(calls: int) -> tuple[Callable[[float, float, int], bool], list[tuple[float, float, int]]]:
    seen: list[tuple[float, float, int]] = []

    def progress(bound: float, best: float, open_blocks: int) -> bool:
        seen.append((bound, best, open_blocks))
        return len(seen) < calls

    return progress, seen


@pytest.mark.parametrize(("network", "number"), EVERY[::6])
@pytest.mark.parametrize("calls", [1, 4])
def test_a_stopped_search_proves_what_it_says(network: str, number: int, calls: int, monkeypatch: pytest.MonkeyPatch) -> None:
    small_steps(monkeypatch, number)
    spaces, goal, top, rows = case(network, number)
    progress, seen = stop_after(calls)
    outcome = search(spaces, goal, top=top, progress=progress)
    if len(seen) < calls:
        check_complete(outcome, spaces, rows, top)
        return
    assert not outcome.complete
    assert outcome.status == ("feasible" if outcome.found else "unknown")
    check_found(outcome, spaces, rows)
    check_bound(outcome, spaces, rows, top)


def test_searches_were_stopped_with_and_without_a_candidate(monkeypatch: pytest.MonkeyPatch) -> None:
    small_steps(monkeypatch, 0)
    seen = set()
    for network in NETWORKS:
        for number in range(0, CASES, 6):
            spaces, goal, top, _ = case(network, number)
            seen.add(search(spaces, goal, top=top, progress=stop_after(1)[0]).status)
    assert seen >= {"feasible", "unknown"}


@every_network
def test_progress_reports_a_rising_bound_and_a_falling_best(network: str, monkeypatch: pytest.MonkeyPatch) -> None:
    small_steps(monkeypatch, 0)
    reports = 0
    # Spaces with a reference element are mostly decided in a few steps, so more of them are looked at.
    for number in range(0, CASES, 4 if NETWORKS[network].reference == "no" else 1):
        spaces, goal, top, rows = case(network, number)
        seen = stop_after(10**9)
        search(spaces, goal, top=top, progress=seen[0])
        bounds, bests, blocks = (np.array([report[k] for report in seen[1]]) for k in range(3))
        reports += len(seen[1])
        assert np.all(np.diff(bounds) >= 0.0)
        assert np.all(np.minimum(bests[1:], 1e300) <= np.minimum(bests[:-1], 1e300))
        assert np.all(blocks >= 1)
        if len(rows) >= top:
            assert np.all(bests >= rows[top - 1].drift)
    assert reports >= 8


# --- Search and worst case together -------------------------------------------------------------------------------


def check_brute(spaces: list[Space], goal: Goal, most: int) -> None:
    rows = enumerate_all(spaces, goal, brute=True)
    outcome = search(spaces, goal, top=most)
    assert outcome.complete
    assert {row.index for row in rows} == {f.index for f in outcome.found}
    by_index = {row.index: row for row in rows}
    for f in outcome.found:
        row = by_index[f.index]
        for quantity, found in f.drifts.items():
            brute = row.drifts[quantity]
            assert found >= brute * (1.0 - POLISH)
            assert_allclose(brute, found, rtol=ZOOM, atol=0.0)
    if len(rows) > 1 and rows[1].drift > rows[0].drift * (1.0 + 2.0 * ZOOM):
        assert outcome.found[0].index == rows[0].index


@every_network
@pytest.mark.parametrize("qualifies", [True, False])
def test_search_equals_enumeration_with_a_brute_force_worst_case(network: str, qualifies: bool) -> None:
    for number in range(100):
        spaces, goal = random_spaces(generator("brute", network, number), [network], most=3)
        if bool(enumerate_all(spaces, goal)) == qualifies:
            check_brute(spaces, goal, 3)
            return
    pytest.fail("no such space drawn")


@pytest.mark.long
@every_network
@pytest.mark.parametrize("number", range(100, 130))
def test_search_equals_enumeration_with_a_brute_force_worst_case_long(network: str, number: int) -> None:
    check_brute(*random_spaces(generator("brute", network, number), [network], most=16), 16)


@pytest.mark.long
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
@pytest.mark.parametrize("block", range(10))
def test_search_equals_full_enumeration_long(network: str, block: int, monkeypatch: pytest.MonkeyPatch) -> None:
    for number in range(1000 + 40 * block, 1040 + 40 * block):
        with monkeypatch.context() as patch:
            small_steps(patch, number)
            spaces, goal, top, rows = case.__wrapped__(network, number)
            check_complete(search(spaces, goal, top=top), spaces, rows, top)


# --- Blocks -------------------------------------------------------------------------------------------------------


def scattered(rng: np.random.Generator, space: Space, most: int = 5) -> Space:
    """The space with a few values in each role, up to 2.5 decades from where they were laid out."""
    lists = {}
    for role, part in space.lists.items():
        n, decades = int(rng.integers(1, most + 1)), float(rng.choice([0.3, 1.0, 2.5]))
        old = part.take(rng.integers(0, part.nominal.size, n))
        nominal = np.sort(part.nominal.mean() * 10.0 ** rng.uniform(-decades, decades, n))
        lists[role] = Parts(nominal=nominal, band=old.band, tcr_low=old.tcr_low, tcr_high=old.tcr_high)
    return replace(space, lists=lists)


def random_point(rng: np.random.Generator, space: Space) -> dict[str, float]:
    """A point of the box, mostly a vertex; an axis now and then stays nominal."""
    axes = [*space.rails, "delta", "hfe", "icbo", *space.roles]
    found = {axis: float(rng.choice([0.0, 1.0, rng.random()])) for axis in axes if rng.random() < 0.9}
    if rng.random() < 0.9:
        t = space.temperature
        found["temperature"] = float(rng.choice([t.low, t.high, rng.uniform(t.low, t.high)]))
    return found


def random_blocks(rng: np.random.Generator, space: Space, count: int) -> tuple[NDArray[np.int32], NDArray[np.int32]]:
    sizes = np.array([space.lists[role].nominal.size for role in space.roles])
    one, two = ((rng.random((count, sizes.size)) * sizes).astype(np.int32) for _ in range(2))
    return np.minimum(one, two), np.maximum(one, two)


def members(space: Space, lo: NDArray[np.int32], hi: NDArray[np.int32]) -> list[NDArray[np.intp]]:
    index = every_index(space)
    return [np.flatnonzero(((index >= a) & (index <= b)).all(axis=1)) for a, b in zip(lo, hi, strict=True)]


def check_corners(space: Space, point: dict[str, float], lo: NDArray[np.int32], hi: NDArray[np.int32]) -> bool:
    """Bound of every quantity against its value at every member; True where some member is leakage-dominated."""
    corners = Corners(space, point, Meter())
    box = space.box(every_index(space), Meter())
    values = box.values(point)
    q = box.solve(values, active_law=True)
    currents = [f"i_{role}" for role in space.roles if f"i_{role}" in space.network.signs]
    for quantity in ("ic", "vce", "ib", *currents):
        value = np.broadcast_to(box.measure((quantity,), values, q), (box.size,))
        for direction in (1, -1):
            corners.begin(lo, hi)
            least = corners.least(quantity, direction)
            for k, inside in enumerate(members(space, lo, hi)):
                true = (direction * value[inside]).min()
                assert least[k] <= true + ROUNDING * abs(true), (quantity, direction, lo[k], hi[k])
    return bool(np.any(q.ib < 0.0))


KINDS = [("silicon", "junction"), ("silicon", "fixed"), ("germanium", "junction"), ("germanium", "fixed")]
every_kind = pytest.mark.parametrize(("material", "model"), KINDS)


def check_blocks(network: str, numbers: range, material: str, model: str) -> tuple[int, int]:
    """Blocks of many spaces; returns how many points there were, and how many with leakage that dominates."""
    points = leaky = 0
    for number in numbers:
        rng = generator("block", network, number)
        (space,), _ = random_spaces(rng, [network], most=10, leakages=["dominant"] if number % 2 else LEAKAGES)
        if (space.transistor.material, space.transistor.vbe_model) == (material, model):
            space = scattered(rng, space)
            points += 1
            leaky += check_corners(space, random_point(rng, space), *random_blocks(rng, space, 12))
    return points, leaky


@every_network
@every_kind
def test_bound_of_a_block_is_below_every_member(network: str, material: str, model: str) -> None:
    points, leaky = check_blocks(network, range(80 if material == "silicon" else 180), material, model)
    assert points >= 3
    if (material, model) == KINDS[0]:
        assert leaky >= 5


@pytest.mark.long
@every_network
@every_kind
def test_bound_of_a_block_is_below_every_member_long(network: str, material: str, model: str) -> None:
    check_blocks(network, range(1000, 4000), material, model)


@every_network
@pytest.mark.parametrize("quantity", ["ic", "vce"])
def test_bound_of_a_single_member_is_its_own_value(network: str, quantity: str) -> None:
    """Section 9 of the design: where a sign is None, both ends and the interval form; of one member that is its value.

    Without it nothing excludes a block by its VCE, and the search degenerates to assessing every member.
    """
    for number in range(12):
        rng = generator("single", network, number)
        (space,), _ = random_spaces(rng, [network], most=30, leakages=["none"])
        if number % 2:
            space = scattered(rng, space, most=3)
        index = every_index(space)
        box = space.box(index, Meter())
        q = box.solve(box.nominal(), active_law=True)
        if box.reference is not None:
            # Only members whose reference conducts are bounded: the others fail a limit that always holds.
            conducts = np.broadcast_to(box.measure(("i_ref",), box.nominal(), q) > 0.0, box.size)
            index = index[conducts]
            box = space.box(index, Meter())
            q = box.solve(box.nominal(), active_law=True)
        corners = Corners(space, {}, Meter())
        for direction in (1, -1):
            corners.begin(index, index)
            least = corners.least(quantity, direction)
            own = np.broadcast_to(direction * getattr(q, quantity), least.shape)
            # VCE is a difference of voltages up to the supply: an absolute 1e-12 V is some hundreds of ulps.
            assert_allclose(least, own, rtol=ROUNDING, atol=1e-12 if quantity == "vce" else 0.0)


def feedback_space(device: Transistor, vcc: float, hot: float, **values: list[float]) -> Space:
    """A collector divider of exact parts with grounded emitter."""
    zero = {role: np.zeros(len(r)) for role, r in values.items()}
    return Space(
        network=NETWORKS["collector_divider"],
        lists={r: Parts(nominal=np.array(v), band=zero[r], tcr_low=zero[r], tcr_high=zero[r]) for r, v in values.items()},
        transistor=device,
        rails={"vcc": Spread.exact(vcc)},
        temperature=Spread(298.15, 298.15, hot),
        requirements=(),
    )


WHOLE = np.array([[0, 0, 0]], dtype=np.int32), np.array([[0, 1, 0]], dtype=np.int32)
"""The one block that holds both values of r2."""


def test_bound_of_a_block_holds_where_the_base_lies_below_ground() -> None:
    """Hot germanium below its saturation current: VBE < 0, so r2 of a grounded-emitter stage feeds current into the base.

    IC then falls with r2, against the sign that holds for VB > 0. Nothing is wrong with such a stage: at 25 °C it draws
    0.6 mA by VBE = 0.14 V.
    """
    device = Transistor(material="germanium", hfe=Spread.exact(100.0), vbe=Spread(0.10, 0.15, 0.20), vbe_ic=1e-3)
    space = feedback_space(device, 9.0, 343.15, r1=[1e6], r2=[1e3, 1e5], rc=[1e3])
    check_corners(space, {"delta": 0.0, "temperature": 343.15}, *WHOLE)


def blocked_space() -> Space:
    """Too little base drive for a fixed VBE: IC = 0, and VCE is that of the bare divider, which rises with r2.

    By hand VCE = 9 V·(r1 + r2)/(r1 + r2 + rc): 8.18919 V with 1 kohm, 8.19643 V with 2 kohm.
    """
    device = Transistor(hfe=Spread.exact(100.0), vbe=Spread.exact(0.65), vbe_ic=2e-3, vbe_model="fixed")
    return feedback_space(device, 9.0, 298.15, r1=[1e5], r2=[1e3, 2e3], rc=[1e4])


def test_bound_of_a_block_holds_where_a_fixed_vbe_blocks() -> None:
    check_corners(blocked_space(), {}, *WHOLE)


def test_search_finds_what_a_fixed_vbe_blocks() -> None:
    window = Requirement(
        name="target.vce", kind="voltage", interval=Interval(0.0, 8.19), judged="box", sums=(("vce",),), target=5.0
    )
    space = replace(blocked_space(), requirements=(window,))
    outcome = search([space], Goal(ic=1e-3, vce=5.0), top=1)
    assert [f.index for f in outcome.found] == [(0, 0, 0)]
    assert_allclose(outcome.found[0].extremes["vce max"].value[0], 9.0 * 101.0 / 111.0, rtol=ROUNDING, atol=0.0)


def test_bound_of_a_single_value_holds_where_bands_overlap() -> None:
    """1.2 times 6 kohm lies above 6.06 kohm: at this point of the box the two values have swapped their order.

    With r1·IC below VT, VCE rises with r2, so the larger of the two is no lower bound for the smaller.
    """
    device = Transistor(hfe=Spread.exact(100.0), vbe=Spread.exact(0.65), vbe_ic=2e-3)
    space = feedback_space(device, 9.0, 298.15, r1=[1e3], r2=[6000.0, 6060.0], rc=[1e5])
    zero = np.zeros(2)
    r2 = Parts(nominal=space.lists["r2"].nominal, band=np.array([0.2, 0.0]), tcr_low=zero, tcr_high=zero)
    space = replace(space, lists={**space.lists, "r2": r2})
    each = np.array([[0, 0, 0], [0, 1, 0]], dtype=np.int32)
    check_corners(space, {"r2": 1.0}, each, each)


def bounds(
    space: Space,
    goal: Goal,
    anchors: dict[tuple[str, int], dict[str, float]],
    lo: NDArray[np.int32],
    hi: NDArray[np.int32],
) -> Array:
    """Bounds of blocks on drift; the weights steer only what is split first."""
    work = Room(space, goal, Meter(), anchors, [1.0] * len(space.roles))
    blocks = work.fresh(lo, hi)
    work.raise_bounds(blocks, np.inf)
    return blocks.bound


def check_room(network: str, number: int) -> tuple[int, int]:
    """Bounds of blocks on drift at random anchors; returns how many were infinite, and how many told something."""
    rng = generator("room", network, number)
    (space,), goal = random_spaces(rng, [network], most=40)
    anchors = {key: random_point(rng, space) for key in wanted(goal)}
    lo, hi = random_blocks(rng, space, 25)
    bound = bounds(space, goal, anchors, lo, hi)
    box = space.box(every_index(space), Meter())
    extreme = cache(lambda names, side: box.extreme(names, side).value)
    each = drifts({(q, side): extreme((q,), side) for q in ("ic", "vce", "vc", "ve") for side in (1, -1)}, goal)
    drift = np.max(list(each.values()), axis=0)
    passed = np.ones(box.size, dtype=bool)
    for need in space.requirements:
        passed &= judge(box, need, lambda names, side: (extreme(tuple(names), side), {})).passed
    for k, inside in enumerate(members(space, lo, hi)):
        if np.isinf(bound[k]):
            assert not passed[inside].any()
        else:
            assert bound[k] <= drift[inside].min() * (1.0 + ROUNDING)
    return int(np.isinf(bound).sum()), int(((bound > 0.0) & np.isfinite(bound)).sum())


@every_network
def test_bound_of_a_block_on_drift_is_below_every_member_and_infinite_only_where_all_fail(network: str) -> None:
    counts = [check_room(network, number) for number in range(4)]
    assert sum(infinite for infinite, _ in counts) >= 4
    assert sum(telling for _, telling in counts) >= 20


@pytest.mark.long
@every_network
def test_bound_of_a_block_on_drift_is_below_every_member_long(network: str) -> None:
    for number in range(1000, 1600):
        check_room(network, number)


@pytest.mark.parametrize("side", [1, -1])
def test_a_range_as_limit_is_bounded_on_both_sides(side: int) -> None:
    """A block that lies wholly beside the range is excluded, whichever side it is; a block across it is not."""
    stage = synth.Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", series="E12", tolerance="5 %")
    (space,) = spaces_of(stage)
    sizes = np.array([space.lists[role].nominal.size for role in space.roles], dtype=np.int32)
    every = np.zeros_like(sizes)[None], (sizes - 1)[None]
    need = next(n for n in space.requirements if n.name == "base_resistance")
    beyond = Interval(1e9, 2e9) if side < 0 else Interval(1e-3, 2e-3)
    goal = goal_of(stage)
    for interval, alive in ((beyond, False), (Interval(1e3, 2e3), True)):
        only = replace(space, requirements=(replace(need, interval=interval),))
        anchors: dict[tuple[str, int], dict[str, float]] = {key: {} for key in wanted(goal)}
        assert np.isfinite(bounds(only, goal, anchors, *every))[0] == alive


# --- What a search says of itself ---------------------------------------------------------------------------------


def test_evaluated_counts_every_q_point_solve(monkeypatch: pytest.MonkeyPatch) -> None:
    """Counted a second time where the solver is called."""
    spaces, goal, top, _ = case("divider", 0)
    calls = []
    box_room = importlib.import_module(Box.__module__)
    for name in ("solve", "solve_active"):
        law = getattr(box_room, name)

        def counted(*args: object, law: Callable[..., object] = law, **kw: object) -> object:
            q = law(*args, **kw)
            calls.append(q.ic.size)  # type: ignore[attr-defined]
            return q

        monkeypatch.setattr(box_room, name, counted)
    assert search(spaces, goal, top=top).evaluated == sum(calls)


def test_a_search_is_repeated_to_the_last_bit() -> None:
    spaces, goal, top, _ = case("divider", 0)
    one, two = (search(spaces, goal, top=top) for _ in range(2))
    assert [(f.index, f.drift) for f in one.found] == [(f.index, f.drift) for f in two.found]
    assert (one.bound, one.evaluated) == (two.bound, two.evaluated)


# --- The corner of the bypass capacitor -----------------------------------------------------------------------------


CORNERED = ("divider", "fixed_base", "two_supply", "collector_feedback")


def with_corner(spaces: list[Space], rng: np.random.Generator) -> list[Space] | None:
    """The spaces with re bypassed by a capacitor, and a limit on its corner that some candidates fail and others meet."""
    found = []
    for space in spaces:
        if "re" not in space.roles:
            return None
        capacitor = 10.0 ** rng.uniform(-6.0, -3.5)
        signal = Signal(source=float(rng.choice([0.0, 1e3])), capacitor=capacitor)
        space = replace(space, signal=signal)
        box = space.box(every_index(space), Meter())
        nominal = np.broadcast_to(box.measure((CORNER,), box.nominal(), box.solve(box.nominal())), (box.size,))
        limit = Interval(-np.inf, float(np.quantile(nominal, 0.5)) * 1.1)
        around = Surroundings(rails=space.rails, roles=space.roles, signal=signal)
        (need,) = (n for n in requirements(space.network, around, {CORNER: limit}, (CORNER,), {}) if n.name == CORNER)
        found.append(replace(space, requirements=(*space.requirements, need)))
    return found


@pytest.mark.parametrize("network", CORNERED)
def test_a_limit_on_the_corner_is_exact(network: str) -> None:
    deciding = 0
    for number in range(20):
        rng = generator("corner", network, number)
        spaces, goal = random_spaces(rng, [network], most=20)
        limited = with_corner(spaces, rng)
        if limited is None:
            continue
        rows = enumerate_all(limited, goal)
        check_complete(search(limited, goal, top=3), limited, rows, 3)
        deciding += 0 < len(rows) < len(enumerate_all(spaces, goal))
    assert deciding >= 1
