"""What a user sees: the width, the order, and that every number in a sentence is in the answer."""

from __future__ import annotations

import csv
import functools
import io
import json
import re as regex
import shlex
from collections.abc import Iterator, Mapping
from dataclasses import replace
from decimal import Decimal
from pathlib import Path
from typing import Any

import pytest

from synth.answer import Answer, Infeasible, NoCandidate, Relaxation
from synth.catalogue import resistor_styles
from synth.limits import RULES
from synth.present import catalogue, export, terminal
from synth.search import search
from synth.solve import check, find
from synth.spaces import goal_of, spaces_of
from synth.stage import Stage
from synth.stage_keys import KEYS

WIDTH = 100
"""Columns of the widest line."""

PLAIN: dict[str, Any] = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
TIGHT = PLAIN | {"ic": "2 mA ± 1 %"}
LONG = "tide-gauge buoy, electronics bay three, second board from the lid, hydrophone channel, first stage of the pair"

FOUND: dict[str, dict[str, Any]] = {
    "plain": PLAIN,
    "fine series": PLAIN | {"series": "E96"},
    "windows": PLAIN | {"ic": "2 mA ± 15 %", "vce": "4 : 5 : 6 V"},
    "vce without a target": PLAIN | {"vce": ">= 2 V"},
    "pnp": {"supply": "9 V ± 5 %", "ic": "1 mA", "vce": "4 V", "type": "BC857B"},
    "sagging battery": PLAIN | {"supply": "9 : 12 : 16 V", "supply_current": "4 mA"},
    "any network": PLAIN | {"network": "any", "vee": "12 V", "series": "E3", "tolerance": "5 %"},
    "fixed base with re or without": PLAIN | {"network": "fixed_base", "resistors_re_use": "either", "vbb": "5 V ± 5 %"},
    "cautions": PLAIN | {"supply": "60 V", "vce": "30 V", "ic": "20 mA", "hfe": None, "type": "BC847B",
                         "limits_transistor_stress": "none"},
    "odd values": PLAIN | {"series": None, "resistors_r1_values": "38.31k, 39.97k", "resistors_r2_values": "21.07k"},
    "small": {"supply": "3 V", "ic": "1 µA", "vce": "1 V", "hfe": "420 : 800", "series": "E24", "range": "1 kohm : 100 Mohm"},
    "long name": PLAIN | {"name": LONG},
    "long word": PLAIN | {"name": "hydrophone" * 20},
    "long stock path": PLAIN | {"series": None, "stock": "drawer.csv"},
}
NOTHING: dict[str, dict[str, Any]] = {
    "window too narrow": TIGHT,
    "several conflicts": TIGHT | {"vce": "5 V ± 1 %", "supply_current": "1 mA"},
    "several networks": TIGHT | {"network": "divider, fixed_base", "series": "E12"},
    "long name": TIGHT | {"name": LONG, "series": "E12"},
    "limit on vce": PLAIN | {"vce": "5 V ± 20 %", "limits_vce": ">= 5.9 V"},
    "five limits at once": PLAIN | {"ic": "2 mA ± 30 %", "vce": "5 V ± 20 %", "limits_vce": ">= 4.7 V"},
    "spread wider than the target": PLAIN | {"supply": "1.5 V", "vce": "0.3 V ± 50 mV"},
}
FITTED: dict[str, dict[str, Any]] = {
    "passes": PLAIN | {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"},
    "fails": PLAIN | {"r1": "15k8", "r2": "14k3", "rc": "1k02", "re": "2k49"},
    "saturates": PLAIN | {"r1": "10k", "r2": "10k", "rc": "4k7", "re": "1k"},
    "saturates in a corner": PLAIN | {"r1": "43k", "r2": "24k", "rc": "3k6", "re": "1k5"},
    "cut off": PLAIN | {"r1": "1M", "r2": "1k", "rc": "1k8", "re": "1k8"},
    "long name": PLAIN | {"name": LONG, "r1": "43.256789k", "r2": "24k", "rc": "1k8", "re": "1k8"},
}
ALL = [(kind, name) for kind, given in (("find", FOUND), ("nothing", NOTHING), ("check", FITTED)) for name in given]
every_answer = pytest.mark.parametrize(("kind", "name"), ALL)

pytestmark = pytest.mark.usefixtures("short_advice")


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with a long path and a stock list in it."""
    place = tmp_path_factory.mktemp("shelf") / ("a-folder-with-a-long-name-" * 4)
    place.mkdir()
    values = ["1k", "1k5", "1k8", "2k2", "3k3", "4k7", "10k", "15k", "18k", "22k", "27k", "33k", "39k", "43k", "47k"]
    (place / "drawer.csv").write_text("\n".join(["value", *values, ""]), encoding="utf-8")
    return place


@functools.cache
def answered(kind: str, name: str, folder: Path) -> Answer:
    if kind == "check":
        return check(Stage(folder=folder, **FITTED[name]))
    return find(Stage(folder=folder, **{"find": FOUND, "nothing": NOTHING}[kind][name]), top=6)


def shown(kind: str, name: str, folder: Path) -> str:
    """All that the command line can show of an answer: the table and the explanation of every candidate."""
    answer = answered(kind, name, folder)
    texts = [terminal.render(answer), *(terminal.explanation(answer, c.rank) for c in answer.candidates)]
    return "\n".join(texts)


# --- Width and form -------------------------------------------------------------------------------------------------


@every_answer
def test_no_line_is_wider_than_a_hundred_columns(kind: str, name: str, folder: Path) -> None:
    wide = [line for line in shown(kind, name, folder).splitlines() if len(line) > WIDTH]
    assert not wide


@pytest.mark.parametrize("name", catalogue.TABLES)
def test_built_in_table_is_not_wider_than_a_hundred_columns(name: str) -> None:
    lines = catalogue.show(name).splitlines()
    assert len(lines) > 3
    assert max(map(len, lines)) <= WIDTH


def test_overview_names_every_table() -> None:
    text = catalogue.overview()
    assert max(map(len, text.splitlines())) <= WIDTH
    assert all(regex.search(rf"^  {name} ", text, regex.MULTILINE) for name in catalogue.TABLES)


@every_answer
def test_text_is_plain(kind: str, name: str, folder: Path) -> None:
    """No colours, tabs or other control characters, whatever it is written to; no blanks at the end of a line."""
    text = shown(kind, name, folder)
    # The no-break space holds the groups of a long number together.
    assert {character for character in text if not character.isprintable()} <= {"\n", "\N{NO-BREAK SPACE}"}
    assert not regex.search(r" $", text, regex.MULTILINE)
    assert terminal.render(answered(kind, name, folder)).endswith("\n")
    assert "\n\n\n" not in text


@every_answer
def test_one_sign_stands_for_minus(kind: str, name: str, folder: Path) -> None:
    text = shown(kind, name, folder)
    signs = set(regex.findall(r"(?<![\w.])([-−])(?=\d)", text))
    assert len(signs) <= 1


@every_answer
def test_no_word_of_the_program_text_shows(kind: str, name: str, folder: Path) -> None:
    words = regex.findall(r"\b(?:None|nan|inf|True|False|Spread|Interval|mapping|np\.)(?!\w)", shown(kind, name, folder))
    assert words == []


# --- Order ----------------------------------------------------------------------------------------------------------

ORDER = {
    "verdict": r"^(PASS|FAIL)  ",
    "resistors": r"^(  rank  |Best: |Fitted: )",
    "Q-point": r"^  +nominal  +over the box  +target",
    "causes": r"^Three largest causes of drift$",
    "alternatives": r"^Worth a look$",
    "assumed": r"^Assumed, since not given$",
    "next": r"^Next: ",
}


def places(text: str) -> dict[str, int]:
    """Line of the first appearance of each part."""
    found = {}
    for part, pattern in ORDER.items():
        lines = [i for i, line in enumerate(text.splitlines()) if regex.match(pattern, line)]
        if lines:
            found[part] = lines[0]
    return found


@every_answer
def test_parts_stand_in_the_order_of_the_contract(kind: str, name: str, folder: Path) -> None:
    text = terminal.render(answered(kind, name, folder))
    where = places(text)
    assert list(where) == sorted(where, key=where.__getitem__)
    assert where["verdict"] == 0
    wanted = {"verdict", "assumed", "next"}
    wanted |= {"resistors", "Q-point"} if kind != "nothing" else set()
    wanted |= {"causes"} if kind == "find" else set()
    assert wanted <= set(where)
    assert all(line.startswith("  ") for line in text.splitlines()[where["next"] + 1 :]), "nothing follows the next command"


def test_alternatives_stand_between_causes_and_assumptions(folder: Path) -> None:
    where = places(terminal.render(answered("find", "fine series", folder)))
    assert where["causes"] < where["alternatives"] < where["assumed"]


@pytest.mark.parametrize("name", FITTED)
def test_verdict_of_a_check_is_the_first_word(name: str, folder: Path) -> None:
    text = terminal.render(answered("check", name, folder))
    assert text.startswith("PASS  " if name in ("passes", "long name") else "FAIL  ")


@pytest.mark.parametrize("name", FOUND)
def test_verdict_of_a_find_is_the_first_word(name: str, folder: Path) -> None:
    assert terminal.render(answered("find", name, folder)).startswith("PASS  ")


@pytest.mark.parametrize("name", NOTHING)
def test_verdict_when_nothing_qualifies_is_the_first_word(name: str, folder: Path) -> None:
    text = terminal.render(answered("nothing", name, folder))
    assert text.startswith("FAIL  ")
    for limit in json.loads(answered("nothing", name, folder).to_json())["infeasible"]["binding"]:
        assert limit in text


def test_a_search_that_was_stopped_says_so(folder: Path) -> None:
    answer = find(Stage(**PLAIN | {"series": "E96"}), progress=lambda bound, best, blocks: False)
    text = " ".join(terminal.render(answer).split())
    assert "proved" not in text.partition("Assumed")[0]
    assert "stopped early" in text
    assert max(map(len, terminal.render(answer).splitlines())) <= WIDTH


def test_limit_that_fails_is_marked(folder: Path) -> None:
    answer = answered("check", "fails", folder)
    lines = terminal.render(answer).splitlines()
    failed = {v.name for v in answer.candidates[0].limits if v.verdict == "fail"}
    assert failed
    for v in answer.candidates[0].limits:
        (line,) = (line for line in lines if line.startswith(f"  {v.name} "))
        assert ("  fail  " in line) == (v.name in failed)


def test_cautions_are_shown_with_their_names(folder: Path) -> None:
    answer = answered("find", "cautions", folder)
    assert {w.name for w in answer.warnings} >= {"high_voltage", "dissipation"}
    text = terminal.render(answer)
    assert text.index("Cautions") < text.index("Assumed")
    for w in answer.warnings:
        assert f"  {w.name}: " in text


def test_every_assumption_is_shown(folder: Path) -> None:
    answer = answered("find", "plain", folder)
    text = terminal.render(answer).partition("Assumed, since not given\n")[2]
    assert len(answer.assumed) > 10
    for note in answer.assumed:
        assert regex.search(rf"^  {regex.escape(note.key)} +{regex.escape(note.value)} +{note.why}$", text, regex.MULTILINE)


def test_rank_beyond_the_list_is_refused(folder: Path) -> None:
    with pytest.raises(NoCandidate, match=r"rank: read 7, accepted is 1 to 6"):
        terminal.explanation(answered("find", "plain", folder), 7)


# --- Numbers --------------------------------------------------------------------------------------------------------

PREFIX = {"f": -15, "p": -12, "n": -9, "µ": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9}
NUMBER = regex.compile(r"(?<![\w.,])([-−]?)([0-9]+(?:\.[0-9]+)?)(?: ?(%|°C|([fpnµmkMG]?)(?:V|A|Ω|W|S)\b))?(?![\w])")
LETTER_CODE = regex.compile(r"\b([0-9]+)([RKMG])([0-9]*)\b")


def numbers(text: str) -> Iterator[tuple[Decimal, Decimal]]:
    """Numbers of a text in SI units, each with half a step of its last figure; a letter code is exact to its last figure."""
    for sign, digits, unit, prefix in NUMBER.findall(text):
        power = -2 if unit == "%" else PREFIX[prefix]
        value = Decimal(digits).scaleb(power) * (-1 if sign else 1)
        if unit == "°C":
            value += Decimal("273.15")
        yield value, Decimal(1).scaleb(power + int(Decimal(digits).as_tuple().exponent)) / 2
    for whole, letter, rest in LETTER_CODE.findall(text):
        power = {"R": 0, "K": 3, "M": 6, "G": 9}[letter]
        yield Decimal(f"{whole}.{rest or 0}").scaleb(power), Decimal(1).scaleb(power - len(rest)) / 2


def every_number(data: Any) -> Iterator[float]:
    if isinstance(data, Mapping):
        for value in data.values():
            yield from every_number(value)
    elif isinstance(data, list):
        for value in data:
            yield from every_number(value)
    elif isinstance(data, int | float) and not isinstance(data, bool):
        yield float(data)


def missing(text: str, data: Any) -> list[str]:
    """Numbers of a text that no number of the data rounds to; three figures may carry a following zero."""
    known = [Decimal(repr(number)) for number in every_number(data)]
    # A figure printed as 24.0 % has its half step in the last place shown; 1e-12 allows for ties in binary fractions.
    slack = Decimal("1.000000001")
    return [
        f"{value} in {text!r}"
        for value, half in numbers(text)
        if not any(abs(value - number) <= half * slack for number in known)
    ]


def test_numbers_are_read_as_they_are_meant() -> None:
    text = "IC 1.99 mA, −40 mV, 14.4 %, 4.00 V, 0.49 %, R1 38K3, 21K, 1R5, at 70 °C, rank 3, hFE 450, R2 drops"
    values = [float(value) for value, _ in numbers(text)]
    assert values == [0.00199, -0.04, 0.144, 4.0, 0.0049, 343.15, 3.0, 450.0, 38300.0, 21000.0, 1.5]
    assert [float(half) for _, half in numbers("4.00 V 2 mA 38K3")] == [0.005, 0.0005, 50.0]
    assert missing("IC 1.99 mA", {"ic": 0.0019949}) == []
    assert missing("IC 1.99 mA", {"ic": 0.0019951})
    assert missing("IC 1.99 mA", {"ic": 1.99})


@pytest.mark.parametrize(("kind", "name"), [case for case in ALL if case[0] != "nothing"])
def test_every_number_of_a_sentence_is_in_the_answer(kind: str, name: str, folder: Path) -> None:
    answer = json.loads(answered(kind, name, folder).to_json())
    for candidate in answer["candidates"]:
        # What a role does is a text of the answer itself; its "0 V" is the name of a node.
        meanings = [duty["meaning"] for duty in candidate["roles"].values()]
        figures = {key: value for key, value in candidate.items() if key != "explanation"}
        assert len(candidate["explanation"]) >= 5
        for sentence in candidate["explanation"]:
            for meaning in meanings:
                sentence = sentence.replace(meaning, "")
            assert missing(sentence, figures) == []


@pytest.mark.parametrize("name", FOUND)
def test_every_number_beside_an_alternative_is_in_the_answer(name: str, folder: Path) -> None:
    answer = json.loads(answered("find", name, folder).to_json())
    counts = [len(set(c["resistors"].values())) for c in answer["candidates"]]
    for alternative in answer["alternatives"]:
        assert missing(alternative["text"], [answer["candidates"], counts]) == []


@pytest.mark.parametrize("name", FOUND)
def test_an_alternative_shows_what_is_better_about_it(name: str, folder: Path) -> None:
    """Two figures that read the same are no reason to look."""
    for alternative in answered("find", name, folder).alternatives:
        first, second = (value for value, _ in numbers(alternative.text))
        assert first != second, alternative.text


@pytest.mark.parametrize(("kind", "name"), [case for case in ALL if case[0] != "nothing"])
def test_every_number_of_the_table_is_in_the_answer(kind: str, name: str, folder: Path) -> None:
    """Of the blocks about the candidates: ranking, Q-point, causes and limits."""
    answer = answered(kind, name, folder)
    text = terminal.render(answer)
    body = text.split("\n\n", 1)[1]
    for heading in ("Worth a look", "Networks", "Cautions", "Assumed, since not given", "Next: "):
        body = body.partition(f"\n\n{heading}")[0]
    body = body.replace("against 0 V", "").replace("at 25 °C", "")
    # The sizes of styles are names.
    for style in sorted(resistor_styles(), key=len, reverse=True):
        body = body.replace(f" {style}", "")
    # "1.78 to 2.19 mA" shows the unit of both ends once.
    body = regex.sub(r"([0-9.]+) to ([0-9.]+) ([fpnµmkM]?(?:[AVSΩ]))(?!\w)", r"\1 \3 to \2 \3", body)
    assert missing(" ".join(body.split()), json.loads(answer.to_json())) == []


# --- Spreadsheets and documents -------------------------------------------------------------------------------------


@pytest.mark.parametrize(("kind", "name"), [case for case in ALL if case[0] != "nothing"])
def test_csv_holds_the_numbers_of_the_answer(kind: str, name: str, folder: Path) -> None:
    answer = answered(kind, name, folder)
    rows = list(csv.DictReader(io.StringIO(export.to_csv(answer))))
    assert [int(row["rank"]) for row in rows] == [c.rank for c in answer.candidates]
    for row, c in zip(rows, answer.candidates, strict=True):
        assert None not in row
        # Written with the digits that reproduce them, so equality is to the last bit.
        assert {role: float(row[f"{role}_ohm"]) for role in c.resistors} == dict(c.resistors)
        assert (float(row["ic_min_a"]), float(row["ic_max_a"])) == c.worst["ic"]
        assert float(row["drift"]) == c.drift.q_point
        assert row["verdict"] == c.verdict


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@now", "\t=1", "\r=1"])
def test_cell_that_a_spreadsheet_would_run_is_made_inert(text: str) -> None:
    assert export.inert(text) == f"'{text}"
    assert export.inert("divider") == "divider"


@every_answer
def test_tables_of_markdown_are_whole(kind: str, name: str, folder: Path) -> None:
    """Every row of a table has as many cells as its head; a bar inside a cell is escaped."""
    text = export.to_markdown(answered(kind, name, folder))
    for block in text.split("\n\n"):
        if block.startswith("| "):
            assert len({len(regex.findall(r"(?<!\\)\|", line)) for line in block.splitlines()}) == 1
    assert text.startswith("# ")
    assert text.count("\n# ") == 0


def test_markdown_shows_a_name_as_it_is(folder: Path) -> None:
    answer = check(Stage(**FITTED["passes"] | {"name": "a|b *c* <d> # e"}))
    assert export.to_markdown(answer).startswith("# a\\|b \\*c\\* \\<d\\> \\# e\n")


@pytest.mark.parametrize("name", NOTHING)
def test_markdown_says_why_nothing_qualifies(name: str, folder: Path) -> None:
    answer = answered("nothing", name, folder)
    assert answer.infeasible is not None
    plain = export.to_markdown(answer).replace("\\", "")
    assert all(limit in plain for limit in answer.infeasible.binding)


# --- What to do next ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("path", ["target.ic", "target.vce", *(f"limits.{name}" for name in RULES)])
def test_next_command_names_the_option_of_the_key_to_change(path: str, folder: Path) -> None:
    answer = answered("nothing", "window too narrow", folder)
    change = Relaxation(change={path: KEYS[path].example}, drift=0.1)
    why = Infeasible(binding=("target.ic",), best_without={"target.ic": 0.1}, relaxations=(change,))
    text = terminal.render(replace(answer, infeasible=why)).partition("\nNext: ")[2]
    words = shlex.split(text.partition(" with ")[2])
    assert words[0] in KEYS[path].options
    assert words[1] == KEYS[path].example


@pytest.mark.parametrize("name", NOTHING)
def test_every_change_that_is_proposed_would_do(name: str, folder: Path) -> None:
    """Applied to the request, it lets a candidate qualify, of a drift close to the one that was promised."""
    why = answered("nothing", name, folder).infeasible
    assert why is not None
    for relaxation in why.relaxations:
        relaxed = find(Stage(**NOTHING[name]).with_keys(relaxation.change), top=1)
        assert relaxed.search is not None
        assert relaxed.search.status == "optimal"
        # The drift promised is that of a real candidate, perhaps not the very best: advice stops within half a per cent.
        assert 0.0 <= relaxation.drift / relaxed.candidates[0].drift.q_point - 1.0 <= 0.005


@pytest.mark.parametrize("name", sorted(set(NOTHING) - {"several conflicts", "limit on vce"}))
def test_reasons_do_not_contradict_each_other(name: str, folder: Path) -> None:
    """What cannot be met together can be met once any one of it is left out, if nothing else is asked.

    The two left out take longer than short advice has; `test_advice` looks at conflicts with all of it.
    """
    why = answered("nothing", name, folder).infeasible
    assert why is not None
    assert set(why.best_without) == set(why.binding)
    stage = Stage(**NOTHING[name])
    every = {need.name for space in spaces_of(stage) for need in space.requirements}
    for left_out in why.binding:
        others = every - set(why.binding) - {"vce"} | {left_out}
        assert search(spaces_of(stage, others), goal_of(stage), top=1, first=True).found
