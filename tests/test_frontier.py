"""The frontier against full enumeration, and what a search that is stopped, short of memory or of time still proves.

Expected values come from `enumeration`: every combination judged, nothing pruned. A frontier is then found by its definition:
of all qualifying combinations those that no other beats. Spaces are random and invented.
"""

import threading
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from enumeration import Row, enumerate_all, generator, order_figures, random_spaces
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from synth.box import Meter
from synth.networks import NETWORKS
from synth.search import AXES, Frontier, best_first, frontier, pools, search
from synth.spaces import Goal, Space

Array = NDArray[np.float64]

ROUNDING = 1e-12
"""As in the tests of the search: the same worst case of unlike batches, some tens of ulps."""
CASES = 8
"""Random spaces of each network and random sets of spaces, each every fourth under limits on stress and signal."""
CHOICES = (
    ("supply_current",),
    ("parts", "distinct_values"),
    ("input_resistance", "supply_current"),
    ("gain",),
    ("swing", "distinct_values"),
    ("price",),
    ("supply_current", "price", "swing"),
)


def priced(rng: np.random.Generator, spaces: list[Space]) -> list[Space]:
    """The spaces with an invented price on every value."""
    return [
        replace(s, prices={role: rng.choice([0.01, 0.02, 0.05, 0.3], p.nominal.size) for role, p in s.lists.items()})
        for s in spaces
    ]


def figures(space: Space, rows: list[Row], goal: Goal, axes: tuple[str, ...]) -> Array:
    """Figures of combinations along axes, less is better: the definition of each axis written again."""
    index = np.array([row.index for row in rows], dtype=np.int32)
    box = space.box(index, Meter())
    values = box.nominal()
    q = box.solve(values, active_law=True)
    order = order_figures(space, index, goal)
    columns = {
        "supply_current": [row[1] for row in order],
        "parts": [row[2] for row in order],
        "distinct_values": [row[3] for row in order],
        "price": [sum(space.prices[role][i] for role, i in zip(space.roles, k, strict=True)) for k in index],
    }
    signal = [axis for axis in axes if axis not in columns]
    for name in signal:
        best = -np.broadcast_to(box.measure((name,), values, q), len(rows)) if space.network.takes_signal else 1e300
        columns[name] = np.broadcast_to(best, len(rows))  # type: ignore[assignment]
    return np.stack([np.asarray(columns[axis], dtype=float) for axis in axes], axis=1)


def vectors(spaces: list[Space], rows: list[Row], goal: Goal, axes: tuple[str, ...]) -> Array:
    """Drift and figures of every qualifying combination, one row each."""
    found = []
    for number, space in enumerate(spaces):
        own = [row for row in rows if row.space == number]
        if own:
            found.append(np.column_stack([[row.drift for row in own], figures(space, own, goal, axes)]))
    return np.concatenate(found) if found else np.zeros((0, 1 + len(axes)))


def beaten(points: Array, by: Array, room: float) -> NDArray[np.bool_]:
    """Which points lie above some point of `by` along one axis by more than `room`, and below it along none."""
    slack = room * np.abs(by)
    none_less = np.all(points[:, None] >= (by - slack)[None], axis=2)
    one_more = np.any(points[:, None] > (by + slack)[None], axis=2)
    return np.asarray((none_less & one_more).any(axis=1))


def check_frontier(found: Frontier, spaces: list[Space], rows: list[Row], goal: Goal, axes: tuple[str, ...]) -> None:
    """No member is beaten, none stands twice, and nothing else is unbeaten."""
    every = vectors(spaces, rows, goal, axes)
    known = {(row.space, row.index): row for row in rows}
    places = [(next(k for k, s in enumerate(spaces) if s is m.found.space), m.found.index) for m in found.members]
    mine = vectors(spaces, [known[place] for place in places], goal, axes)
    assert_allclose(sorted(m.found.score for m in found.members), sorted(mine[:, 0]), rtol=ROUNDING, atol=0.0)
    assert len(set(places)) == len(places)
    if not len(every):
        assert not places
        return
    assert not beaten(mine, every, 2.0 * pools.SAME).any()
    # Everything is as bad as some member along every axis.
    slack = 2.0 * pools.SAME * np.abs(every)
    safe = every[:, 0] < found.bound * (1.0 - ROUNDING)
    covered = np.all(mine[None] <= (every + slack)[:, None], axis=2).any(axis=1)
    assert covered[safe].all()
    doubles = np.all(np.abs(mine[:, None] - mine[None]) <= 0.5 * pools.SAME * np.abs(mine)[None], axis=2)
    assert doubles.sum() == len(mine)


@cache
def case(network: str, number: int) -> tuple[list[Space], Goal, tuple[str, ...], list[Row]]:
    """Random spaces with prices, the goal, some axes and every qualifying combination."""
    rng = generator("frontier", network, number)
    names = [network]
    if network == "any":
        names = [str(name) for name in rng.choice(list(NETWORKS), int(rng.integers(2, 5)))]
    spaces, goal = random_spaces(rng, names, most=60 if number % 2 == 0 else 18, stressed=number % 4 == 1)
    axes = CHOICES[int(rng.integers(len(CHOICES)))]
    spaces = priced(rng, spaces)
    return spaces, goal, axes, enumerate_all(spaces, goal)


def small_steps(monkeypatch: pytest.MonkeyPatch, number: int) -> None:
    for name, sizes in {"BATCH": (3, 8, 32), "COARSE": (2, 3, 5), "FIRST": (1, 2, 16), "ASSESS": (2, 8, 128)}.items():
        monkeypatch.setattr(best_first, name, sizes[number % 3])


@pytest.mark.parametrize("number", range(CASES))
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_frontier_equals_full_enumeration(network: str, number: int, monkeypatch: pytest.MonkeyPatch) -> None:
    spaces, goal, axes, rows = case(network, number)
    if number % 2:
        small_steps(monkeypatch, number // 2)
    found = frontier(spaces, goal, [AXES[name] for name in axes])
    assert found.complete
    check_frontier(found, spaces, rows, goal, axes)


@pytest.mark.long
@pytest.mark.parametrize("block", range(10))
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_frontier_equals_full_enumeration_long(network: str, block: int, monkeypatch: pytest.MonkeyPatch) -> None:
    for number in range(1000 + 30 * block, 1030 + 30 * block):
        with monkeypatch.context() as patch:
            small_steps(patch, number)
            spaces, goal, axes, rows = case.__wrapped__(network, number)
            check_frontier(frontier(spaces, goal, [AXES[name] for name in axes]), spaces, rows, goal, axes)


def test_the_frontiers_are_of_every_kind() -> None:
    """The random cases would prove little if a frontier were mostly empty, or one point, or everything."""
    large = small = 0
    for network in NETWORKS:
        for number in range(CASES):
            spaces, goal, axes, rows = case(network, number)
            count = len(frontier(spaces, goal, [AXES[name] for name in axes]).members)
            large += count >= 3
            small += 0 < count < 0.5 * len(rows)
    assert large >= 8
    assert small >= 20


@pytest.mark.parametrize("members", [1, 2, 5])
@pytest.mark.parametrize("network", NETWORKS)
def test_a_frontier_that_is_cut_off_keeps_the_least_drift_and_says_so(
    network: str, members: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    small_steps(monkeypatch, 0)
    for number in range(0, CASES, 3):
        spaces, goal, axes, rows = case(network, number)
        found = frontier(spaces, goal, [AXES[name] for name in axes], members=members)
        check_frontier(found, spaces, rows, goal, axes)
        assert found.complete == (found.bound == np.inf)
        assert found.complete or len(found.members) >= members


# --- Memory -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("network", NETWORKS)
def test_a_search_short_of_memory_goes_into_depth_and_proves_the_same(
    network: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    small_steps(monkeypatch, 0)
    for number in range(0, CASES, 3):
        spaces, goal, _, _ = case(network, number)
        wide = search(spaces, goal, top=3)
        seen: list[int] = []

        def watch(bound: float, best: float, blocks: int, seen: list[int] = seen) -> bool:
            seen.append(blocks)
            return True

        with monkeypatch.context() as patch:
            patch.setattr(best_first, "MOST_OPEN", 4)
            deep = search(spaces, goal, top=3, progress=watch)
        assert {(f.index, f.score) for f in deep.found} == {(f.index, f.score) for f in wide.found}
        assert deep.complete
        # Beyond the cap each step opens at most as many blocks as it takes, and no deeper than the lists can be halved.
        halvings = max(sum(int(np.ceil(np.log2(p.nominal.size))) for p in s.lists.values()) for s in spaces)
        assert max(seen, default=0) <= (4 + 3 * (halvings + 1)) * len(spaces)


# --- Stopping -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("asked", [0, 1, 3, 10])
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_a_search_stops_wherever_it_is_asked_to_and_stays_true(
    network: str, asked: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    small_steps(monkeypatch, 0)
    for number in range(0, CASES, 4):
        spaces, goal, _, rows = case(network, number)
        calls = 0

        def stop() -> bool:
            nonlocal calls
            calls += 1
            return calls > asked

        outcome = search(spaces, goal, top=2, stop=stop)
        if calls <= asked:
            assert outcome.complete
            continue
        assert not outcome.complete
        assert outcome.status == ("feasible" if outcome.found else "unknown")
        numbers = {id(space): k for k, space in enumerate(spaces)}
        listed = {(numbers[id(f.space)], f.index) for f in outcome.found[:2]}
        qualifying = {(row.space, row.index): row.drift for row in rows}
        assert listed <= set(qualifying)
        rest = [drift for place, drift in qualifying.items() if place not in listed]
        assert outcome.bound <= min(rest, default=np.inf) * (1.0 + ROUNDING)


# --- Jobs ---------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_any_number_of_jobs_gives_the_same_answer_to_the_last_bit(network: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Listing, bound, proof and the number of solves; the portions are so small that every job gets some."""
    small_steps(monkeypatch, 2)
    monkeypatch.setattr(best_first, "PORTION", 4)
    for number in range(0, CASES, 4):
        spaces, goal, axes, _ = case(network, number)
        one, two, five = (search(spaces, goal, top=3, jobs=jobs) for jobs in (1, 2, 5))
        for other in (two, five):
            assert [(f.index, f.score) for f in other.found] == [(f.index, f.score) for f in one.found]
            assert (other.bound, other.evaluated, other.complete) == (one.bound, one.evaluated, one.complete)
        fronts = [frontier(spaces, goal, [AXES[name] for name in axes], jobs=jobs) for jobs in (1, 3)]
        told = [[(m.found.index, m.found.score, m.axes) for m in front.members] for front in fronts]
        assert told[0] == told[1]


def test_jobs_share_the_portions_of_a_batch(monkeypatch: pytest.MonkeyPatch) -> None:
    """They would prove little if one thread did it all: more than one bounds blocks, each in a room of its own."""
    monkeypatch.setattr(best_first, "PORTION", 4)
    seen: dict[int, set[int]] = {}
    bound = best_first.Room.raise_bounds

    def watched(room: best_first.Room, blocks: best_first.Blocks, limit: Array | float) -> None:
        seen.setdefault(id(room), set()).add(threading.get_ident())
        bound(room, blocks, limit)

    monkeypatch.setattr(best_first.Room, "raise_bounds", watched)
    spaces, goal, _, _ = case("divider", 4)
    monkeypatch.setattr(best_first, "COARSE", 2)
    search(spaces, goal, top=1, jobs=3)
    assert len(set().union(*seen.values())) > 1
