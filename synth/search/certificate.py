"""A certificate: the whole space as excluded blocks, each with what excludes it, and assessed candidates.

It is made after a search, by a search of its own in depth, with the limit that the first one ended with and with only those
bounds that need no more than a corner of a block and a sign from the network's table. What it says can be checked by anyone
who trusts the laws of the Q-point and these signs; `tests/certificate.py` does. Lines of JSON: a head, then a row for each
block, ``[space, low positions, high positions, test, bound]``, where `test` is a number in the head's list, or for a block of
one candidate a test of its own, or "listed".
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from synth.box import Meter
from synth.limits import Requirement
from synth.networks.form import Array
from synth.quantities import RestpointError, Spread
from synth.search.best_first import Outcome, _bearings, _pilot
from synth.search.blocks import Room
from synth.search.corners import Corners, swap
from synth.search.pools import TIE
from synth.spaces import Exact, Found, Goal, Index, Space
from synth.transistor import CUT_OFF_CURRENT, GAP_VOLTAGE

BATCH = 4096
"""Blocks bounded at a time."""
WHAT = "restpoint/certificate/1"
CUT_OFF = "cut off"
"""Name of the requirement that current flows at all."""


class NoCertificate(RestpointError):
    """A search that nothing can be certified of."""


@dataclass(frozen=True, kw_only=True)
class _Trial:
    """One way to exclude a block: a sum of quantities at a point of the box, towards one side.

    It is compared with the target where `need` is None, with that requirement otherwise; without names, the resistances
    alone decide.
    """

    names: tuple[str, ...]
    side: int
    point: Mapping[str, float]
    need: int | None

    def told(self) -> dict[str, Any]:
        return {"names": self.names, "side": self.side, "point": dict(self.point), "need": self.need}


def refuse(spaces: Sequence[Space], goal: Goal) -> None:
    """Refuse what no certificate can be made for.

    Parameters
    ----------
    spaces : sequence of Space
        What is searched.
    goal : Goal
        What drift is measured from, and what ranks.

    Raises
    ------
    NoCertificate
        If root sum square ranks, the gain moves with IC or VCE, both parts of a partly bypassed re are chosen, parallel pairs
        of unlike bands are among the values, or the stress of pairs is limited.
    """
    if goal.rss:
        raise NoCertificate("certificate: read metric 'rss', accepted is corners, one drift or weights")
    for space in spaces:
        if space.signal.split:
            raise NoCertificate("certificate: read a re in two parts chosen by the gain, accepted is signal.unbypassed")
        if space.transistor.gain_moves:
            raise NoCertificate("certificate: read hfe_rows or va, accepted is a gain that depends on neither IC nor VCE")
        for role, part in space.lists.items():
            if part.pairs is not None and part.pairs.bent.any():
                text = f"read parallel pairs of unlike bands for {role}, accepted are those of one band"
                raise NoCertificate(f"certificate: {text}")
        for name in (name for need in space.requirements for names in need.sums for name in names):
            if name.partition("_")[0] in ("umax", "pmax"):
                raise NoCertificate(f"certificate: read a limit on {name}, the stress of pairs, accepted is any other limit")


def certificate(spaces: Sequence[Space], goal: Goal, outcome: Outcome, top: int) -> Iterator[str]:
    """Lines of a certificate.

    Parameters
    ----------
    spaces : sequence of Space
        What was searched.
    goal : Goal
        What drift is measured from, and what ranks.
    outcome : Outcome
        What the search found; it must be complete.
    top : int
        How many candidates were proved [-].

    Returns
    -------
    iterator of str
        The head, then a row at a time; no unit.

    Raises
    ------
    NoCertificate
        If the search was stopped, or `refuse` would.
    """
    refuse(spaces, goal)
    if not outcome.complete:
        raise NoCertificate(f"certificate: read a search of status {outcome.status!r}, accepted is one that ran to its end")
    scores = sorted(f.score for f in outcome.found)
    limit = scores[top - 1] if len(scores) >= top else np.inf
    works = [_Writer(k, space, goal, outcome, limit) for k, space in enumerate(spaces)]
    yield _text(
        {
            "certificate": WHAT,
            "top": top,
            "limit": limit if np.isfinite(limit) else None,
            "aims": goal.aims,
            "weights": {quantity: goal.weight(quantity) for quantity in goal.aims},
            "spaces": [work.head() for work in works],
        }
    )
    for work in works:
        yield from work.rows()


def _text(value: Any) -> str:
    return json.dumps(value, separators=(",", ":"), allow_nan=False, default=_number)


def _number(value: Any) -> Any:
    return value.tolist() if isinstance(value, np.ndarray | np.generic) else list(value)


def _ends(spread: Spread) -> tuple[float, float, float]:
    return spread.low, spread.nominal, spread.high


def _open(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


class _Writer:
    """One space: its tests, its blocks and its leaves."""

    def __init__(self, number: int, space: Space, goal: Goal, outcome: Outcome, limit: float) -> None:
        self.number, self.space, self.goal, self.limit = number, space, goal, limit
        self.listed: dict[tuple[int, ...], Found] = {f.index: f for f in outcome.found if f.space is space}
        pilot = _pilot(space, goal, Meter())
        if self.listed:
            pilot = np.array([min(self.listed.values(), key=lambda f: f.score).index], dtype=np.int32)
        self.room = Room(space, goal, Meter(), *_bearings(space, pilot, goal, Meter()))
        self.needs: tuple[Requirement, ...] = space.requirements
        self.trials = list(self._trials())

    def _trials(self) -> Iterator[_Trial]:
        anchors = self.room.anchors
        for k, need in enumerate(self.needs):
            for side in need.sides:
                if need.rule is not None and need.rule.static is not None:
                    yield _Trial(names=(), side=side, point={}, need=k)
                elif need.judged == "nominal":
                    yield from (_Trial(names=names, side=side, point={}, need=k) for names in need.sums)
        for (quantity, side), point in anchors.items():
            if self.goal.weight(quantity) > 0.0 and quantity in self.goal.aims:
                yield _Trial(names=(quantity,), side=side, point=point, need=None)
        for k, need in enumerate(self.needs):
            if need.judged == "box" and need not in self.room.asleep and not (need.rule and need.rule.static):
                for names in need.sums:
                    for side in need.sides:
                        own = anchors.get((names[0], side)) if len(names) == 1 else None
                        yield _Trial(names=names, side=side, point=own or anchors["ic", side], need=k)

    def head(self) -> dict[str, Any]:
        """What the checker has to know of the space."""
        space, device = self.space, self.space.transistor
        network, roles = space.network, space.roles
        home = {rail: rail if rail in space.rails else "vcc" for rail in (*network.rails, *network.optional_rails)}
        home |= {node: home[rail] for node, rail in network.tied.items()}
        if space.reference is None:
            home["m"] = "0"
        for role in network.roles:
            if role.name not in roles and role.absent == "short":
                inner, outer = sorted(role.nodes, key=lambda node: node not in ("b", "c", "e"))
                home[inner] = home.get(outer, outer)
        reference = space.reference
        return {
            "network": network.name,
            "nodes": {r.name: [home.get(node, node) for node in r.nodes] for r in network.roles if r.name in roles},
            "home": {node: home.get(node, node) for node in ("b", "c", "e", "m")},
            "rails": {rail: _ends(spread) for rail, spread in space.rails.items()},
            "temperature": _ends(space.temperature),
            "device": {
                "vbe": _ends(device.vbe), "vbe_ic": device.vbe_ic, "fixed": device.vbe_model == "fixed",
                "gap": GAP_VOLTAGE[device.material], "hfe": _ends(device.hfe), "icbo": _ends(device.icbo),
                "icbo_hot": device.icbo_hot, "vce_sat": device.vce_sat,
            },
            "reference": reference and {
                "voltage": _ends(reference.voltage), "current": reference.current, "tc": _ends(reference.tc),
                "slope": _ends(reference.slope),
            },
            "signal": {"bypass": space.signal.bypass, "unbypassed": space.signal.unbypassed, "load": space.signal.load,
                       "source": space.signal.source},
            "lists": {
                role: {"ohms": part.nominal, "band": part.band, "tcr_low": part.tcr_low, "tcr_high": part.tcr_high}
                for role, part in space.lists.items()
            },
            "signs": {
                quantity: {role: network.sign(quantity, role) for role in roles} for quantity in ("ib", *network.signs)
            },
            "while": [[quantity, role, *told] for (quantity, role), told in network.signs_while.items()],
            "carries": {f"i_{role}": names for role, names in network.carries.items()},
            "base_side": [role for role in network.base_side if role in roles],
            "needs": [
                {"name": need.limit, "low": _open(need.interval.low), "high": _open(need.interval.high),
                 "offset": need.offset, "nominal": need.judged == "nominal"}
                for need in self.needs
            ],
            "tests": [trial.told() for trial in self.trials],
        }  # fmt: skip

    def rows(self) -> Iterator[str]:
        """Every block and leaf."""
        top = np.array([[p.nominal.size - 1 for p in (self.space.lists[r] for r in self.space.roles)]], dtype=np.int32)
        heap = self.room.fresh(np.zeros_like(top), top)
        while heap.bound.size:
            blocks, heap = heap.take(slice(-BATCH, None)), heap.take(slice(0, -BATCH))
            excluded = np.zeros(len(blocks.bound), dtype=bool)
            for number, trial in enumerate(self.trials):
                alive = np.flatnonzero(~excluded)
                if not alive.size:
                    break
                lo, hi = blocks.lo[alive], blocks.hi[alive]
                value = self._value(trial, lo, hi)
                out = self._excludes(trial, value)
                for k in np.flatnonzero(out):
                    yield _text([self.number, lo[k], hi[k], number, float(value[k])])
                excluded[alive[out]] = True
            left = blocks.take(~excluded)
            single = left.single
            yield from self._leaves(left.lo[single])
            heap = heap.join(self.room.split(left.take(~single)))

    def _value(self, trial: _Trial, lo: Index, hi: Index) -> Array:
        """Least of side times the sum, over each block, by corners and signs alone."""
        if not trial.names:
            rule = self.needs[trial.need or 0].rule
            assert rule is not None
            assert rule.static is not None
            assert rule.static_signs is not None
            signs = rule.static_signs(self.space.network)
            r = {
                role: self.space.lists[role].nominal[(lo if signs.get(role, 0) * trial.side > 0 else hi)[:, j]]
                for j, role in enumerate(self.space.roles)
            }
            return np.asarray(trial.side * np.asarray(rule.static(self.space.network, r)))
        corners = self.room.at(trial.point, lo, hi)
        return np.asarray(sum(plain_bound(corners, name, trial.side) for name in trial.names))

    def _excludes(self, trial: _Trial, value: Array, room: float = 2.0 * TIE) -> NDArray[np.bool_]:
        """Whether a value is beyond the limit; what the search lists as tied with it is within `TIE`."""
        if trial.need is not None:
            return np.asarray(~self.needs[trial.need].side(trial.side).passes(trial.side * value) & np.isfinite(value))
        (quantity,) = trial.names
        score = self.goal.weight(quantity) * (value / self.goal.aims[quantity] - trial.side)
        return np.asarray(score > self.limit * (1.0 + room))

    def _leaves(self, index: Index) -> Iterator[str]:
        for start in range(0, len(index), 128):
            part = index[start : start + 128]
            box = self.space.box(part, Meter())
            exact = Exact(box, self.goal)
            for k, row in enumerate(part):
                place = tuple(int(i) for i in row)
                trial, value = self._witness(exact, k) if place not in self.listed else self._reached(exact, k)
                told: Any = trial.told()
                yield _text([self.number, place, place, {**told, "listed": place in self.listed}, value])

    def _reached(self, exact: Exact, k: int) -> tuple[_Trial, float]:
        """Where a candidate that is listed drifts as far as it does."""
        best, found = -np.inf, (_Trial(names=(), side=1, point={}, need=None), 0.0)
        for (quantity, side), extreme in exact.extremes.items():
            if quantity in self.goal.aims and self.goal.weight(quantity) > 0.0:
                value = side * float(extreme.value[k])
                score = self.goal.weight(quantity) * (value / self.goal.aims[quantity] - side)
                if score > best:
                    best = score
                    found = _Trial(names=(quantity,), side=side, point=extreme.anchor(k), need=None), value
        return found

    def _witness(self, exact: Exact, k: int) -> tuple[_Trial, float]:
        """What keeps a candidate off the list, at the point of the box that shows it."""
        trial, value = self._reached(exact, k)
        if self._excludes(trial, np.asarray([value]), 0.5 * TIE)[0]:
            return trial, value
        box = exact.box.take([k])
        for number, need in enumerate(self.needs):
            for side in need.sides:
                for names in need.sums:
                    if need.judged == "nominal":
                        values = box.nominal()
                        worst, point = box.measure(names, values, box.solve(values)), {}
                    else:
                        extreme = box.extreme(names, side)
                        worst, point = extreme.value, extreme.anchor(0)
                    if not need.side(side).passes(worst)[0]:
                        return _Trial(names=names, side=side, point=point, need=number), side * float(worst[0])
            if need.limit == "vce":
                least = box.extreme(("ic",), -1)
                if least.value[0] <= CUT_OFF_CURRENT:
                    return _Trial(names=("ic",), side=-1, point=least.anchor(0), need=-1), -float(least.value[0])
        raise AssertionError(f"{self.space.network.name} {self.space.fitted(np.array([k]))} should be listed")


def plain_bound(corners: Corners, name: str, side: int) -> Array:
    """Least of side times a quantity over blocks, by corners and signs alone; minus infinity where they do not suffice.

    Parameters
    ----------
    corners : Corners
        A point of the box, set to the blocks.
    name : str
        A quantity.
    side : {+1, -1}
        +1 for the quantity, −1 for its negative.

    Returns
    -------
    ndarray, shape (n,)
        The bound [A, V or W].
    """
    nothing = np.full(len(corners.lo), -np.inf)
    kind, _, role = name.partition("_")
    if behind := corners._behind(name):
        if kind in ("i", "vc"):
            return np.asarray(sum(plain_bound(corners, part, side) for part in behind))
        if side < 0 or kind not in ("u", "p") or role not in corners.roles:
            return nothing
        current = np.maximum(plain_bound(corners, behind[0], 1), 0.0)
        ohms = corners.low[role][corners.lo[:, corners.roles.index(role)]]
        return np.asarray(current * ohms if kind == "u" else current**2 * ohms)
    ends, open_roles = corners.ends(name, side)
    held = np.ones(len(corners.lo), dtype=bool)
    if name == "vce":
        for j in [j for j in open_roles if corners.roles[j] != "re"]:
            told = corners.space.network.signs_while.get(("vce", corners.roles[j]))
            if told is None:
                return nothing
            sign, other = told
            flows = corners.at(corners.ends("ic", 1)[0])[1].ic
            held &= flows * corners.low[other][corners.lo[:, corners.roles.index(other)]] >= corners.vt
            held &= (flows > 0.0) & corners._sound(*corners.at(corners.ends("ic", 1)[0]))
            ends = swap(ends, j, 0 if sign * side > 0 else 1)
            open_roles = [k for k in open_roles if k != j]
        bound = corners._vce_corner(ends, open_roles, side)
        for j in open_roles:
            held &= corners._sound(*corners.at(swap(ends, j, 1)))
    elif open_roles or name not in ("ib", *corners.space.network.signs):
        return nothing
    else:
        bound = side * corners.frame.measure((name,), *corners.at(ends))
    return np.where(held & corners._sound(*corners.at(ends)), bound, nothing)
