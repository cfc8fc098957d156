"""Monte Carlo: what built units look like, and what share of them meets each window and limit.

Every unit is solved exactly, in its own region; a saturated or cut-off unit counts as one. The interval of a share is the exact
binomial one (Clopper and Pearson). It holds for independent draws; scrambled Sobol points fill the box more evenly, so with
them it is as a rule too wide.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import betaincinv

from synth.box import Box, Values
from synth.limits import Requirement
from synth.measures import PARAMETERS_OF_SIGNAL, is_figure
from synth.networks.form import Array
from synth.q_point import ACTIVE, REGIONS
from synth.statistics.distribution import Lot
from synth.statistics.pieces import pieces_of, whole_of
from synth.transistor import T0

CHUNK = 16384
"""Units solved at a time: their arrays stay in the cache."""
LEVEL = 0.95
"""Confidence level of the interval of a share [-]."""
QUANTILES = (0.00135, 0.025, 0.5, 0.975, 0.99865)
"""Shares of the units below the quantiles that are told [-]: three sigma and 95 % of a normal law, and the median."""


@dataclass(frozen=True, kw_only=True)
class Yield:
    """Units that meet one window or limit: how many, their share [-] and the interval of that share [-]."""

    name: str
    passed: int
    share: float
    low: float
    high: float


@dataclass(frozen=True, kw_only=True)
class Sample:
    """What the units show of one quantity [A or V]: least, mean, greatest, standard deviation and `QUANTILES`."""

    quantity: str
    least: float
    mean: float
    greatest: float
    sigma: float
    quantiles: tuple[float, ...]


@dataclass(frozen=True, kw_only=True)
class MonteCarlo:
    """A lot of units drawn and solved.

    `regions` counts the units of each region, and those without a solution as "none"; `yields` has every window and limit that
    is judged over the box, and "all" of them together.
    """

    units: int
    seed: int
    points: str
    laws: Mapping[str, str]
    regions: Mapping[str, int]
    samples: tuple[Sample, ...]
    yields: tuple[Yield, ...]


def interval(passed: int, units: int, level: float = LEVEL) -> tuple[float, float]:
    """Exact two-sided interval of a binomial share.

    Parameters
    ----------
    passed, units : int
        Successes and trials [-].
    level : float
        Confidence level [-].

    Returns
    -------
    low, high : float
        Ends of the interval [-].

    References
    ----------
    C. J. Clopper and E. S. Pearson, The use of confidence or fiducial limits illustrated in the case of the binomial,
    Biometrika 26, 1934, pp. 404-413.
    """
    tail = 0.5 * (1.0 - level)
    low = float(betaincinv(passed, units - passed + 1, tail)) if passed > 0 else 0.0
    high = float(betaincinv(passed + 1, units - passed, 1.0 - tail)) if passed < units else 1.0
    return low, high


def draws(box: Box, lot: Lot, life: Mapping[str, float]) -> Iterator[Values]:
    """Parameters of every unit of a lot, a chunk at a time.

    Parameters
    ----------
    box : Box
        Of one candidate.
    lot : Lot
        How many units, and their distributions.
    life : mapping of str to float
        Change over life of each role, which is part of its band [-].

    Returns
    -------
    iterator of dict
        See `synth.box.Values`; arrays of at most `CHUNK` units. Tolerance, change over life and temperature coefficient of
        every resistor, of a pair of both, are drawn apart.
    """
    spreads = {name: s for name, s in box.spreads.items() if name != "delta_ref"}
    reference = box.reference
    wide = [name for name, s in spreads.items() if s.width > 0.0]
    wide += ["temperature"] * (box.temperature.width > 0.0)
    names = [f"{role}{ending}" for role, part in box.parts.items() for ending, _ in pieces_of(part)]
    wide += [f"{name}.{what}" for name in names for what in ("tolerance", "life", "tcr")]
    wide += ["reference.voltage", "reference.tc"] if reference is not None else []
    for u in _points(lot, len(wide)):
        column = dict(zip(wide, u.T, strict=True))
        half = np.full(len(u), 0.5)

        def pick(axis: str, law: str, low: float, nominal: float, high: float) -> Array:
            if high <= low:
                return np.asarray(nominal)
            return lot.law(law).quantile(column.get(axis, half), low, nominal, high)  # noqa: B023  used at once

        temperature = box.temperature
        t = pick("temperature", "temperature", temperature.low, temperature.nominal, temperature.high)
        found: Values = {"temperature": t + np.zeros(len(u))}
        for name, s in spreads.items():
            if name == "delta":
                vbe = box.transistor.vbe
                found[name] = pick(name, "vbe", vbe.low, vbe.nominal, vbe.high) - vbe.nominal
                found[name] = np.clip(found[name], s.low, s.high)
            else:
                found[name] = pick(name, "reference" if name == "r_ref" else name, s.low, s.nominal, s.high)
        rise = found["temperature"] - T0
        if reference is not None:
            v, tc = reference.voltage, reference.tc
            off = pick("reference.voltage", "reference", v.low, v.nominal, v.high) - v.nominal
            off = off + (pick("reference.tc", "reference", tc.low, tc.nominal, tc.high) - tc.nominal) * rise
            found["delta_ref"] = np.clip(off, *reference.deviation(found["temperature"]))
        for role, part in box.parts.items():
            ohms = []
            for ending, piece in pieces_of(part):
                name, band = f"{role}{ending}", float(piece.band[0])
                drift = min(life.get(role, 0.0), band)
                tolerance = band - drift
                low, high = float(piece.tcr_low[0]), float(piece.tcr_high[0])
                factor = 1.0 + pick(f"{name}.tolerance", "tolerance", -tolerance, 0.0, tolerance)
                factor = factor + pick(f"{name}.life", "life", -drift, 0.0, drift)
                factor = factor + pick(f"{name}.tcr", "tcr", low, min(max(0.0, low), high), high) * rise
                ohms.append(piece.nominal * factor)
            # The box holds every unit; the last bit of a sum may not say otherwise.
            found[role] = np.clip(whole_of(part, ohms), *part.ends(found["temperature"]))
        yield found


def _points(lot: Lot, dimensions: int) -> Iterator[Array]:
    """Points of the unit cube, a chunk at a time."""
    rng = np.random.default_rng(lot.seed)
    engine = None
    if lot.points == "sobol" and dimensions:
        from scipy.stats import qmc

        engine = qmc.Sobol(dimensions, scramble=True, seed=rng)
    for start in range(0, lot.units, CHUNK):
        count = min(CHUNK, lot.units - start)
        if engine is None:
            yield rng.random((count, dimensions))
            continue
        with warnings.catch_warnings():
            # A lot that is no power of two loses a little of the evenness, nothing else.
            warnings.simplefilter("ignore", UserWarning)
            yield np.minimum(engine.random(count), 1.0 - 2.0**-53)


def monte_carlo(
    box: Box, needs: Sequence[Requirement], lot: Lot, *, life: Mapping[str, float], quantities: Sequence[str] = ("ic", "vce")
) -> MonteCarlo:
    """Draw a lot of units, solve each, and count.

    Parameters
    ----------
    box : Box
        Of one candidate.
    needs : sequence of Requirement
        Windows and limits; those that are judged at nominal values are left out.
    lot : Lot
        How many units, and their distributions.
    life : mapping of str to float
        Change over life of each role [-].
    quantities : sequence of str
        Quantities of `synth.measures` to be told of.

    Returns
    -------
    MonteCarlo
        Counts, shares and quantiles; a small-signal figure of a unit that is not active counts as failed.
    """
    judged = [need for need in needs if need.judged == "box" and need.sums]
    names = tuple(dict.fromkeys(name for need in judged for sums in need.sums for name in sums))
    passed = dict.fromkeys((need.name for need in judged), 0)
    every, regions = 0, np.zeros(len(REGIONS), dtype=np.int64)
    kept: dict[str, list[Array]] = {name: [] for name in quantities}
    for values in draws(box, lot, life):
        q = box.solve(values)
        shape = q.ic.shape
        active: NDArray[np.bool_] = q.region == ACTIVE
        solved = ~np.isnan(q.ic)
        regions += np.bincount(q.region[solved], minlength=len(REGIONS))
        measured = {n: np.broadcast_to(box.measure((n,), values, q), shape) for n in dict.fromkeys((*names, *quantities))}
        whole = np.ones(shape, dtype=bool)
        for need in judged:
            good = np.ones(shape, dtype=bool)
            for sums in need.sums:
                good &= need.passes(np.asarray(sum(measured[name] for name in sums)))
                if need.name == "vce" or any(is_figure(name) or name in PARAMETERS_OF_SIGNAL for name in sums):
                    good &= active
            passed[need.name] += int(np.count_nonzero(good))
            whole &= good
        every += int(np.count_nonzero(whole))
        for name, column in kept.items():
            column.append(measured[name][solved])
    counts = {name: int(n) for name, n in zip(REGIONS, regions, strict=True) if n}
    if (lost := lot.units - int(regions.sum())) > 0:
        counts["none"] = lost
    shares = {**passed, "all": every} if judged else {}
    return MonteCarlo(
        units=lot.units,
        seed=lot.seed,
        points=lot.points,
        laws={name: law.words for name, law in lot.laws.items()},
        regions=counts,
        samples=tuple(_sample(name, np.concatenate(column)) for name, column in kept.items()),
        yields=tuple(_yield(name, count, lot.units) for name, count in shares.items()),
    )


def _yield(name: str, passed: int, units: int) -> Yield:
    low, high = interval(passed, units)
    return Yield(name=name, passed=passed, share=passed / units, low=low, high=high)


def _sample(quantity: str, x: Array) -> Sample:
    if not x.size:
        nan = float("nan")
        return Sample(quantity=quantity, least=nan, mean=nan, greatest=nan, sigma=nan, quantiles=(nan,) * len(QUANTILES))
    return Sample(
        quantity=quantity,
        least=float(x.min()),
        mean=float(x.mean()),
        greatest=float(x.max()),
        sigma=float(x.std(ddof=1)) if x.size > 1 else 0.0,
        quantiles=tuple(float(v) for v in np.quantile(x, QUANTILES)),
    )
