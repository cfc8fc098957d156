"""What could be changed besides a limit: finer resistors, a steadier supply, a narrower gain, another network.

A lever is a list of grades, from the least change to the greatest. Each is in keys and texts of the stage file, so that it
can be applied as it stands.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from synth.advice.purse import Grade
from synth.networks import NETWORKS, Network
from synth.quantities import Spread, format_exact, format_resistance
from synth.stage import Stage
from synth.stage_keys import KEYS

STEPS = 25
"""Grades of a spread that is narrowed: four per cent of the way each."""
FIGURES = 3
"""Significant figures of a narrowed end."""
TOLERANCES = (0.05, 0.02, 0.01, 0.005, 0.0025, 0.001)
"""Classes of resistors that are made, IEC 60063 with IEC 60115 [-]."""
COEFFICIENTS = (100e-6, 50e-6, 25e-6, 15e-6, 10e-6, 5e-6)
"""Classes of temperature coefficient that are made, common practice [1/K]."""
REGULATED = (1.8, 2.5, 3.3, 5.0, 9.0, 12.0, 15.0, 24.0)
"""Voltages of fixed regulators, common practice [V]."""
FREE_SERIES = "E96"
"""Series that a value is sought in where a list or drawer lacks it."""
REGULATION = "2 %"
"""Band of a plain fixed regulator over load and temperature, common practice."""


def levers(stage: Stage) -> list[tuple[Grade, ...]]:
    """Every change besides limits that a request leaves open.

    Parameters
    ----------
    stage : Stage
        The request.

    Returns
    -------
    list of tuple of Grade
        The grades of each, at least one.
    """
    found = [
        *(narrowed(f"supply.{rail}", spread) for rail, spread in stage.rails.items()),
        _regulated_feed(stage),
        narrowed("transistor.hfe", stage.transistor.hfe),
        finer_tolerance(stage),
        lower_coefficient(stage),
        _narrowed_ambient(stage),
        *map(_network_grades, other_networks(stage)),
    ]
    return [grades for grades in found if grades]


def finer_tolerance(stage: Stage) -> tuple[Grade, ...]:
    """Finer classes of tolerance for all resistors.

    Parameters
    ----------
    stage : Stage
        The request.

    Returns
    -------
    tuple of Grade
        From the nearest to the finest.
    """
    own = max((setting.tolerance for setting in stage.roles.values()), default=0.0)
    return tuple(
        Grade(change={"resistors.tolerance": format_exact(t, "ratio")}, size=1.0 - t / own)
        for t in TOLERANCES
        if t < own * (1.0 - 1e-9)
    )


def lower_coefficient(stage: Stage) -> tuple[Grade, ...]:
    """Lower classes of temperature coefficient for all resistors.

    Parameters
    ----------
    stage : Stage
        The request.

    Returns
    -------
    tuple of Grade
        From the nearest to the lowest.
    """
    own = max((max(abs(s.tcr.low), abs(s.tcr.high)) for s in stage.roles.values()), default=0.0)
    key = KEYS["resistors.tcr"]
    return tuple(
        Grade(change={key.path: key.write(Spread(-c, 0.0, c))}, size=1.0 - c / own)
        for c in COEFFICIENTS
        if c < own * (1.0 - 1e-9)
    )


def narrowed(path: str, spread: Spread) -> tuple[Grade, ...]:
    """A spread drawn together towards its nominal value, four per cent of the way at a time, ends in three figures."""
    if spread.width == 0.0:
        return ()
    key = KEYS[path]
    grades: dict[str, Grade] = {}
    for step in range(1, STEPS + 1):
        # In ratio, as gains spread; of a narrow supply that is the same as in difference.
        share = 1.0 - step / STEPS
        ends = [spread.nominal * (end / spread.nominal) ** share for end in (spread.low, spread.high)]
        low, high = min(rounded(ends[0], 1), spread.nominal), max(rounded(ends[1], -1), spread.nominal)
        # A nominal value that follows from the ends is not written.
        is_derived = key.rule == "geometric" and key.write(spread).count(":") == 1
        text = f"{low:g} : {high:g}" if is_derived else key.write(Spread(low, spread.nominal, high))
        size = max(abs(low / spread.low - 1.0), abs(high / spread.high - 1.0))
        if size > 0.0:
            grades.setdefault(text, Grade(change={path: text}, size=size))
    return tuple(grades.values())


def rounded(value: float, direction: int) -> float:
    """Round to three figures.

    Parameters
    ----------
    value : float
        Any figure [-].
    direction : {+1, -1}
        Up or down.

    Returns
    -------
    float
        The figure [-].
    """
    if value == 0.0:
        return 0.0
    scale = 10.0 ** (FIGURES - 1 - math.floor(math.log10(abs(value))))
    steps = value * scale
    whole = math.ceil(steps - 1e-9) if direction > 0 else math.floor(steps + 1e-9)
    return float(f"{whole / scale:.{FIGURES}g}")


def _narrowed_ambient(stage: Stage) -> tuple[Grade, ...]:
    """Temperatures drawn together, in whole kelvins."""
    spread, path = stage.temperature, "ambient.temperature"
    if spread.width == 0.0:
        return ()
    grades: dict[str, Grade] = {}
    for step in range(1, STEPS + 1):
        share = 1.0 - step / STEPS
        low = spread.nominal - math.floor((spread.nominal - spread.low) * share + 1e-9)
        high = spread.nominal + math.floor((spread.high - spread.nominal) * share + 1e-9)
        text = KEYS[path].write(Spread(low, spread.nominal, high))
        size = 1.0 - (high - low) / spread.width
        if size > 1e-9:
            grades.setdefault(text, Grade(change={path: text}, size=size))
    return tuple(grades.values())


def _regulated_feed(stage: Stage) -> tuple[Grade, ...]:
    """The base fed from a fixed regulator below the lowest supply, where the supply itself is less steady than that."""
    rail = stage.rails["vcc"]
    if "vbb" in stage.rails or rail.width / rail.nominal <= 0.05:
        return ()
    if not any("vbb" in NETWORKS[name].optional_rails for name in stage.networks):
        return ()
    usable = [v for v in REGULATED if v < rail.low]
    return tuple(
        Grade(change={"supply.vbb": f"{format_exact(v, 'voltage')} ± {REGULATION}"}, size=1.0) for v in usable[-1:]
    )


def other_networks(stage: Stage) -> list[Network]:
    """Networks that the request does not name, whose rails it has and which do the same job.

    Parameters
    ----------
    stage : Stage
        The request.

    Returns
    -------
    list of Network
        Without those that need a reference element where none is given.
    """
    own = NETWORKS[stage.networks[0]]
    return [
        network
        for name, network in NETWORKS.items()
        if name not in stage.networks
        and all(rail in stage.rails for rail in network.rails)
        # A follower does another job than a stage with its output at the collector, and so does a sink.
        and (network.tied, network.sinks) == (own.tied, own.sinks)
        and (network.reference != "needed" or stage.reference is not None)
    ]


def _network_grades(network: Network) -> tuple[Grade, ...]:
    changes: list[Mapping[str, str]] = [{"network": network.name}]
    optional = [part.name for part in network.roles if part.optional is True]
    changes += [{"network": network.name, f"resistors.{role}.use": "yes"} for role in optional]
    return tuple(Grade(change=change, size=1.0 + 0.1 * len(change)) for change in changes)


def free_value(stage: Stage, role: str) -> Stage | None:
    """The request with one role free to be any preferred value, where its list or drawer bound it before.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.

    Returns
    -------
    Stage or None
        With E96 for the role; None where it was free already.
    """
    setting = stage.role(role)
    if not setting.values and setting.stock is None:
        return None
    return stage.with_keys({f"resistors.{role}.values": None, f"resistors.{role}.series": FREE_SERIES})


def chosen_value(role: str, ohm: float) -> Mapping[str, str]:
    """A value for a role that its list or drawer lacks, as a change.

    Parameters
    ----------
    role : str
        The role.
    ohm : float
        The value [ohm].

    Returns
    -------
    mapping of str to str
        Key and text.
    """
    return {f"resistors.{role}.values": format_resistance(ohm)}
