"""The built-in tables: what they hold, how they are looked up, and how a broken one is refused."""

from __future__ import annotations

import csv
import shutil
import subprocess
import sys
from collections.abc import Callable
from dataclasses import fields, replace
from math import sqrt
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

from synth import catalogue
from synth.catalogue import CatalogueError, TransistorRow, reading
from synth.quantities import Spread

TABLES = Path(__file__).resolve().parents[1] / "tables"

# Figures are converted by decimal arithmetic and so are the nearest floats: equal to a literal to the last
# bit. Where a test computes with them, two or three roundings of 1.1e-16 each are covered by this.
FEW_ROUNDINGS = 1e-15

Edit = Callable[[list[list[str]]], None]


@pytest.fixture
def edited(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[str, Edit], None]:
    """Put a copy of the tables, one of them changed, in the place of the built-in ones."""

    def edit(name: str, change: Edit) -> None:
        folder = tmp_path / "tables"
        shutil.copytree(TABLES, folder, dirs_exist_ok=True)
        with (folder / name).open(encoding="utf-8", newline="") as stream:
            rows = list(csv.reader(stream))
        change(rows)
        with (folder / name).open("w", encoding="utf-8", newline="") as stream:
            csv.writer(stream, lineterminator="\n").writerows(rows)
        monkeypatch.setattr(reading, "directory", lambda: folder)

    return edit


def put(key: str, column: str, value: str, key_column: int = 0) -> Edit:
    """Change one cell in the first row whose key matches."""

    def change(rows: list[list[str]]) -> None:
        row = next(row for row in rows if row[key_column] == key)
        row[rows[0].index(column)] = value

    return change


def drop_last_cell(rows: list[list[str]]) -> None:
    rows[1].pop()


def drop_last_column(rows: list[list[str]]) -> None:
    for row in rows:
        row.pop()


# --- The texts beside the tables ------------------------------------------------------------


def test_every_table_has_its_text_and_every_text_its_table() -> None:
    assert {path.stem for path in TABLES.glob("*.csv")} == {path.stem for path in TABLES.glob("*.txt")}
    assert len(list(TABLES.glob("*.csv"))) >= 7


@pytest.mark.parametrize("path", sorted(TABLES.glob("*.txt")), ids=lambda path: path.stem)
def test_text_says_source_edition_place_date_licence_check_and_every_column(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    for heading in ("Columns:", "Source:", "Edition:", "Locator:", "Date:", "Licence:", "Checked:"):
        assert f"\n{heading}" in text
    with path.with_suffix(".csv").open(encoding="utf-8", newline="") as stream:
        header = next(csv.reader(stream))
    patterns = [column for column in header if not column.startswith("ptot2_")]
    assert [column for column in patterns if column not in text] == []


def test_tables_are_found_in_the_checkout() -> None:
    assert catalogue.directory() == TABLES


def test_tables_are_found_inside_an_installed_package(tmp_path: Path) -> None:
    # The wheel carries tables as synth/tables; laid out so, away from the checkout, that folder must win.
    shutil.copytree(TABLES.parent / "synth", tmp_path / "synth", ignore=shutil.ignore_patterns("__pycache__"))
    shutil.copytree(TABLES, tmp_path / "synth" / "tables")
    program = "from synth import catalogue; print(catalogue.directory(), len(catalogue.transistors()))"
    run = subprocess.run(
        [sys.executable, "-c", program],
        cwd=tmp_path,
        env={"PYTHONPATH": str(tmp_path)},
        capture_output=True,
        text=True,
    )
    assert (run.stdout, run.stderr) == (
        f"{tmp_path / 'synth' / 'tables'} {len(catalogue.transistors())}\n",
        "",
    )


# --- Facts of the trade ---------------------------------------------------------------------


@pytest.mark.parametrize(
    ("letter", "per_cent", "colour"),
    # Tolerance letters and colours of IEC 60062. From memory; the tables of the standard were not available.
    # The letters B to M are common practice on every parts list.
    [
        ("E", 0.005, None),
        ("L", 0.01, "grey"),
        ("P", 0.02, "yellow"),
        ("W", 0.05, "orange"),
        ("B", 0.1, "violet"),
        ("C", 0.25, "blue"),
        ("D", 0.5, "green"),
        ("F", 1, "brown"),
        ("G", 2, "red"),
        ("H", 3, None),
        ("J", 5, "gold"),
        ("K", 10, "silver"),
        ("M", 20, "none"),
    ],
)
def test_tolerance_letters_of_resistors(letter: str, per_cent: float, colour: str | None) -> None:
    code = catalogue.tolerance_codes()[letter]
    assert code.colour == colour
    assert code.applies_to in ("resistors", "both")
    assert_allclose([code.low, code.high], per_cent / 100, rtol=FEW_ROUNDINGS, atol=0)


@pytest.mark.parametrize(
    ("letter", "minus", "plus"),
    # Capacitor letters of IEC 60062: plus 80 % and minus 20 % for Z, 50 and 20 for S, 50 and 10 for T, 30 and
    # 10 for Q, N ±30 %. From memory.
    [("Z", 0.2, 0.8), ("S", 0.2, 0.5), ("T", 0.1, 0.5), ("Q", 0.1, 0.3), ("N", 0.3, 0.3)],
)
def test_tolerance_letters_of_capacitors_keep_both_sides(letter: str, minus: float, plus: float) -> None:
    code = catalogue.tolerance_codes()[letter]
    assert (code.low, code.high, code.applies_to) == (minus, plus, "capacitors")


def test_temperature_colours() -> None:
    # Sixth band of IEC 60062, in ppm/K and with its letter. From memory.
    printed = {
        "black": ("U", 250e-6),
        "brown": ("S", 100e-6),
        "red": ("R", 50e-6),
        "orange": ("P", 15e-6),
        "yellow": ("Q", 25e-6),
        "green": ("Z", 20e-6),
        "blue": ("Z", 10e-6),
        "violet": ("M", 5e-6),
        "grey": ("K", 1e-6),
    }
    assert {
        colour: (code.letter, code.tcr_per_k) for colour, code in catalogue.tcr_codes().items()
    } == printed


# Usual tolerance of each series: common practice, IEC 60063 in its earlier editions.
USUAL = {"E3": 0.4, "E6": 0.2, "E12": 0.1, "E24": 0.05, "E48": 0.02, "E96": 0.01, "E192": 0.005}


@pytest.mark.parametrize("series", USUAL)
def test_series_and_tolerance_belong_together(series: str) -> None:
    assert catalogue.series_tolerance(series) == USUAL[series]
    assert catalogue.series_tolerance(f" {series.lower()} ") == USUAL[series]
    assert catalogue.tolerance_series(USUAL[series]) == series


@pytest.mark.parametrize(
    ("tolerance", "series"),
    [
        (0.0, "E192"),
        (0.001, "E192"),
        (0.0025, "E192"),
        (0.0051, "E96"),
        (0.015, "E48"),
        (0.03, "E24"),
        (0.051, "E12"),
        (0.15, "E6"),
        (0.21, "E3"),
        (0.5, "E3"),
    ],
)
def test_a_tolerance_between_two_classes_takes_the_coarser_series(tolerance: float, series: str) -> None:
    assert catalogue.tolerance_series(tolerance) == series


@pytest.mark.parametrize("per_cent", [0.5, 1, 2, 5, 10, 20])
def test_a_rounding_error_above_a_class_stays_in_it(per_cent: float) -> None:
    tolerance = per_cent / 100 * (1 + 4e-16)
    assert catalogue.tolerance_series(tolerance) == catalogue.tolerance_series(per_cent / 100)


@pytest.mark.parametrize(("tolerance", "shown"), [(-0.01, "-0.01"), (1.0, "1"), (float("nan"), "nan")])
def test_a_tolerance_that_is_none_is_refused(tolerance: float, shown: str) -> None:
    with pytest.raises(CatalogueError, match=rf"resistors\.tolerance: read {shown}, .* from 0 to below 1"):
        catalogue.tolerance_series(tolerance)


@pytest.mark.parametrize(
    ("wrong", "near"),
    [("E94", "E96"), ("E25", "E24"), ("24", "E24"), ("E1", "E3"), ("E1000", "E192"), ("", "E3")],
)
def test_an_unknown_series_has_no_tolerance(wrong: str, near: str) -> None:
    with pytest.raises(
        CatalogueError, match=rf"resistors\.series: read '{wrong}', .*E96 or E192, nearest is {near}$"
    ):
        catalogue.series_tolerance(wrong)


# --- Resistor styles ------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "technology", "tolerance"),
    [
        ("0805", "thick film", 0.01),
        ("0805 thick film", "thick film", 0.01),
        ("0805 thick film 5 %", "thick film 5 %", 0.05),
        ("0805  Thin Film", "thin film", 0.001),
        ("0207 (0.25 W)", "metal film", 0.01),
        (" 0207 (0.25 w) metal film ", "metal film", 0.01),
        ("0207 (0.25 W) carbon film", "carbon film", 0.05),
    ],
)
def test_style_names(name: str, technology: str, tolerance: float) -> None:
    style = catalogue.resistor_style(name)
    assert style.technology == technology
    assert style.usual_tolerance == tolerance


def test_every_style_is_found_by_both_of_its_names() -> None:
    styles = catalogue.resistor_styles()
    assert len(styles) >= 24
    for name, style in styles.items():
        assert style.name == name
        assert catalogue.resistor_style(style.name) is catalogue.resistor_style(style.full_name) is style


def test_ratings_of_a_common_chip() -> None:
    # Chip 0805: 1/8 W at 70 °C falling to zero at 155 °C, 150 V, 100 ppm/K in 1 %. Makers' sheets, common
    # practice.
    style = catalogue.resistor_style("0805")
    assert style.power_w_common == 0.125
    assert (style.rated_temperature_k, style.zero_power_temperature_k) == (343.15, 428.15)
    assert style.max_working_voltage_v == 150.0
    assert style.usual_tcr_per_k == 100e-6


@pytest.mark.parametrize(
    ("wrong", "near"),
    [
        ("0207", r"0207 \(0\.25 W\) or 0207 \(0\.5 W small\)"),
        ("0805 thinfilm", "0805 thin film"),
        ("085", "0805"),
    ],
)
def test_an_unknown_style_names_the_nearest(wrong: str, near: str) -> None:
    with pytest.raises(CatalogueError, match=rf"resistors\.style: read '{wrong}', .*nearest is .*{near}"):
        catalogue.resistor_style(wrong)


# --- Transistors ----------------------------------------------------------------------------


def test_figures_of_one_type_in_si_units() -> None:
    # BC847B in the data sheets of several makers: 45 V, 100 mA, 250 mW, hFE 200 to 450 at 2 mA and 5 V, VBE
    # 580 to 700 mV typically 660 mV, ICBO 15 nA and 5 µA at 150 °C, VCE(sat) 250 mV at 10 mA/0.5 mA, fT at
    # least 100 MHz. From memory, agreeing with the table.
    row = catalogue.transistor("BC847B")
    assert (row.polarity, row.material, row.package) == ("npn", "silicon", "SOT-23")
    assert (row.vceo_v, row.ic_max_a, row.ptot_w, row.ptot_ref_k, row.tj_max_k) == (
        45,
        0.1,
        0.25,
        298.15,
        423.15,
    )
    assert row.hfe_spread == Spread(200, 290, 450)
    assert (row.hfe_ic_a, row.hfe_vce_v) == (2e-3, 5)
    assert row.vbe_spread == Spread(0.58, 0.66, 0.7)
    assert row.vbe_ic_a == 2e-3
    assert row.icbo_spread == Spread(0, 0, 15e-9)
    assert row.icbo_hot == (5e-6, 423.15)
    assert (row.vce_sat_max_v, row.vce_sat_ic_a, row.vce_sat_ib_a) == (0.25, 10e-3, 0.5e-3)
    assert row.ft_hz == 100e6


def test_germanium_and_pnp_are_told_apart() -> None:
    row = catalogue.transistor("AC128")
    assert (row.polarity, row.material) == ("pnp", "germanium")


@pytest.mark.parametrize("name", ["bc847b", " BC847B", "Bc847b "])
def test_case_and_blanks_of_a_type_do_not_matter(name: str) -> None:
    assert catalogue.transistor(name) is catalogue.transistors()["BC847B"]


def test_gain_without_a_typical_figure_is_centred_geometrically() -> None:
    row = catalogue.transistor("2N3904")
    assert row.hfe_typ is None
    assert_allclose(row.hfe_spread.nominal, sqrt(100 * 300), rtol=FEW_ROUNDINGS, atol=0)


@pytest.mark.parametrize(
    "name",
    [
        "2N3904",  # saturated, though with minimum and maximum: a rating of the switch
        "2N5088",  # active region, but with a maximum only
    ],
)
def test_saturated_or_one_sided_vbe_is_no_spread(name: str) -> None:
    assert catalogue.transistor(name).vbe_spread is None


def test_vbe_without_a_typical_figure_is_centred_arithmetically() -> None:
    row = replace(catalogue.transistor("BC847B"), vbe_typ_v=None)
    assert row.vbe_spread is not None
    assert_allclose(row.vbe_spread.nominal, 0.64, rtol=FEW_ROUNDINGS, atol=0)


def test_no_hot_leakage_where_none_is_printed() -> None:
    assert catalogue.transistor("2N3904").icbo_hot is None


def test_evidence_goes_down_to_the_field() -> None:
    row = catalogue.transistor("BC856A")
    assert row.evidence_of("hfe_min") == row.evidence_of("ft_hz") == row.evidence_of("icbo_hot_k") == "memory"
    assert row.evidence_of("vbe_min_v") == "seen"
    assert replace(row, evidence="memory").evidence_of("vbe_min_v") == "memory"


@pytest.mark.parametrize("row", catalogue.transistors().values(), ids=lambda row: row.type)
def test_every_row_is_physically_possible(row: TransistorRow) -> None:
    assert row.hfe_min < row.hfe_max
    assert row.hfe_typ is None or row.hfe_min < row.hfe_typ < row.hfe_max
    assert row.vce_sat_max_v < row.vceo_v
    assert row.icbo_hot is None or (row.icbo_hot[0] > row.icbo_max_a and row.icbo_hot[1] <= row.tj_max_k)
    # Forced gain of the saturation test is 10 to 20 by the custom of data sheets (at least below hFE min),
    # from memory.
    assert row.vce_sat_ic_a / row.vce_sat_ib_a <= 20.0000001
    if row.vbe_spread is not None:
        low, high = (0.1, 0.5) if row.material == "germanium" else (0.5, 0.8)
        assert low <= row.vbe_spread.low < row.vbe_spread.nominal < row.vbe_spread.high <= high


@pytest.mark.parametrize("row", catalogue.transistors().values(), ids=lambda row: row.type)
def test_power_temperature_and_thermal_resistance_agree(row: TransistorRow) -> None:
    # P = (TJ max - Tref)/Rth is how a sheet defines the rating (definition of thermal resistance).
    # Sheets print two figures, so 6 % is their rounding; power at the case or mounting base goes with the
    # resistance to it.
    checked = 0
    for power, held, temperature in (
        (row.ptot_w, row.ptot_ref, row.ptot_ref_k),
        (row.ptot2_w, row.ptot2_ref, row.ptot2_ref_k),
    ):
        resistance = row.rth_ja_k_w if held == "ambient" else row.rth_jc_k_w
        if power is None or temperature is None or resistance is None or held == "case (with fin)":
            continue
        assert_allclose(power, (row.tj_max_k - temperature) / resistance, rtol=0.06, atol=0)
        checked += 1
    assert checked >= 1


@pytest.mark.parametrize(
    ("family", "low", "high"),
    # Gain range of the type without a bin letter, as sheets print it; common practice.
    [("BC547", 110, 800), ("BC847", 110, 800), ("BC846", 110, 450), ("BC817", 100, 600), ("BC337", 100, 630)],
)
def test_a_type_without_its_bin_has_the_whole_gain_range(family: str, low: float, high: float) -> None:
    row = catalogue.transistor(family.lower())
    bins = catalogue.gain_bins()[family]
    assert row.type == family
    assert (row.hfe_min, row.hfe_typ, row.hfe_max) == (low, None, high)
    assert row.note.startswith(f"no bin given: the whole range of its bins {', '.join(bins)}")
    first = catalogue.transistor(bins[0])
    for field in fields(TransistorRow):
        if field.name not in ("type", "hfe_min", "hfe_typ", "hfe_max", "note"):
            assert getattr(row, field.name) == getattr(first, field.name), field.name


@pytest.mark.parametrize(
    ("column", "other", "field", "merged"),
    [
        ("vceo_v", "30", "vceo_v", 30.0),
        ("vceo_v", "50", "vceo_v", 45.0),
        ("ptot_w", "0.2", "ptot_w", 0.2),
        ("tj_max_c", "125", "tj_max_k", 398.15),
        ("rth_ja_k_w", "600", "rth_ja_k_w", 600.0),
        ("rth_ja_k_w", "400", "rth_ja_k_w", 500.0),
        ("rth_ja_k_w", "", "rth_ja_k_w", None),
        ("vce_sat_max_v", "0.4", "vce_sat_max_v", 0.4),
        ("icbo_max_a", "1e-7", "icbo_max_a", 1e-7),
        ("icbo_hot_max_a", "1e-5", "icbo_hot_max_a", 1e-5),
        ("vbe_min_v", "0.55", "vbe_min_v", 0.55),
        ("vbe_min_v", "", "vbe_min_v", None),
        ("vbe_max_v", "0.72", "vbe_max_v", 0.72),
        ("vbe_typ_v", "0.65", "vbe_typ_v", None),
        ("ft_mhz", "80", "ft_hz", 80e6),
        ("evidence", "memory", "evidence", "memory"),
        ("fields_from_memory", "tj_max_c;ft_mhz", "fields_from_memory", ("tj_max_k", "ft_hz")),
    ],
)
def test_a_family_takes_the_more_cautious_of_differing_ratings(
    edited: Callable[[str, Edit], None], column: str, other: str, field: str, merged: object
) -> None:
    edited("transistors.csv", put("BC847C", column, other))
    assert getattr(catalogue.transistor("BC847"), field) == merged


@pytest.mark.parametrize(
    ("name", "bins", "missing"), [("BD139", "BD139-10 or BD139-16", "BD139-6"), ("BC107", "BC107B", "BC107A")]
)
def test_a_family_with_a_bin_that_the_table_lacks_is_refused(name: str, bins: str, missing: str) -> None:
    with pytest.raises(
        CatalogueError,
        match=rf"transistor\.type: read '{name}' without .* is {bins}; .*since {missing} is not in the table",
    ):
        catalogue.transistor(name)


def test_the_a_of_a_jedec_type_is_no_gain_bin() -> None:
    with pytest.raises(CatalogueError, match=r"transistor\.type: read '2N2222', .*nearest is 2N2222A, "):
        catalogue.transistor("2N2222")


@pytest.mark.parametrize(
    ("wrong", "near"), [("BC874B", "BC847B, "), ("BC847D", "BC847"), ("2N3904A", "2N3904"), ("", "2N3904")]
)
def test_an_unknown_type_names_the_nearest(wrong: str, near: str) -> None:
    with pytest.raises(CatalogueError, match=rf"transistor\.type: read '{wrong}', .*nearest is .*{near}"):
        catalogue.transistor(wrong)


def test_a_page_of_text_is_not_repeated_in_the_message() -> None:
    with pytest.raises(CatalogueError, match=r"read 'x{40}…', ") as caught:
        catalogue.transistor("x" * 100_000)
    assert len(str(caught.value)) < 200


def test_a_family_none_of_whose_bins_is_in_the_table_is_unknown(edited: Callable[[str, Edit], None]) -> None:
    edited("gain_bins.csv", lambda rows: rows.append(["BC549", "BC549C", "memory"]))
    with pytest.raises(CatalogueError, match=r"read 'BC549', .*nearest is BC547"):
        catalogue.transistor("BC549")


# --- Gain at other currents -----------------------------------------------------------------


def test_gain_points_include_the_point_of_the_row() -> None:
    for name, row in catalogue.transistors().items():
        points = catalogue.hfe_points(name)
        at_test = [p for p in points if p.place == (row.hfe_ic_a, row.hfe_vce_v, 298.15)]
        assert not points or [(p.hfe_min, p.hfe_max) for p in at_test] == [(row.hfe_min, row.hfe_max)], name


def test_gain_points_of_one_type() -> None:
    # 2N2222A: hFE at least 35, 50, 75 at 0.1, 1, 10 mA and 10 V, 100 to 300 at 150 mA, 40 at 500 mA, 50 at
    # 150 mA and 1 V, 35 at 10 mA and minus 55 °C: registered figures, printed in every sheet. From memory.
    points = {
        (p.ic_a, p.vce_v, p.temperature_k): (p.hfe_min, p.hfe_max) for p in catalogue.hfe_points("2n2222a")
    }
    assert points == {
        (0.1e-3, 10, 298.15): (35, None),
        (1e-3, 10, 298.15): (50, None),
        (10e-3, 10, 298.15): (75, None),
        (150e-3, 10, 298.15): (100, 300),
        (500e-3, 10, 298.15): (40, None),
        (150e-3, 1, 298.15): (50, None),
        (10e-3, 10, 218.15): (35, None),
    }


def test_gain_points_of_a_family_are_the_shared_ones_at_their_widest(
    edited: Callable[[str, Edit], None],
) -> None:
    edited(
        "transistor_hfe_points.csv",
        lambda rows: rows.append(["BC337-16", "0.01", "1", "25", "90", "", "memory"]),
    )
    points = catalogue.hfe_points("BC337")
    assert [(p.type, p.ic_a, p.hfe_min, p.hfe_max) for p in points] == [
        ("BC337", 0.1, 100, 630),
        ("BC337", 0.3, 60, None),
    ]
    assert len(catalogue.hfe_points("BC337-16")) == 3


def test_a_type_without_points_has_none() -> None:
    assert catalogue.hfe_points("BC847B") == ()


def test_gain_points_of_an_unknown_type_are_refused() -> None:
    with pytest.raises(CatalogueError, match=r"transistor\.type: read '2N3944', .*nearest is 2N3904"):
        catalogue.hfe_points("2N3944")


# --- Broken tables --------------------------------------------------------------------------

CELLS = [
    ("transistors.csv", "BC847B", "hfe_min", "x", r"line 29, column hfe_min: read 'x', .* from 1 to 10000"),
    ("transistors.csv", "BC847B", "hfe_min", "0", r"column hfe_min: read '0', .* from 1 to 10000"),
    ("transistors.csv", "BC847B", "hfe_min", "nan", r"column hfe_min: read 'nan', .* from 1 to 10000"),
    ("transistors.csv", "BC847B", "hfe_min", "", r"column hfe_min: read an empty cell, .* from 1 to 10000"),
    (
        "transistors.csv",
        "BC847B",
        "hfe_min",
        "450",
        r"column hfe_typ: read 290, accepted is at least the 450 of hfe_min",
    ),
    (
        "transistors.csv",
        "2N3904",
        "hfe_max",
        "100",
        r"column hfe_max: read 100, accepted is more than the 100 of hfe_min",
    ),
    (
        "transistors.csv",
        "BC847B",
        "hfe_typ",
        "500",
        r"column hfe_max: read 450, accepted is at least the 500 of hfe_typ",
    ),
    ("transistors.csv", "BC847B", "polarity", "npn", r"column polarity: read 'npn', accepted is NPN or PNP"),
    ("transistors.csv", "BC847B", "material", "GaAs", r"column material: read 'GaAs', accepted is Si or Ge"),
    ("transistors.csv", "BC847B", "package", "", r"column package: read an empty cell, accepted is a text"),
    (
        "transistors.csv",
        "BC847B",
        "evidence",
        "sure",
        r"column evidence: read 'sure', accepted is seen, mixed or memory",
    ),
    (
        "transistors.csv",
        "BC847B",
        "vbe_min_v",
        "0.71",
        r"column vbe_typ_v: read 0\.66, .* at least the 0\.71 of vbe_min_v",
    ),
    (
        "transistors.csv",
        "BC847B",
        "vbe_condition",
        "off",
        r"column vbe_condition: read 'off', accepted is 'on \.\.\.'",
    ),
    ("transistors.csv", "BC847B", "tj_max_c", "25", r"column tj_max_c: read '25', .* from 50 to 250"),
    (
        "transistors.csv",
        "BC847B",
        "ptot_ref_c",
        "150",
        r"column tj_max_c: read 423\.15, .* more than the 423\.15 of ptot_ref_c",
    ),
    (
        "transistors.csv",
        "BC107B",
        "rth_ja_k_w",
        "100",
        r"column rth_ja_k_w: read 100, .* at least the 200 of rth_jc_k_w",
    ),
    (
        "transistors.csv",
        "BC847B",
        "vce_sat_ic_a",
        "0.2",
        r"column ic_max_a: read 0\.1, .* at least the 0\.2 of vce_sat_ic_a",
    ),
    (
        "transistors.csv",
        "BC847B",
        "icbo_hot_max_a",
        "1e-9",
        r"column icbo_hot_max_a: read 1e-09, .* at least the 1\.5e-08 of",
    ),
    (
        "transistors.csv",
        "BC847B",
        "icbo_hot_c",
        "",
        r"column icbo_hot_c: read an empty cell, .*icbo_hot_max_a and icbo_hot_c",
    ),
    (
        "transistors.csv",
        "2N3904",
        "ptot2_ref",
        "",
        r"column ptot2_ref: read an empty cell, .*ptot2_w and ptot2_ref and",
    ),
    (
        "transistors.csv",
        "BC847B",
        "fields_from_memory",
        "hfe_mn",
        r"read 'hfe_mn', accepted is a column, nearest is hfe_min",
    ),
    (
        "transistors.csv",
        "BC847B",
        "type",
        "bc847c",
        r"line 30, column type: read 'BC847C', which stands in line 29 already",
    ),
    (
        "transistors.csv",
        "BC847C",
        "package",
        "TO-92",
        r"gain_bins\.csv, line \d+, .* 'BC847C', which differs in package from",
    ),
    (
        "transistors.csv",
        "BC847C",
        "hfe_ic_a",
        "0.01",
        r"gain_bins\.csv, line \d+, .* 'BC847C', which differs in hfe_ic_a from",
    ),
    (
        "gain_bins.csv",
        "BC847",
        "family",
        "BC848C",
        r"column family: read 'BC848C', which is a row of transistors\.csv",
    ),
    (
        "gain_bins.csv",
        "BC847",
        "type",
        "BC848A",
        r"column type: read 'BC848A', which stands in line \d+ already",
    ),
    (
        "transistor_hfe_points.csv",
        "2N3904",
        "type",
        "2N3940",
        r"line 2, column type: read '2N3940', .*nearest is 2N3904",
    ),
    (
        "transistor_hfe_points.csv",
        "2N3904",
        "ic_a",
        "0.001",
        r"line 3, column ic_a: read 0\.001 A again for 2N3904 at 1 V",
    ),
    (
        "transistor_hfe_points.csv",
        "2N3904",
        "hfe_max",
        "40",
        r"line 2, column hfe_max: read 40, .* more than the 40 of hfe_min",
    ),
    (
        "resistor_styles.csv",
        "chip",
        "power_w_common",
        "0.05",
        r"column power_w_common: read 0\.05, .* at least the 0\.0625 of",
    ),
    (
        "resistor_styles.csv",
        "chip",
        "r_max_ohm",
        "10",
        r"column r_max_ohm: read 10, .* more than the 10 of r_min_ohm",
    ),
    (
        "resistor_styles.csv",
        "chip",
        "zero_power_temp_c",
        "70",
        r"column zero_power_temp_c: read 343\.15, .* of rated_temp_c",
    ),
    (
        "resistor_styles.csv",
        "chip",
        "size_code",
        "0603",
        r"line 3, column size_code: read '0603', which stands in line 2",
    ),
    (
        "tcr_codes.csv",
        "black",
        "colour",
        "brown",
        r"line 3, column colour: read 'brown', which stands in line 2 already",
    ),
    (
        "tcr_codes.csv",
        "black",
        "tcr_ppm_per_k",
        "-5",
        r"line 2, column tcr_ppm_per_k: read '-5', .* from 0\.1 to 5000",
    ),
    (
        "tolerance_codes.csv",
        "letter",
        "tolerance_percent",
        "1",
        r"line 2, column tolerance_percent: read 0\.01 for E, accepted",
    ),
    (
        "tolerance_codes.csv",
        "letter",
        "tolerance_percent",
        "",
        r"tolerance_percent: read an empty cell for E, accepted is the",
    ),
    (
        "tolerance_codes.csv",
        "series",
        "code",
        "E13",
        r"column code: read 'E13', accepted is a series, nearest is E3",
    ),
    (
        "tolerance_codes.csv",
        "series",
        "code",
        "E6",
        r"column code: read 'E6', which stands in line \d+ already",
    ),
    (
        "preferred_numbers.csv",
        "E3",
        "significand",
        "1000",
        r"line 2, column significand: read '1000', .* from 100 to 999",
    ),
    (
        "preferred_numbers.csv",
        "E3",
        "significand",
        "099",
        r"line 2, column significand: read '099', .* from 100 to 999",
    ),
    (
        "preferred_numbers.csv",
        "E3",
        "significand",
        "220",
        r"line 3, column significand: read 220 after 220, .* ascending",
    ),
    ("preferred_numbers.csv", "E3", "series", "E4", r"line 2, column series: read 1 values of E4 in one run"),
]


def read_everything() -> None:
    catalogue.preferred_numbers()
    catalogue.tolerance_codes()
    catalogue.tcr_codes()
    catalogue.resistor_styles()
    catalogue.deratings()
    catalogue.transistors()
    catalogue.gain_bins()
    catalogue.hfe_points("2N3906")


@pytest.mark.parametrize(("table", "key", "column", "value", "message"), CELLS)
def test_a_broken_cell_is_refused_with_its_place(
    edited: Callable[[str, Edit], None], table: str, key: str, column: str, value: str, message: str
) -> None:
    edited(table, put(key, column, value))
    with pytest.raises(CatalogueError, match=message):
        read_everything()


@pytest.mark.parametrize("table", sorted(path.name for path in TABLES.glob("*.csv")))
def test_the_message_names_the_file(edited: Callable[[str, Edit], None], table: str) -> None:
    edited(table, drop_last_cell)
    with pytest.raises(CatalogueError, match=rf"{table}, line 2: read (\d+) cells, accepted are \d+"):
        read_everything()


def test_an_unknown_column_names_the_nearest(edited: Callable[[str, Edit], None]) -> None:
    edited("tcr_codes.csv", lambda rows: rows[0].__setitem__(2, "tcr_ppm"))
    with pytest.raises(
        CatalogueError, match=r"tcr_codes\.csv, line 1: read column 'tcr_ppm', .* is tcr_ppm_per_k"
    ):
        catalogue.tcr_codes()


def test_a_missing_column_is_named(edited: Callable[[str, Edit], None]) -> None:
    edited("tcr_codes.csv", drop_last_column)
    with pytest.raises(
        CatalogueError, match=r"tcr_codes\.csv, line 1: accepted are the columns colour, .*; missing note"
    ):
        catalogue.tcr_codes()


def test_columns_out_of_order_are_refused(edited: Callable[[str, Edit], None]) -> None:
    edited("tcr_codes.csv", lambda rows: rows[0].reverse())
    with pytest.raises(CatalogueError, match=r"tcr_codes\.csv, line 1: .*; one is doubled or out of order"):
        catalogue.tcr_codes()


def test_a_table_without_rows_is_refused(edited: Callable[[str, Edit], None]) -> None:
    edited("tcr_codes.csv", lambda rows: rows.__delitem__(slice(1, None)))
    with pytest.raises(CatalogueError, match=r"tcr_codes\.csv: the table holds no row"):
        catalogue.tcr_codes()


@pytest.mark.parametrize(
    ("content", "reason"),
    [
        (None, "No such file"),
        (b"colour,\xb5\n", "invalid start byte"),
        (b'colour,"letter\n', "unexpected end of data"),
    ],
)
def test_a_file_that_is_no_csv_in_utf8_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, content: bytes | None, reason: str
) -> None:
    if content is not None:
        (tmp_path / "tcr_codes.csv").write_bytes(content)
    monkeypatch.setattr(reading, "directory", lambda: tmp_path)
    with pytest.raises(
        CatalogueError, match=rf"tcr_codes\.csv: cannot be read as a CSV table in UTF-8: .*{reason}"
    ):
        catalogue.tcr_codes()


def test_tables_cannot_be_changed_by_a_caller() -> None:
    with pytest.raises(TypeError):
        catalogue.transistors()["X"] = catalogue.transistor("2N3904")  # type: ignore[index]


def test_tables_are_read_once() -> None:
    assert catalogue.transistors() is catalogue.transistors()
    assert catalogue.resistor_styles() is catalogue.resistor_styles()
