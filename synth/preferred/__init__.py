"""Resistances that can be bought or lie in a drawer: series of IEC 60063, given values, stock lists, pairs of two."""

from synth.preferred.lists import ValueList
from synth.preferred.pairs import JOINS, PairList, pair_up
from synth.preferred.series import PreferredError, nearest, neighbours, series_values, significands
from synth.preferred.stock import STOCK_COLUMNS, StockError, StockRow, stock_rows

__all__ = [
    "JOINS",
    "STOCK_COLUMNS",
    "PairList",
    "PreferredError",
    "StockError",
    "StockRow",
    "ValueList",
    "nearest",
    "neighbours",
    "pair_up",
    "series_values",
    "significands",
    "stock_rows",
]
