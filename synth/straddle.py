"""Extremes over a box that reaches into saturation.

Where the transistor saturates, hFE no longer governs: IC is the smaller of the active and the saturated law. More base drive
raises the first and lowers the second, so the maximum of IC lies on the edge of saturation.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property, partial

import numpy as np
from numpy.typing import NDArray

from synth.box import Box, Extreme, Values, golden, peaks_that_matter
from synth.measures import PARAMETERS_OF_DEVICE
from synth.networks.form import Array, TwoPort


def extreme_in_any_region(box: Box, names: Sequence[str], direction: int) -> Extreme:
    """Extreme over a box that reaches into saturation.

    Parameters
    ----------
    box : Box
        n candidates.
    names : sequence of str
        Quantities whose sum counts, as in `Box.measure`.
    direction : {+1, -1}
        +1 for the maximum, −1 for the minimum.

    Returns
    -------
    Extreme
        Value and deciding point, shape (n,) [A, V, W, ohm or -].

    Notes
    -----
    Tried are the extreme of the active law, every vertex over temperature, and every point where VCE reaches VCE(sat) along
    one axis from a vertex of the others, or along all that only drives the base together. NaN without any solution.
    """
    return _Straddle(box, tuple(names), direction).run()


@dataclass
class _Straddle:
    """Extreme over a box in which some points saturate."""

    box: Box
    names: tuple[str, ...]
    direction: int

    def run(self) -> Extreme:
        box, n = self.box, self.box.size
        # The active law is the true one wherever its own extreme is active: every maximum of VCE, and most minima of IC.
        active = box.extreme(self.names, self.direction)
        self.best = np.full(n, -np.inf)
        self.at = {name: v.copy() for name, v in active.at.items()}
        self._keep(np.arange(n), active.at)
        scan = box.scan
        corners = np.array(list(itertools.product((0.0, 1.0), repeat=len(box.axes)))).reshape(-1, len(box.axes))
        grid: dict[str, Array] = {a: corners[:, j, None, None] for j, a in enumerate(box.axes)}
        grid["temperature"] = scan[None, :, None]
        self._vertices(grid, (len(corners), scan.size, n))
        for axis in (*box.axes, "temperature", "drive"):
            self._edges(axis)
        return Extreme(self.direction * np.where(np.isfinite(self.best), self.best, np.nan), self.at, {})

    def height(self, values: Values) -> Array:
        """direction·quantity; a point without a solution counts for nothing."""
        height = self.direction * self.box.measure(self.names, values, self.box.solve(values))
        return np.where(np.isnan(height), -np.inf, height)

    def over_temperature(self, spot: Mapping[str, Array], t: Array) -> Array:
        """Height of points that differ in temperature only."""
        return self.height(self.box.values({**spot, "temperature": t}))

    def _keep(self, who: NDArray[np.integer], values: Values) -> None:
        height = self.height(values)
        for k in np.argsort(height):
            if height[k] > self.best[who[k]]:
                self.best[who[k]] = height[k]
                for name, v in values.items():
                    self.at[name][who[k]] = v[k]

    def _vertices(self, grid: Mapping[str, Array], shape: tuple[int, ...]) -> None:
        """Every vertex at every temperature of the scan, and the peaks over temperature between them."""
        box, scan = self.box, self.box.scan
        heights = np.broadcast_to(self.height(box.values(grid)), shape)
        flat = heights.reshape(-1, shape[-1])
        index = np.array(np.unravel_index(flat.argmax(axis=0), shape[:2]))
        spots = {a: np.broadcast_to(x, shape) for a, x in grid.items()}
        who = np.arange(shape[-1])
        self._keep(who, self._whole({a: x[index[0], index[1], who] for a, x in spots.items()}))
        if scan.size < 3:
            return
        which, when, who = peaks_that_matter(heights, scan, self.best)
        if who.size:
            spot = {a: x[which, 0, who] for a, x in spots.items()}
            part = replace(self, box=box.take(who))
            for low, high in ((scan[when], scan[when + 1]), (scan[when + 1], scan[when + 2])):
                t, _ = golden(partial(part.over_temperature, spot), low, high)
                self._keep(who, part._whole({**spot, "temperature": t}))

    def _whole(self, spot: Mapping[str, Array]) -> Values:
        n = self.box.size
        return {k: np.broadcast_to(v, (n,)).copy() for k, v in self.box.values(spot).items()}

    @cached_property
    def drive(self) -> dict[str, float]:
        """Axes that move the base drive alone, with the end of most drive."""
        box = self.box
        values = box.nominal()
        t = values["temperature"]

        def port(moved: Mapping[str, Array]) -> TwoPort:
            now = {**values, **moved}
            return box.network.two_port(box.sources(now), {k: now[k] for k in box.parts}, t)

        plain = port({})
        found = {axis: most for axis, most in (("delta", 0.0), ("delta_ref", 1.0)) if axis in box.axes}
        for axis in (a for a in box.axes if a not in PARAMETERS_OF_DEVICE):
            other = port({axis: values[axis] * 1.01})
            load = ((plain.e_c, other.e_c), (plain.z_cb, other.z_cb), (plain.z_cc, other.z_cc))
            sign = box.network.sign("ic", axis)
            if sign and all(np.array_equal(np.asarray(a), np.asarray(b)) for a, b in load):
                found[axis] = 0.5 + 0.5 * sign
        return found

    def _edges(self, axis: str) -> None:
        """Points where VCE reaches VCE(sat) along one axis, from every vertex of the others.

        The axis "drive" moves everything that only drives the base together, from least to most.
        """
        box, n, scan = self.box, self.box.size, self.box.scan
        moving = self.drive if axis == "drive" else {axis: 1.0}
        others = tuple(a for a in box.axes if a not in moving)
        corners = np.array(list(itertools.product((0.0, 1.0), repeat=len(others)))).reshape(-1, len(others))
        if axis == "temperature":
            starts, ends = scan[:-1], scan[1:]
        else:
            starts, ends = np.zeros(scan.size), np.ones(scan.size)
        if not moving or not starts.size:
            return
        shape = (len(corners), starts.size, n)
        base = {a: np.broadcast_to(corners[:, j, None, None], shape) for j, a in enumerate(others)}
        if axis != "temperature":
            base["temperature"] = np.broadcast_to(scan[None, :, None], shape)
        low, high = (np.broadcast_to(x[None, :, None], shape) for x in (starts, ends))

        def along(spot: Mapping[str, Array], x: Array) -> dict[str, Array]:
            return {**spot, **{a: x if most else 1.0 - x for a, most in moving.items()}}

        def room(b: Box, spot: Mapping[str, Array], x: Array) -> Array:
            return b.solve(b.values(along(spot, x)), active_law=True).vce - b.transistor.vce_sat

        begin, end = (np.broadcast_to(room(box, base, x), shape) for x in (low, high))
        crossing = np.nonzero((begin >= 0.0) != (end >= 0.0))
        who = crossing[-1]
        if not who.size:
            return
        part = box.take(who)
        spot = {a: x[crossing] for a, x in base.items()}
        one, two = low[crossing].copy(), high[crossing].copy()
        rising = begin[crossing] < 0.0
        for _ in range(60):
            middle = 0.5 * (one + two)
            before = (room(part, spot, middle) >= 0.0) != rising
            one, two = np.where(before, middle, one), np.where(before, two, middle)
        # Of the last two points, the one that is still active: there both laws give the same.
        self._keep(who, replace(self, box=part)._whole(along(spot, np.where(rising, two, one))))
