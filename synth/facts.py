"""What a review asks of a candidate besides its drift: stress of every part, and small-signal figures over the box."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np

from synth.answer import Load, Stress
from synth.box import Box, Extreme, Heat, Values
from synth.catalogue import Derating, ResistorStyle, resistor_styles
from synth.limits import holds_emitter
from synth.measures import BYPASS, POWER_OF_TRANSISTOR
from synth.networks.form import Array
from synth.parts import HALVES, Parts
from synth.preferred.pairs import SINGLE
from synth.signal import CORNER, corner_capacitance
from synth.stress import (
    JUNCTION_STATES,
    Junction,
    TransistorRatings,
    allowed_dissipation,
    allowed_ic,
    allowed_power,
    allowed_vce,
    allowed_veb,
    allowed_voltage,
    carries,
    junction_temperature,
    smallest_style,
    string_length,
)

SHOWN = ("gm", "r_pi", "r_intrinsic", "input_resistance", "output_resistance", "gain", "swing")
"""Small-signal figures of an answer: [S], [ohm], [ohm], [ohm], [ohm], [-], [V]."""
HOTTEST = 473.15
"""Junction temperature at which the laws end where no TJ max is known, 200 °C [K]."""


Law = Callable[[Sequence[str], int], Extreme]


def stresses(
    box: Box, styles: Mapping[str, ResistorStyle], policy: Derating, law: Law | None = None
) -> list[dict[str, Stress]]:
    """Worst power and voltage of every resistor, each at its own point of the box, against its style.

    Parameters
    ----------
    box : Box
        n candidates.
    styles : mapping of str to ResistorStyle
        Style of each role that has one.
    policy : Derating
        Derating policy.
    law : callable, optional
        ``law(names, side)``: extreme of a sum of quantities; that of the active region when not given.

    Returns
    -------
    list of dict
        Designator to stress, one mapping for each candidate [W, V]: the role, with ``a`` and ``b`` for the parts of a pair.
    """
    hot, law = box.temperature.high, law or box.extreme
    found: list[dict[str, Stress]] = [{} for _ in range(box.size)]
    for role, who, part in _every_part(box):
        power = law((f"p_{who}",), 1).value
        volts = np.maximum(law((f"u_{who}",), 1).value, -law((f"u_{who}",), -1).value)
        style = styles.get(role)
        mounting = "chip" if style is None else style.style
        among = [row for row in resistor_styles().values() if row.style == mounting]
        for k in range(box.size):
            ohms = float(part.nominal[k])
            if np.isnan(ohms):
                continue
            needed = smallest_style(power[k], volts[k], ohms, hot, policy, among=among)
            number = None
            if style is not None and not bool(carries(style, power[k], volts[k], ohms, hot, policy)):
                number = string_length(style, power[k], volts[k], ohms, hot, policy, band=float(part.band[k]))
            found[k][who] = Stress(
                power=float(power[k]),
                voltage=float(volts[k]),
                style=None if style is None else style.name,
                power_allowed=None if style is None else float(allowed_power(style, hot, policy)),
                voltage_allowed=None if style is None else float(allowed_voltage(style, ohms, policy)),
                smallest=None if needed is None else needed.name,
                string=number,
            )
    return found


def _every_part(box: Box) -> list[tuple[str, str, Parts]]:
    """Role, designator and values of every resistor; the value is NaN where a candidate has no such part."""
    found = []
    for role, part in box.parts.items():
        if part.pairs is None:
            found.append((role, role, part))
            continue
        alone = part.pairs.join == SINGLE
        if alone.any():
            found.append((role, role, replace(part, nominal=np.where(alone, part.nominal, np.nan))))
        if not alone.all():
            for half, one in zip(HALVES, part.pairs.halves, strict=True):
                found.append((role, f"{role}{half}", replace(one, nominal=np.where(alone, np.nan, one.nominal))))
    return found


def loads(box: Box, ratings: TransistorRatings, policy: Derating, law: Law | None = None) -> list[Load]:
    """What the transistor carries at worst, and where its junction gets at the hot ambient.

    Parameters
    ----------
    box : Box
        n candidates.
    ratings : TransistorRatings
        What is known of the transistor.
    policy : Derating
        Derating policy.
    law : callable, optional
        As in `stresses`.

    Returns
    -------
    list of Load
        One for each candidate [W, V, A, K, K/W].
    """
    law = law or box.extreme
    worst = law((POWER_OF_TRANSISTOR,), 1)
    rail, ic = (law((name,), 1).value for name in ("span", "ic"))
    hot, rth = box.temperature.high, ratings.thermal_resistance
    most = allowed_dissipation(ratings, hot, policy)
    known = {
        "power": None if most is None else float(most),
        "vceo": allowed_vce(ratings, policy),
        "veb": allowed_veb(ratings, policy) if holds_emitter(box.network, box.signal) else None,
        "ic": allowed_ic(ratings, policy),
    }
    allowed = {name: limit for name, limit in known.items() if limit is not None}
    emitter = law(("ve",), 1).value if "veb" in allowed else np.zeros(box.size)
    settled = None if rth is None else _settled(box, worst.at | {"temperature": np.full(box.size, hot)}, rth, ratings)
    nominal = None if rth is None else _settled(box, box.nominal(), rth, ratings)
    return [
        Load(
            power=float(worst.value[k]),
            vceo=float(rail[k]),
            ic=float(ic[k]),
            veb=float(emitter[k]),
            allowed=allowed,
            thermal_resistance=rth,
            junction=None if settled is None else _known(settled.temperature[k]),
            loop_gain=None if settled is None else _known(settled.loop_gain[k]),
            state=None if settled is None else JUNCTION_STATES[int(settled.status[k])],
            heating=None if nominal is None else _known(_shift(box, nominal.temperature)[k]),
            too_hot=rth is not None and hot + rth * float(worst.value[k]) > (ratings.tj_max or HOTTEST),
        )
        for k in range(box.size)
    ]


def heated(box: Box, load: Load, ratings: TransistorRatings) -> Load:
    """A load with the worst case of a candidate that warms itself.

    Parameters
    ----------
    box : Box
        Of one candidate.
    load : Load
        Its load, with a thermal resistance [K/W].
    ratings : TransistorRatings
        What is known of the transistor.

    Returns
    -------
    Load
        With least and greatest IC [A] and VCE [V] over the box.

    Notes
    -----
    At every point the junction temperature is solved with the Q-point; since the proved signs hold at one temperature,
    every vertex, edge and temperature is looked at.
    """
    if load.thermal_resistance is None or load.state != JUNCTION_STATES[0]:
        return load
    warm = replace(box, heat=Heat(load.thermal_resistance, max(ratings.tj_max or HOTTEST, box.temperature.high + 1.0)))
    ends = {name: tuple(float(warm.extreme((name,), side).value[0]) for side in (-1, 1)) for name in ("ic", "vce")}
    return replace(load, worst={name: (low, high) for name, (low, high) in ends.items() if np.isfinite([low, high]).all()})


def _known(x: float) -> float | None:
    return float(x) if np.isfinite(x) else None


def _settled(box: Box, values: Values, rth: float, ratings: TransistorRatings) -> Junction:
    """Where the junctions settle at one point of the box each, power and Q-point solved together."""

    def power_of(t: Array) -> Array:
        return np.maximum(np.broadcast_to(box.solve(values, junction=t).power, t.shape), 0.0)

    ambient = np.broadcast_to(np.asarray(values["temperature"], dtype=float), (box.size,))
    limit = max(ratings.tj_max or HOTTEST, float(ambient.max()) + 1.0)
    return junction_temperature(power_of, ambient, rth, limit)


def _shift(box: Box, junction: Array) -> Array:
    """How far self-heating moves the nominal IC [-]."""
    values = box.nominal()
    cold = box.solve(values).ic
    return np.broadcast_to(box.solve(values, junction=junction).ic / cold - 1.0, (box.size,))


def signals(box: Box, corner: float | None = None) -> list[dict[str, tuple[float, float, float]]]:
    """Small-signal figures: least, nominal and greatest over the box.

    Parameters
    ----------
    box : Box
        n candidates, active over the whole box.
    corner : float, optional
        Frequency that the bypass capacitor is sized for [Hz].

    Returns
    -------
    list of dict
        Figure to its three values [S, ohm, - or V]; empty for a network that takes no signal.
    """
    if not box.network.takes_signal:
        return [{} for _ in range(box.size)]
    values = box.nominal()
    q = box.solve(values)
    found: list[dict[str, tuple[float, float, float]]] = [{} for _ in range(box.size)]
    for name in SHOWN:
        middle = np.broadcast_to(box.measure((name,), values, q), (box.size,))
        if name == "swing":
            sides = ("swing_to_cutoff", "swing_to_saturation")
            low = np.minimum.reduce([box.extreme((side,), -1).value for side in sides])
            # The greatest of the smaller of two is no corner of either: only the least is told.
            high = np.full(box.size, np.nan)
        else:
            low, high = (box.extreme((name,), side).value for side in (-1, 1))
        for k in range(box.size):
            found[k][name] = (float(low[k]), float(middle[k]), float(high[k]))
    # The emitter of a follower is its output.
    has_bypass = box.signal.bypass != "none" and "re" in box.parts and "c" not in box.network.tied
    if box.signal.capacitor is not None and has_bypass:
        ends = [box.extreme((CORNER,), side).value for side in (-1, 1)]
        middle = np.broadcast_to(box.measure((CORNER,), values, q), (box.size,))
        for k in range(box.size):
            found[k][CORNER] = (float(ends[0][k]), float(middle[k]), float(ends[1][k]))
    if corner is not None and has_bypass:
        ohms = (box.extreme((BYPASS,), 1).value, box.measure((BYPASS,), values, q), box.extreme((BYPASS,), -1).value)
        sizes = [np.broadcast_to(corner_capacitance(r, corner), (box.size,)) for r in ohms]
        for k in range(box.size):
            found[k]["bypass_capacitor"] = (float(sizes[0][k]), float(sizes[1][k]), float(sizes[2][k]))
    return found
