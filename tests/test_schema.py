"""The JSON of every kind of answer against its schema, and the schema against the contract."""

from __future__ import annotations

import copy
import functools
import json
import math
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import jsonschema
import pytest

import synth
import synth.present
from synth.solve import check, find
from synth.stage import Stage

SCHEMA = json.loads((Path(synth.present.__file__).parent / "schema.json").read_text(encoding="utf-8"))
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)

# The sample of the design, section 6: its keys are the contract; its figures are not compared here.
CONTRACT = json.loads("""
{"schema": "restpoint/find/1", "version": "0.1.0", "command": "...", "stage": {},
 "assumed": [{"key": "ambient.temperature", "value": "0 : 25 : 70 °C", "why": "not given"}],
 "warnings": [{"name": "...", "text": "..."}],
 "search": {"status": "optimal", "bound": 0.1492, "combinations": 442050625,
   "evaluated": 330000, "complete": true, "seconds": 0.05},
 "networks": [{"network": "divider", "best": 0.1493, "why": "..."}],
 "candidates": [{"rank": 1, "network": "divider", "resistors": {"r1": 43000.0, "r2": 24000.0, "rc": 1800.0, "re": 1800.0},
   "nominal": {"ic": 0.0019439, "vce": 4.98640, "ib": 8.73698e-06, "region": "active", "nodes": {}},
   "worst": {"ic": [0.00172723, 0.00214289], "vce": [4.27875, 5.74634]},
   "drift": {"ic": 0.136384, "vce": 0.149269, "q_point": 0.149269}, "centring": 0.02807,
   "budget": {"ic": [{"cause": "vbe", "share": 0.05}], "vce": []},
   "neighbours": [{"role": "r1", "step": 1, "value": 47000.0, "drift": 0.2, "verdict": "fail"}],
   "roles": {"r1": {"drop": 7.7, "current": 0.00018}},
   "limits": [{"name": "bleeder_current", "sense": "<=", "limit": 0.0002, "worst": 0.000173,
     "margin": 0.13, "at": {}, "verdict": "pass"}],
   "verdict": "pass", "explanation": ["..."]}],
 "infeasible": null}
""")
CONTRACT_INFEASIBLE = json.loads("""
{"binding": ["target.ic", "collector_share"], "best_without": {},
 "relaxations": [{"change": {"limits.collector_share": "0.3"}, "drift": 0.29}]}
""")

PLAIN: dict[str, Any] = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}

FEASIBLE: dict[str, dict[str, Any]] = {
    "as in the contract": PLAIN,
    "windows": PLAIN | {"ic": "2 mA ± 15 %", "vce": "4 : 5 : 6 V"},
    "vce without a target": PLAIN | {"vce": ">= 2 V"},
    "type, pnp": {"supply": "9 V ± 5 %", "ic": "1 mA", "vce": "4 V", "type": "BC857B", "series": "E12"},
    "germanium": PLAIN | {"transistor_material": "germanium", "transistor_icbo": "2 µA", "temperature": "10 : 30 °C"},
    "fixed VBE": PLAIN | {"transistor_vbe_model": "fixed"},
    "own base supply, limits off": PLAIN
    | {"network": "fixed_base", "vbb": "3.3 V ± 2 %", "resistors_re_use": "yes", "base_resistance": "none"},
    "collector feedback": PLAIN | {"network": "collector_feedback"},
    "two supplies": PLAIN | {"network": "two_supply", "vee": "12 V"},
    "several networks": PLAIN | {"network": "divider, fixed_base", "resistors_re_use": "either", "series": "E12"},
    "any network, coarse": PLAIN | {"network": "any", "series": "E3", "tolerance": "5 %"},
    "pinned values": PLAIN | {"resistors_re_values": "1k8, 2k"},
    "only one combination": PLAIN
    | {f"resistors_{role}_values": value for role, value in (("r1", "43k"), ("r2", "24k"), ("rc", "1k8"), ("re", "1k8"))},
    "no spread at all": PLAIN | {"hfe": "200", "vbe": "0.65 V", "tcr": "0 ppm/K", "temperature": "25 °C"},
    "warnings": PLAIN | {"supply": "60 V", "vce": "30 V", "ic": "20 mA", "type": "BC847B", "hfe": None,
                         "limits_transistor_stress": "none"},
    "pairs": PLAIN | {"series": "E6", "range": "470 ohm : 47 kohm", "pairs": True, "on_board": "1k, 10k"},
}
INFEASIBLE: dict[str, dict[str, Any]] = {
    "window too narrow": PLAIN | {"ic": "2 mA ± 1 %"},
    "several conflicts": PLAIN | {"ic": "2 mA ± 1 %", "vce": "5 V ± 1 %", "supply_current": "1 mA"},
    "two networks": PLAIN | {"ic": "2 mA ± 1 %", "network": "divider, fixed_base", "series": "E12"},
    "VCE(sat) in the way": PLAIN | {"supply": "1.5 V", "vce": "0.3 V ± 50 mV"},
}
FITTED: dict[str, dict[str, Any]] = {
    "passes": {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"},
    "fails": {"r1": "15k8", "r2": "14k3", "rc": "1k02", "re": "2k49"},
    "saturates": {"r1": "10k", "r2": "10k", "rc": "4k7", "re": "1k"},
    "cut off": {"r1": "1M", "r2": "1k", "rc": "1k8", "re": "1k8"},
}

pytestmark = pytest.mark.usefixtures("short_advice")


@functools.cache
def text_of(**given: Any) -> str:
    return find(Stage(**given), top=3, command="restpoint find").to_json()


def found(**given: Any) -> dict[str, Any]:
    """JSON of an answer, read back from its text."""
    read: dict[str, Any] = json.loads(text_of(**given))
    return read


def judged(**fitted: str) -> dict[str, Any]:
    read: dict[str, Any] = json.loads(check(Stage(**PLAIN, **fitted), command="restpoint check").to_json())
    return read


def keys_of(sample: Any, path: str = "") -> Iterator[str]:
    """Every path of keys in a sample; a list stands for its items."""
    if isinstance(sample, Mapping):
        for key, value in sample.items():
            yield f"{path}.{key}"
            yield from keys_of(value, f"{path}.{key}")
    elif isinstance(sample, list):
        for item in sample:
            yield from keys_of(item, f"{path}[]")


def required_places(schema: Any, instance: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """Places in an instance that its schema says must be there."""
    if "$ref" in schema:
        yield from required_places(SCHEMA["$defs"][schema["$ref"].rpartition("/")[2]], instance, path)
    for part in ("anyOf", "allOf"):
        for option in schema.get(part, []):
            yield from required_places(option, instance, path)
    if isinstance(instance, Mapping):
        yield from ((*path, key) for key in schema.get("required", []))
        for key, value in instance.items():
            inner = schema.get("properties", {}).get(key, schema.get("additionalProperties"))
            if isinstance(inner, Mapping):
                yield from required_places(inner, value, (*path, key))
    elif isinstance(instance, list) and instance and isinstance(schema.get("items"), Mapping):
        yield from required_places(schema["items"], instance[0], (*path, 0))


def test_schema_is_itself_valid() -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)


@pytest.mark.parametrize("name", FEASIBLE)
def test_answer_of_find_is_valid(name: str) -> None:
    answer = found(**FEASIBLE[name])
    VALIDATOR.validate(answer)
    assert answer["candidates"]
    assert answer["infeasible"] is None


@pytest.mark.parametrize("name", INFEASIBLE)
def test_answer_of_find_is_valid_when_nothing_qualifies(name: str) -> None:
    answer = found(**INFEASIBLE[name])
    VALIDATOR.validate(answer)
    assert answer["search"]["status"] == "infeasible"
    assert answer["candidates"] == []
    assert answer["infeasible"]["binding"]


@pytest.mark.parametrize("name", FITTED)
def test_answer_of_check_is_valid(name: str) -> None:
    answer = judged(**FITTED[name])
    VALIDATOR.validate(answer)
    (candidate,) = answer["candidates"]
    assert candidate["verdict"] == ("pass" if name == "passes" else "fail")
    assert candidate["nominal"]["region"] == {"saturates": "saturated", "cut off": "cut off"}.get(name, "active")


def test_answer_of_a_stopped_search_is_valid() -> None:
    stage = Stage(**PLAIN | {"series": "E96"})
    answer = json.loads(find(stage, progress=lambda bound, best, blocks: False).to_json())
    VALIDATOR.validate(answer)
    assert not answer["search"]["complete"]


def test_answer_to_a_program_carries_the_version() -> None:
    """A file that a script wrote is as traceable as one of the command line."""
    answer = json.loads(synth.find(Stage(**PLAIN), top=1).to_json())
    VALIDATOR.validate(answer)
    assert answer["version"] == synth.__version__


@pytest.mark.parametrize("path", sorted(set(keys_of(CONTRACT))))
def test_key_of_the_contract_is_there(path: str) -> None:
    # Warnings need a stage that deserves one; the rest is the contract's own stage, as designs quote it.
    given = FEASIBLE["warnings"] if path.startswith(".warnings") else PLAIN
    assert path in set(keys_of(found(**given)))


@pytest.mark.parametrize("path", sorted(set(keys_of(CONTRACT_INFEASIBLE)) - {".relaxations[].change.limits.collector_share"}))
def test_key_of_the_contract_is_there_when_nothing_qualifies(path: str) -> None:
    assert path in set(keys_of(found(**INFEASIBLE["window too narrow"])["infeasible"]))


def test_values_of_the_contract_have_the_types_of_its_sample() -> None:
    answer = found(**PLAIN)
    for key, sample in CONTRACT.items():
        assert type(answer[key]) is type(sample), key
    ours, theirs = answer["candidates"][0], CONTRACT["candidates"][0]
    for key, sample in theirs.items():
        assert type(ours[key]) is type(sample), key


def test_sample_of_the_contract_says_what_the_schema_says() -> None:
    """Where the sample carries a key, the schema describes it and accepts the sample's value."""
    candidate = SCHEMA["$defs"]["candidate"]["properties"]
    for key, value in CONTRACT["candidates"][0].items():
        if key in ("rank", "network", "resistors", "worst", "drift", "centring", "verdict", "explanation"):
            jsonschema.Draft202012Validator({**candidate[key], "$defs": SCHEMA["$defs"]}).validate(value)
    jsonschema.Draft202012Validator({"$ref": "#/$defs/search", "$defs": SCHEMA["$defs"]}).validate(CONTRACT["search"])
    jsonschema.Draft202012Validator({"$ref": "#/$defs/infeasible", "$defs": SCHEMA["$defs"]}).validate(CONTRACT_INFEASIBLE)


def test_every_required_key_is_missed_when_it_is_taken_away() -> None:
    for answer in (found(**FEASIBLE["windows"]), found(**INFEASIBLE["window too narrow"]), judged(**FITTED["fails"])):
        places = set(required_places(SCHEMA, answer))
        assert len(places) > 40
        for *owner, key in places:
            broken = copy.deepcopy(answer)
            inside = broken
            for step in owner:
                inside = inside[step]
            del inside[key]
            assert not VALIDATOR.is_valid(broken), (owner, key)


def test_every_key_that_is_always_there_is_required() -> None:
    """A key that all answers carry is described and required, unless its name is that of a role, rail or limit."""
    answers = [found(**FEASIBLE["windows"]), found(**FEASIBLE["type, pnp"])]
    described = {".".join(map(str, place)) for answer in answers for place in required_places(SCHEMA, answer)}
    for answer in answers:
        assert set(answer) <= described
        for part in ("search", "stage"):
            assert {f"{part}.{key}" for key in answer[part]} <= described
        candidate = answer["candidates"][0]
        assert {f"candidates.0.{key}" for key in candidate} <= described
        for key in ("nominal", "worst", "drift"):
            assert {f"candidates.0.{key}.{leaf}" for leaf in candidate[key]} <= described
        for key in ("neighbours", "limits"):
            assert {f"candidates.0.{key}.0.{leaf}" for leaf in candidate[key][0]} <= described


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("schema",), "restpoint/find/2"),
        (("search", "status"), "done"),
        (("search", "combinations"), 1.5),
        (("candidates", 0, "verdict"), "ok"),
        (("candidates", 0, "verdict"), "fail"),
        (("candidates", 0, "resistors", "r1"), "43K"),
        (("candidates", 0, "resistors", "r1"), 0.0),
        (("candidates", 0, "resistors"), {"load": 1.0, "r2": 1.0}),
        (("candidates", 0, "worst", "ic"), [0.001]),
        (("candidates", 0, "worst", "ic"), [None, 0.001]),
        (("candidates", 0, "drift", "q_point"), -0.1),
        (("candidates", 0, "nominal", "region"), "linear"),
        (("candidates", 0, "explanation"), []),
        (("candidates", 0, "budget", "ib"), []),
        (("candidates", 0, "neighbours", 0, "step"), 2),
        (("candidates", 0, "limits", 0, "limit"), 0.1),
        (("candidates",), []),
        (("stage", "target", "ic"), [None, None, None]),
        (("stage", "transistor", "polarity"), "pmos"),
        (("infeasible",), {"binding": [], "best_without": {},
 "relaxations": []}),
    ],
)
def test_wrong_value_is_refused(path: tuple[Any, ...], value: Any) -> None:
    answer = found(**FEASIBLE["windows"])
    assert VALIDATOR.is_valid(answer)
    inside = answer
    for step in path[:-1]:
        inside = inside[step]
    inside[path[-1]] = value
    assert not VALIDATOR.is_valid(answer)


def test_further_keys_are_accepted() -> None:
    """The contract lets keys be added: a reader of today accepts the answers of tomorrow."""
    answer = found(**FEASIBLE["windows"])
    for owner in (answer, answer["stage"], answer["search"], answer["candidates"][0], answer["candidates"][0]["nominal"]):
        owner["something_new"] = {"x": 1}
    VALIDATOR.validate(answer)


def test_text_is_json_without_the_numbers_that_json_lacks() -> None:
    def refuse(word: str) -> None:
        raise AssertionError(word)

    # collector_share >= 0 holds with an infinite margin, which has to become null.
    answer = find(Stage(**PLAIN, collector_share="0"), top=1)
    read = json.loads(answer.to_json(), parse_constant=refuse)
    share = next(v for v in answer.candidates[0].limits if v.name == "collector_share")
    assert math.isinf(share.margin)
    assert next(v for v in read["candidates"][0]["limits"] if v["name"] == "collector_share")["margin"] is None


def test_numbers_of_the_text_are_those_of_the_answer() -> None:
    """Written with the digits that reproduce them, so equality is to the last bit."""
    answer = find(Stage(**PLAIN), top=1)
    read = json.loads(answer.to_json())["candidates"][0]
    best = answer.candidates[0]
    assert read["nominal"]["ic"] == best.nominal.ic
    assert tuple(read["worst"]["vce"]) == best.worst["vce"]
    assert read["drift"]["q_point"] == best.drift.q_point
