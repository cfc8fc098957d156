"""The stage as a frozen, validated value: what is wanted, what surrounds it, what its parts may be.

A stage is made from texts, whether they come from a file, from the command line or from Python. Whatever was not given
and had to be assumed stands in `Stage.assumed`, in keys and texts that can be given back.
"""

from __future__ import annotations

import dataclasses
import math
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np

from synth.catalogue import Derating
from synth.networks import NETWORKS
from synth.preferred import ValueList
from synth.preferred import nearest as nearest_value
from synth.quantities import (
    Interval,
    RestpointError,
    Spread,
    Target,
    format_resistance,
)
from synth.reference import Reference
from synth.signal import Signal
from synth.stage_file import read_toml, stage_file, template, toml_literal, unknown_key
from synth.stage_keys import (
    KEYS,
    NAMES,
    Given,
    StageError,
    nearest,
)
from synth.stage_resolve import Assumption, RoleSetting, StageWarning, band, needing, no_role, resolve, rival
from synth.statistics import Lot
from synth.stress import TransistorRatings
from synth.transistor import GainRows, Transistor

__all__ = ["Assumption", "RoleSetting", "Stage", "StageError", "StageWarning", "template"]


@dataclass(frozen=True, kw_only=True, init=False, repr=False)
class Stage:
    """One transistor with its bias network, its targets, surroundings and limits; frozen, compared by content.

    Parameters
    ----------
    folder : path
        Folder that paths in the values are relative to.
    **flat : str, float, Spread, Interval, Target, path, sequence or None
        Values of the keys by their short names or with their table before them, as in ``supply`` or ``supply_vcc``,
        ``resistors_re_values``; numbers in SI units. None counts as not given.

    Attributes
    ----------
    name : str
        Name for reports.
    networks : tuple of str
        Networks that come into question, keys of `synth.networks.NETWORKS`.
    any_network : bool
        Whether they were asked for as ``any``.
    rails : mapping of str to Spread
        Rails given, magnitudes [V].
    ground : {"negative", "positive", "middle"}
        Which rail is 0 V.
    ic : Target
        Target of IC with its window [A].
    voltages : mapping of str to Target
        The one of ``vce``, ``vc`` and ``ve`` that is given, with its window [V]; empty for a sink.
    transistor : Transistor
        Laws and spreads of the transistor.
    reference : Reference or None
        The reference element of the base voltage.
    ratings : TransistorRatings
        What is known of the transistor's ratings.
    derating : Derating
        The policy that ratings are judged by.
    signal : Signal
        What the signal meets.
    corner : float or None
        Frequency that the bypass capacitor of re is sized for [Hz].
    temperature : Spread
        Ambient [K].
    limits : mapping of str to Interval
        Limits given and limits by default, SI units; whether one applies is a matter of the network.
    values : mapping of str to float
        Resistors fitted today, of a pair the total [ohm].
    fitted_pairs : mapping of str to (int, tuple of float)
        The pairs among them: code of `synth.preferred.pairs.JOINS`, and the parts [ohm].
    replacement : mapping of str to Spread, float or str
        What is given of the transistor that is to take the place of today's, by key, SI units; empty for none.
    lot : Lot
        The units that Monte Carlo draws.
    measured : mapping of str to Spread
        Parts measured, conditions of the bench and readings of a meter there [ohm, -, V, K].
    roles : mapping of str to RoleSetting
        What each role of the networks may be.
    on_board : tuple of float
        Values that the board has already, ascending [ohm].
    assumed : tuple of Assumption
        What was not given, in the order of the stage file.
    warnings : tuple of StageWarning
        What deserves caution.
    given : mapping of str to str
        Texts of the keys given.
    folder : Path
        Folder that paths in `given` are relative to.

    Raises
    ------
    RestpointError
        If a value is wrong or contradicts another; one sentence that names the field.

    Examples
    --------
    >>> stage = Stage(supply="12 V ± 5 %", ic="2 mA ± 15 %", vce="5 V", hfe="110 : 450", tolerance="1 %")
    >>> stage.rails["vcc"].low, stage.role("r1").series
    (11.4, ('E96',))
    """

    name: str
    networks: tuple[str, ...]
    any_network: bool
    rails: Mapping[str, Spread]
    ground: str
    ic: Target
    voltages: Mapping[str, Target]
    transistor: Transistor
    reference: Reference | None
    ratings: TransistorRatings
    derating: Derating
    signal: Signal
    corner: float | None
    temperature: Spread
    limits: Mapping[str, Interval]
    values: Mapping[str, float]
    fitted_pairs: Mapping[str, tuple[int, tuple[float, ...]]]
    replacement: Mapping[str, Any]
    lot: Lot
    measured: Mapping[str, Spread]
    roles: Mapping[str, RoleSetting]
    on_board: tuple[float, ...]
    assumed: tuple[Assumption, ...] = field(compare=False)
    warnings: tuple[StageWarning, ...] = field(compare=False)
    given: Mapping[str, str] = field(compare=False)
    folder: Path = field(compare=False)
    _stock: Mapping[str, ValueList]

    def __init__(self, *, folder: str | os.PathLike[str] = ".", **flat: Given) -> None:
        given: dict[str, str] = {}
        for name, value in flat.items():
            path = _path_of(name)
            if value is None:
                continue
            if path in given:
                raise StageError(path, value, "which is given twice", f"one of {', '.join(KEYS[path].names)}")
            given[path] = KEYS[path].text(value)
        for attribute, content in resolve(given, Path(folder)).items():
            object.__setattr__(self, attribute, content)

    def __hash__(self) -> int:
        return hash((self.name, self.networks, self.ic, self.temperature, self.transistor))

    def __repr__(self) -> str:
        given = (f"{KEYS[path].names[0]}={text!r}" for path, text in self.given.items())
        return f"Stage({', '.join(given)})"

    def __getstate__(self) -> dict[str, Any]:
        # A read-only view cannot be pickled; workers get the content and put the view back.
        return {k: dict(v) if isinstance(v, MappingProxyType) else v for k, v in vars(self).items()}

    def __setstate__(self, state: dict[str, Any]) -> None:
        for attribute, content in state.items():
            object.__setattr__(self, attribute, MappingProxyType(content) if isinstance(content, dict) else content)

    @classmethod
    def read(cls, path: str | os.PathLike[str]) -> Stage:
        """Stage of a file.

        Parameters
        ----------
        path : path
            Stage file in TOML, UTF-8, at most 1 MB; paths in it are relative to its folder.

        Returns
        -------
        Stage
            The stage; without a name of its own it has that of the file.

        Raises
        ------
        RestpointError
            If the file cannot be read, or what it says is wrong.
        """
        file = Path(path)
        name = file.stem if file.stem.isprintable() else "stage"
        return cls.from_keys({"name": name} | read_toml(file), file.parent)

    @classmethod
    def from_keys(cls, keys: Mapping[str, Given], folder: str | os.PathLike[str] = ".") -> Stage:
        """Stage of dotted keys, as a stage file has them.

        Parameters
        ----------
        keys : mapping of str to str, float, Spread, Interval, Target, path or sequence
            Path of a key, as in "supply.vcc", to its text or value in SI units.
        folder : path
            Folder that paths in the values are relative to.

        Returns
        -------
        Stage
            The stage.

        Raises
        ------
        RestpointError
            If a key is unknown or its value wrong.
        """
        for path in keys:
            if path not in KEYS:
                raise unknown_key(path)
        return cls(folder=folder, **{KEYS[path].flat: value for path, value in keys.items()})

    @property
    def vce(self) -> Target | None:
        """Target of VCE with its window [V], None where another voltage or none has the target."""
        return self.voltages.get("vce")

    def replace(self, **flat: Given) -> Stage:
        """The stage with some keys given anew; what was assumed is assumed again.

        Parameters
        ----------
        **flat : str, float, Spread, Interval, Target, path, sequence or None
            As for `Stage`; None takes a key back. A series takes the place of a stock list and the reverse; a type does
            not take the place of figures that were given, such as hfe.

        Returns
        -------
        Stage
            Another stage.

        Raises
        ------
        RestpointError
            If a value is wrong or contradicts another.
        """
        return self.with_keys({_path_of(name): value for name, value in flat.items()})

    def with_keys(self, keys: Mapping[str, Given]) -> Stage:
        """The stage with some dotted keys given anew, as `replace` does it for short names.

        Parameters
        ----------
        keys : mapping of str to str, float, Spread, Interval, Target, path, sequence or None
            Path of a key, as in "supply.vcc", to its text or value in SI units.

        Returns
        -------
        Stage
            Another stage.

        Raises
        ------
        RestpointError
            If a key is unknown, or a value is wrong or contradicts another.
        """
        kept: dict[str, Given] = dict(self.given)
        for path, value in keys.items():
            other = rival(path)
            if other is not None and value is not None and other not in keys:
                kept.pop(other, None)
        return Stage.from_keys(kept | dict(keys), self.folder)

    def role(self, name: str) -> RoleSetting:
        """What the resistor of one role may be.

        Parameters
        ----------
        name : str
            A role of one of the networks.

        Returns
        -------
        RoleSetting
            Its setting.

        Raises
        ------
        StageError
            If none of the networks has the role.
        """
        if name not in self.roles:
            raise no_role("role", name, self.networks)
        return self.roles[name]

    def value_list(self, role: str, values: Sequence[float] = ()) -> ValueList:
        """Values that a role may have.

        Parameters
        ----------
        role : str
            A role of one of the networks.
        values : sequence of float
            Values to take in place of those that the stage allows, such as the ones fitted [ohm].

        Returns
        -------
        ValueList
            The values with their bands; the range does not bind values that are named one by one.

        Raises
        ------
        StageError
            If none of the networks has the role, or no value lies in its range.
        """
        setting = self.role(role)
        named = tuple(values) or setting.values
        stock = self._stock.get(role)
        if named:
            return _named_values(named, setting, stock)
        low, high = setting.range.low, setting.range.high
        if stock is not None:
            inside = (stock.values >= low) & (stock.values <= high)
            if inside.any():
                return stock.select(inside)
            source = f"the stock list {str(setting.stock)!r}"
            ends = {float(min(stock.values, key=lambda v: abs(math.log(v / end)))) for end in (low, high)}
        else:
            try:
                return ValueList.from_series(setting.series, low, high, *band(setting))
            except RestpointError:
                source = " and ".join(setting.series)
                ends = {nearest_value(end, setting.series) for end in (low, high)}
        raise StageError(
            f"resistors.{role}.range",
            f"{format_resistance(low)} : {format_resistance(high)}",
            f"which holds no value of {source}",
            "a range with at least one",
            sorted(map(format_resistance, ends)),
        )

    def roles_used(self, network: str) -> tuple[tuple[str, ...], ...]:
        """Sets of roles to search in a network.

        Parameters
        ----------
        network : str
            One of `networks`.

        Returns
        -------
        tuple of tuple of str
            Each in the network's order; with the optional roles, without them, or both ways.
        """
        sets: list[tuple[str, ...]] = [()]
        form = NETWORKS[network]
        for role in form.roles:
            use = self.role(role.name).use if form.optional(role, self.reference is not None) else "yes"
            used = [(*names, role.name) for names in sets] if use != "no" else []
            sets = used + (sets if use != "yes" else [])
        return tuple(sets)

    @property
    def limits_given(self) -> frozenset[str]:
        """Names of the limits that were given rather than taken by default."""
        return frozenset(name for name in self.limits if f"limits.{name}" in self.given)

    def to_toml(self, folder: str | os.PathLike[str] | None = None) -> str:
        """The request as a stage file, with every assumed value spelled out.

        Parameters
        ----------
        folder : path, optional
            Folder that the file will lie in; the stage's own when not given.

        Returns
        -------
        str
            A file that reads back to an equal stage.
        """
        lines = {"name": f"name = {toml_literal('name', self.name)}"}
        for path, text in self.given.items():
            if KEYS[path].leaf == "stock" and folder is not None and not Path(text).is_absolute():
                text = Path(os.path.relpath(self.folder / text, folder)).as_posix()
            lines[path] = f"{KEYS[path].leaf} = {toml_literal(path, text)}"
        for assumption in self.assumed:
            if assumption.key not in lines:
                key = KEYS[assumption.key]
                # For reading an assumed limit is rounded; in a file it has to be the same number.
                text = key.write(self.limits[key.leaf]) if key.table == "limits" else assumption.value
                line = f"{key.leaf} = {toml_literal(key.path, text)}"
                mark = "" if self._can_be_given(assumption) else "#"
                lines[assumption.key] = f"{mark}{line}  # assumed: {assumption.why}"
        return stage_file(["A stage of restpoint; every value that was assumed is spelled out and marked."], lines)

    def _can_be_given(self, assumption: Assumption) -> bool:
        """Whether the stage stays the same once the assumed text is given."""
        if assumption.key == "signal.unbypassed":
            # A range that is chosen from is no value.
            return False
        if assumption.why.startswith("rating "):
            # Given, the power would hold at 25 °C ambient whatever the type says.
            return False
        if assumption.key in ("transistor.hfe", "transistor.vce_sat"):
            # Where they come of rows, the rows are given.
            return not any(note.key == f"{assumption.key}_rows" for note in self.assumed) and (
                f"{assumption.key}_rows" not in self.given
            )
        if assumption.key == "limits.collector_share":
            # Given, it would bind the networks too whose default is no share at all.
            return all(NETWORKS[name].shared_rails for name in self.networks)
        if assumption.key == "limits.base_resistance":
            return all(NETWORKS[name].takes_signal for name in self.networks)
        if assumption.key == "limits.bleeder_current":
            return self.reference is None and any(NETWORKS[name].bleeder for name in self.networks)
        role = KEYS[assumption.key].table.rpartition(".")[2]
        return assumption.value != "no" or not needing(role, self.networks, self.reference is not None)

    def as_dict(self) -> dict[str, Any]:
        """The stage as plain data for JSON.

        Returns
        -------
        dict
            Tables and keys as in the stage file; numbers in SI units, a spread or target as [low, nominal, high], a
            limit as [low, high], None where a side is open or a thing absent.
        """
        t = self.transistor
        return {
            "name": self.name,
            "network": list(self.networks),
            "supply": {rail: _plain(spread) for rail, spread in self.rails.items()} | {"ground": self.ground},
            "target": {"ic": _plain(self.ic), **{quantity: _plain(t) for quantity, t in self.voltages.items()}},
            "transistor": {f.name: _plain(getattr(t, f.name)) for f in dataclasses.fields(t)},
            "reference": self.reference and {f: _plain(v) for f, v in vars(self.reference).items()},
            "ratings": {f: _plain(v) for f, v in vars(self.ratings).items()},
            "derating": self.derating.name,
            "signal": {f: _plain(v) for f, v in vars(self.signal).items()} | {"corner": self.corner},
            "resistors": {
                role: {f.name: _plain(getattr(setting, f.name)) for f in dataclasses.fields(setting)}
                for role, setting in self.roles.items()
            },
            "on_board": list(self.on_board),
            "ambient": {"temperature": _plain(self.temperature)},
            "limits": {name: _plain(interval) for name, interval in self.limits.items()},
            "values": dict(self.values),
            "distribution": {
                "units": self.lot.units,
                "seed": self.lot.seed,
                "points": self.lot.points,
                **{name: law.values or law.shape for name, law in self.lot.laws.items()},
            },
            "measured": {name: _plain(spread) for name, spread in self.measured.items()},
            "replacement": {leaf: _plain(value) for leaf, value in self.replacement.items()},
        }


def _plain(value: Any) -> Any:
    if isinstance(value, Spread | Target):
        return [_plain(end) for end in (value.low, value.nominal, value.high)]
    if isinstance(value, Interval):
        return [_plain(value.low), _plain(value.high)]
    if isinstance(value, GainRows):
        return {f.name: _plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    if isinstance(value, Path):
        return value.as_posix()
    return None if isinstance(value, float) and not math.isfinite(value) else value


# --- Names --------------------------------------------------------------------------------------------------------


def _path_of(name: str) -> str:
    if name not in NAMES:
        paths = nearest(name, NAMES)
        raise StageError("stage", name, "which is no key of a stage", "a key of the stage file", paths)
    return NAMES[name]


# --- Value lists --------------------------------------------------------------------------------------------------


def _named_values(values: Sequence[float], setting: RoleSetting, stock: ValueList | None) -> ValueList:
    """Values named one by one; one that lies in stock has the tolerance and coefficient of its row."""
    nominal = np.array(values)
    bands = [np.full(nominal.shape, figure) for figure in band(setting)]
    if stock is not None:
        row = np.minimum(np.searchsorted(stock.values, nominal), len(stock) - 1)
        found = stock.values[row] == nominal
        for figures, own in zip(bands, (stock.tolerance_low, stock.tcr), strict=False):
            figures[found] = own[row[found]]
    return ValueList.from_values(nominal, *bands)
