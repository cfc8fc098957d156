"""What a part may carry and how hot it gets: power, voltage, current and junction temperature under a derating policy.

All formulas broadcast. A policy never grants more than the part's maker: its share is taken of what the part may carry at
that temperature.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth.catalogue import Derating, ResistorStyle, TransistorRow, resistor_styles
from synth.quantities import RestpointError

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

SETTLED, RUNAWAY, UNDEFINED = 0, 1, 2
JUNCTION_STATES = ("settled", "runaway", "undefined")
"""Names of the states of a junction, in the order of their codes."""

# Equality passes; power and voltage come from a solved Q-point with rounding errors of this order at most.
_ROUNDING = 1e-12


class StressError(RestpointError):
    """A rating or a question about stress that contradicts itself."""


# --- Resistors --------------------------------------------------------------------------------------------------------


def _ramp(temperature: Array | float, full: float, zero: float) -> Array:
    """Share of power on a derating line: 1 up to `full`, 0 from `zero` on."""
    return np.clip((zero - np.asarray(temperature, dtype=float)) / (zero - full), 0.0, 1.0)


def allowed_power(style: ResistorStyle, ambient: Array | float, policy: Derating) -> Array:
    """Power that a resistor may dissipate.

    Parameters
    ----------
    style : ResistorStyle
        The style; its conservative rating counts.
    ambient : array_like
        Ambient temperature [K], broadcast.
    policy : Derating
        The policy.

    Returns
    -------
    ndarray
        Power [W].

    Notes
    -----
    D·Pr·(Tz − T)/(Tz − Tf) between the end Tf of full power and the temperature Tz of none, D·Pr below, 0 above. A policy
    with a line of its own does not lift that of the style: the lower of both holds at every temperature.

    References
    ----------
    Makers' data sheets of film resistors: full power to 70 °C, linear to zero at 155 °C (125 °C for some small chips).
    """
    share = _ramp(ambient, style.rated_temperature_k, style.zero_power_temperature_k)
    own = policy.resistor_temperatures(style)
    if own is not None:
        share = np.minimum(share, _ramp(ambient, *own))
    return np.asarray(policy.resistor_power * style.power_w_conservative * share)


def allowed_voltage(style: ResistorStyle, resistance: Array | float, policy: Derating) -> Array:
    """Continuous voltage that a resistor may have across it.

    Parameters
    ----------
    style : ResistorStyle
        The style.
    resistance : array_like
        Nominal resistance [ohm], broadcast.
    policy : Derating
        The policy.

    Returns
    -------
    ndarray
        Voltage [V].

    Notes
    -----
    The lower of √(D·Pr·R) and the policy's share of the style's working voltage. Pr is the rated power at full-power
    temperature: what heat takes off is judged as power.

    References
    ----------
    MIL-PRF-39005: rated voltage √(P·R), never above the style's limit. A US Navy chapter on parts derating: √(D·P·R).
    """
    rated = policy.resistor_power * style.power_w_conservative
    return np.minimum(policy.resistor_voltage * style.max_working_voltage_v, np.sqrt(rated * np.asarray(resistance)))


def critical_resistance(style: ResistorStyle, policy: Derating) -> float:
    """Resistance above which the voltage limit rules instead of power.

    Parameters
    ----------
    style : ResistorStyle
        The style.
    policy : Derating
        The policy.

    Returns
    -------
    float
        Resistance [ohm].

    Notes
    -----
    Vmax²/P, both as far as the policy lets them be used, up to the full-power temperature.
    """
    voltage = policy.resistor_voltage * style.max_working_voltage_v
    return voltage**2 / (policy.resistor_power * style.power_w_conservative)


def _used(stress: Array | float, allowed: Array) -> Array:
    stress, allowed = np.broadcast_arrays(np.asarray(stress, dtype=float), allowed)
    nothing_allowed = np.where(stress > 0, np.inf, 0.0)
    return np.divide(stress, allowed, out=nothing_allowed, where=allowed > 0)


def power_used(style: ResistorStyle, power: Array | float, ambient: Array | float, policy: Derating) -> Array:
    """Share of the allowed power that a resistor uses.

    Parameters
    ----------
    style : ResistorStyle
        The style.
    power : array_like
        Dissipated power [W], broadcast.
    ambient : array_like
        Ambient temperature [K], broadcast.
    policy : Derating
        The policy.

    Returns
    -------
    ndarray
        Share [-], up to 1 is allowed; infinite where any power is too much.
    """
    return _used(power, allowed_power(style, ambient, policy))


def voltage_used(style: ResistorStyle, voltage: Array | float, resistance: Array | float, policy: Derating) -> Array:
    """Share of the allowed voltage that a resistor uses.

    Parameters
    ----------
    style : ResistorStyle
        The style.
    voltage : array_like
        Magnitude of the voltage across it [V], broadcast.
    resistance : array_like
        Nominal resistance [ohm], broadcast.
    policy : Derating
        The policy.

    Returns
    -------
    ndarray
        Share [-], up to 1 is allowed.
    """
    return _used(voltage, allowed_voltage(style, resistance, policy))


def carries(
    style: ResistorStyle,
    power: Array | float,
    voltage: Array | float,
    resistance: Array | float,
    ambient: Array | float,
    policy: Derating,
) -> Flags:
    """Whether a resistor carries a power and a voltage.

    Parameters
    ----------
    style : ResistorStyle
        The style.
    power, voltage : array_like
        Dissipated power [W] and magnitude of the voltage [V], broadcast.
    resistance : array_like
        Nominal resistance [ohm], broadcast; whether the style is made at it does not matter here.
    ambient : array_like
        Ambient temperature [K], broadcast.
    policy : Derating
        The policy.

    Returns
    -------
    ndarray of bool
        True where neither share is above 1, but for rounding.
    """
    used = np.maximum(power_used(style, power, ambient, policy), voltage_used(style, voltage, resistance, policy))
    return np.asarray(used <= 1.0 + _ROUNDING)


def _is_made(style: ResistorStyle, resistance: Array | float) -> Flags:
    r = np.asarray(resistance)
    return (style.r_min_ohm <= r * (1.0 + _ROUNDING)) & (r <= style.r_max_ohm * (1.0 + _ROUNDING))


def _size(style: ResistorStyle) -> tuple[float, float]:
    """Rated power and area of the body, which its code tells: chips in 0.01 inch, axial parts in millimetres."""
    one, other = int(style.size_code[:2]), int(style.size_code[2:4])
    unit = 0.254e-3 if style.style == "chip" else 1e-3
    return style.power_w_conservative, one * other * unit**2


def smallest_style(
    power: Array | float,
    voltage: Array | float,
    resistance: Array | float,
    ambient: Array | float,
    policy: Derating,
    among: Iterable[ResistorStyle] | None = None,
) -> ResistorStyle | None:
    """The smallest style that carries a power and a voltage.

    Parameters
    ----------
    power, voltage : array_like
        Dissipated power [W] and magnitude of the voltage [V], broadcast; each element is a corner to be carried.
    resistance : array_like
        Nominal resistance [ohm], broadcast; the style must be made at it.
    ambient : array_like
        Ambient temperature [K], broadcast.
    policy : Derating
        The policy.
    among : iterable of ResistorStyle, optional
        Styles to choose from; by default the whole table.

    Returns
    -------
    ResistorStyle or None
        Of the styles that carry every corner the one of least rated power, then of smallest body, then the first; None
        where none does.
    """
    styles = resistor_styles().values() if among is None else among
    fit = [
        style
        for style in styles
        if np.all(carries(style, power, voltage, resistance, ambient, policy)) and np.all(_is_made(style, resistance))
    ]
    return min(fit, key=_size, default=None)


def string_length(
    style: ResistorStyle,
    power: Array | float,
    voltage: Array | float,
    resistance: Array | float,
    ambient: Array | float,
    policy: Derating,
    *,
    band: float = 0.0,
    most: int = 10,
) -> int | None:
    """How many equal resistors in series carry a power and a voltage together.

    Parameters
    ----------
    style : ResistorStyle
        Style of each.
    power, voltage : array_like
        Power [W] and magnitude of the voltage [V] of the whole string, broadcast; each element is a corner to be carried.
    resistance : array_like
        Nominal resistance of the whole string [ohm], broadcast; the style must be made at each one's part of it.
    ambient : array_like
        Ambient temperature [K], broadcast.
    policy : Derating
        The policy.
    band : float
        How far each resistance may lie off nominal [-], 0 or more and below 1.
    most : int
        Longest string to consider [-].

    Returns
    -------
    int or None
        The least number [-] that does, 1 where a single one does; None where not even `most` do.

    Raises
    ------
    StressError
        If the band is outside its range.

    Notes
    -----
    One current flows through all, so the largest of n takes (1 + b)/((1 + b) + (n − 1)(1 − b)) of power and voltage when
    the others are the smallest that the band b allows; 1/n without a band.
    """
    if not 0.0 <= band < 1.0:
        raise StressError(f"band: read {band:g}, accepted is a fraction from 0 to below 1")
    for n in range(1, most + 1):
        share = (1.0 + band) / ((1.0 + band) + (n - 1) * (1.0 - band))
        each = np.asarray(resistance) / n
        fits = carries(style, np.asarray(power) * share, np.asarray(voltage) * share, each, ambient, policy)
        if np.all(fits) and np.all(_is_made(style, each)):
            return n
    return None


def temperature_rise(style: ResistorStyle, power: Array | float) -> Array:
    """How much warmer than the ambient a resistor's film gets.

    Parameters
    ----------
    style : ResistorStyle
        The style.
    power : array_like
        Dissipated power [W], broadcast.

    Returns
    -------
    ndarray
        Rise [K].

    Notes
    -----
    P/Pr·(Tz − Tf): the derating line is the locus on which the film is at Tz, the highest temperature that it may have, so
    it tells the thermal resistance, (Tz − Tf)/Pr. The board is that of the maker's test.
    """
    return np.asarray(power) * ((style.zero_power_temperature_k - style.rated_temperature_k) / style.power_w_conservative)


# --- Transistors ------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, kw_only=True)
class TransistorRatings:
    """What a transistor may carry; None stands for a figure that is not known.

    Parameters
    ----------
    vceo : float or None
        Largest collector-emitter voltage with the base open [V].
    vebo : float or None
        Largest reverse voltage of the emitter against the base [V].
    ic_max : float or None
        Largest collector current [A].
    ptot : float or None
        Largest total power at any temperature [W].
    ptot_ambient : float or None
        Ambient temperature up to which `ptot` holds [K]; None where it holds at the case or mounting base and so says
        nothing about a given ambient.
    rth_ja : float or None
        Thermal resistance from junction to ambient [K/W].
    tj_max : float or None
        Largest junction temperature [K].

    Raises
    ------
    StressError
        If a rating is not above 0, or the power holds up to the largest junction temperature.
    """

    vceo: float | None = None
    vebo: float | None = None
    ic_max: float | None = None
    ptot: float | None = None
    ptot_ambient: float | None = None
    rth_ja: float | None = None
    tj_max: float | None = None

    def __post_init__(self) -> None:
        for name, figure in vars(self).items():
            if figure is not None and not figure > 0:
                raise StressError(f"{name}: read {figure:g}, accepted is a rating above 0")
        if self.ptot_ambient is not None and self.tj_max is not None and self.ptot_ambient >= self.tj_max:
            raise StressError(
                f"ptot_ambient: read {self.ptot_ambient:g} K, accepted is a temperature below the largest junction"
                f" temperature of {self.tj_max:g} K"
            )

    @property
    def thermal_resistance(self) -> float | None:
        """Thermal resistance from junction to ambient, else what the power at an ambient temperature implies [K/W]."""
        if self.rth_ja is not None:
            return self.rth_ja
        if self.ptot is None or self.ptot_ambient is None or self.tj_max is None:
            return None
        return (self.tj_max - self.ptot_ambient) / self.ptot


def transistor_ratings(row: TransistorRow, rth_ja: float | None = None) -> TransistorRatings:
    """Ratings of a row of the table, as mounted.

    Parameters
    ----------
    row : TransistorRow
        The type.
    rth_ja : float, optional
        Thermal resistance from junction to ambient of this very mounting [K/W]; by default that of the row.

    Returns
    -------
    TransistorRatings
        Its ratings.

    Notes
    -----
    Power is that at an ambient temperature, where the row prints one. A mounting that cools better than the row's own may
    go up to the largest power printed, that at the case: it stays a ceiling, for the case is not at the ambient temperature.
    """
    printed = [(row.ptot_w, row.ptot_ref, row.ptot_ref_k), (row.ptot2_w, row.ptot2_ref, row.ptot2_ref_k)]
    known = [(power, held, at) for power, held, at in printed if power is not None]
    in_air = [(power, at) for power, held, at in known if held == "ambient"]
    cooled = rth_ja is not None and (row.rth_ja_k_w is None or rth_ja < row.rth_ja_k_w)
    ptot, ptot_ambient = max(in_air, default=(0.0, None), key=lambda rating: rating[0])
    if cooled or not in_air:
        ceiling = max(power for power, _, _ in known)
        if ceiling > ptot:
            ptot, ptot_ambient = ceiling, None
    return TransistorRatings(
        vceo=row.vceo_v,
        ic_max=row.ic_max_a,
        ptot=ptot,
        ptot_ambient=ptot_ambient,
        rth_ja=row.rth_ja_k_w if rth_ja is None else rth_ja,
        tj_max=row.tj_max_k,
    )


def allowed_vce(ratings: TransistorRatings, policy: Derating) -> float | None:
    """Voltage that the collector may have against the emitter; in cut-off that is the whole rail.

    Parameters
    ----------
    ratings : TransistorRatings
        The transistor.
    policy : Derating
        The policy.

    Returns
    -------
    float or None
        Voltage [V]; None where VCEO is not known.
    """
    return None if ratings.vceo is None else policy.transistor_voltage * ratings.vceo


def allowed_veb(ratings: TransistorRatings, policy: Derating) -> float | None:
    """Reverse voltage that the emitter may have against the base.

    Parameters
    ----------
    ratings : TransistorRatings
        The transistor.
    policy : Derating
        The policy.

    Returns
    -------
    float or None
        Voltage [V]; None where VEBO is not known.
    """
    return None if ratings.vebo is None else policy.transistor_voltage * ratings.vebo


def allowed_ic(ratings: TransistorRatings, policy: Derating) -> float | None:
    """Collector current that the transistor may carry.

    Parameters
    ----------
    ratings : TransistorRatings
        The transistor.
    policy : Derating
        The policy.

    Returns
    -------
    float or None
        Current [A]; None where its largest is not known.
    """
    return None if ratings.ic_max is None else policy.transistor_current * ratings.ic_max


def junction_limit(ratings: TransistorRatings, policy: Derating) -> float | None:
    """Temperature that the junction may have.

    Parameters
    ----------
    ratings : TransistorRatings
        The transistor.
    policy : Derating
        The policy.

    Returns
    -------
    float or None
        The lower of the policy's absolute limit and its distance below TJ max [K]; None where TJ max is not known, for then
        nobody knows which is lower.
    """
    if ratings.tj_max is None:
        return None
    relative = ratings.tj_max - policy.junction_below_max_k
    return relative if policy.junction_max_k is None else min(relative, policy.junction_max_k)


def allowed_dissipation(ratings: TransistorRatings, ambient: Array | float, policy: Derating) -> Array | None:
    """Power that the transistor may dissipate.

    Parameters
    ----------
    ratings : TransistorRatings
        The transistor.
    ambient : array_like
        Ambient temperature [K], broadcast.
    policy : Derating
        The policy.

    Returns
    -------
    ndarray or None
        Power [W], 0 where the ambient leaves none; None where the ratings do not tell it: TJ max is missing, or both RthJA
        and the power at an ambient temperature are.

    Notes
    -----
    The policy's share of (TJmax − TA)/RthJA, capped at Ptot; without RthJA the line from Ptot at its ambient temperature to
    zero at TJ max, which is the same law. The junction limit of the policy counts too: no more than heats the junction to it.

    References
    ----------
    Definition of thermal resistance; data sheets draw this line.
    """
    rth, limit = ratings.thermal_resistance, junction_limit(ratings, policy)
    if rth is None or limit is None or ratings.tj_max is None:
        return None
    ta = np.asarray(ambient, dtype=float)
    rated = (ratings.tj_max - ta) / rth
    if ratings.ptot is not None:
        rated = np.minimum(rated, ratings.ptot)
    return np.maximum(np.minimum(policy.transistor_power * rated, (limit - ta) / rth), 0.0)


# --- Junction temperature ---------------------------------------------------------------------------------------------

_LONGEST_STEP, _SHORTEST_STEP = 1.0 / 8.0, 1.0 / 24.0
"""Steps of the walk relative to the way from ambient to limit [-]."""

_STRIDE = 3.0
"""A step over the imbalance where it starts [-]; up to 1 no solution can be stepped over while power does not fall."""

_RESOLUTION = 1e-14
"""Width of the last bracket relative to the temperature: above rounding, a hundredth of the promised accuracy."""

_RESIDUAL = 1e-9
"""Imbalance relative to the temperature above which power jumps across its bracket and so has no solution there."""

_GAIN_STEP = 1e-3
"""Half the step of the derivative [K]: truncation and rounding both stay near 1e-8 for laws that e-fold in 10 K."""

_PATIENCE = 60
"""Most calls of one refinement; halving alone would need 50."""

Power = Callable[[Array], Array]


@dataclass(frozen=True, kw_only=True)
class Junction:
    """Where the junctions of a batch settle.

    Parameters
    ----------
    temperature : ndarray
        Junction temperature [K]; NaN where none is.
    status : ndarray of int
        SETTLED, RUNAWAY (no solution up to the limit) or UNDEFINED (power is not a number, negative, or jumps there) [-].
    loop_gain : ndarray
        RthJA·dP/dTJ at the solution [-]; NaN where none is.
    """

    temperature: Array
    status: NDArray[np.int_]
    loop_gain: Array


def junction_temperature(power_of: Power, ambient: Array | float, rth_ja: Array | float, limit: Array | float) -> Junction:
    """The temperature at which a junction that heats itself settles, starting from the ambient.

    Parameters
    ----------
    power_of : callable
        Dissipation [W] at junction temperatures [K]; takes and returns arrays of the common shape of the other arguments.
    ambient : array_like
        Ambient temperature [K], broadcast.
    rth_ja : array_like
        Thermal resistance from junction to ambient [K/W], above 0, broadcast.
    limit : array_like
        Highest junction temperature that counts [K], broadcast.

    Returns
    -------
    Junction
        The least solution TJ ≥ TA of TJ = TA + RthJA·P(TJ) up to the limit, with a status for each element.

    Raises
    ------
    StressError
        If a thermal resistance is not above 0, or `power_of` returns another shape.

    Notes
    -----
    With g(T) = T − TA − RthJA·P(T) the junction warms up while g < 0, so it stops at the first zero of g, which is stable:
    there the loop gain is at most 1. A walk brackets it in steps of three times −g, but at least 1/24 and at most 1/8 of the
    way from ambient to limit; a maximum of g below zero on that walk is searched for a pair of zeros between the steps, so
    that a stage just short of runaway is not taken for one. Where P is convex in T, as for power that grows exponentially,
    this cannot fail, however long the steps: g is concave and has one maximum. Else turns of g narrower than a step can be
    missed. The bracket is closed to 1e-14 of the temperature; the solution is that accurate divided by (1 − loop gain).

    `power_of` is called about 10 times where a whole batch settles and 20 times where a part of it runs away; elements that
    lie within a millionth of the edge of runaway take up to 60. It sees no temperature outside ambient to limit but for
    1 mK, the step of the derivative. Where P has a kink at the solution, the loop gain is the mean of both sides.

    References
    ----------
    Condition of thermal stability RthJA·dP/dTJ < 1: textbooks on electronic circuits. Bracketing: "A new hybrid
    quadratic/bisection algorithm for finding the zero of a nonlinear function without using derivatives", Advances in
    Engineering Software 28, 1997.
    """
    ta, rth, top = (x.astype(float) for x in np.broadcast_arrays(ambient, rth_ja, limit))
    if not np.all(rth > 0):
        raise StressError(f"rth_ja: read {np.min(rth):g} K/W, accepted is a thermal resistance above 0 K/W")

    def power_at(t: Array) -> Array:
        power = np.asarray(power_of(t), dtype=float)
        if power.shape != t.shape:
            raise StressError(f"power_of: read an array of shape {power.shape}, accepted is that of its argument, {t.shape}")
        return power

    def imbalance(t: Array) -> Array:
        return np.asarray(t - ta - rth * power_at(t))

    walk = _walk(imbalance, ta, np.maximum(top, ta))
    _look_between(imbalance, walk)
    tj, residual = _close(imbalance, walk)
    settled = np.isfinite(walk.hi) & (np.abs(residual) <= _RESIDUAL * tj) & (tj <= top)
    # A limit below the ambient leaves no solution, whatever the power.
    lost = walk.undefined | (np.isfinite(walk.hi) & ~settled & (ta <= top))
    here = np.where(settled, tj, ta)
    above, below = here + _GAIN_STEP, here - _GAIN_STEP
    with np.errstate(invalid="ignore"):  # an infinite power at the ambient, where nothing settles
        gain = rth * (power_at(above) - power_at(below)) / (above - below)
    return Junction(
        temperature=np.where(settled, tj, np.nan),
        status=np.where(settled, SETTLED, np.where(lost, UNDEFINED, RUNAWAY)),
        loop_gain=np.where(settled, gain, np.nan),
    )


@dataclass
class _Walk:
    """Imbalance on the way from ambient to limit, steps along the first axis, and the bracket of the first zero (else NaN)."""

    t: Array
    g: Array
    lo: Array
    hi: Array
    g_lo: Array
    g_hi: Array
    undefined: Flags

    def bracket(self, at: Flags, lo: Array, hi: Array, g_lo: Array, g_hi: Array) -> None:
        for name, figure in (("lo", lo), ("hi", hi), ("g_lo", g_lo), ("g_hi", g_hi)):
            setattr(self, name, np.where(at, figure, getattr(self, name)))


def _walk(imbalance: Power, ambient: Array, limit: Array) -> _Walk:
    way, nowhere = limit - ambient, np.full(ambient.shape, np.nan)
    t, before, g_before = ambient, ambient, nowhere
    walk = _Walk(
        t=ambient, g=nowhere, lo=nowhere, hi=nowhere, g_lo=nowhere, g_hi=nowhere,
        undefined=np.zeros(ambient.shape, dtype=bool),
    )  # fmt: skip
    ts: list[Array] = []
    gs: list[Array] = []
    under_way = np.ones(ambient.shape, dtype=bool)
    while np.any(under_way):
        g = np.where(under_way, imbalance(np.where(under_way, t, ambient)), -np.inf)
        # Only a negative power balances below the ambient.
        walk.undefined = walk.undefined | np.isnan(g) | (g > 0 if not ts else False)
        crossed = (g >= 0) & ~walk.undefined
        walk.bracket(crossed, before if ts else t, t, g_before if ts else g, g)
        ts.append(t)
        gs.append(g)
        under_way = under_way & ~crossed & ~walk.undefined & (t < limit)
        step = np.clip(-_STRIDE * g, _SHORTEST_STEP * way, _LONGEST_STEP * way)
        # No sliver is left before the limit, where slopes would be rounding noise.
        onward = np.where(limit - t < step + 0.5 * _SHORTEST_STEP * way, limit, t + step)
        before, g_before, t = t, g, np.where(under_way, onward, t)
    walk.t, walk.g = np.stack([*ts, t]), np.stack([*gs, np.full(ambient.shape, -np.inf)])
    return walk


def _look_between(imbalance: Power, walk: _Walk) -> None:
    """Search the maxima of g below zero, in the order of the walk, for zeros that lie between its steps."""
    beyond = np.full((1, *walk.lo.shape), -np.inf)
    before, after = np.concatenate([beyond, walk.g[:-1]]), np.concatenate([walk.g[1:], beyond])
    peaks = (walk.g < 0) & (walk.g > before) & (walk.g >= after) & ~walk.undefined
    number = np.cumsum(peaks, axis=0)
    searching = np.ones(walk.lo.shape, dtype=bool)
    for n in range(1, int(np.max(number, initial=0)) + 1):
        this = peaks & (number == n)
        index = np.argmax(this, axis=0)
        searching = searching & np.any(this, axis=0)
        triple = [np.clip(index + shift, 0, len(walk.t) - 1)[np.newaxis] for shift in (-1, 0, 1)]
        ts = [np.take_along_axis(walk.t, i, axis=0)[0] for i in triple]
        gs = [np.take_along_axis(walk.g, i, axis=0)[0] for i in triple]
        searching = searching & ~_climb(imbalance, walk, searching, ts, gs)


def _climb(imbalance: Power, walk: _Walk, active: Flags, ts: list[Array], gs: list[Array]) -> Flags:
    """Climb towards a maximum of g between three temperatures until g is no longer negative; tell where it got there."""
    (a, c, b), (ga, gc, gb) = ts, gs
    reached = np.zeros(active.shape, dtype=bool)
    for turn in range(_PATIENCE):
        left, right = c - a, b - c
        nearest = np.sqrt(np.finfo(float).eps) * c  # g is flat to rounding within this distance from its maximum
        with np.errstate(divide="ignore", invalid="ignore"):  # at the ends of the walk one side has no width
            fall_left, fall_right = gc - ga, gc - gb
            vertex = c - 0.5 * (left**2 * fall_right - right**2 * fall_left) / (left * fall_right + right * fall_left)
            # A concave g lies below the chord through two of its points, drawn on beyond them.
            ceiling = gc + np.maximum(fall_right * left / right, fall_left * right / left)
        active = active & ~(ceiling < 0) & (np.maximum(left, right) > 2 * nearest)
        if not np.any(active):
            break
        wider = np.where(right > left, right, -left)
        # Now and then a golden section, since parabolas alone may close in from one side only.
        x = np.where(np.isfinite(vertex) & (turn % 3 < 2), vertex, c + 0.382 * wider)
        # At an end of the walk the first question is whether g rises inward at all.
        x = np.where(np.minimum(left, right) > 0, x, c + 1e-3 * wider)
        x = np.where(np.abs(x - c) < nearest, c + np.copysign(nearest, wider), x)
        gx = np.where(active, imbalance(np.where(active, x, c)), -np.inf)
        walk.undefined = walk.undefined | np.isnan(gx)
        there = active & (gx >= 0)
        walk.bracket(there, np.where(x < c, a, c), x, np.where(x < c, ga, gc), gx)
        reached, active = reached | there, active & (gx < 0)
        better, inward = gx > gc, x < c
        new_a, new_ga = np.where(inward, a, c), np.where(inward, ga, gc)
        new_b, new_gb = np.where(inward, c, b), np.where(inward, gc, gb)
        a, ga, b, gb = (
            np.where(better, new_a, np.where(inward, x, a)), np.where(better, new_ga, np.where(inward, gx, ga)),
            np.where(better, new_b, np.where(inward, b, x)), np.where(better, new_gb, np.where(inward, gb, gx)),
        )  # fmt: skip
        c, gc = np.where(better, x, c), np.where(better, gx, gc)
    return reached


def _close(imbalance: Power, walk: _Walk) -> tuple[Array, Array]:
    """Close the brackets; temperature and what is left of g there."""
    ambient = walk.t[0]
    new, old, g_new, g_old = walk.hi, walk.lo, walk.g_hi, walk.g_lo
    active = np.isfinite(new) & ~walk.undefined
    with np.errstate(divide="ignore", invalid="ignore"):  # brackets that are none, or end where power is infinite
        part = g_new / (g_new - g_old)
    for _ in range(_PATIENCE):
        best = np.where(np.abs(g_new) < np.abs(g_old), new, old)
        g_best = np.where(np.abs(g_new) < np.abs(g_old), g_new, g_old)
        width = np.abs(old - new)
        active = active & (g_best != 0) & (width > 2 * _RESOLUTION * np.abs(best))
        if not np.any(active):
            break
        with np.errstate(divide="ignore", invalid="ignore"):
            least = _RESOLUTION * np.abs(best) / width
        part = np.clip(np.where(np.isfinite(part), part, 0.5), least, 1.0 - least)
        x = np.where(active, new + part * (old - new), ambient)
        g = np.where(active, imbalance(x), np.nan)
        walk.undefined = walk.undefined | (active & np.isnan(g))
        active = active & ~np.isnan(g)
        same = np.sign(g) == np.sign(g_new)
        third, g_third = np.where(same, new, old), np.where(same, g_new, g_old)
        kept, g_kept = np.where(same, old, new), np.where(same, g_old, g_new)
        with np.errstate(divide="ignore", invalid="ignore"):
            # Inverse parabola through the three points where it is monotone between them, else halving.
            xi, phi = (x - kept) / (third - kept), (g - g_kept) / (g_third - g_kept)
            alpha = (third - x) / (kept - x)
            inverse = g / (g_kept - g) * g_third / (g_kept - g_third) + alpha * g / (g_third - g) * g_kept / (g_third - g_kept)
            part = np.where((phi**2 < xi) & ((1.0 - phi) ** 2 < 1.0 - xi), inverse, 0.5)
        new, g_new = np.where(active, x, new), np.where(active, g, g_new)
        old, g_old = np.where(active, kept, old), np.where(active, g_kept, g_old)
    nothing = active | walk.undefined  # out of patience: a last iterate is no answer
    return np.where(nothing, np.nan, best), np.where(nothing, np.nan, g_best)
