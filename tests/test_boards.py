"""The choice for a whole board against trying everything, and what is said about it.

The brute force of this file shares nothing with the program but the drift of a single combination, which
`enumeration.enumerate_all` finds for every one of them: it walks through every choice of a candidate for each stage and every
way of filling the places with rows of the stock list, and reads the price list by itself. Stages, drawers and prices are random
and invented; a failing case is repeated by its number.
"""

from __future__ import annotations

import csv
import io
import itertools
import json
from collections import Counter
from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cache
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
from enumeration import enumerate_all, generator
from numpy.testing import assert_allclose

import synth
import synth.present
from synth.boards.file import Board, BoardStage, designators
from synth.cli import main
from synth.parts import Parts
from synth.present.board import to_csv
from synth.quantities import RestpointError
from synth.spaces import goal_of, spaces_of
from synth.stage import Stage, StageError

EXAMPLES = Path(__file__).resolve().parents[1] / "examples"
ROUNDING = 1e-9
"""Drift is counted in steps of 1e-9, each rounded up; a sum over three stages is at most 3e-9 above the true one."""

REQUESTS: tuple[dict[str, Any], ...] = (
    {"supply": "12 V ± 2 %", "ic": "2 mA", "vce": "5 V", "hfe": "200 : 450"},
    {"supply": "9 V ± 5 %", "ic": "1 mA", "vce": "4 V", "hfe": "110 : 220", "network": "collector_feedback"},
    {"supply": "12 V", "ic": "1 mA", "vce": "4 V", "hfe": "200 : 450", "network": "divider, collector_feedback"},
    {"supply": "5 V", "ic": "500 µA", "vce": "2 V", "hfe": "420 : 800", "network": "collector_feedback",
     "resistors_re_use": "either"},
)  # fmt: skip
FREE = dict.fromkeys(("bleeder_current", "collector_share", "base_resistance"), "none")
VALUES = (470.0, 1000.0, 1500.0, 2200.0, 3300.0, 4700.0, 10e3, 15e3, 22e3, 47e3, 330e3, 680e3)


@dataclass(frozen=True)
class Row:
    """A row of the stock list as the brute force sees it."""

    value: float
    tolerance: float
    quantity: int | None
    prices: tuple[tuple[int, Fraction], ...]
    minimum: int
    number: int


def random_rows(rng: np.random.Generator) -> list[Row]:
    rows = []
    for value in sorted(rng.choice(VALUES, int(rng.integers(4, 6)), replace=False).tolist()):
        tolerances = [0.01, 0.05] if rng.random() < 0.3 else [0.01 if rng.random() < 0.7 else 0.05]
        for tolerance in tolerances:
            prices: tuple[tuple[int, Fraction], ...] = ()
            if rng.random() < 0.7:
                first = Fraction(int(rng.integers(1, 200)), 1000)
                prices = ((1, first),) if rng.random() < 0.5 else ((1, first), (int(rng.integers(3, 6)), first / 2))
            quantity = None if rng.random() < 0.4 else int(rng.integers(0, 9))
            minimum = int(rng.integers(1, 6)) if prices else 1
            rows.append(Row(value, tolerance, quantity, prices, minimum, len(rows)))
    return rows


def as_csv(rows: Sequence[Row]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["value", "tolerance", "quantity", "price", "minimum", "part"])
    for row in rows:
        price = " ".join(f"{n}:{float(p)!r}" for n, p in row.prices)
        quantity = "" if row.quantity is None else row.quantity
        writer.writerow([f"{row.value:g} ohm", f"{100 * row.tolerance:g} %", quantity, price, row.minimum, f"X{row.number}"])
    return out.getvalue()


def order_cost(row: Row, pieces: int) -> Fraction | None:
    """Least cost of fitting so many pieces, by trying every order up to a size beyond which nothing gets cheaper."""
    if row.quantity is None and not row.prices:
        return Fraction(0)
    missing = pieces - (row.quantity or 0)
    if missing <= 0:
        return Fraction(0)
    costs = []
    for order in range(max(missing, row.minimum), 80):
        reached = [price for start, price in row.prices if start <= order]
        if reached:
            costs.append(order * reached[-1])
    return min(costs, default=None)


def spread_over(pieces: int, among: int) -> Iterator[tuple[int, ...]]:
    """Every way to take so many pieces from several rows."""
    if among == 1:
        yield (pieces,)
        return
    for first in range(pieces + 1):
        for rest in spread_over(pieces - first, among - 1):
            yield (first, *rest)


def cheapest(
    rows: Sequence[Row], value: float, demand: tuple[tuple[float, int], ...], there: Collection[int]
) -> tuple[int, Fraction] | None:
    """Fewest new rows, then least cost, that fill a number of places of one value in each tolerance class."""
    own = [row for row in rows if row.value == value and (row.quantity != 0 or row.prices)]
    best: tuple[int, Fraction] | None = None
    fitting = [[row for row in own if row.tolerance <= tolerance] for tolerance, _ in demand]
    ways = [[dict(zip(f, way, strict=True)) for way in spread_over(n, len(f))] for f, (_, n) in zip(fitting, demand, strict=True)]
    for combined in itertools.product(*ways):
        taken: Counter[Row] = Counter()
        for way in combined:
            taken.update({row: n for row, n in way.items() if n})
        costs = [order_cost(row, n) for row, n in taken.items()]
        if all(cost is not None for cost in costs):
            found = (sum(row.number not in there for row in taken), sum((c for c in costs if c is not None), Fraction(0)))
            best = found if best is None else min(best, found)
    return best


@dataclass(frozen=True)
class Case:
    rows: tuple[Row, ...]
    entries: tuple[BoardStage, ...]
    on_board: tuple[int, ...]
    most_new: int | None
    sets: tuple[tuple[tuple[float, tuple[tuple[float, float], ...]], ...], ...]


def every_candidate(
    stage: Stage, rows: Sequence[Row], fixed: Collection[str] = ()
) -> list[tuple[float, tuple[tuple[float, float], ...]]]:
    """Drift of every qualifying combination of rows, ascending, with the value and tolerance of each of its resistors.

    Roles in `fixed` keep what the stage says and are not listed.
    """
    grades = sorted({(row.value, row.tolerance) for row in rows if row.quantity != 0 or row.prices})
    nominal, band = np.array(grades).T
    part = Parts(nominal=nominal, band=band, tcr_low=np.full(len(grades), -1e-4), tcr_high=np.full(len(grades), 1e-4))
    spaces = [
        replace(space, lists={role: space.lists[role] if role in fixed else part for role in space.roles})
        for space in spaces_of(stage)
    ]
    found = enumerate_all(spaces, goal_of(stage))
    return [
        (row.drift, tuple(grades[i] for role, i in zip(spaces[row.space].roles, row.index, strict=True) if role not in fixed))
        for row in found
    ]


@cache
def case(number: int) -> Case:
    rng = generator("board", number)
    while True:
        rows = random_rows(rng)
        entries, sets = [], []
        for k in range(int(rng.integers(2, 4))):
            request = REQUESTS[int(rng.integers(len(REQUESTS)))]
            stage = Stage(name=f"stage {k}", **FREE, **request)
            every = every_candidate(stage, rows)
            if not every:
                break
            size = min(int(rng.integers(2, 14)), len(every))
            end = (every[size - 1][0] + every[size][0]) / 2 if size < len(every) else every[-1][0] + 0.01
            within = tuple(c for c in every if c[0] <= end)
            entries.append(BoardStage(stage=stage, count=int(rng.integers(1, 4)), allowance=end - every[0][0]))
            sets.append(within)
        else:
            if np.prod([len(s) for s in sets]) <= 4000:
                break
    on_board = tuple(row.number for row in rows if rng.random() < 0.25)
    most_new = int(rng.integers(1, 6)) if rng.random() < 0.3 else None
    return Case(tuple(rows), tuple(entries), on_board, most_new, tuple(sets))


def best_of_everything(case: Case) -> tuple[int, Fraction, float] | None:
    """Least new lines, then cost, then total drift, over every choice there is."""

    @cache
    def fill(value: float, demand: tuple[tuple[float, int], ...]) -> tuple[int, Fraction] | None:
        return cheapest(case.rows, value, demand, case.on_board)

    best: tuple[int, Fraction, float] | None = None
    for choice in itertools.product(*case.sets):
        places: Counter[tuple[float, float]] = Counter()
        for (_, needs), entry in zip(choice, case.entries, strict=True):
            for need in needs:
                places[need] += entry.count
        lines, cost = 0, Fraction(0)
        for value in {value for value, _ in places}:
            demand = tuple(sorted((tolerance, n) for (v, tolerance), n in places.items() if v == value))
            filled = fill(value, demand)
            if filled is None:
                break
            lines, cost = lines + filled[0], cost + filled[1]
        else:
            if case.most_new is None or lines <= case.most_new:
                reached = (lines, cost, sum(drift for drift, _ in choice))
                best = reached if best is None else min(best, reached)
    return best


def solve(case: Case, folder: Path, **options: Any) -> synth.BoardAnswer:
    path = folder / "stock.csv"
    path.write_text(as_csv(case.rows), encoding="utf-8")
    request = Board.of(case.entries, stock=path, on_board=[f"X{number}" for number in case.on_board], most_new=case.most_new)
    return synth.board(request, **options)


@pytest.mark.parametrize("number", [*range(16), *(pytest.param(k, marks=pytest.mark.long) for k in range(16, 40))])
def test_board_equals_full_enumeration(number: int, tmp_path: Path) -> None:
    own = case(number)
    answer, best = solve(own, tmp_path), best_of_everything(own)
    assert answer.search.complete
    assert answer.search.candidates == sum(map(len, own.sets))
    if best is None:
        assert answer.search.status == "infeasible"
        assert not answer.passed
        return
    lines, cost, drift = (bound.value for bound in answer.search.objectives)
    assert lines == best[0] == sum(line.new for line in answer.bom)
    # Prices are whole millionths, so the sums are exact until they are written as floats.
    assert_allclose(cost, float(best[1]), rtol=1e-15, atol=0)
    assert_allclose(sum(line.cost or 0.0 for line in answer.bom), float(best[1]), rtol=1e-14, atol=0)
    assert best[2] <= drift <= best[2] + 3 * ROUNDING
    assert_allclose(sum(stage.drift for stage in answer.stages), best[2], rtol=1e-9, atol=0)
    assert all(bound.gap == 0.0 for bound in answer.search.objectives)


# --- What is said ---------------------------------------------------------------------------------------------------

BOARD = """
name = "bench board"
stock = "stock.csv"
on_board = ["10K"]
allowance = "6 %"
[[stage]]
name = "front"
count = 2
designators = "R101-R108"
supply.vcc = "12 V"
target.ic = "1 mA"
target.vce = "4 V"
transistor.hfe = "200 : 450"
[[stage]]
name = "driver"
outside = ["rc"]
supply.vcc = "12 V"
target.ic = "2 mA"
target.vce = "5 V"
transistor.hfe = "200 : 450"
resistors.rc.values = ["2k"]
"""
STOCK = """value,tolerance,quantity,style,price,minimum,part
1K6,1 %,2,0805,1:0.04 100:0.01,,=A1
1K8,1 %,,0805,0.05,10,A2
3K6,1 %,,0805,0.05,,A5
3K9,1 %,,0805,0.05,,A6
4K3,1 %,,0805,0.05,,A4
10K,1 %,50,0805,,,A7
22K,1 %,,0805,0.05,,A9
43K,1 %,,0805,0.05,,B2
47K,1 %,,0805,0.05,,B3
82K,1 %,,0805,0.05,,B4
"""


@pytest.fixture
def board_file(tmp_path: Path) -> Path:
    (tmp_path / "stock.csv").write_text(STOCK, encoding="utf-8")
    path = tmp_path / "board.toml"
    path.write_text(BOARD, encoding="utf-8")
    return path


def test_answer_is_whole_and_valid(board_file: Path) -> None:
    answer = synth.board(Board.read(board_file))
    plain = json.loads(answer.to_json())
    schema = Path(synth.present.__file__).parent / "schema_board.json"
    jsonschema.Draft202012Validator(json.loads(schema.read_text(encoding="utf-8"))).validate(plain)
    assert plain["search"]["complete"]
    front, driver = answer.stages
    # Two copies of four resistors, and three resistors beside the one that is no part of this board.
    assert [len(numbers) for numbers in front.designators] == [4, 4]
    assert set(driver.designators[0]) == {"r1", "r2", "re"}
    assert sum(line.quantity for line in answer.bom) == 11
    numbers = [number for line in answer.bom for number in line.designators]
    assert sorted(numbers) == sorted([*(f"R{k}" for k in range(101, 109)), "R1", "R2", "R3"])
    for line in answer.bom:
        assert line.quantity == len(line.designators)
        assert line.new == (line.ohms != 10e3)
    for stage in answer.stages:
        assert stage.candidate.verdict == "pass"
        assert stage.best <= stage.drift <= stage.allowed
        # A part as good as its class makes the box no larger; here it is that class.
        assert_allclose(stage.candidate.drift.q_point, stage.drift, rtol=1e-12, atol=0)
    assert list(answer.frame["item"]) == [line.item for line in answer.bom]


def test_merges_tell_what_sharing_costs(board_file: Path) -> None:
    """Against going through every combination of the drawer for the stage that gives something up."""
    request = Board.read(board_file)
    answer = synth.board(request)
    rows = [Row(float(p.value), p.tolerance, None, (), 1, 0) for p in request.parts or ()]
    lines = {line.ohms for line in answer.bom}
    assert answer.merges
    for merge in answer.merges:
        (own,) = [line.ohms for line in answer.bom if line.item == merge.item]
        for share in merge.shares:
            (k,) = [k for k, stage in enumerate(answer.stages) if stage.name == share.stage]
            entry, reached = request.stages[k], answer.stages[k]
            others = [
                drift
                for drift, needs in every_candidate(entry.stage, rows, entry.outside)
                if drift <= reached.allowed and own not in (values := {value for value, _ in needs}) and len(values - lines) <= 1
            ]
            if share.cost is None:
                assert not others
            else:
                # Both are found anew, by unlike batches; rtol for a difference of two drifts of some tenths.
                assert_allclose(share.cost, max(0.0, reached.drift - min(others)), rtol=1e-9, atol=1e-12)
            assert share.stage in merge.text
        assert merge.text.startswith(f"{merge.value} shared by ")


def test_a_list_that_ends_early_leaves_a_gap_that_is_told(board_file: Path) -> None:
    whole, short = synth.board(Board.read(board_file)), synth.board(Board.read(board_file), most=1)
    assert [stage.found for stage in short.stages] == [1, 1]
    # The first stage has one candidate in all, so that its list is whole; of the second some are left out.
    assert short.stages[0].reached is None
    assert short.stages[1].reached is not None
    assert short.search.status == "feasible"
    for known, bound in zip(whole.search.objectives[:1], short.search.objectives, strict=False):
        assert bound.bound <= known.value <= bound.value


def test_the_same_request_gives_the_same_bom(board_file: Path) -> None:
    one, two = (to_csv(synth.board(Board.read(board_file))) for _ in range(2))
    assert one == two


def test_no_cell_of_the_bom_is_run_by_a_spreadsheet(board_file: Path, tmp_path: Path) -> None:
    with pytest.raises(SystemExit) as stop:
        main(["board", str(board_file), "--format", "csv", "--output", str(tmp_path / "bom.csv")])
    assert stop.value.code == 0
    rows = list(csv.DictReader(io.StringIO((tmp_path / "bom.csv").read_text(encoding="utf-8"))))
    assert sum(int(row["quantity"]) for row in rows) == 11
    assert "'=A1" in {row["part"] for row in rows}
    for row in rows:
        assert not any(cell.startswith(("=", "+", "-", "@")) for cell in row.values())


@pytest.mark.parametrize("form", ["table", "markdown"])
def test_board_is_told_in_words(board_file: Path, form: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as stop:
        main(["board", str(board_file), "--format", form])
    text = capsys.readouterr().out
    assert stop.value.code == 0
    assert "PASS" in text
    assert "shared by" in text
    assert "R101" in text


def changed(board_file: Path, bom: Path, capsys: pytest.CaptureFixture[str], **ohms: str) -> list[dict[str, Any]]:
    """What board says against a BOM in which some resistors had another value."""
    rows = list(csv.DictReader(io.StringIO(bom.read_text(encoding="utf-8"))))
    for number, value in ohms.items():
        for row in rows:
            row["designators"] = " ".join(other for other in row["designators"].split() if other != number)
        rows.append(rows[0] | {"designators": number, "ohms": value, "part": "", "style": ""})
    old = bom.with_name("old.csv")
    with old.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.DictWriter(stream, rows[0])
        writer.writeheader()
        writer.writerows(row for row in rows if row["designators"])
    with pytest.raises(SystemExit) as stop:
        main(["board", str(board_file), "--against", str(old), "--format", "json"])
    assert stop.value.code == 0
    found: list[dict[str, Any]] = json.loads(capsys.readouterr().out)["changes"]
    return found


def test_what_changed_against_an_earlier_bom_and_why(
    board_file: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    bom = tmp_path / "bom.csv"
    bom.write_text(to_csv(synth.board(Board.read(board_file))), encoding="utf-8")
    assert changed(board_file, bom, capsys) == []
    # The driver on 43K, 22K and 1K8 is within its allowance, but shares no 47K with the front: seven lines instead of six.
    found = changed(board_file, bom, capsys, R1="43000.0", R3="1800.0")
    assert [(c["designators"], c["before"], c["stage"]) for c in found] == [
        (["R1"], "43K 1 %", "driver"), (["R3"], "1K8 1 %", "driver"),
    ]  # fmt: skip
    assert {c["why"] for c in found} == {"the old values pass, but keeping them takes 1 new line more"}
    # By Ohm's law a bleeder of 12 V over 82 kohm and 10 kohm holds the base at 1.3 V: far too little for 1 mA in 3K6.
    found = changed(board_file, bom, capsys, R102="10000.0", R106="10000.0", R99="1000.0")
    assert [c["designators"] for c in found] == [["R102", "R106"], ["R99"]]
    assert "10K 1 %" in found[0]["before"]
    assert found[0]["why"].startswith(("the old values drift", "the old values fail"))
    assert (found[1]["after"], found[1]["why"]) == ("", "no stage has this number now")
    with pytest.raises(SystemExit):
        main(["board", str(board_file), "--against", str(tmp_path / "old.csv")])
    assert "no stage has this number now" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("item,designators\n1,R1\n", r"against 'old\.csv' has no column 'ohms'"),
        ("designators,ohms\nR1,1k\n", r"against 'old\.csv', line 2: read '1k ohm'"),
        (None, r"against: read '.*old\.csv', which cannot be read"),
    ],
)
def test_what_is_no_bom_is_refused(board_file: Path, tmp_path: Path, content: str | None, message: str) -> None:
    if content is not None:
        (tmp_path / "old.csv").write_text(content, encoding="utf-8")
    with pytest.raises(RestpointError, match=message):
        synth.board(Board.read(board_file), against=tmp_path / "old.csv")


def test_why_there_is_no_bom(board_file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    board_file.write_text(BOARD.replace('allowance = "6 %"', 'allowance = "6 %"\nmost_new = 0', 1), encoding="utf-8")
    with pytest.raises(SystemExit) as stop:
        main(["board", str(board_file)])
    text = capsys.readouterr().out
    assert stop.value.code == 1
    assert "FAIL  bench board" in text
    assert "at most 0 new line items" in text


def test_the_board_of_the_buoy_as_its_buyer_reads_it(tmp_path: Path) -> None:
    """The BOM against the parts list, read here by itself: what is ordered, what it costs, what it may carry."""
    answer = synth.board(Board.read(EXAMPLES / "buoy_board.toml"))
    assert answer.search.complete
    assert len(answer.stages) == 8
    listed = {row["part"]: row for row in csv.DictReader(io.StringIO((EXAMPLES / "buoy_parts.csv").read_text(encoding="utf-8")))}
    total = Fraction(0)
    bom = list(csv.DictReader(io.StringIO(to_csv(answer))))
    # Every resistor of the stage files but the one that is the sensor, and the twice built stage twice.
    assert sum(int(row["quantity"]) for row in bom) == 4 + 3 + 4 + 2 + 2 * 4 + 3 + 2 + 3
    for row in bom:
        source = listed[row["part"]]
        assert (row["value"], row["tolerance"], row["style"]) == (source["value"], source["tolerance"], source["style"])
        missing = int(row["quantity"]) - int(source["quantity"] or 0)
        breaks = [(int(n), Fraction(p)) for n, _, p in (item.partition(":") for item in source["price"].split())]
        orders = [n for n in range(max(missing, int(source["minimum"])), 200) if missing > 0]
        cost = min((n * [p for start, p in breaks if start <= n][-1] for n in orders), default=Fraction(0))
        assert_allclose(float(row["cost"]), float(cost), rtol=1e-12, atol=0)
        assert int(row["buy"]) == 0 or int(row["buy"]) >= max(missing, int(source["minimum"]))
        assert float(row["power_w"]) < float(row["power_rating_w"])
        assert float(row["voltage_v"]) < float(row["voltage_rating_v"])
        total += cost
    assert answer.cost is not None
    assert_allclose(answer.cost, float(total), rtol=1e-12, atol=0)
    # The values of the lines judged anew by the stage files themselves, in the coarser class that these ask for or better.
    for stage in answer.stages:
        assert stage.candidate.verdict == "pass"
        assert stage.drift <= stage.allowed


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('name = "bench board"', 'nam = "x"', r"board: read 'nam', which is no key of a board, .* nearest is 'name'"),
        ("count = 2", "count = 0", r"stage 'front', count: read '0', which is no number of copies"),
        ("count = 2", "count = 2.5", r"count: read '2\.5', which is no whole number"),
        ("R101-R108", "R101-R104", r"stage 'front', designators: read 'R101 to R104', which holds 4 numbers, accepted is 8"),
        ("R101-R108", "R108-R101", r"designators: read 'R108-R101', which is no number of a part"),
        ("R101-R108", "R101-R108, R101", r"designators: read 'R101', which 'front' has already"),
        ('["rc"]', '["rd"]', r"stage 'driver', outside: read 'rd', which is no role of divider"),
        ('["10K"]', '["11K"]', r"on_board: read '11K', which no row of the stock list has, .* nearest is '10K'"),
        ('["10K"]', '["10K 5 %"]', r"on_board: read '10K 5 %', which no row of the stock list has"),
        ("transistor.hfe", "transistor.hef", r"stage 1: read 'transistor\.hef', .* nearest is 'transistor\.hfe'"),
        ('stock = "stock.csv"', "stock = 3", r"stock: read '3', which is no text"),
        ('on_board = ["10K"]', "on_board = 10", r"on_board: read '10', which is no list of texts"),
        ('allowance = "6 %"', 'allowance = "-6 %"', r"stage 'front', allowance: read '-0\.06', which is no drift"),
        ('allowance = "6 %"', "most_new = -1", r"most_new: read '-1', which is no number of lines"),
    ],
)
def test_wrong_boards_are_refused(board_file: Path, old: str, new: str, message: str) -> None:
    assert old in BOARD
    board_file.write_text(BOARD.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(RestpointError, match=message):
        Board.read(board_file)


def test_a_value_that_the_list_has_twice_is_named_by_more_than_itself(board_file: Path, tmp_path: Path) -> None:
    (tmp_path / "stock.csv").write_text(STOCK + "10K,0.1 %,,0805,0.2,,T1\n", encoding="utf-8")
    with pytest.raises(StageError, match=r"on_board: read '10K', which 2 rows .* have, .* nearest is 'T1' or 'A7'"):
        Board.read(board_file)
    for text in ("10K 1 %", "A7"):
        board_file.write_text(BOARD.replace('["10K"]', f'["{text}"]'), encoding="utf-8")
        assert [part.number for part in Board.read(board_file).parts or () if not part.new] == ["A7"]


def test_a_board_needs_stages() -> None:
    with pytest.raises(StageError, match=r"stage is no board, accepted is at least one stage"):
        Board(stages=())


def test_what_a_board_cannot_hold_is_refused(board_file: Path) -> None:
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="200 : 450", series="E6", tolerance="1 %", pairs="series")
    with pytest.raises(StageError, match=r"resistors\.r1\.pairs may be pairs, accepted is single resistors on a board"):
        synth.board([stage])
    board_file.write_text("stage = 3\n", encoding="utf-8")
    with pytest.raises(StageError, match=r"stage: read '3', which is no list of tables"):
        Board.read(board_file)


def test_designators_are_written_out() -> None:
    assert designators(["R3", "R11-R13"]) == ("R3", "R11", "R12", "R13")


def test_stages_of_a_program_may_do_without_a_stock_list() -> None:
    stage = Stage(name="one", supply="12 V", ic="2 mA", vce="5 V", hfe="200 : 450", series="E12", tolerance="1 %")
    answer = synth.board([stage, stage.replace(name="two", ic="1 mA")], on_board=["10K"], allowance=0.05)
    assert answer.search.complete
    assert answer.cost is None
    assert {line.new for line in answer.bom if line.ohms == 10e3} <= {False}
