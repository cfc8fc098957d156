"""The table of derating policies: what it holds, how a policy is looked up, and how a broken table is refused."""

from __future__ import annotations

import csv
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

from synth import catalogue
from synth.catalogue import CatalogueError, reading

TABLES = Path(__file__).resolve().parents[1] / "tables"

# Percentages and temperatures are converted by decimal arithmetic: the nearest float, so one rounding of the literal.
ONE_ROUNDING = 2.3e-16

Edit = Callable[[list[dict[str, str]]], None]


@pytest.fixture
def edited(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[Edit], None]:
    """Put a copy of the tables with a changed derating.csv in the place of the built-in ones."""

    def edit(change: Edit) -> None:
        folder = tmp_path / "tables"
        shutil.copytree(TABLES, folder)
        with (folder / "derating.csv").open(encoding="utf-8", newline="") as stream:
            rows = list(csv.DictReader(stream))
        change(rows)
        with (folder / "derating.csv").open("w", encoding="utf-8", newline="") as stream:
            writer = csv.DictWriter(stream, list(rows[0]), lineterminator="\n")
            writer.writeheader()
            writer.writerows(rows)
        monkeypatch.setattr(reading, "directory", lambda: folder)

    return edit


def put(name: str, column: str, value: str) -> Edit:
    def change(rows: list[dict[str, str]]) -> None:
        next(row for row in rows if row["name"] == name)[column] = value

    return change


# --- What the policies say -------------------------------------------------------------------------------------------


def test_no_derating_leaves_every_rating_whole() -> None:
    policy = catalogue.derating("none")
    assert (policy.resistor_power, policy.resistor_voltage) == (1.0, 1.0)
    assert (policy.transistor_voltage, policy.transistor_current, policy.transistor_power) == (1.0, 1.0, 1.0)
    assert (policy.junction_max_k, policy.junction_below_max_k) == (None, 0.0)


def test_half_power_is_the_informal_rule() -> None:
    # Common practice: a resistor at about half its rating; three quarters of a transistor's voltage (from memory).
    policy = catalogue.derating("half_power")
    assert (policy.resistor_power, policy.resistor_voltage) == (0.5, 1.0)
    assert (policy.transistor_voltage, policy.transistor_current, policy.transistor_power) == (0.75, 1.0, 1.0)
    assert (policy.junction_max_k, policy.junction_below_max_k) == (None, 0.0)


@pytest.mark.parametrize(
    ("name", "resistor", "transistor", "junction_c"),
    [
        # ECSS-Q-ST-30-11C, from memory: film resistors 50 % of power, 80 % of voltage; bipolar transistors 75 % of voltages,
        # 75 % of current, 65 % of power, junction at 110 °C or 40 K below its maximum.
        ("ECSS-Q-ST-30-11C", (0.5, 0.8), (0.75, 0.75, 0.65), 110.0),
        # EEE-INST-002, from memory: film resistors 60 % of power, 80 % of voltage; transistors 75 %, 75 %, 60 %, 125 °C or
        # 40 K below the maximum.
        ("EEE-INST-002", (0.6, 0.8), (0.75, 0.75, 0.6), 125.0),
    ],
)
def test_published_policies(
    name: str, resistor: tuple[float, float], transistor: tuple[float, float, float], junction_c: float
) -> None:
    policy = catalogue.derating(name)
    read = (
        policy.resistor_power, policy.resistor_voltage,
        policy.transistor_voltage, policy.transistor_current, policy.transistor_power,
    )  # fmt: skip
    assert_allclose(read, (*resistor, *transistor), rtol=ONE_ROUNDING, atol=0)
    assert policy.junction_max_k is not None
    assert_allclose(policy.junction_max_k, junction_c + 273.15, rtol=ONE_ROUNDING, atol=0)
    assert policy.junction_below_max_k == 40.0
    assert policy.evidence == "memory"


@pytest.mark.parametrize(("style", "full_c", "zero_c"), [("0805", 85.0, 125.0), ("0207 (0.6 W)", 125.0, 150.0)])
def test_a_policy_may_have_its_own_temperatures_for_chips_and_for_axial_parts(style: str, full_c: float, zero_c: float) -> None:
    # ECSS-Q-ST-30-11C, from memory: full allowance to 125 °C for precision metal film, 85 °C for chips, zero at 150 and 125 °C.
    own = catalogue.derating("ECSS-Q-ST-30-11C").resistor_temperatures(catalogue.resistor_style(style))
    assert own is not None
    assert_allclose(own, (full_c + 273.15, zero_c + 273.15), rtol=ONE_ROUNDING, atol=0)


@pytest.mark.parametrize("name", ["none", "half_power", "EEE-INST-002"])
@pytest.mark.parametrize("style", ["0805", "0207 (0.6 W)"])
def test_a_policy_without_temperatures_keeps_those_of_the_style(name: str, style: str) -> None:
    assert catalogue.derating(name).resistor_temperatures(catalogue.resistor_style(style)) is None


def test_every_policy_has_a_title_a_source_and_its_evidence() -> None:
    for name, policy in catalogue.deratings().items():
        assert policy.name == name
        assert policy.title
        assert policy.source
        assert policy.evidence in reading.EVIDENCE


# --- Lookup -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("text", ["half_power", " Half_Power ", "half power", "HALF  POWER"])
def test_case_and_blanks_do_not_matter(text: str) -> None:
    assert catalogue.derating(text).name == "half_power"


@pytest.mark.parametrize(
    ("text", "nearest"), [("ECSS-Q-ST-30-11", "ECSS-Q-ST-30-11C"), ("EEE-INST-2", "EEE-INST-002"), ("half", "half_power")]
)
def test_an_unknown_policy_is_refused_with_the_nearest(text: str, nearest: str) -> None:
    message = rf"derating: read '{text}', accepted is none, half_power, ECSS-\S+ or EEE-INST-002, nearest is {nearest}"
    with pytest.raises(CatalogueError, match=message):
        catalogue.derating(text)


# --- A broken table ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("column", "value", "message"),
    [
        ("resistor_power_percent", "0", r"line 3, column resistor_power_percent: read '0', accepted is a number from 1 to 100"),
        ("transistor_voltage_percent", "101", r"column transistor_voltage_percent: read '101', accepted is a number from 1 to 100"),
        ("junction_max_c", "500", r"column junction_max_c: read '500', accepted is a number from 50 to 250"),
        ("junction_below_max_k", "", r"column junction_below_max_k: read an empty cell, accepted is a number from 0 to 150"),
        ("chip_zero_power_temp_c", "20", r"column chip_zero_power_temp_c: read '20', accepted is a number from 25 to 400"),
        ("title", "", r"column title: read an empty cell, accepted is a text"),
        ("evidence", "hearsay", r"column evidence: read 'hearsay', accepted is seen, mixed or memory"),
        ("name", "NONE", r"line 3, column name: read 'NONE', which stands in line 2 already"),
        (
            "axial_full_power_temp_c", "70",
            r"line 3, column axial_zero_power_temp_c: read an empty cell, accepted is a value,"
            r" since axial_full_power_temp_c and axial_zero_power_temp_c belong together",
        ),
    ],
)  # fmt: skip
def test_a_broken_cell_is_refused(edited: Callable[[Edit], None], column: str, value: str, message: str) -> None:
    edited(put("half_power", column, value))
    with pytest.raises(CatalogueError, match=rf"derating\.csv.*{message}"):
        catalogue.deratings()


@pytest.mark.parametrize(("kind", "zero"), [("axial", "125"), ("chip", "80")])
def test_power_must_fall_before_it_ends(edited: Callable[[Edit], None], kind: str, zero: str) -> None:
    edited(put("ECSS-Q-ST-30-11C", f"{kind}_zero_power_temp_c", zero))
    message = rf"line 4, column {kind}_zero_power_temp_c: read {float(zero) + 273.15}, accepted is more than the"
    with pytest.raises(CatalogueError, match=message):
        catalogue.deratings()
