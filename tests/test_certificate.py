"""Certificates of the search are checked by `certificate`, which uses nothing of the search; tampered ones are refused.

Spaces are random and invented; what a certificate lists is compared with full enumeration.
"""

import json
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from certificate import Refused, covers, verify
from enumeration import enumerate_all, generator, random_spaces

import synth
from synth.cli import main
from synth.networks import NETWORKS
from synth.ranking import read_goal
from synth.search import NoCertificate, certificate, refuse, search
from synth.spaces import Goal, Space, goal_of, spaces_of
from synth.stage import Stage

TOP = 3


@cache
def case(network: str, number: int) -> tuple[list[Space], Goal, tuple[str, ...]]:
    """Random spaces of a network, or of three, every other one with limits on stress and signal; and their certificate."""
    rng = generator("certificate", network, number)
    names = [network] if network != "any" else [str(name) for name in rng.choice(list(NETWORKS), 3)]
    spaces, goal = random_spaces(rng, names, most=24, stressed=number % 2 == 1)
    return spaces, goal, tuple(certificate(spaces, goal, search(spaces, goal, top=TOP), TOP))


@pytest.mark.parametrize("number", range(4))
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_a_certificate_holds_and_lists_what_enumeration_does(network: str, number: int) -> None:
    spaces, goal, lines = case(network, number)
    blocks, listed = verify(iter(lines))
    assert blocks == len(lines) - 1
    rows = enumerate_all(spaces, goal)
    told = [json.loads(line) for line in lines[1:]]
    places = {(row[0], tuple(row[1])) for row in told if isinstance(row[3], dict) and row[3]["listed"]}
    assert len(places) == listed
    assert {(row.space, row.index) for row in rows[:TOP]} <= places
    assert places <= {(row.space, row.index) for row in rows if row.drift <= rows[min(TOP, len(rows)) - 1].drift * (1 + 1e-9)}


@pytest.mark.long
@pytest.mark.parametrize("block", range(8))
@pytest.mark.parametrize("network", [*NETWORKS, "any"])
def test_certificates_hold_long(network: str, block: int) -> None:
    for number in range(1000 + 25 * block, 1025 + 25 * block):
        verify(iter(case.__wrapped__(network, number)[2]))


def exclusions() -> set[str]:
    """Kinds of tests that exclude blocks or candidates in the certificates above."""
    kinds = set()
    for network in [*NETWORKS, "any"]:
        for number in range(4):
            _, _, lines = case(network, number)
            spaces = json.loads(lines[0])["spaces"]
            for line in lines[1:]:
                k, _, _, test, _ = json.loads(line)
                told = spaces[k]["tests"][test] if isinstance(test, int) else test
                if not (isinstance(test, dict) and test["listed"]):
                    need = told["need"]
                    kinds.add("drift" if need is None else CUT_OFF if need < 0 else spaces[k]["needs"][need]["name"])
    return kinds


CUT_OFF = "cut off"


def test_every_kind_of_exclusion_occurs() -> None:
    """Drift, windows, limits over the box, shape rules, limits on stress and signal."""
    wanted = {"drift", "target.ic", "target.vce", "vce", "supply_current", "base_resistance", "collector_share"}
    assert wanted <= exclusions()
    assert exclusions() & {"gain", "input_resistance", "output_resistance", "swing", "resistor_stress", "transistor_stress"}


# --- Tampering ----------------------------------------------------------------------------------------------------


@cache
def education() -> tuple[str, ...]:
    """The bench stage of the shared scenarios, with a gain that some candidates miss."""
    stage = Stage(supply="12 V", ic="2 mA ± 20 %", vce="5 V", hfe="100 : 300", series="E12", tolerance="5 %",
                  temperature="20 : 25 : 30 °C", gain="120")  # fmt: skip
    spaces, goal = spaces_of(stage), goal_of(stage)
    return tuple(certificate(spaces, goal, search(spaces, goal, top=TOP), TOP))


def rows(kind: str) -> tuple[list[Any], list[int]]:
    """The lines read, and which rows are of a kind: excluded blocks, rejected candidates, listed ones."""
    told = [json.loads(line) for line in education()]
    kinds = ["head", *("block" if isinstance(row[3], int) else "listed" if row[3]["listed"] else "leaf" for row in told[1:])]
    return told, [k for k, name in enumerate(kinds) if name == kind]


def refused(told: list[Any], reason: str) -> None:
    with pytest.raises(Refused, match=reason):
        verify(json.dumps(row) for row in told)


def test_the_untouched_certificate_holds() -> None:
    blocks, listed = verify(iter(education()))
    assert blocks > 100
    assert listed >= TOP
    assert all(rows(kind)[1] for kind in ("block", "leaf", "listed"))


@pytest.mark.parametrize("kind", ["block", "leaf", "listed"])
def test_a_missing_row_is_refused(kind: str) -> None:
    told, which = rows(kind)
    for k in which[:: max(len(which) // 5, 1)]:
        refused([row for j, row in enumerate(told) if j != k], "is not covered")


@pytest.mark.parametrize("kind", ["block", "leaf", "listed"])
def test_a_row_that_stands_twice_is_refused(kind: str) -> None:
    told, which = rows(kind)
    refused([*told, told[which[0]]], "is not covered")


@pytest.mark.parametrize("factor", [0.5, 1.01])
def test_another_bound_of_a_block_is_refused(factor: float) -> None:
    """Larger it does not hold; smaller it excludes nothing."""
    told, which = rows("block")
    tests = told[0]["spaces"][0]["tests"]
    drift = [k for k in which if tests[told[k][3]]["need"] is None and tests[told[k][3]]["side"] > 0]
    tight = min(drift, key=lambda k: told[k][4])
    told[tight][4] *= factor
    refused(told, "does not exclude")


def test_a_block_that_is_larger_than_was_bounded_is_refused() -> None:
    """It swallows a candidate of the list, so that every place is still covered once."""
    told, listed = rows("listed")
    place = told[listed[0]][1]
    row = told.pop(listed[0])
    told.append([row[0], place, place, next(r[3] for r in told[1:] if isinstance(r[3], int)), 1e9])
    refused(told, "does not exclude")


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        (lambda row: row.__setitem__(4, row[4] * 1.001), "does not reach"),
        (lambda row: row[3]["point"].__setitem__("hfe", 0.4), "does not reach"),
        (lambda row: row[3]["point"].__setitem__("hfe", 1.5), "outside of the box"),
        (lambda row: row[3]["point"].__setitem__("temperature", 400.0), "outside of the ambient range"),
        (lambda row: row[3].__setitem__("listed", True), "limit is not that|is beyond the limit|has a drift"),
    ],
)
def test_a_changed_leaf_is_refused(change: Callable[[Any], None], reason: str) -> None:
    told, which = rows("leaf")
    change(told[which[0]])
    refused(told, reason)


def test_a_listed_candidate_that_is_passed_over_is_refused() -> None:
    told, which = rows("listed")
    told[which[0]][3]["listed"] = False
    refused(told, "is not excluded|limit is not that")


@pytest.mark.parametrize("factor", [0.9, 1.1])
def test_another_limit_is_refused(factor: float) -> None:
    told, _ = rows("block")
    told[0]["limit"] *= factor
    refused(told, "limit is not that|does not exclude|is not excluded")


def test_other_surroundings_are_refused() -> None:
    """With another gain spread, or another value in a list, bounds do not hold any more."""
    told, _ = rows("block")
    told[0]["spaces"][0]["device"]["hfe"][2] *= 0.8
    refused(told, "does not exclude|does not reach")
    told, _ = rows("block")
    told[0]["spaces"][0]["lists"]["re"]["ohms"].append(1e7)
    for name in ("band", "tcr_low", "tcr_high"):
        told[0]["spaces"][0]["lists"]["re"][name].append(0.05)
    refused(told, "is not covered")


def test_blocks_cover_a_box_only_without_gap_and_overlap() -> None:
    low, high = np.array([0, 0]), np.array([3, 3])
    quarters = [[[0, 0], [1, 1]], [[2, 0], [3, 1]], [[0, 2], [1, 3]], [[2, 2], [3, 3]]]

    def covered(blocks: list[list[list[int]]]) -> bool:
        return covers(*(np.array([block[k] for block in blocks]) for k in (0, 1)), low, high)

    assert covered(quarters)
    assert not covered(quarters[:3])
    assert not covered([*quarters[:3], [[2, 2], [3, 2]]])
    assert not covered([*quarters[:3], [[1, 2], [3, 3]]])


# --- From the command line ----------------------------------------------------------------------------------------

EASY = ["find", "--supply", "12V", "--ic", "2mA", "--vce", "5V", "--hfe", "110:450", "--series", "E12", "--tolerance", "1%"]


def run(*arguments: str) -> int:
    with pytest.raises(SystemExit) as ended:
        main([*arguments])
    assert isinstance(ended.value.code, int)
    return ended.value.code


def test_find_writes_a_certificate_that_holds(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "proof.jsonl"
    assert run(*EASY, "--certificate", str(path)) == 0
    with path.open(encoding="utf-8") as lines:
        assert verify(lines)[1] >= 10
    assert run(*EASY, "--certificate", str(path)) == 2
    assert "exists already" in capsys.readouterr().err


def test_a_stopped_search_writes_no_certificate(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "proof.jsonl"
    run(*EASY, "--certificate", str(path), "--budget", "0 s")
    assert not path.exists()
    assert "certificate: not written, since the search was stopped" in capsys.readouterr().err


def test_what_cannot_be_certified_is_refused() -> None:
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", series="E6", tolerance="1 %")
    with pytest.raises(NoCertificate, match="certificate: read metric 'rss'"):
        synth.find(stage, metric="rss", keep=list)
    spaces, goal = spaces_of(stage), read_goal(stage, "ic=1, vce=0.5")
    stopped = search(spaces, goal, stop=lambda: True)
    with pytest.raises(NoCertificate, match="certificate: read a search of status 'unknown'"):
        list(certificate(spaces, goal, stopped, 10))
    verify(certificate(spaces, goal, search(spaces, goal), 10))


def test_a_gain_that_moves_is_not_certified() -> None:
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", series="E6", tolerance="1 %", va="60 V")
    with pytest.raises(NoCertificate, match="certificate: read hfe_rows or va, accepted is a gain that depends on neither"):
        synth.find(stage, keep=list)


def test_a_re_in_two_parts_is_not_certified() -> None:
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", series="E6", tolerance="1 %", bypass="part", gain=">= 5")
    with pytest.raises(NoCertificate, match="certificate: read a re in two parts chosen by the gain"):
        refuse(spaces_of(stage), goal_of(stage))


def test_pairs_are_certified_where_corners_tell_their_ends() -> None:
    pairs = {"network": "fixed_base", "series": "E6", "pairs": "yes", "tolerance": "1 %", "range": "100 ohm : 1 Mohm"}
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="200 : 250", **pairs)
    spaces, goal = spaces_of(stage), goal_of(stage)
    refuse(spaces, goal)
    verify(certificate(spaces, goal, search(spaces, goal), 10))
    rated = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="200 : 250", style="0805", **pairs)
    with pytest.raises(NoCertificate, match=r"certificate: read a limit on \w+, the stress of pairs"):
        refuse(spaces_of(rated), goal_of(rated))
