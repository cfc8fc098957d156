"""Lists of resistances: decades of a series, given values, stock lists."""

from __future__ import annotations

import itertools
import math
from decimal import Decimal
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_array_equal

from synth import catalogue, preferred
from synth.catalogue import CatalogueError
from synth.preferred import (
    PreferredError,
    StockError,
    ValueList,
    nearest,
    neighbours,
    series_values,
    significands,
)
from synth.quantities import QuantityError

BAND = {"tolerance": 0.01, "tcr": 100e-6, "life": 0.0}
BANDS = {name: [figure, figure] for name, figure in BAND.items()}


# --- Series ---------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["E24", "e24", " E 24 "])
def test_the_name_of_a_series_may_be_written_loosely(name: str) -> None:
    assert len(significands(name)) == 24


def test_an_unknown_series_is_refused() -> None:
    with pytest.raises(CatalogueError, match=r"resistors\.series: read 'E36', .* nearest is E48"):
        significands("E36")


def test_values_are_the_floats_that_the_decimal_text_gives() -> None:
    # Slow equivalent: every significand times every power of ten, as decimal numbers.
    low, high = Decimal("0.47"), Decimal("10e6")
    decimals = (Decimal(m).scaleb(k) for k in range(-12, 12) for m in significands("E96"))
    expected = sorted(float(value) for value in decimals if low <= value <= high)
    assert_array_equal(series_values("E96", 0.475, 10e6), [value for value in expected if value >= 0.475])
    assert {0.475, 1.02, 15.8e3, 4750.0, 9.76e6, 10e6} <= set(series_values("E96", 0.475, 10e6).tolist())


@pytest.mark.parametrize(
    ("low", "high", "expected"),
    # Both ends belong to the range; a step of one unit in the last place beyond them leaves them out.
    [
        (100.0, 220.0, [100.0, 220.0]),
        (math.nextafter(100.0, 200), 220.0, [220.0]),
        (100.0, math.nextafter(220.0, 0), [100.0]),
        (1000.0, 1000.0, [1000.0]),
        (0.47, 1.0, [0.47, 1.0]),
        (230.0, 460.0, []),
        (9.99e5, 1e6, [1e6]),
        (1e-3, 1.5e-3, [1e-3]),
    ],
)
def test_ends_of_the_range_are_included(low: float, high: float, expected: list[float]) -> None:
    assert series_values("E3", low, high).tolist() == expected


@pytest.mark.parametrize("power", range(-3, 9))
def test_no_decade_is_lost_at_its_ends(power: int) -> None:
    low, high = float(f"1e{power}"), float(f"1e{power + 1}")
    assert series_values("E6", low, high).tolist() == [
        float(f"{text}e{power}") for text in ("1.0", "1.5", "2.2", "3.3", "4.7", "6.8", "10")
    ]


def test_a_union_is_sorted_and_without_repetition() -> None:
    union = series_values(["E24", "E96"], 100, 999)
    assert_array_equal(union, sorted(set(significands("E24")) | set(significands("E96"))))
    # 24 + 96 values, of which 10 11 13 15 20 75 are in both: counted from the two printed lists, common
    # practice.
    shared = set(significands("E24")) & set(significands("E96"))
    assert shared == {100, 110, 130, 150, 200, 750}
    assert union.size == 24 + 96 - 6


def test_the_order_of_a_union_does_not_matter() -> None:
    assert_array_equal(series_values(["E96", "E24"], 1, 1e6), series_values(("E24", "E96"), 1, 1e6))


def test_the_shared_array_cannot_be_changed() -> None:
    with pytest.raises(ValueError, match="read-only"):
        series_values("E24", 10, 100)[0] = 1.0


@pytest.mark.parametrize(
    ("low", "high", "shown"),
    [
        (0.0, 1.0, "0 ohm : 1 ohm"),
        (-1.0, 1.0, "-1 ohm : 1 ohm"),
        (2.0, 1.0, "2 ohm : 1 ohm"),
        (1.0, math.inf, "1 ohm : inf ohm"),
        (math.nan, 1.0, "nan ohm : 1 ohm"),
    ],
)
def test_a_range_that_is_none_is_refused(low: float, high: float, shown: str) -> None:
    with pytest.raises(
        PreferredError, match=rf"resistors\.range: read {shown}, accepted is low : high with 0 < low"
    ):
        series_values("E24", low, high)


def test_no_series_at_all_is_refused() -> None:
    with pytest.raises(PreferredError, match=r"resistors\.series: read an empty list"):
        series_values([], 1, 10)


def test_a_large_list_has_every_value_of_six_decades_and_the_end() -> None:
    assert series_values("E192", 10, 10e6).size == 6 * 192 + 1


@pytest.mark.parametrize(
    ("value", "series", "expected"),
    [
        (4800.0, "E12", 4700.0),
        (4700.0, "E12", 4700.0),
        (105.0, "E24", 100.0),  # equally near to 100 and 110
        (0.00105, "E24", 0.001),  # likewise, where the floats are not
        (105.0001, "E24", 110.0),
        (954.0, "E24", 910.0),
        (956.0, "E24", 1000.0),
        (990.0, "E6", 1000.0),
        (101.0, ["E24", "E96"], 100.0),
        (108.6, ["E24", "E96"], 110.0),
        (1e-9, "E3", 1e-9),
    ],
)
def test_nearest_value(value: float, series: str | list[str], expected: float) -> None:
    assert nearest(value, series) == expected


@given(value=st.floats(1e-2, 1e8), series=st.sampled_from(["E3", "E6", "E12", "E24", "E48", "E96", "E192"]))
def test_nearest_value_is_nearer_than_any_other(value: float, series: str) -> None:
    others = [float(f"{m}e{k}") for k in range(-6, 8) for m in significands(series)]
    wanted = Decimal(repr(value))
    assert nearest(value, series) == min(others, key=lambda v: (abs(Decimal(repr(v)) - wanted), v))


@pytest.mark.parametrize(("value", "shown"), [(0.0, "0"), (-1.0, "-1"), (math.inf, "inf"), (math.nan, "nan")])
def test_nearest_to_no_resistance_is_refused(value: float, shown: str) -> None:
    with pytest.raises(PreferredError, match=f"value: read {shown} ohm, accepted is a resistance above 0"):
        nearest(value, "E24")


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (22.0, (10.0, 47.0)),
        (23.0, (22.0, 47.0)),
        (10.0, (None, 22.0)),
        (47.0, (22.0, None)),
        (1.0, (None, 10.0)),
        (100.0, (47.0, None)),
    ],
)
def test_neighbours_of_members_and_others(value: float, expected: tuple[float | None, float | None]) -> None:
    assert neighbours(value, [10.0, 22.0, 47.0]) == expected


def test_an_empty_list_has_no_neighbours() -> None:
    assert neighbours(1.0, []) == (None, None)


# --- Lists ----------------------------------------------------------------------------------


def test_list_of_a_series() -> None:
    values = ValueList.from_series("E6", 10, 100, tolerance=0.2, tcr=200e-6, life=0.01)
    assert values.values.tolist() == [10, 15, 22, 33, 47, 68, 100]
    assert len(values) == 7
    for name, figure in (("tolerance_low", 0.2), ("tolerance_high", 0.2), ("tcr", 200e-6), ("life", 0.01)):
        assert_array_equal(getattr(values, name), np.full(7, figure))
    assert (values.labels, values.parts, values.styles, values.quantities, values.prices) == (None,) * 5


def test_a_range_without_a_value_of_the_series_is_refused() -> None:
    with pytest.raises(
        PreferredError, match=r"resistors\.range: read 230R : 320R, .* no value of E3, nearest is 220R$"
    ):
        ValueList.from_series("E3", 230, 320, **BAND)
    with pytest.raises(PreferredError, match=r"no value of E3 or E6, nearest is 220R or 330R$"):
        ValueList.from_series(["E3", "E6"], 230, 320, **BAND)


def test_given_values_are_sorted_with_their_bands() -> None:
    values = ValueList.from_values([47.0, 10.0, 22.0], [0.05, 0.01, 0.02], 1e-4, [0.0, 0.1, 0.2])
    assert values.values.tolist() == [10, 22, 47]
    assert values.tolerance_low.tolist() == values.tolerance_high.tolist() == [0.01, 0.02, 0.05]
    assert values.life.tolist() == [0.1, 0.2, 0.0]


def test_one_value_is_a_list_of_one() -> None:
    assert ValueList.from_values(1800.0, 0.0, 0.0, 0.0).values.tolist() == [1800]


def test_of_equal_values_the_tightest_stays() -> None:
    values = ValueList.from_values(
        [22, 10, 10, 10, 10], [0.05, 0.05, 0.01, 0.01, 0.01], [0, 0, 5e-5, 1e-5, 1e-5], [0, 0, 0, 0.02, 0.01]
    )
    assert values.values.tolist() == [10, 22]
    assert (values.tolerance_low[0], values.tcr[0], values.life[0]) == (0.01, 1e-5, 0.01)


@pytest.mark.parametrize(
    ("values", "shown"),
    [
        ([10, 0], "0 ohm"),
        ([-3], "-3 ohm"),
        ([10, math.nan], "nan ohm"),
        ([math.inf], "inf ohm"),
        ([], r"an array of shape \(0,\)"),
        ([[1, 2]], r"an array of shape \(1, 2\)"),
    ],
)
def test_values_that_are_no_resistances_are_refused(values: list[float], shown: str) -> None:
    with pytest.raises(PreferredError, match=f"values: read {shown}, accepted is a"):
        ValueList.from_values(values, **BAND)


@pytest.mark.parametrize("name", ["tolerance", "tcr", "life"])
@pytest.mark.parametrize(("figure", "shown"), [(-0.01, "-0.01"), (1.0, "1"), (math.nan, "nan")])
def test_a_band_that_is_none_is_refused(name: str, figure: float, shown: str) -> None:
    with pytest.raises(PreferredError, match=f"{name}: read {shown}, accepted is a figure from 0 to below 1"):
        ValueList.from_values([10, 22], **{**BANDS, name: [0.0, figure]})


def test_a_band_for_another_number_of_values_is_refused() -> None:
    with pytest.raises(PreferredError, match="tcr: read 3 figures, accepted are 2, one for each value"):
        ValueList.from_values([10, 22], 0.01, [0, 0, 0], 0)


def test_a_band_down_to_zero_ohm_is_refused() -> None:
    with pytest.raises(
        PreferredError, match=r"read 0\.6 with a life drift of 0\.4 for 22 ohm, accepted is a sum below 1"
    ):
        ValueList.from_values([10, 22], [0.1, 0.6], 0, 0.4)


def plain(values: list[float], **others: object) -> ValueList:
    array = np.array(values, dtype=float)
    zero = np.zeros(array.shape)
    return ValueList(values=array, tolerance_low=zero, tolerance_high=zero, tcr=zero, life=zero, **others)  # type: ignore[arg-type]


@pytest.mark.parametrize("values", [[22.0, 10.0], [10.0, 10.0]])
def test_values_out_of_order_are_refused(values: list[float]) -> None:
    with pytest.raises(
        PreferredError, match="values: read 10 ohm, accepted is more than the value before it"
    ):
        plain(values)


@pytest.mark.parametrize("name", ["labels", "parts", "styles", "quantities", "prices"])
def test_texts_for_another_number_of_values_are_refused(name: str) -> None:
    with pytest.raises(PreferredError, match=f"{name}: read 1 entries, accepted are 2, one for each value"):
        plain([10.0, 22.0], **{name: ("a",)})


def test_a_list_keeps_its_own_copy_that_cannot_be_changed() -> None:
    given_array = np.array([10.0, 22.0])
    values = ValueList(
        values=given_array,
        tolerance_low=given_array * 0,
        tolerance_high=given_array * 0,
        tcr=given_array * 0,
        life=given_array * 0,
    )
    given_array[0] = 1.0
    assert values.values.tolist() == [10, 22]
    for name in ("values", "tolerance_low", "tolerance_high", "tcr", "life"):
        with pytest.raises(ValueError, match="read-only"):
            getattr(values, name)[0] = 5.0


def test_lists_are_compared_and_hashed_by_content() -> None:
    one = ValueList.from_series("E24", 10, 1e6, **BAND)
    same = ValueList.from_values(series_values("E24", 10, 1e6)[::-1], **BAND)
    assert one == same
    assert hash(one) == hash(same)
    assert one != ValueList.from_series("E24", 10, 1e6, tolerance=0.05, tcr=100e-6, life=0.0)
    assert one != ValueList.from_series("E24", 10, 1e5, **BAND)
    assert plain([10.0]) != plain([10.0], parts=("A",))
    assert plain([10.0]) != [10.0]


def test_selection_by_index_and_by_mask() -> None:
    values = plain([10.0, 22.0, 47.0], parts=("a", None, "c"))
    assert (
        values.select([0, 2]) == values.select([True, False, True]) == plain([10.0, 47.0], parts=("a", "c"))
    )


# --- Stock ----------------------------------------------------------------------------------

# Invented drawer of the bench where the hydrophone stage of a tide-gauge buoy is built.
DRAWER = """value,tolerance,tcr,quantity,style,price,part
4K7,1 %,50 ppm/K,120,0805,0.02,TG-4701
1k8,,,,,,
R47,F,,3,,,
"100 ohm","5 %","200 ppm/K",25,"0207 (0.25 W)","0,1",
"""


def drawer(tmp_path: Path, text: str | bytes, **others: float) -> ValueList:
    path = tmp_path / "drawer.csv"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return ValueList.from_stock(path, **{**BAND, **others})


def test_stock_list(tmp_path: Path) -> None:
    stock = drawer(tmp_path, DRAWER, tolerance=0.02, life=0.005)
    assert stock.values.tolist() == [0.47, 100.0, 1800.0, 4700.0]
    assert stock.tolerance_low.tolist() == stock.tolerance_high.tolist() == [0.01, 0.05, 0.02, 0.01]
    assert stock.tcr.tolist() == [100e-6, 200e-6, 100e-6, 50e-6]
    assert stock.life.tolist() == [0.005] * 4
    assert stock.labels == ("R47", "100 ohm", "1k8", "4K7")
    assert stock.quantities == (3, 25, None, 120)
    assert stock.styles == (None, "0207 (0.25 W)", None, "0805")
    assert stock.prices == (None, 0.1, None, 0.02)
    assert stock.parts == (None, None, None, "TG-4701")


def spreadsheet(separator: str, bom: bytes, newline: str, padding: str) -> bytes:
    rows = ["Value;Tolerance;Quantity", "4,7 kΩ;1 %;3", "", "10 kΩ;1 %;5", ";;"]
    quoted = [
        separator.join(f'"{cell}"' if separator in cell else cell for cell in row.split(";")) + padding
        if row
        else row
        for row in rows
    ]
    return bom + newline.join(quoted).encode()


@pytest.mark.parametrize(
    ("separator", "bom", "newline", "padding"),
    list(itertools.product(",;", [b"", "\ufeff".encode()], ["\n", "\r\n", "\r"], ["", "{0}{0}"])),
)
def test_spreadsheet_exports(tmp_path: Path, separator: str, bom: bytes, newline: str, padding: str) -> None:
    content = spreadsheet(separator, bom, newline, padding.format(separator))
    assert drawer(tmp_path, content) == drawer(
        tmp_path, 'value,tolerance,quantity\n"4,7 kΩ",1 %,3\n10 kΩ,1 %,5\n'
    )


def test_a_list_of_values_alone(tmp_path: Path) -> None:
    assert drawer(tmp_path, "value\n1k\n2k2\n").values.tolist() == [1000, 2200]


def test_a_list_without_further_rows_may_have_short_rows(tmp_path: Path) -> None:
    assert drawer(tmp_path, "value,tolerance,part\n1k\n2k2,5 %\n").tolerance_low.tolist() == [0.01, 0.05]


@pytest.mark.parametrize(
    ("text", "fraction"),
    [("1 %", 0.01), ("0.01", 0.01), ("F", 0.01), ("j", 0.05), ("B", 0.001), ("0 %", 0.0), ("M", 0.2)],
)
def test_a_tolerance_may_be_a_letter(tmp_path: Path, text: str, fraction: float) -> None:
    assert drawer(tmp_path, f"value,tolerance\n1k,{text}\n", tolerance=0.5).tolerance_high.tolist() == [
        fraction
    ]


def test_of_equal_values_the_tightest_row_stays(tmp_path: Path) -> None:
    rows = ("1k,5 %,,10,a", "1000 ohm,1 %,100 ppm/K,4,b", "1k0,1 %,50 ppm/K,7,c", "1K,,,2,d")
    text = "\n".join(("value,tolerance,tcr,quantity,part", *rows))
    stock = drawer(tmp_path, text, tolerance=0.02)
    assert stock.values.tolist() == [1000]
    assert (stock.tolerance_low[0], stock.tcr[0]) == (0.01, 50e-6)
    assert (stock.labels, stock.parts, stock.quantities) == (("1k0",), ("c",), (7,))


@pytest.mark.parametrize(
    ("rows", "total"),
    [
        ("1k,F,4,a\n1000 ohm,1 %,5,a\n1K,F,1,a", 10),
        ("1k,F,4,a\n1k,F,,a", None),
        ("1k,F,4,a\n1k,F,5,b", 4),
        ("1k,F,0,a\n1k,J,5,a", 5),
    ],
)
def test_quantities_of_the_same_part_are_added(tmp_path: Path, rows: str, total: int | None) -> None:
    assert drawer(tmp_path, f"value,tolerance,quantity,part\n{rows}\n").quantities == (total,)


def test_a_value_of_which_none_is_left_is_not_offered(tmp_path: Path) -> None:
    assert drawer(tmp_path, "value,quantity\n1k,0\n2k2,1\n").values.tolist() == [2200]


def test_a_range_takes_part_of_the_list(tmp_path: Path) -> None:
    assert drawer(tmp_path, DRAWER, low=100, high=1800).values.tolist() == [100, 1800]


@pytest.mark.parametrize(
    ("row", "message"),
    [
        ("x,,,,,,", r"line 3, column value: read 'x', "),
        ("4700,,,,,,", r"line 3, column value: read '4700', .*nearest is '4700 ohm' or '4K7'"),
        (",1 %,,,,,", r"line 3, column value: read '', "),
        ("5 mA,,,,,,", r"line 3, column value: read '5 mA', "),
        ("-5 ohm,,,,,,", r"line 3, column value: read '-5 ohm', "),
        ("1k,1,,,,,", r"line 3, column tolerance: read '1', .*nearest is '1 %'"),
        ("1k,1 V,,,,,", r"line 3, column tolerance: read '1 V', "),
        ("1k,,100,,,,", r"line 3, column tcr: read '100', .*nearest is '100 ppm/K'"),
        ("1k,,,,,free,", r"line 3, column price: read 'free', "),
    ],
)
def test_a_cell_that_is_no_quantity_is_named_by_its_line(tmp_path: Path, row: str, message: str) -> None:
    with pytest.raises(QuantityError, match=rf"stock 'drawer\.csv', {message}"):
        drawer(tmp_path, f"value,tolerance,tcr,quantity,style,price,part\n2k2,,,,,,\n{row}\n")


@pytest.mark.parametrize(
    ("row", "message"),
    [
        ("0 ohm,,,,,,", r"line 3, column value: read '0 ohm', accepted is a resistance above 0 ohm"),
        ("1k,-1 %,,,,,", r"line 3, column tolerance: read '-1 %', accepted is 0 or more"),
        ("1k,100 %,,,,,", r"line 3, column tolerance: read '100 %', accepted is below 100 %"),
        ("1k,,-50 ppm/K,,,,", r"line 3, column tcr: read '-50 ppm/K', accepted is 0 or more"),
        ("1k,,,2.5,,,", r"line 3, column quantity: read '2\.5', accepted is a whole number"),
        ("1k,,,-1,,,", r"line 3, column quantity: read '-1', accepted is a whole number"),
        ("1k,,,³,,,", r"line 3, column quantity: read '³', accepted is a whole number"),
        ("1k,,,9999999999,,,", r"line 3, column quantity: read '9999999999', accepted is a whole number"),
        ("1k,,,,,1:0.05 1:0.02,", r"line 3, column price: read '1:0\.05 1:0\.02', accepted is .* rising numbers of pieces"),
        ("1k,,,,,0:0.05,", r"line 3, column price: read '0:0\.05', accepted is the price of one piece"),
        ("1k,,,,,0.0000001,", r"line 3, column price: read '0\.0000001', accepted are prices of at most 6 decimals"),
        ("4,7k,,,,,,", r"line 3: read 8 cells, accepted are 7"),
        ("1k,,,,,,a,b", r"line 3: read 8 cells, accepted are 7"),
        ('"1k,,,,,,', r"line 3: read a record that is not CSV \(unexpected end of data\)"),
    ],
)
def test_a_bad_row_is_named_by_its_line(tmp_path: Path, row: str, message: str) -> None:
    with pytest.raises(StockError, match=rf"stock 'drawer\.csv', {message}"):
        drawer(
            tmp_path, f"value,tolerance,tcr,quantity,style,price,part\n2k2,,,,,,\n{row}\n".removesuffix("\n")
        )


def test_a_text_under_a_column_without_name_is_refused(tmp_path: Path) -> None:
    with pytest.raises(
        StockError, match=r"stock 'drawer\.csv', line 2: read 3 cells, accepted are 1 as in the header"
    ):
        drawer(tmp_path, "value,,\n1k,,spare\n")


@pytest.mark.parametrize("letter", ["Z", "S", "N"])
def test_a_letter_of_capacitors_is_no_tolerance_of_a_resistor(tmp_path: Path, letter: str) -> None:
    with pytest.raises(QuantityError, match=rf"line 2, column tolerance: read '{letter}', "):
        drawer(tmp_path, f"value,tolerance\n1k,{letter}\n")


@pytest.mark.parametrize(
    ("header", "message"),
    [
        ("value,tolerence", r"line 1: read column 'tolerence', .* nearest is tolerance"),
        ("Wert,tolerance", r"line 1: read column 'Wert', accepted are value, tolerance, tcr, .*nearest is "),
        ("value\ttcr", r"line 1: read column 'value\\ttcr', .* nearest is value"),
        ("value,,tcr,", r"line 1: read column '', .* nearest is "),
        ("value,tcr,Value", r"line 1: read column 'Value' twice, accepted is each column once"),
        ("tcr,part", r"line 1: read the columns 'tcr, part', accepted is a header with a column 'value'"),
        ('"",', r"line 1: read the columns '', accepted is a header with a column 'value'"),
    ],
)
def test_a_bad_header_is_refused(tmp_path: Path, header: str, message: str) -> None:
    rows = "" if header.startswith('"') else "1k,\n"
    with pytest.raises(StockError, match=rf"stock 'drawer\.csv', {message}"):
        drawer(tmp_path, f"{header}\n{rows}")


@pytest.mark.parametrize("content", [b"", b"\n \r\n", "\ufeff".encode()])
def test_an_empty_file_is_refused(tmp_path: Path, content: bytes) -> None:
    with pytest.raises(StockError, match=r"stock 'drawer\.csv': read an empty file"):
        drawer(tmp_path, content)


def test_a_header_alone_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StockError, match=r"stock 'drawer\.csv': read a header without rows"):
        drawer(tmp_path, "value,tcr\n,\n")


def test_a_drawer_that_is_used_up_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StockError, match=r"stock 'drawer\.csv': read no row with a quantity above 0"):
        drawer(tmp_path, "value,quantity\n1k,0\n")


def test_a_range_without_stock_is_refused(tmp_path: Path) -> None:
    with pytest.raises(
        StockError, match=r"stock 'drawer\.csv': read values from R47 to 4K7, .* 10000 ohm to 1e\+06 ohm"
    ):
        drawer(tmp_path, DRAWER, low=1e4, high=1e6)


def test_a_file_that_is_not_utf8_is_refused(tmp_path: Path) -> None:
    with pytest.raises(
        StockError, match=r"stock 'drawer\.csv': read the byte 0xb5 at position 10, which is not UTF-8"
    ):
        drawer(tmp_path, b"value\n100 \xb5")
    with pytest.raises(
        StockError, match=r"stock 'drawer\.csv': read the byte 0xff at position 0, which is not UTF-8"
    ):
        drawer(tmp_path, "value\n1k\n".encode("utf-16"))


@pytest.mark.parametrize(
    ("name", "reason"), [("absent.csv", "No such file or directory"), ("", "Is a directory")]
)
def test_a_file_that_cannot_be_read_is_refused(tmp_path: Path, name: str, reason: str) -> None:
    path = tmp_path / name
    with pytest.raises(
        StockError, match=rf"stock '{path.name}': read nothing \({reason}\), accepted is a CSV file"
    ):
        ValueList.from_stock(path, **BAND)


@pytest.mark.parametrize("size", [5_000_000, 5_000_001])
def test_a_file_above_five_megabytes_is_refused(tmp_path: Path, size: int) -> None:
    blank = b" " * 9_999 + b"\n"
    content = (b"value\n1k\n" + blank * 499).ljust(size, b" ")
    if size == 5_000_000:
        assert drawer(tmp_path, content).values.tolist() == [1000]
    else:
        with pytest.raises(
            StockError, match=r"stock 'drawer\.csv': read 5000001 bytes, accepted are at most 5000000"
        ):
            drawer(tmp_path, content)


def test_the_columns_are_those_of_the_contract() -> None:
    assert preferred.STOCK_COLUMNS[:7] == ("value", "tolerance", "tcr", "quantity", "style", "price", "part")


def test_every_style_of_the_table_fits_into_a_stock_list(tmp_path: Path) -> None:
    names = list(catalogue.resistor_styles())
    rows = "".join(f'{100 + number} ohm,"{name}"\n' for number, name in enumerate(names))
    assert drawer(tmp_path, f"value,style\n{rows}").styles == tuple(names)


def test_price_breaks_and_minimum_order_are_read(tmp_path: Path) -> None:
    path = tmp_path / "prices.csv"
    path.write_text("value,price,minimum,quantity\n1k,1:0.05 100:0.021,50,7\n2k2,0.1,,0\n3k3,,,\n", encoding="utf-8")
    first, second, third = preferred.stock_rows(path, tolerance=0.01, tcr=1e-4)
    assert (first.prices, first.price, first.minimum, first.quantity) == (((1, 0.05), (100, 0.021)), 0.05, 50, 7)
    assert (second.prices, second.minimum, second.quantity) == (((1, 0.1),), 1, 0)
    assert (third.prices, third.price, third.quantity) == ((), None, None)
