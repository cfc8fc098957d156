"""What the resistor of each role may be: series or stock, band, style, range; the values fitted today."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from synth import catalogue
from synth.networks import NETWORKS
from synth.preferred import ValueList
from synth.preferred.pairs import read_parts
from synth.quantities import Interval, RestpointError, Spread, Target, format_exact, format_quantity, format_resistance
from synth.stage_keys import KEYS, ROLES, StageError, nearest
from synth.stage_resolve.request import Request
from synth.transistor import T0

LARGEST_TOLERANCE = 0.5
"""Largest tolerance and change over life that is read [-]."""

Use = Literal["yes", "no", "either"]
Pairing = Literal["no", "yes", "series", "parallel"]


@dataclass(frozen=True, kw_only=True)
class RoleSetting:
    """What the resistor of one role may be.

    Parameters
    ----------
    use : {"yes", "no", "either"}
        Whether the role is used where a network can do without it.
    series : tuple of str
        Series of preferred values; empty where a stock list replaces them.
    stock : Path or None
        Stock list.
    tolerance, life : float
        Tolerance and change over life, plus and minus [-].
    tcr : Spread
        Temperature coefficient [1/K].
    style : str or None
        Resistor style.
    range : Interval
        Range of values that a search may take, both ends finite [ohm].
    values : tuple of float
        Only values that the role may have [ohm]; empty for any.
    pairs : {"no", "yes", "series", "parallel"}
        Which pairs may take the place of one part.
    """

    use: Use
    series: tuple[str, ...]
    stock: Path | None
    tolerance: float
    tcr: Spread
    life: float
    style: str | None
    range: Interval
    values: tuple[float, ...]
    pairs: Pairing


def rival(path: str) -> str | None:
    """The key that cannot be given beside this one.

    Parameters
    ----------
    path : str
        Dotted path of a key.

    Returns
    -------
    str or None
        The other's path, None if there is no such key.
    """
    table, _, leaf = path.rpartition(".")
    pairs = [("hfe", "hfe_rows"), ("vce_sat", "vce_sat_rows")] if table == "transistor" else [("series", "stock")]
    other = next((one if leaf == two else two for one, two in pairs if leaf in (one, two)), None)
    return f"{table}.{other}" if other else None


def no_role(name: str, role: str, networks: Sequence[str]) -> StageError:
    """The error that says that no network has a role.

    Parameters
    ----------
    name : str
        Field in which the role was named.
    role : str
        The role.
    networks : sequence of str
        Networks chosen.

    Returns
    -------
    StageError
        To be raised.
    """
    roles = dict.fromkeys(known for network in networks for known in NETWORKS[network].role_names)
    reason = f"which is no role of {' or '.join(networks)}"
    return StageError(name, role, reason, f"one of {', '.join(roles)}", nearest(role, roles))


def needing(role: str, networks: Sequence[str], has_reference: bool) -> list[str]:
    """Networks that have a role and cannot do without it.

    Parameters
    ----------
    role : str
        Name of a role.
    networks : sequence of str
        Where to look.
    has_reference : bool
        Whether a reference element is given.

    Returns
    -------
    list of str
        Their names.
    """
    forms = {name: NETWORKS[name] for name in networks}
    return [
        name
        for name, form in forms.items()
        if any(part.name == role and not form.optional(part, has_reference) for part in form.roles)
    ]


def band(setting: RoleSetting) -> tuple[float, float, float]:
    """Band of a resistor as three figures.

    Parameters
    ----------
    setting : RoleSetting
        What it may be.

    Returns
    -------
    tuple of float
        Tolerance [-], largest temperature coefficient of either sign [1/K] and change over life [-].
    """
    return setting.tolerance, max(abs(setting.tcr.low), abs(setting.tcr.high)), setting.life


def read_roles(request: Request, networks: Sequence[str], any_network: bool, temperature: Spread) -> dict[str, RoleSetting]:
    """What the resistor of each role may be."""
    common = _resistor(request, "", None)
    roles = {name for network in networks for name in NETWORKS[network].role_names}
    settings = {}
    for role in filter(roles.__contains__, ROLES):
        values: tuple[float, ...] = request.value(f"resistors.{role}.values") or ()
        if f"measured.{role}" in request.given:
            # The one that was measured is the one that is there.
            values = (request.value(f"measured.{role}").nominal,)
        elif values and min(values) <= 0.0:
            raise request.refusal(f"resistors.{role}.values", "which goes down to 0 ohm", "resistances above 0 ohm")
        forms = [(NETWORKS[name], part) for name in networks for part in NETWORKS[name].roles if part.name == role]
        optional = any(form.optional(part, request.has_reference) for form, part in forms)
        use: Use = _use(request, role, bool(values), any_network) if optional else "yes"
        setting: RoleSetting = dataclasses.replace(_resistor(request, role, common), use=use, values=values)
        rise = max(abs(temperature.low - T0), abs(temperature.high - T0))
        tolerance, tcr, life = band(setting)
        if tolerance + life + tcr * rise >= 1.0:
            raise request.refusal(
                _source(request, role, "tcr") or "resistors.tcr",
                f"which with tolerance and life takes {role} down to 0 ohm over the temperatures",
                "a band of less than 100 % in all",
            )
        settings[role] = setting
    return settings


def check_drops(
    request: Request,
    networks: Sequence[str],
    ic: Target,
    voltages: Mapping[str, Target],
    rails: Mapping[str, Spread],
    roles: Mapping[str, RoleSetting],
) -> None:
    """Refuse values of rc and re that leave less than the least VCE at the least current, in every network."""
    current, vce = _least_wanted(ic), _least_wanted(voltages.get("vce", Target(0.0, 0.0, 0.0)))
    excess = {}
    for name in networks:
        network = NETWORKS[name]
        span = sum(rails[rail].high for rail in network.rails)
        named = {r: min(roles[r].values) for r in ("rc", "re") if r in network.role_names and r in roles and roles[r].values}
        drop = current * sum(named.values())
        if not named or vce + drop < span:
            return
        excess[max(named, key=lambda role: named[role])] = (drop, span)
    role, (drop, span) = next(iter(excess.items()))
    of = " and ".join(r for r in ("rc", "re") if r in roles and roles[r].values)
    texts = [format_quantity(voltage, "voltage") for voltage in (drop, vce, span)]
    at = format_quantity(current, "current")
    reason = f"with which {of} would drop {texts[0]} at only {at}, with VCE of {texts[1]} not below the supply of {texts[2]}"
    most = format_resistance(float(f"{(span - vce) / current:.3g}"))
    raise request.refusal(f"resistors.{role}.values", reason, f"less than {most} for {of} together, or a higher supply")


def _least_wanted(target: Target) -> float:
    """Lower end of a window; without a window half the target, since a Q-point that misses half of it is none."""
    return target.low if target.low > -math.inf else 0.5 * (target.nominal or 0.0)


def read_fitted(request: Request) -> dict[str, float]:
    """Values fitted today by role [ohm]."""
    values = {role: request.value(f"values.{role}") for role in ROLES if f"values.{role}" in request.given}
    for role, ohm in values.items():
        if ohm <= 0.0:
            raise request.refusal(f"values.{role}", "which is no resistor", "a resistance above 0 ohm")
    return values


def read_fitted_pairs(request: Request, split: bool) -> dict[str, tuple[int, tuple[float, ...]]]:
    """The pairs among them: how they are joined, and their parts [ohm]; those of a split re with the upper one first."""
    paths = {role: f"values.{role}" for role in ROLES if f"values.{role}" in request.given}
    found = {role: read_parts(request.given[path], path, as_written=split and role == "re") for role, path in paths.items()}
    return {role: made for role, made in found.items() if len(made[1]) > 1}


def read_on_board(request: Request) -> tuple[float, ...]:
    """Values that the board has already, ascending [ohm]."""
    values: tuple[float, ...] = request.value("resistors.on_board") or ()
    if values and min(values) <= 0.0:
        raise request.refusal("resistors.on_board", "which goes down to 0 ohm", "resistances above 0 ohm")
    return tuple(sorted(set(values)))


def read_stock(request: Request, roles: Mapping[str, RoleSetting]) -> dict[str, ValueList]:
    """The whole stock list of each role that has one; a list that roles share is read once."""
    read: dict[tuple[Path, float, float, float], ValueList] = {}
    lists = {}
    for role, setting in roles.items():
        if setting.stock is not None:
            tolerance, tcr, life = figures = band(setting)
            if (key := (setting.stock, *figures)) not in read:
                read[key] = ValueList.from_stock(setting.stock, tolerance=tolerance, tcr=tcr, life=life)
            lists[role] = read[key]
    return lists


def _use(request: Request, role: str, has_values: bool, any_network: bool) -> Any:
    if role == "re" and "target.ve" in request.given:
        use = request.take("resistors.re.use", "yes", "target.ve is given")
        if use != "yes":
            raise request.refusal("resistors.re.use", "but target.ve is the drop of re", "yes, or a target.vce", "yes")
        return use
    if has_values:
        return request.take(f"resistors.{role}.use", "yes", "its values are given")
    if any_network:
        return request.take(f"resistors.{role}.use", "either", "any network was asked for")
    return request.take(f"resistors.{role}.use", "no")


def _source(request: Request, role: str, leaf: str) -> str:
    """Path of the key that sets something for a role: its own, else the common one; "" where neither is given."""
    for table in (f"resistors.{role}", "resistors") if role else ("resistors",):
        path = f"{table}.{leaf}"
        if path in request.given:
            return path
        if rival(path) in request.given:
            return ""
    return ""


def _resistor(request: Request, role: str, common: RoleSetting | None) -> RoleSetting:
    """What ``[resistors]`` says, for one role or (role "") for all; `common` is what it says for all."""
    table = f"resistors.{role}" if role else "resistors"

    def setting(leaf: str) -> Any:
        if path := _source(request, role, leaf):
            return request.value(path)
        return request.take(f"{table}.{leaf}") if common is None else getattr(common, leaf)

    def inferred(leaf: str, value: Any, why: str) -> Any:
        # A role takes over what was inferred for all: listed once.
        is_known = common is not None and getattr(common, leaf) == value
        return value if is_known else request.assume(f"{table}.{leaf}", value, why)

    if f"{table}.series" in request.given and f"{table}.stock" in request.given:
        raise request.refusal(f"{table}.stock", f"but {table}.series is given too", "one of the two")
    series: tuple[str, ...] = request.value(_source(request, role, "series")) or ()
    stock: str | None = request.value(_source(request, role, "stock"))
    tolerance: float | None = request.value(path := _source(request, role, "tolerance"))
    if tolerance is None and series:
        coarsest = max(series, key=catalogue.series_tolerance)
        tolerance = inferred("tolerance", catalogue.series_tolerance(coarsest), f"goes with {coarsest}")
    elif tolerance is None:
        tolerance = inferred("tolerance", 0.01, "not given")
    elif not 0.0 < tolerance <= LARGEST_TOLERANCE:
        raise request.refusal(path, "which is out of range", "above 0 % and up to 50 %", "1 %")
    if not series and stock is None:
        why = f"goes with a tolerance of {format_exact(tolerance, 'ratio')}" if path else "not given"
        series = inferred("series", (catalogue.tolerance_series(tolerance),), why)
    life: float = setting("life")
    if not 0.0 <= life <= LARGEST_TOLERANCE:
        raise request.refusal(_source(request, role, "life"), "which is out of range", "0 % to 50 %", "0 %")
    return RoleSetting(
        use="yes",
        series=series,
        stock=None if stock is None else request.folder / stock,
        tolerance=tolerance,
        tcr=setting("tcr"),
        life=life,
        style=_style(request, _source(request, role, "style")),
        range=_range(request, setting("range"), _source(request, role, "range")),
        values=(),
        pairs=request.value(_source(request, role, "pairs")) or "no",
    )


def _style(request: Request, path: str) -> str | None:
    if not path:
        return None
    known = catalogue.resistor_styles()
    try:
        return catalogue.resistor_style(request.value(path)).name
    except RestpointError:
        near = nearest(request.given[path], known)
        raise request.refusal(path, "which is unknown", "a row of the table of resistor styles", *near) from None


def _range(request: Request, given: Interval, path: str) -> Interval:
    """The range with its open ends closed."""
    usual: Interval = KEYS["resistors.range"].read(KEYS["resistors.range"].default)
    low = given.low if given.low > -math.inf else usual.low
    high = given.high if given.high < math.inf else usual.high
    if not 0.0 < low <= high:
        closed = f"{format_resistance(low)} : {format_resistance(high)}"
        reason = f"which with its open end closed is {closed}" if low > high else "which goes down to 0 ohm"
        raise request.refusal(path, reason, "low : high, above 0 ohm", KEYS["resistors.range"].default)
    return Interval(low, high)
