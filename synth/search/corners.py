"""Bounds of blocks: one point of the box solved at the corners of a range of list positions.

A block is a range of list positions for every role. Any single point of the box gives a rigorous lower bound on the worst
case of every member: at that point the favourable corner of the block gives the least IC maximum, the greatest IC minimum,
and so on, because each quantity is monotone in each resistance with the signs that the network file proves. VCE is not
monotone in re, but re leaves the collector-base loop,

    VCE = (e_c − e_b) + (z_bb − z_cb)·IB + (z_bc − z_cc)·IC + VBE(IC),

so along re VCE is a concave function of IC alone: least at an end, greatest at an end or where its slope vanishes.

Proofs of monotonicity assume IB ≥ 0, IC ≥ ICBO and VBE ≥ 0. A bound from a corner that breaks this is replaced by one
that holds all the same: IC ≤ max(IC, ICEO, IS) above, the least over every vertex of the base-side roles below, nothing
otherwise.

Rows of hFE against IC leave the signs alone, but bend IB(IC): along re each line is then taken between the two that the
extreme gains of its range give. Under the Early effect every member of a block is a Q-point of the law without it whose gain
is lifted by a factor between the ends of e(VCE) over the VCE that the block can have; that range is found by bounding VCE with
the whole range of factors and narrowing it twice. Quantities that are monotone in hFE take the favourable end. Along hFE VCE is
concave in IC (the base loop is −z_cc·IC + (z_cb/z_bb)·VBE(IC)): least at an end, and above its value at the low end by at
most VT times the logarithm of the ratio of the currents, since z_cb ≤ z_bb. Candidates themselves are assessed exactly.

They also assume that a reference element conducts, which is a limit on every candidate: its current has the sign
of VB − vref, whatever r2, so a bound from a corner where it conducts holds for every member where it does.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from synth.box import Meter, Values
from synth.measures import POWER_OF_TRANSISTOR, UPPER, is_figure, parts_of_current, small_signal
from synth.measures import sign as quantity_sign
from synth.networks.form import Array, QPoint
from synth.signal import own_signs
from synth.spaces import MOST_VBE, Index, Space
from synth.transistor import thermal_voltage

NARROWED = 2
"""How often the range of VCE of a block narrows that of the Early effect."""


class Corners:
    """Solves one point of the box at corners of blocks."""

    def __init__(self, space: Space, point: Mapping[str, float], meter: Meter) -> None:
        self.space = space
        self.meter = meter
        self.roles = space.roles
        t = point.get("temperature", space.temperature.nominal)
        self.t = np.asarray(t, dtype=float)
        self.low: dict[str, Array] = {}
        self.high: dict[str, Array] = {}
        for role in self.roles:
            x = point.get(role)
            part = space.lists[role]
            low, high = part.ends(self.t)
            still = np.clip(part.nominal, low, high) if point else part.nominal
            r = still if x is None else (1.0 - x) * low + x * high
            # Values of unlike tolerance may swap order at a point of the box; the envelopes stay bounds of each block.
            self.low[role] = np.minimum.accumulate(r[::-1])[::-1].copy()
            self.high[role] = np.maximum.accumulate(r)
        scalar = {axis: x for axis, x in point.items() if axis not in self.roles}
        one = np.zeros((1, len(self.roles)), dtype=np.int32)
        self.device = {
            k: v for k, v in space.box(one, Meter()).values(scalar).items() if k not in self.roles
        }
        re = space.lists.get("re")
        if space.signal.split and re is not None and re.pairs is not None:
            # One upper part for the whole space; where re sits at a share of its band, so does this, or they would not add up.
            x, upper = point.get("re"), re.pairs.halves[0].take([0])
            low, high = upper.ends(self.t)
            self.device[UPPER] = np.asarray(upper.nominal[0] if x is None else (1.0 - x) * low[0] + x * high[0])
        self.hfe = self.device["hfe"] * space.transistor.gain_factor(self.t)
        self.va = self.device.pop("va", None)
        self.rows = space.transistor.hfe_rows
        # Ends of the factor by which rows and Early voltage may move the gain, wherever the Q-point lies.
        self.reach = (1.0, 1.0)
        if self.rows is not None:
            low, high = self.rows.reach(self.device["hfe"], 0.0, np.inf)
            self.reach = (float(np.exp(low)), float(np.exp(high)))
        if self.va is not None:
            self.reach = (self.reach[0] * float(space.transistor.early_factor(self.va, 0.0)), self.reach[1])
        self.icbo = self.device["icbo"] * space.transistor.leakage_factor(self.t)
        # From this current on VBE is not negative.
        self.floor = 0.0
        if space.transistor.vbe_model == "junction":
            unit = np.exp(-self.device["delta"] / thermal_voltage(self.t))
            self.floor = float(space.transistor.saturation_current(self.t) * unit)
        self.frame = space.box(one, meter)
        if self.va is not None:
            self.frame = replace(self.frame, transistor=replace(space.transistor, va=None))
        self.vt = thermal_voltage(self.t) if space.transistor.vbe_model == "junction" else np.zeros(())

    def begin(self, lo: Index, hi: Index) -> None:
        """Take up a batch of blocks and forget what was solved for the last one."""
        self.lo, self.hi = lo, hi
        self.solved: dict[tuple[object, ...], tuple[dict[str, Array], QPoint]] = {}
        if self.va is not None:
            self._narrow(self.va)

    def _narrow(self, va: Array) -> None:
        """Find between what factors the Early effect may lift the gain of the members of each block."""
        factor = self.space.transistor.early_factor
        ohms = sum((self.high[role][self.hi[:, j]] for j, role in enumerate(self.roles)), np.zeros(len(self.lo)))
        least_gain = self.hfe * self.reach[0]
        rails = sum(float(spread.high) for spread in self.space.rails.values())
        most = rails + ohms * self.icbo * (1.0 + 1.0 / least_gain)
        self.most_lifted = False
        self.lift = (np.full(len(self.lo), float(factor(va, 0.0))), np.asarray(factor(va, most)))
        for _ in range(NARROWED):
            self.solved = {}
            low, high = self.least("vce", 1), -self.least("vce", -1)
            one, two = self.lift
            self.lift = (
                np.where(np.isfinite(low), np.maximum(one, factor(va, low)), one),
                np.where(np.isfinite(high), np.minimum(two, factor(va, high)), two),
            )
        self.solved = {}

    def at(self, ends: tuple[int, ...]) -> tuple[dict[str, Array], QPoint]:
        """Resistances and Q-point of every block at one corner; 0 is the low end of a role, 1 the high end."""
        lifted = self.va is not None and self.most_lifted
        key = (ends, lifted)
        if key not in self.solved:
            r = {
                role: self.high[role][self.hi[:, j]] if end else self.low[role][self.lo[:, j]]
                for j, (role, end) in enumerate(zip(self.roles, ends, strict=True))
            }
            values: Values = {**self.device, **r}
            if self.va is not None:
                values["lift"] = self.lift[int(lifted)]
            self.solved[key] = (values, self.frame.solve(values, active_law=True))
        return self.solved[key]

    def ends(self, quantity: str, direction: int) -> tuple[tuple[int, ...], list[int]]:
        """Corner where direction·quantity is least, and the roles whose sign is not proved."""
        ends, open_roles = [], []
        for j, role in enumerate(self.roles):
            sign = quantity_sign(quantity, role, self.frame.setting)
            if sign is None:
                open_roles.append(j)
            ends.append(0 if not sign or sign * direction > 0 else 1)
        return tuple(ends), open_roles

    def uses(self, quantity: str, direction: int) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
        """Which roles' low ends and high ends the bound of a quantity depends on."""
        ends, open_roles = self.ends(quantity, direction)
        uses = np.zeros((2, len(self.roles)), dtype=bool)
        if is_figure(quantity) or self.va is not None:
            return ~uses[0], ~uses[1]
        behind = self._behind(quantity)
        if behind:
            for name in behind:
                uses |= np.stack(self.uses(name, direction))
            if (role := quantity.partition("_")[2]) in self.roles:
                uses[0, self.roles.index(role)] = True
            return uses[0], uses[1]
        for j, role in enumerate(self.roles):
            if quantity_sign(quantity, role, self.frame.setting) != 0:
                uses[ends[j], j] = True
            # Where leakage may turn IB round, every vertex of the base side may be asked for.
            if self.icbo > 0.0 and role in self.space.network.base_side:
                uses[:, j] = True
        for j in open_roles:
            uses[:, j] = True
            condition = self.space.network.signs_while.get((quantity, self.roles[j]))
            if condition is not None:
                uses[0, self.roles.index(condition[1])] = True
                uses |= np.stack(self.uses("ic", 1))
        return uses[0], uses[1]

    def _behind(self, quantity: str) -> tuple[str, ...]:
        """Quantities with bounds of their own that the bound of this one is made of; none for one that has its own."""
        kind, _, role = quantity.partition("_")
        if quantity == POWER_OF_TRANSISTOR:
            return ("ic", "vce")
        if role in self.roles and kind in ("u", "p", "umax", "pmax"):
            return (f"i_{role}",)
        if role in self.roles and kind == "i" and quantity not in self.space.network.signs:
            return parts_of_current(self.space.network, role)
        # Of two supplies VC and VE count from unlike ends.
        if quantity == "vc" and self.ends(quantity, 1)[1] and "vee" not in self.space.rails:
            return ("vce", "ve")
        return ()

    def _least_made_up(self, quantity: str, behind: tuple[str, ...], direction: int) -> Array:
        """Bound of a sum, or of a product of quantities each at its own end."""
        kind, _, role = quantity.partition("_")
        if kind in ("i", "vc"):
            return np.asarray(sum(self.least(name, direction) for name in behind))
        if direction < 0:
            return np.full(len(self.lo), -np.inf)
        parts = [np.maximum(self.least(name, 1), 0.0) for name in behind]
        if quantity == POWER_OF_TRANSISTOR:
            # Where leakage flows out of the base it takes back this much of VBE·IB at most.
            return np.asarray(parts[0] * parts[1] - MOST_VBE * self.icbo * (1.0 + 1.0 / (self.hfe * self.reach[0])))
        ohms = self.low[role][self.lo[:, self.roles.index(role)]]
        # Of two parts the more loaded one carries half at least.
        share = 0.5 if kind.endswith("max") else 1.0
        return np.asarray(share * parts[0] * ohms if kind[0] == "u" else share * parts[0] ** 2 * ohms)

    def _least_figure(self, figure: str, direction: int) -> Array:
        """Bound of a small-signal figure, with every resistance and IC each at its own favourable end.

        The output share of what VCE leaves towards saturation is at most 1.
        """
        nothing = np.full(len(self.lo), -np.inf)
        if figure == "swing_to_saturation":
            room = np.maximum(-self.least("vce", -1) - self.space.transistor.vce_sat, 0.0)
            return nothing if direction > 0 else -room
        own = own_signs(self.space.network, figure, self.space.signal.bypass, roles=self.roles)
        along = own["ic"]
        if along is None:
            return nothing
        current = self.least("ic", 1) if along * direction >= 0 else -self.least("ic", -1)
        held = np.isfinite(current)
        ends = []
        for j, role in enumerate(self.roles):
            sign = own[role]
            if sign is None:
                held &= self.low[role][self.lo[:, j]] == self.high[role][self.hi[:, j]]
            ends.append(0 if not sign or sign * direction > 0 else 1)
        gain: Array = self.hfe
        if self.space.transistor.gain_moves:
            low, high = self._gains()
            gain = low if (own["hfe"] or 0) * direction >= 0 else high
            if own["hfe"] is None:
                held &= low == high
        values, q = self.at(tuple(ends))
        r = {role: values[role] for role in self.roles}
        mixed = q._replace(ic=np.where(held, current, 0.0))
        stage = small_signal(self.frame.setting, self.frame.sources(values), r, mixed, gain, self.t)
        return np.where(held, direction * np.asarray(getattr(stage, figure)), nothing)

    def _gains(self) -> tuple[Array, Array]:
        """Ends of the gain over each block, wherever IC and VCE lie in it."""
        least, most = np.maximum(self.least("ic", 1), 0.0), -self.least("ic", -1)
        low, high = (np.zeros(len(self.lo)),) * 2 if self.rows is None else self.rows.reach(self.device["hfe"], least, most)
        one, two = (np.ones(len(self.lo)),) * 2 if self.va is None else self.lift
        return np.asarray(self.hfe * np.exp(low) * one), np.asarray(self.hfe * np.exp(high) * two)

    def least(self, quantity: str, direction: int) -> Array:
        """Lower bound over each block of direction·quantity at this point of the box."""
        if is_figure(quantity):
            return self._least_figure(quantity, direction)
        behind = self._behind(quantity)
        if behind:
            return self._least_made_up(quantity, behind, direction)
        return self._least(quantity, direction) if self.va is None else self._least_lifted(quantity, direction)

    def _least_lifted(self, quantity: str, direction: int) -> Array:
        """The same where the Early effect lifts the gain of each member by a factor of its own between two ends."""
        before = self.most_lifted
        bound = self._least_of_lifts(quantity, direction)
        self.most_lifted = before
        return bound

    def _least_of_lifts(self, quantity: str, direction: int) -> Array:
        if quantity == "vce":
            self.most_lifted = False
            low = self._least(quantity, direction)
            if direction < 0:
                # ln IC moves by at most 1/(1 - s) of ln hFE, s the steepest rise of the rows.
                steepest = 0.0 if self.rows is None else self.rows.steepest
                return np.asarray(low - self.vt * np.log(self.lift[1] / self.lift[0]) / (1.0 - steepest))
            self.most_lifted = True
            return np.minimum(low, self._least(quantity, direction))
        along = quantity_sign(quantity, "hfe", self.frame.setting)
        if along is not None:
            self.most_lifted = along * direction < 0
            return self._least(quantity, direction)
        if quantity == "ve" and "re" in self.roles:
            j = self.roles.index("re")
            ohms = self.low["re"][self.lo[:, j]] if direction > 0 else self.high["re"][self.hi[:, j]]
            drawn = self.least("ic", direction) + self.least("ib", direction)
            known = np.isfinite(drawn) & (direction * drawn > 0.0)
            return np.asarray(np.where(known, np.where(known, drawn, 0.0) * ohms, -np.inf))
        return np.full(len(self.lo), -np.inf)

    def _least(self, quantity: str, direction: int) -> Array:
        ends, open_roles = self.ends(quantity, direction)
        values, q = self.at(ends)
        if quantity == "ic":
            return self._least_ic(ends, direction)
        if quantity == "vce":
            return self._least_vce(ends, open_roles, direction)
        nothing = np.full(len(self.lo), -np.inf)
        if open_roles:
            return nothing
        bound = direction * self.frame.measure((quantity,), values, q)
        # Where even the favourable corner leaves the reference without current, no member conducts: that bound holds.
        sound = self._carries(q) if quantity == "i_ref" and direction < 0 else self._sound(values, q)
        return np.where(sound, bound, nothing)

    def _carries(self, q: QPoint) -> NDArray[np.bool_]:
        return np.asarray((q.ib >= 0.0) & (q.ic >= self.icbo) & (q.vbe >= 0.0))

    def _sound(self, values: Values, q: QPoint) -> NDArray[np.bool_]:
        return self._carries(q) & self._conducts(values, q)

    def _conducts(self, values: Values, q: QPoint) -> NDArray[np.bool_]:
        """Whether the reference element carries current in its own direction, if there is one."""
        if self.space.reference is None:
            return np.ones(len(self.lo), dtype=bool)
        return np.asarray(self.frame.measure(("i_ref",), values, q) >= 0.0)

    def _vertices(self, ends: tuple[int, ...]) -> list[tuple[int, ...]]:
        base = [j for j, role in enumerate(self.roles) if role in self.space.network.base_side]
        corners = []
        for choice in itertools.product((0, 1), repeat=len(base)):
            corner = list(ends)
            for j, end in zip(base, choice, strict=True):
                corner[j] = end
            corners.append(tuple(corner))
        return corners

    def _least_ic(self, ends: tuple[int, ...], direction: int) -> Array:
        values, q = self.at(ends)
        conducts = self._conducts(values, q)
        if direction < 0:
            # From the greater of these two on neither IB nor VBE is negative.
            most = self.hfe * self.reach[1] * (1.0 if self.va is None else self.lift[1])
            floor = np.maximum(self.floor, (most + 1.0) * self.icbo)
            return np.where(conducts, -np.maximum(q.ic, floor), -np.inf)
        bound, sound = q.ic, (q.vbe >= 0.0) & conducts
        if np.any(q.ib < 0.0):
            every = [self.at(corner)[1] for corner in self._vertices(ends)]
            bound = np.minimum.reduce([point.ic for point in every])
            sound = conducts & np.logical_and.reduce([point.vbe >= 0.0 for point in every])
        return np.where(sound & (bound >= self.icbo), bound, 0.0)

    def _least_vce(self, ends: tuple[int, ...], open_roles: list[int], direction: int) -> Array:
        held = np.ones(len(self.lo), dtype=bool)
        for j in [j for j in open_roles if self.roles[j] != "re"]:
            condition = self.space.network.signs_while.get(("vce", self.roles[j]))
            if condition is None:
                return self._least_vce_over_feedback(direction)
            sign, role = condition
            least = self.at(self.ends("ic", 1)[0])[1].ic * self.low[role][self.lo[:, self.roles.index(role)]]
            # A role without width in a block needs no sign; where bands overlap even one value has an envelope of its own.
            own = self.roles[j]
            fixed = self.low[own][self.lo[:, j]] == self.high[own][self.hi[:, j]]
            held &= ((least >= self.vt) & (least > 0.0)) | fixed
            ends = swap(ends, j, 0 if sign * direction > 0 else 1)
            open_roles = [k for k in open_roles if k != j]
        bound = self._vce_corner(ends, open_roles, direction)
        sound = self._sound(*self.at(ends))
        conducts = self._conducts(*self.at(ends))
        for j in open_roles:
            sound &= self._sound(*self.at(swap(ends, j, 1)))
            conducts &= self._conducts(*self.at(swap(ends, j, 1)))
        if not sound.all():
            every = np.minimum.reduce([self._vce_corner(c, open_roles, direction) for c in self._vertices(ends)])
            active = np.minimum.reduce([self.at(c)[1].ic for c in self._vertices(ends)]) >= self.icbo
            active &= conducts
            bound = np.where(sound, bound, np.where(active, every, -np.inf))
        return bound if held.all() else np.where(held, bound, self._least_vce_over_feedback(direction))

    def _least_vce_over_feedback(self, direction: int) -> Array:
        """Bound of VCE = VBE + R·I over a resistor from collector to base, each factor at its own end."""
        nothing = np.full(len(self.lo), -np.inf)
        network = self.space.network
        role = next((role.name for role in network.roles if set(role.nodes) == {"b", "c"} and role.name in self.roles), None)
        if role is None:
            return nothing
        j = self.roles.index(role)
        ic = direction * self.least("ic", direction)
        current = np.asarray(sum(self.least(name, direction) for name in network.carries.get(role, (f"i_{role}",))))
        ohms = np.where(current >= 0.0, self.low[role][self.lo[:, j]], self.high[role][self.hi[:, j]])
        known = np.isfinite(current) & np.isfinite(ic) & (ic > 0.0)
        vbe = self.space.transistor.vbe_at(np.where(known, ic, 1.0), self.t, self.device["delta"])
        return np.where(known, direction * vbe + ohms * np.where(known, current, 0.0), nothing)

    def _vce_corner(self, ends: tuple[int, ...], open_roles: list[int], direction: int) -> Array:
        """Least of direction·VCE over re at one corner of the other roles."""
        if not open_roles:
            return np.asarray(direction * self.at(ends)[1].vce)
        (j,) = open_roles
        values, small = self.at(swap(ends, j, 0))
        large = self.at(swap(ends, j, 1))[1]
        if self.rows is not None:
            return self._vce_between(values, small, large, direction)
        if direction > 0:
            return np.minimum(small.vce, large.vce)
        top = np.maximum(small.vce, large.vce)
        if self.space.transistor.vbe_model == "fixed":
            return -top
        r = {role: values[role] for role in self.roles}
        port = self.space.network.two_port(self.frame.sources(values), r, self.t)
        own = self.hfe if self.va is None else self.hfe * self.lift[int(self.most_lifted)]
        slope = np.asarray((port.z_bb - port.z_cb) / own + (port.z_bc - port.z_cc))
        vt = thermal_voltage(self.t)
        # A slope of zero or more has no stationary point: the comparison below is then false.
        with np.errstate(divide="ignore", invalid="ignore"):
            current = np.where(slope < 0.0, -vt / slope, np.inf)
            inside = (current < small.ic) & (current > large.ic)
            peak = small.vce + slope * (current - small.ic) + vt * np.log(current / small.ic)
        return -np.where(inside, np.maximum(peak, top), top)

    def _vce_between(self, values: dict[str, Array], small: QPoint, large: QPoint, direction: int) -> Array:
        """The same with gain that goes with IC: the line of the least or the greatest gain of the range bounds that of all."""
        assert self.rows is not None
        r = {role: values[role] for role in self.roles}
        port = self.space.network.two_port(self.frame.sources(values), r, self.t)
        across = np.asarray(port.z_bb - port.z_cb)
        low, high = self.rows.reach(self.device["hfe"], large.ic, small.ic)
        own = self.hfe if self.va is None else self.hfe * self.lift[int(self.most_lifted)]
        gain = own * np.exp(high if direction > 0 else low)
        # IB + ICBO = (IC - ICBO)/hFE, of the end itself and with the gain that bounds the range.
        ends = [q.vce + across * ((q.ic - self.icbo) / gain - (q.ib + self.icbo)) for q in (small, large)]
        if direction > 0:
            return np.minimum(*ends)
        top = np.maximum(*ends)
        if self.space.transistor.vbe_model == "fixed":
            return -top
        slope = np.asarray(across / gain + (port.z_bc - port.z_cc))
        vt = thermal_voltage(self.t)
        with np.errstate(divide="ignore", invalid="ignore"):
            current = np.where(slope < 0.0, -vt / slope, np.inf)
            inside = (current < small.ic) & (current > large.ic)
            peak = ends[0] + slope * (current - small.ic) + vt * np.log(current / small.ic)
        return -np.where(inside, np.maximum(peak, top), top)


def swap(ends: tuple[int, ...], position: int, end: int) -> tuple[int, ...]:
    """A corner with the end of one role exchanged."""
    return (*ends[:position], end, *ends[position + 1 :])
