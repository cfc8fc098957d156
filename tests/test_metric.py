"""What ranks: largest drift, one drift, weighed drifts, or the root sum square; each against full enumeration.

The root sum square is formed here a second time, from nodal analysis and Newton's method (`enumeration.q_point`), by its
definition in `synth.rss`: centring, plus the move of the nominal stage over temperature, plus the root of the sum of the
squares of what each part does alone. Spaces are random and invented.
"""

import numpy as np
import pytest
from enumeration import ROOM, enumerate_all, every_index, generator, place, q_point, random_spaces
from numpy.testing import assert_allclose
from numpy.typing import NDArray

import synth
from synth.box import Box, Meter
from synth.networks import NETWORKS
from synth.ranking import read_goal
from synth.search import best_first, search
from synth.search.blocks import Room
from synth.spaces import Goal, Space, goal_of
from synth.stage import Stage, StageError

Array = NDArray[np.float64]

SECOND = 1e-9
"""Two solutions of one equation, some 1e-13 apart, and differences of them that are a thousandth of their size."""
CASES = 3


def position(low: float, nominal: float, high: float) -> float:
    return (nominal - low) / (high - low) if high > low else 0.0


def second_rss(box: Box, goal: Goal) -> Array:
    """Root sum square of every candidate of a box, by the definition, quantity by quantity and part by part."""
    spreads = {**box.rails, "delta": box.transistor.vbe, "hfe": box.transistor.hfe, "icbo": box.transistor.icbo}
    if box.reference is not None:
        spreads |= {"r_ref": box.reference.slope}
    ambient = box.temperature
    stops = [ambient.nominal, ambient.low, ambient.high, *([ROOM] if ambient.low < ROOM < ambient.high else [])]

    def at(t: float, moved: str = "", end: float = 0.0) -> dict[str, Array]:
        u = {name: position(s.low, s.nominal, s.high) for name, s in spreads.items()}
        if box.reference is not None:
            volts, tc, rise = box.reference.voltage, box.reference.tc, t - ROOM
            ends = [volts.low + min(tc.low * rise, tc.high * rise), volts.high + max(tc.low * rise, tc.high * rise)]
            u["delta_ref"] = position(ends[0], volts.nominal + tc.nominal * rise, ends[1])
        where: dict[str, Array] = {name: np.full(box.size, x) for name, x in u.items()}
        where["temperature"] = np.full(box.size, position(ambient.low, t, ambient.high))
        for role, part in box.parts.items():
            ends = [part.tcr_low * (t - ROOM), part.tcr_high * (t - ROOM)]
            low, high = 1.0 - part.band + np.minimum(*ends), 1.0 + part.band + np.maximum(*ends)
            wide = np.where(high > low, high - low, 1.0)
            where[role] = np.where(high > low, (np.clip(1.0, low, high) - low) / wide, 0.0)
        if moved:
            where[moved] = np.full(box.size, end)
        return q_point(box.network, box.transistor, place(box, where))

    worst = []
    wide = [name for name, s in spreads.items() if s.width > 0.0] + list(box.parts)
    wide += ["delta_ref"] if box.reference is not None else []
    for quantity, aim in goal.aims.items():
        start = at(ambient.nominal)[quantity]
        theta = np.max([np.abs(at(t)[quantity] - start) for t in stops], axis=0)
        squares = np.zeros(box.size)
        for name in wide:
            moves = [np.abs(at(t, name, end)[quantity] - at(t)[quantity]) for t in stops for end in (0.0, 1.0)]
            squares += np.max(moves, axis=0) ** 2
        worst.append((np.abs(start - aim) + theta + np.sqrt(squares)) / aim)
    return np.asarray(np.max(worst, axis=0))


def cases(network: str, number: int) -> tuple[list[Space], Goal, dict[tuple[int, tuple[int, ...]], dict[str, float]]]:
    """Random spaces, their goal, and the drifts of every qualifying combination."""
    rng = generator("metric", network, number)
    spaces, goal = random_spaces(rng, [network], most=40)
    return spaces, goal, {(row.space, row.index): dict(row.drifts) for row in enumerate_all(spaces, goal)}


def check(spaces: list[Space], goal: Goal, scores: dict[tuple[int, tuple[int, ...]], float], rtol: float) -> None:
    """The search lists the least scores there are, and bounds the rest."""
    outcome = search(spaces, goal, top=3)
    assert outcome.complete
    best = sorted(scores.values())
    assert_allclose([f.score for f in outcome.found[:3]], best[:3], rtol=rtol, atol=0.0)
    for f in outcome.found:
        assert_allclose(f.score, scores[0, f.index], rtol=rtol, atol=0.0)
    if len(best) > 3:
        assert outcome.bound <= best[3] * (1.0 + rtol)
        assert outcome.bound >= best[2] * (1.0 - rtol)


@pytest.mark.parametrize("number", range(CASES))
@pytest.mark.parametrize("network", NETWORKS)
def test_root_sum_square_ranks_as_full_enumeration_does(network: str, number: int, monkeypatch: pytest.MonkeyPatch) -> None:
    spaces, goal, drifts = cases(network, number)
    squares = Goal(**{**goal.aims, "rss": True})  # type: ignore[arg-type]
    every = second_rss(spaces[0].box(every_index(spaces[0]), Meter()), goal)
    by_index = {(0, tuple(int(i) for i in index)): float(x) for index, x in zip(every_index(spaces[0]), every, strict=True)}
    if number % 2:
        monkeypatch.setattr(best_first, "BATCH", 4)
        monkeypatch.setattr(best_first, "COARSE", 2)
    check(spaces, squares, {place: by_index[place] for place in drifts}, SECOND)


@pytest.mark.parametrize("number", range(CASES))
@pytest.mark.parametrize("network", NETWORKS)
def test_weighed_drifts_rank_as_full_enumeration_does(network: str, number: int) -> None:
    spaces, goal, drifts = cases(network, number)
    rng = generator("weights", network, number)
    weights = {name: float(rng.choice([0.0, 0.3, 1.0, 2.0])) for name in goal.aims}
    weights["ic"] = weights["ic"] or float(not any(weights.values()))
    weighed = Goal(**{**goal.aims, "weights": weights})  # type: ignore[arg-type]
    scores = {place: max(weights[name] * drift for name, drift in row.items()) for place, row in drifts.items()}
    check(spaces, weighed, scores, 1e-12)


@pytest.mark.parametrize("network", NETWORKS)
def test_bound_of_a_block_on_the_root_sum_square_is_below_every_member(network: str) -> None:
    """At the moves that decide for any one member; of a block of one member it tells half of the value at least."""
    telling = 0
    for number in range(5):
        rng = generator("squares", network, number)
        (space,), goal = random_spaces(rng, [network], most=40, leakages=["none", "limit"])
        index = every_index(space)
        squares = Goal(**{**goal.aims, "rss": True})  # type: ignore[arg-type]
        pilot = index[[int(rng.integers(len(index)))]]
        room = Room(space, squares, Meter(), *best_first._bearings(space, pilot, squares, Meter()))
        sizes = np.array([space.lists[role].nominal.size for role in space.roles])
        one, two = ((rng.random((20, sizes.size)) * sizes).astype(np.int32) for _ in range(2))
        lo, hi = np.minimum(one, two), np.maximum(one, two)
        lo[:5] = hi[:5]
        bound = np.max([room._squares(quantity, lo, hi) for quantity in goal.aims], axis=0)
        own = second_rss(space.box(index, Meter()), goal)
        for k in range(len(lo)):
            inside = ((index >= lo[k]) & (index <= hi[k])).all(axis=1)
            assert bound[k] <= own[inside].min() * (1.0 + SECOND)
            telling += k < 5 and bound[k] > 0.5 * own[inside].min()
    assert telling >= 6


# --- Texts --------------------------------------------------------------------------------------------------------


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E12", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("text", "weights", "rss"),
    [
        ("corners", None, False),
        ("rss", None, True),
        ("ic", {"ic": 1.0}, False),
        ("VCE", {"vce": 1.0}, False),
        ("ic=1, vce=0.5", {"ic": 1.0, "vce": 0.5}, False),
    ],
)
def test_a_metric_is_read(text: str, weights: dict[str, float] | None, rss: bool) -> None:
    goal = read_goal(stage(), text)
    assert (goal.weights, goal.rss) == (weights, rss)
    assert goal.aims == goal_of(stage()).aims


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("corner", r"metric: read 'corner', which is no measure .* nearest is 'corners'"),
        ("vc", r"metric: read 'vc', which is no measure of this stage, accepted is corners, rss, ic, vce, or weights"),
        ("ic=1, vc=2", r"metric: read 'vc', which has no target"),
        ("ic=1, ic=2", r"metric: read 'ic', which is weighed twice"),
        ("ic=-1", r"metric: read 'ic=-1', whose weight is no number"),
        ("ic=much", r"metric: read 'ic=much', whose weight is no number"),
        ("ic=0", r"metric: read 'ic=0', where nothing counts"),
    ],
)
def test_a_metric_that_is_none_is_refused(text: str, message: str) -> None:
    with pytest.raises(StageError, match=message):
        synth.find(stage(), metric=text)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("current", r"frontier: read 'current', which is no axis of a frontier, .* nearest is 'supply_current'"),
        ("gain,gain", r"frontier: read 'gain,gain', where gain stands twice"),
        ("price", r"frontier: read 'price', but not every role has a stock list"),
    ],
)
def test_axes_that_are_none_are_refused(text: str, message: str) -> None:
    with pytest.raises(StageError, match=message):
        synth.find(stage(), frontier=text)


def test_an_axis_that_means_nothing_is_refused() -> None:
    with pytest.raises(StageError, match=r"frontier: read 'gain', which means nothing for sink"):
        synth.find(stage(network="sink", vce=None), frontier="gain")
