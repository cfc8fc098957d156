"""Facts behind an answer: what each resistor does, what drives the drift, and what the next value would do.

The budget of a drift is the Shapley value of each cause: its mean effect over every order of moving the parameters from
nominal to the deciding point. It treats the causes alike, needs no order of moving and adds up exactly, interactions
included, which one-at-a-time sensitivities do not.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import factorial
from typing import TYPE_CHECKING

import numpy as np

from synth.answer import Compared, Duty, Neighbour, Nominal, Pair, Share
from synth.box import Box, Meter, Values
from synth.measures import UPPER, ground_voltage
from synth.networks.form import Array, Network
from synth.parts import Parts
from synth.preferred.pairs import JOINS, SERIES
from synth.q_point import REGIONS, SATURATED
from synth.quantities import format_quantity, format_resistance
from synth.spaces import Goal, Index, Space, assess_all

if TYPE_CHECKING:
    from synth.answer import Candidate

CAUSES = {
    "delta": "vbe",
    "hfe": "hfe",
    "icbo": "leakage",
    "va": "early",
    "temperature": "temperature",
    "delta_ref": "reference",
    "r_ref": "reference_slope",
}
"""Names of the device axes as causes; rails and roles keep their own."""

WORTH_TELLING = 0.1
"""Share of a drift from which the difference of one cause explains it [-]."""
NEGLIGIBLE = 0.005
"""Below this many per cent a share prints as 0 %."""

CAUSE_WORDS = {
    "vbe": "VBE spread",
    "hfe": "hFE spread",
    "leakage": "leakage",
    "early": "Early voltage",
    "temperature": "temperature",
    "centring": "centring",
    "vcc": "supply",
    "vee": "negative supply",
    "vbb": "base supply",
    "vload": "load supply",
    "reference": "reference voltage",
    "reference_slope": "reference slope",
}


def nominal_points(box: Box, ground: str = "negative") -> list[Nominal]:
    """Nominal Q-point of every candidate.

    Parameters
    ----------
    box : Box
        n candidates.
    ground : {"negative", "positive", "middle", "common"}
        What is 0 V: a rail, half-way between two rails, or the common point of two supplies; node voltages are given
        against it, as a meter would read them.

    Returns
    -------
    list of Nominal
        One each.
    """
    values = box.nominal()
    q = box.solve(values)
    branches = box.branches(values, q)
    mirror = -1.0 if box.transistor.polarity == "pnp" else 1.0
    zero = ground_voltage(box.sources(values), ground, box.transistor.polarity)

    def pick(x: object, k: int) -> float:
        return float(np.broadcast_to(np.asarray(x, dtype=float), (box.size,))[k])

    return [
        Nominal(
            ic=pick(q.ic, k),
            vce=pick(q.vce, k),
            ib=pick(q.ib, k),
            vbe=pick(q.vbe, k),
            vc=pick(branches.nodes["c"], k),
            ve=pick(branches.voltage.get("re", 0.0), k),
            region=REGIONS[int(np.broadcast_to(q.region, (box.size,))[k])],
            nodes={node: mirror * (pick(v, k) - pick(zero, k)) for node, v in branches.nodes.items()},
            rails={rail: pick(i, k) for rail, i in branches.rail.items()},
            forced_gain=pick(q.ic / q.ib, k) if np.broadcast_to(q.region, (box.size,))[k] == SATURATED else None,
        )
        for k in range(box.size)
    ]


def place(node: str, polarity: str, ground: str) -> str:
    """Where a node of a network is, in the words of a meter's user.

    Parameters
    ----------
    node : str
        A node of `synth.networks.form.Role`: a rail, ``0`` for the emitter's rail, or ``b c e``.
    polarity : {"npn", "pnp"}
        A PNP stage is the mirror image, so that its emitter's rail is the positive one.
    ground : str
        See `nominal_points`.

    Returns
    -------
    str
        ``base``, ``VCC``, ``0 V``...
    """
    if node in ("b", "c", "e", "m"):
        return {"b": "base", "c": "collector", "e": "emitter", "m": "reference"}[node]
    pnp = polarity == "pnp"
    if node in ("vbb", "vload"):
        return node.upper()
    if ground == "common":
        return {"vcc": "-VCC" if pnp else "VCC", "0": "0 V", "vee": "VEE" if pnp else "-VEE"}[node]
    upper = (node == "vcc") != pnp
    if ground == "middle":
        return "VCC/2" if upper else "-VCC/2"
    if node == "vee":
        return "VEE"
    return ("VCC" if upper else "0 V") if ground == "negative" else ("0 V" if upper else "-VCC")


def duties(box: Box, ground: str = "negative") -> list[dict[str, Duty]]:
    """Drop and current of every resistor at the nominal Q-point, and where it hangs.

    Parameters
    ----------
    box : Box
        n candidates.
    ground : str
        See `nominal_points`.

    Returns
    -------
    list of dict
        Role to duty, one mapping each.
    """
    values = box.nominal()
    branches = box.branches(values, box.solve(values))
    found: list[dict[str, Duty]] = []
    for k in range(box.size):
        row = {}
        for role in box.parts:
            drop = np.broadcast_to(np.asarray(branches.voltage[role]), (box.size,))[k]
            current = np.broadcast_to(np.asarray(branches.current[role]), (box.size,))[k]
            one, two = box.network.role(role).nodes
            stands_for = {rail: "vcc" for rail in box.network.optional_rails if rail not in box.rails}
            if box.reference is None:
                stands_for["m"] = "0"
            nodes = (stands_for.get(node, node) for node in (one, two))
            first, second = (place(node, box.transistor.polarity, ground) for node in nodes)
            row[role] = Duty(
                drop=float(drop),
                current=float(current),
                meaning=box.network.role(role).meaning,
                between=(first, second),
            )
        found.append(row)
    return found


def budgets(
    box: Box, at: Values, quantity: str, direction: int, goal: float, active_law: bool = True
) -> list[tuple[Share, ...]]:
    """Split the excursion of a quantity at its deciding point among its causes.

    Parameters
    ----------
    box : Box
        n candidates.
    at : dict
        The deciding point of each, arrays of shape (n,).
    quantity : {"ic", "vce", "vc", "ve"}
        What drifts.
    direction : {+1, -1}
        Side of the excursion.
    goal : float
        Target [A or V].
    active_law : bool
        False where the box reaches into saturation.

    Returns
    -------
    list of tuple of Share
        Descending; the shares of one candidate add up to direction·(worst/goal − 1) [-]. Empty where a mixture of
        nominal and deciding values has no Q-point.

    Notes
    -----
    2**k solves for k causes. Zero shares are left out.

    References
    ----------
    A value for n-person games, Contributions to the Theory of Games II, 1953, pp. 307-317.
    """
    n = box.size
    start = box.nominal()
    causes = [c for c in start if np.any(np.broadcast_to(start[c], (n,)) != np.broadcast_to(at[c], (n,)))]
    k = len(causes)
    masks = (np.arange(2**k)[:, None] >> np.arange(k)) & 1
    values = dict(start)
    for j, cause in enumerate(causes):
        values[cause] = np.where(masks[:, j, None] == 1, at[cause], start[cause])
    q = box.solve(values, active_law=active_law)
    reached = np.broadcast_to(box.measure((quantity,), values, q), (2**k, n)) * (direction / goal)
    size = masks.sum(axis=1)
    weight = np.array([factorial(s) * factorial(k - s - 1) / factorial(k) if s < k else 0.0 for s in range(k + 1)])
    shares: dict[str, Array] = {"centring": reached[0] - direction}
    for j, cause in enumerate(causes):
        without = np.flatnonzero(masks[:, j] == 0)
        gain = reached[without | (1 << j)] - reached[without]
        shares[CAUSES.get(cause, cause)] = weight[size[without]] @ gain
    found = []
    for i in range(n):
        row = [Share(cause=c, share=float(x[i])) for c, x in shares.items() if x[i] != 0.0]
        sound = all(np.isfinite(s.share) for s in row)
        found.append(tuple(sorted(row, key=lambda s: -s.share)) if sound else ())
    return found


def neighbours(space: Space, index: Index, goal: Goal) -> list[tuple[Neighbour, ...]]:
    """What one preferred value up or down in each role would do.

    Parameters
    ----------
    space : Space
        Where the candidates come from.
    index : ndarray of int, shape (n, roles)
        Their list positions.
    goal : Goal
        What drift is measured from.

    Returns
    -------
    list of tuple of Neighbour
        By role, down before up; each judged over its whole box.
    """
    rows: list[Index] = []
    owner: list[tuple[int, int, int]] = []
    for k, row in enumerate(index):
        for j, role in enumerate(space.roles):
            for step in (-1, 1):
                moved = row.copy()
                moved[j] += step
                if 0 <= moved[j] < space.lists[role].nominal.size:
                    rows.append(moved)
                    owner.append((k, j, step))
    found: list[list[Neighbour]] = [[] for _ in index]
    if not rows:
        return [tuple(f) for f in found]
    judged = assess_all(space, np.stack(rows), goal, Meter())
    for (k, j, step), row, result in zip(owner, rows, judged, strict=True):
        role = space.roles[j]
        found[k].append(
            Neighbour(
                role=role,
                step=step,
                value=float(space.lists[role].nominal[row[j]]),
                pair=pair_of(space.lists[role], int(row[j])),
                drift=result.drift,
                verdict="fail" if result.fails else "pass",
                fails=result.fails,
            )
        )
    return [tuple(f) for f in found]


def pair_of(part: Parts, k: int) -> Pair | None:
    """The two parts that make up a resistance.

    Parameters
    ----------
    part : Parts
        Resistances of a role [ohm].
    k : int
        Which of them.

    Returns
    -------
    Pair or None
        None for a single part.
    """
    join, ohms = part.pieces(k)
    return Pair(join=JOINS[join], ohms=(ohms[0], ohms[1])) if len(ohms) > 1 else None


def made_of(ohms: float, pair: Pair | None) -> str:
    """A resistance in words, with the parts that make it up.

    Parameters
    ----------
    ohms : float
        Resistance [ohm].
    pair : Pair or None
        Its two parts.

    Returns
    -------
    str
        ``4K7``; ``33K + 1K5`` in series, ``10K || 22K`` in parallel.
    """
    if pair is None:
        return format_resistance(ohms)
    return (" + " if pair.join == JOINS[SERIES] else " || ").join(map(format_resistance, pair.ohms))


def percent(fraction: float) -> str:
    """A fraction in per cent, three figures.

    Parameters
    ----------
    fraction : float
        Any [-].

    Returns
    -------
    str
        ``14.9 %``.
    """
    value = 100.0 * fraction
    if abs(value) < NEGLIGIBLE:
        return "0 %"
    return f"{value:.0f} %" if abs(value) >= 99.95 else f"{value:.{1 if abs(value) >= 0.995 else 2}f} %"


def cause_words(cause: str) -> str:
    """A cause of drift in words.

    Parameters
    ----------
    cause : str
        As in a budget.

    Returns
    -------
    str
        ``hFE spread``, ``supply``, ``R1``...
    """
    return CAUSE_WORDS.get(cause, cause.upper())


def point_words(at: Mapping[str, float], skip: Sequence[str] = ()) -> str:
    """A point of the box in words.

    Parameters
    ----------
    at : mapping of str to float
        Parameters (see `synth.box.Values`) [V, A, K, ohm].
    skip : sequence of str
        Parameters to leave out.

    Returns
    -------
    str
        ``VCC 12 V, hFE 110, ...``.
    """
    words = []
    for name, value in at.items():
        # Told of resistors as little as their own values.
        if name in skip or (name == UPPER and skip):
            continue
        if name == "temperature":
            words.append(format_quantity(value, "temperature"))
        elif name == "delta":
            if value:
                words.append(f"VBE {'+' if value > 0 else '-'}{format_quantity(abs(value), 'voltage')}")
        elif name == "hfe":
            words.append(f"hFE {value:.4g}")
        elif name == "icbo":
            if value:
                words.append(f"ICBO {format_quantity(value, 'current')} at 25 °C")
        elif name == "delta_ref":
            if value:
                words.append(f"reference {'+' if value > 0 else '-'}{format_quantity(abs(value), 'voltage')}")
        elif name == "r_ref":
            words.append(f"reference slope {format_quantity(value, 'resistance')}")
        elif name == UPPER:
            words.append(f"upper part of RE {format_quantity(value, 'resistance')}")
        elif name.startswith("v"):
            words.append(f"{name.upper()} {format_quantity(value, 'voltage')}")
        else:
            words.append(f"{name.upper()} {format_quantity(value, 'resistance')}")
    return ", ".join(words)


def sentences(candidate: Candidate, network: Network) -> tuple[str, ...]:
    """Explanation of a candidate; every number in it stands in the candidate.

    Parameters
    ----------
    candidate : Candidate
        Complete but for its explanation.
    network : Network
        Its network.

    Returns
    -------
    tuple of str
        One fact each.
    """
    c = candidate
    ic, vce = c.worst.ic, c.worst.vce
    lines = [
        f"{network.title.capitalize()}: {network.summary}",
        f"Q-point: IC {format_quantity(c.nominal.ic, 'current')} nominal, {format_quantity(ic[0], 'current')} to "
        f"{format_quantity(ic[1], 'current')} over the whole box; VCE {format_quantity(c.nominal.vce, 'voltage')} nominal, "
        f"{format_quantity(vce[0], 'voltage')} to {format_quantity(vce[1], 'voltage')}"
        + (" while the load takes nothing of its rail." if network.sinks else "."),
    ]
    if c.nominal.forced_gain is not None:
        lines.append(
            f"The transistor is saturated at the nominal point: hFE no longer governs IC, the load line does; forced gain "
            f"{c.nominal.forced_gain:.3g}."
        )
    for role, duty in c.roles.items():
        lines.append(
            f"{role.upper()} {made_of(c.resistors[role], c.parts.get(role))}, {duty.between[0]} to {duty.between[1]}: "
            f"{duty.meaning}; drops "
            f"{format_quantity(duty.drop, 'voltage')} at {format_quantity(duty.current, 'current')}."
        )
    larger = c.drift.decides
    others = ", ".join(f"{q.upper()} {percent(drift)}" for q, drift in c.drift.of().items() if q != larger)
    lines.append(
        f"{larger.upper()} decides the Q-point drift: it drifts {percent(c.drift.q_point)} at worst"
        f"{f' ({others})' if others else ''}; the nominal Q-point itself is off target by {percent(c.centring)}."
    )
    for quantity, shares in c.budget.items():
        parts = ", ".join(f"{cause_words(s.cause)} {percent(s.share)}" for s in shares if percent(s.share) != "0 %")
        if parts:
            lines.append(f"Budget of {quantity.upper()} ({percent(c.drift.of()[quantity])}): {parts}.")
    steps = []
    for n in c.neighbours:
        effect = "the transistor saturates" if n.drift is None else f"drift {percent(n.drift)}"
        if n.fails and n.drift is not None:
            effect += f", fails {' and '.join(n.fails)}"
        steps.append(f"{n.role.upper()} {made_of(n.value, n.pair)}: {effect}")
    if steps:
        lines.append(f"One value up or down: {'; '.join(steps)}.")
    judged = [v for v in c.limits if np.isfinite(v.margin)]
    if "saturated" in c.regions:
        lines.append("The transistor saturates within the box: VCE falls to VCE(sat), and the verdict on vce fails.")
    elif judged:
        tight = min(judged, key=lambda v: v.margin)
        limit = tight.limit if isinstance(tight.limit, float) else None
        bound = "its window" if limit is None else f"{tight.sense} {format_quantity(limit, tight.kind)}"
        lines.append(
            f"Least margin: {tight.name}, {format_quantity(tight.worst, tight.kind)} at worst against {bound}, "
            f"margin {percent(tight.margin)}."
        )
    return tuple(lines)


def comparison(winner: Candidate, other: Candidate) -> Compared | None:
    """What costs another network more drift than the winner.

    Parameters
    ----------
    winner, other : Candidate
        Best of two networks.

    Returns
    -------
    Compared or None
        The cause with its shares [-]; None where no cause takes much more there.
    """
    quantity = other.drift.decides
    here = {share.cause: share.share for share in winner.budget.get(quantity, ())}
    costs = [(there.share - here.get(there.cause, 0.0), there) for there in other.budget.get(quantity, ())]
    more, most = max(costs, key=lambda cost: cost[0], default=(0.0, None))
    if most is None or more < WORTH_TELLING * other.drift.q_point:
        return None
    return Compared(cause=most.cause, there=most.share, here=here.get(most.cause, 0.0))


def compared_words(compared: Compared) -> str:
    """A comparison in words.

    Parameters
    ----------
    compared : Compared
        As `comparison` gives it.

    Returns
    -------
    str
        ``hFE spread takes 21.3 % there and 1.9 % here``.
    """
    return f"{cause_words(compared.cause)} takes {percent(compared.there)} there and {percent(compared.here)} here"


def dissipation(candidate: Candidate) -> float:
    """Greatest dissipation of the transistor.

    Parameters
    ----------
    candidate : Candidate
        Any candidate.

    Returns
    -------
    float
        Over the box, or where that was not looked for the product of the greatest IC and VCE, which is more [W].
    """
    if candidate.transistor is not None:
        return candidate.transistor.power
    return candidate.worst.ic[1] * candidate.worst.vce[1]
