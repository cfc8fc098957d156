"""The order of candidates by section 6 of the design, rule by rule, and the alternatives worth a look.

Order: ascending Q-point drift rounded to 12 significant digits, then centring, supply current, number of resistors, number
of distinct values, network name, resistor values in role order.
"""

from dataclasses import replace

import numpy as np
import pytest

import synth
from synth.answer import Candidate, Drift
from synth.networks import NETWORKS
from synth.ranking import alternatives, order_key
from synth.stage import Stage


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


def base() -> Candidate:
    best = synth.check(stage(), r1="43k", r2="24k", rc="1k8", re="1k8").best
    assert best is not None
    return best


def key(candidate: Candidate) -> tuple[object, ...]:
    return order_key(candidate, NETWORKS[candidate.network].role_names)


def drift(value: float) -> Drift:
    return Drift(ic=value, vce=value, q_point=value)


PLAIN = {"r1": 43e3, "r2": 24e3, "rc": 1800.0, "re": 1800.0}
TIED = {"drift": drift(0.2), "centring": 0.02, "supply_current": 2e-3}
LADDER = [
    {"drift": drift(0.100)},
    {"drift": drift(0.2), "centring": 0.01},
    {"drift": drift(0.2), "centring": 0.02, "supply_current": 1e-3},
    {**TIED, "network": "fixed_base", "resistors": {"rb": 1e6, "rc": 2e3}},
    {**TIED, "resistors": dict.fromkeys(PLAIN, 1e3)},
    {**TIED, "resistors": PLAIN, "network": "collector_divider"},
    {**TIED, "resistors": {**PLAIN, "re": 1e3}, "network": "collector_divider"},
    {**TIED, "resistors": {**PLAIN, "re": 1e3}},
    {**TIED, "resistors": {**PLAIN, "re": 1100.0}},
    {**TIED, "resistors": {**PLAIN, "r2": 30e3, "re": 1e3}},
    {**TIED, "resistors": {**PLAIN, "r1": 47e3, "r2": 1100.0, "re": 1e3}},
]
"""Each is worse than the one before by one rule, and better or equal by every later one."""


@pytest.mark.parametrize("step", range(len(LADDER) - 1))
def test_each_rule_decides_where_those_before_it_tie(step: int) -> None:
    better, worse = (replace(base(), **LADDER[k]) for k in (step, step + 1))  # type: ignore[arg-type]
    assert key(better) < key(worse)


def test_drifts_that_agree_to_12_digits_tie() -> None:
    one = replace(base(), drift=drift(0.1234567890123), centring=0.02)
    same = replace(base(), drift=drift(0.1234567890121), centring=0.01)
    apart = replace(base(), drift=drift(0.123456789011), centring=0.02)
    assert key(same) < key(one)
    assert key(apart) < key(same)


def test_values_count_in_role_order() -> None:
    """r1 before r2, whatever order the mapping has."""
    one = replace(base(), resistors={"re": 1800.0, "rc": 1800.0, "r2": 30e3, "r1": 43e3})
    two = replace(base(), resistors={**PLAIN, "r1": 47e3, "r2": 24e3})
    assert key(one) < key(two)


# --- Alternatives -------------------------------------------------------------------------------------------------


def listed(*changes: dict[str, object]) -> tuple[Candidate, ...]:
    return tuple(replace(base(), rank=k + 1, **change) for k, change in enumerate(changes))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("reason", "better", "text"),
    [
        ("least current", {"supply_current": 1e-3}, "1 mA from the supply at nominal, instead of 2.13 mA"),
        ("highest base-feed resistance", {"base_feed": 27e3}, "base feed of 27 kΩ loads the signal less than 15.4 kΩ"),
        (
            "fewest distinct values",
            {"resistors": {"r1": 24e3, "r2": 24e3, "rc": 1800.0, "re": 1800.0}},
            "2 different values to stock instead of 3",
        ),
    ],
)
def test_a_candidate_that_is_better_in_something_else_is_named(reason: str, better: dict[str, object], text: str) -> None:
    found = alternatives(listed({}, {}, better, {}))
    assert [(a.reason, a.rank, a.text) for a in found] == [(reason, 3, text)]


def test_the_best_that_is_also_best_in_everything_has_no_alternatives() -> None:
    worse = {"supply_current": 1.0, "base_feed": 1.0, "resistors": {"r1": 1.0, "r2": 2.0, "rc": 3.0, "re": 4.0}}
    assert alternatives(listed({}, worse, {})) == ()
    assert alternatives(listed({})) == ()
    assert alternatives(()) == ()


def test_of_equal_alternatives_the_one_of_best_rank_is_named() -> None:
    better = {"supply_current": 1e-3}
    (found,) = alternatives(listed({}, better, better))
    assert found.rank == 2


def test_a_single_value_is_counted_in_the_singular() -> None:
    one = {"resistors": dict.fromkeys(PLAIN, 10e3)}
    (found,) = alternatives(listed({}, one))
    assert found.text == "1 different value to stock instead of 3"


def test_alternatives_of_an_answer_are_the_extremes_of_its_list() -> None:
    answer = synth.find(stage(), top=10)
    found = {a.reason: a.rank for a in answer.alternatives}
    supply = [c.supply_current for c in answer.candidates]
    feed = [c.base_feed for c in answer.candidates]
    distinct = [len(set(c.resistors.values())) for c in answer.candidates]
    expected = {
        "least current": int(np.argmin(supply)) + 1,
        "highest base-feed resistance": int(np.argmax(feed)) + 1,
        "fewest distinct values": int(np.argmin(distinct)) + 1,
    }
    # Below 2 % better is no reason to look.
    worth = {
        "least current": min(supply) < 0.98 * supply[0],
        "highest base-feed resistance": max(feed) > 1.02 * feed[0],
        "fewest distinct values": min(distinct) < distinct[0],
    }
    assert found == {reason: rank for reason, rank in expected.items() if worth[reason]}
    assert found
