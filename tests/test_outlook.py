"""What would make an answer better or cheaper: every figure is borne out by a request of its own."""

import jsonschema
import pytest
from test_schema import SCHEMA

import synth
from synth.advice import outlook
from synth.answer import Answer, Outlook
from synth.present.terminal import render
from synth.stage import Stage

GAP = 0.005
"""What advice may leave between the drift it quotes and the least one."""


@pytest.fixture(scope="module")
def given() -> Stage:
    """The invented stage of the contract, with few enough values for short searches."""
    ends = {"r1": "10k : 100k", "r2": "10k : 100k", "rc": "1k : 10k", "re": "1k : 10k"}
    return Stage(
        supply="12 V ± 5 %", ic="2 mA", vce="5 V", hfe="110 : 450", series="E24", tolerance="1 %",
        **{f"resistors_{role}_range": text for role, text in ends.items()},
    )  # fmt: skip


@pytest.fixture(scope="module")
def answer(given: Stage) -> Answer:
    return synth.find(given, top=1, advise=True)


@pytest.fixture(scope="module")
def found(answer: Answer) -> Outlook:
    assert answer.outlook is not None
    return answer.outlook


def least(stage: Stage) -> float:
    best = synth.find(stage, top=1).best
    assert best is not None
    return best.drift.q_point


def close(quoted: float | None, true: float) -> bool:
    """Advice quotes real candidates within half a per cent of the best."""
    return quoted is not None and true * (1.0 - 1e-12) <= quoted <= true / (1.0 - GAP) * (1.0 + 1e-12)


def test_series_compared_are_those_of_requests_of_their_own(given: Stage, found: Outlook) -> None:
    """The band stays that of the request, whatever the series."""
    drifts = {floor.values: floor.drift for floor in found.floors}
    assert set(drifts) == {"E12", "E24", "E96", "E192", "any value"}
    assert close(drifts["E24"], found.drift)
    assert close(drifts["E12"], least(given.replace(series="E12")))
    # IEC 60063: the values of E12 are among those of E24, and a larger list is never worse.
    assert drifts["E24"] * (1.0 - GAP) <= drifts["E12"]


def test_nearly_any_value_is_no_worse_than_a_preferred_one(found: Outlook) -> None:
    """Steps of 0.3 % leave at most about 0.15 % on each resistor: a tenth of a point here."""
    drifts = {floor.values: floor.drift for floor in found.floors}
    assert drifts["any value"] <= min(drifts.values()) + 1e-3


def test_every_change_is_borne_out_by_a_request_of_its_own(given: Stage, found: Outlook) -> None:
    rows = [*found.upgrades[:3], *found.savings[:2]]
    assert len(rows) == 5
    for row in rows:
        assert close(row.drift, least(given.with_keys(dict(row.change)))), row


def test_upgrades_help_most_useful_first_and_savings_cost_least_first(found: Outlook) -> None:
    gains = [row.drift for row in found.upgrades]
    assert all(drift is not None and drift < found.drift for drift in gains)
    assert gains == sorted(gains, key=lambda drift: drift or 0.0)
    costs = [float("inf") if row.drift is None else row.drift for row in found.savings]
    assert costs == sorted(costs)


def test_usual_levers_are_tried(found: Outlook) -> None:
    """Resistor class, coefficient, gain bin, regulated rail, drop across re: the levers of the trade."""
    keys = {key for row in (*found.upgrades, *found.savings) for key in row.change}
    expected = {"resistors.tolerance", "transistor.hfe", "supply.vcc", "limits.collector_share", "resistors.r1.tolerance"}
    assert expected <= keys


def test_a_saving_that_no_candidate_survives_is_said_to_be_one(given: Stage) -> None:
    """A window just met with 1 % parts is not met with 5 % ones."""
    tight = given.replace(ic=f"2 mA ± {100.0 * (least(given) + 0.002):.2f} %")
    best = synth.find(tight, top=1).best
    assert best is not None
    savings = {row.name: row.drift for row in outlook(tight, best.drift.q_point).savings}
    assert savings["R1 of 5 %"] is None or savings["R1 of 5 %"] > best.drift.q_point


def test_the_answer_carries_and_prints_it(answer: Answer) -> None:
    body = answer.as_dict()
    jsonschema.Draft202012Validator(SCHEMA).validate(body)
    assert body["outlook"]["drift"] == answer.best.drift.q_point
    text = " ".join(render(answer).split())
    assert "What would change the best drift of" in text
    assert "any value" in text
    for row in answer.outlook.upgrades:
        assert row.name in text


def test_without_being_asked_nothing_is_searched_again(given: Stage) -> None:
    assert synth.find(given, top=1).outlook is None
    assert "outlook" not in synth.find(given, top=1).as_dict()
