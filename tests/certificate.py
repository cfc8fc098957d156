"""Check a certificate of `restpoint find --certificate FILE`: is the whole space excluded but for the candidates listed?

    python -m tests.certificate FILE

Nothing of the search is used: the circuit comes from the nodes in the file, by nodal analysis, the Q-point from the laws of
section 4 of the design by the Wright omega function, and only small-signal figures from `synth.signal`. A block is bounded
at the one corner where the signs in the file put the least value; the signs themselves are tested in `test_networks.py`.
"""

import json
import sys
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import wrightomega

from synth.networks import NETWORKS
from synth.networks.form import QPoint
from synth.signal import FIGURES, Signal, SmallSignal

Array = NDArray[Any]
K_OVER_Q, T0 = 1.380649e-23 / 1.602176634e-19, 298.15
ROUNDING = 1e-9
"""Relative: what two ways of solving one circuit may differ by, with a wide margin."""
CUT_OFF = 1e-9


class Refused(Exception):
    """A certificate that does not prove what it says."""


def check(condition: bool | np.bool_, *what: object) -> None:
    if not condition:
        raise Refused(" ".join(map(str, what)))


def covers(lo: Array, hi: Array, low: Array, high: Array) -> bool:
    """Whether blocks fill a box without a gap: cut between two of them until one is left, which must be the box itself."""
    if len(lo) == 1:
        return bool((lo[0] == low).all() and (hi[0] == high).all())
    for j in range(len(low)):
        order = np.argsort(lo[:, j], kind="stable")
        reach = np.maximum.accumulate(hi[order, j])
        if (cuts := np.flatnonzero(lo[order[1:], j] > reach[:-1])).size:
            k = cuts[len(cuts) // 2]
            below, above, end, start = order[: k + 1], order[k + 1 :], high.copy(), low.copy()
            end[j], start[j] = reach[k], reach[k] + 1
            return covers(lo[below], hi[below], low, end) and covers(lo[above], hi[above], start, high)
    return False


class Point:
    """One space at one point of the box: its device, and its circuit at any resistances."""

    def __init__(self, space: dict[str, Any], point: dict[str, float]) -> None:
        check(all(0.0 <= x <= 1.0 for axis, x in point.items() if axis != "temperature"), "outside of the box:", point)
        self.space, device = space, space["device"]
        self.t = t = point.get("temperature", space["temperature"][1])
        check(space["temperature"][0] <= t <= space["temperature"][2], "outside of the ambient range:", t)

        def at(axis: str, spread: Sequence[float]) -> float:
            x = point.get(axis)
            return spread[1] if x is None else spread[0] + x * (spread[2] - spread[0])

        self.vt, ratio, nominal = K_OVER_Q * t, t / T0, device["vbe"][1]
        law = device["gap"] - (device["gap"] - nominal) * ratio - 3.0 * self.vt * np.log(ratio)
        self.vbe = (nominal if device["fixed"] else law) + at("delta", device["vbe"]) - nominal
        self.h = at("hfe", device["hfe"]) * ratio ** (1.5 if t >= T0 else 2.5)
        growth = np.log(2.0) / 10.0
        if device["icbo_hot"] and device["icbo"][2]:
            growth = np.log(device["icbo_hot"][0] / device["icbo"][2]) / (device["icbo_hot"][1] - T0)
        self.leak = at("icbo", device["icbo"]) * np.exp(growth * (t - T0))
        self.volts = {"0": 0.0} | {rail: at(rail, s) * (-1.0 if rail == "vee" else 1.0) for rail, s in space["rails"].items()}
        if ref := space["reference"]:
            tc, rise, (least, middle, most) = ref["tc"], t - T0, ref["voltage"]
            ends = (least + min(tc[0] * rise, tc[2] * rise), middle + tc[1] * rise, most + max(tc[0] * rise, tc[2] * rise))
            self.slope = at("r_ref", ref["slope"])
            self.vref = at("delta_ref", ends) - self.slope * ref["current"]
        self.own: dict[str, Array] = {}
        for role, part in space["lists"].items():
            ohms, band, two = np.array(part["ohms"]), np.array(part["band"]), [np.array(part[k]) for k in ("tcr_low", "tcr_high")]
            swing = [tcr * (t - T0) for tcr in two]
            low, high = ohms * (1.0 - band + np.minimum(*swing)), ohms * (1.0 + band + np.maximum(*swing))
            still = np.clip(ohms, low, high) if point else ohms
            x = point.get(role)
            self.own[role] = still if x is None else (1.0 - x) * low + x * high
        self.least = {role: np.minimum.accumulate(r[::-1])[::-1] for role, r in self.own.items()}
        self.most = {role: np.maximum.accumulate(r) for role, r in self.own.items()}

    def solve(self, r: Mapping[str, Array]) -> dict[str, Array]:
        """Every quantity at these resistances, in the active region."""
        space, home, n = self.space, self.space["home"], len(next(iter(r.values())))
        branches = [(*space["nodes"][role], 1.0 / ohms, 0.0) for role, ohms in r.items()]
        if space["reference"]:
            branches.append((home["m"], "0", np.full(n, 1.0 / self.slope), self.vref))
        names = sorted({node for one, two, *_ in branches for node in (one, two)} - set(self.volts))
        g, sources = np.zeros((n, len(names), len(names))), np.zeros((n, len(names), 3))
        for one, two, conductance, emf in branches:
            for node, other, sign in ((one, two, 1.0), (two, one, -1.0)):
                if node in names:
                    k = names.index(node)
                    g[:, k, k] += conductance
                    sources[:, k, 0] += conductance * sign * emf
                    if other in names:
                        g[:, k, names.index(other)] -= conductance
                    else:
                        sources[:, k, 0] += conductance * self.volts[other]
        for column, (into, out) in enumerate((("b", "e"), ("c", "e")), start=1):
            for node, sign in ((into, -1.0), (out, 1.0)):
                if home[node] in names:
                    sources[:, names.index(home[node]), column] += sign
        solved = np.linalg.solve(g, sources)
        fixed = {node: np.stack([np.full(n, v), np.zeros(n), np.zeros(n)], axis=1) for node, v in self.volts.items()}
        line = fixed | {node: solved[:, k] for k, node in enumerate(names)}
        loop = line[home["b"]] - line[home["e"]]
        offset, device = self.leak * (1.0 + 1.0 / self.h), space["device"]
        z = -loop[:, 1] / self.h - loop[:, 2]
        drive = loop[:, 0] - loop[:, 1] * offset - self.vbe
        ic = np.maximum(drive, 0.0) / z
        if not device["fixed"]:
            ic = wrightomega(drive / self.vt + np.log(z * device["vbe_ic"] / self.vt)) * self.vt / z
        ib = ic / self.h - offset
        v = {node: x[:, 0] + x[:, 1] * ib + x[:, 2] * ic for node, x in line.items()}
        node = {name: v[home[name]] for name in ("b", "c", "e")}
        found = {"ic": ic, "ib": ib, "vbe": node["b"] - node["e"], "vce": node["c"] - node["e"], "vc": node["c"]}
        # Without re nothing drops; of the collector-base loop re is no part, so VCE is a concave function of IC along it.
        found |= {"ve": np.zeros(n), "i_ref": np.zeros(n)}
        found["bend"] = (line[home["c"]] - line[home["b"]]) @ np.array([0.0, 1.0 / self.h, 1.0])
        for role, (one, two) in space["nodes"].items():
            found[f"u_{role}"] = v[one] - v[two]
            found[f"i_{role}"], found[f"p_{role}"] = found[f"u_{role}"] / r[role], found[f"u_{role}"] ** 2 / r[role]
        if "re" in r:
            found["ve"] = found["u_re"]
        if space["reference"]:
            found["i_ref"] = (v[home["m"]] - self.vref) / self.slope
        found["p_q"] = found["vce"] * ic + found["vbe"] * ib
        found["span"] = np.full(n, self.volts.get("vload", self.volts["vcc"]) - self.volts.get("vee", 0.0))
        if not space["nodes"].keys() - r.keys() and NETWORKS[space["network"]].takes_signal:
            q = QPoint(ic, ib, found["vbe"], found["vce"], np.zeros(n, dtype=np.int8))
            stage = SmallSignal(network=NETWORKS[space["network"]], r=r, q=q, hfe=np.asarray(self.h), temperature=np.asarray(self.t),
                                vce_sat=device["vce_sat"], signal=Signal(**space["signal"]), r_ref=getattr(self, "slope", None))  # fmt: skip
            found["figures"] = stage  # type: ignore[assignment]
        return found

    def value(self, name: str, found: Mapping[str, Array]) -> Array:
        return np.asarray(getattr(found["figures"], name)) if name in FIGURES else found[name]

    def sound(self, found: Mapping[str, Array]) -> Array:
        """The premise of the signs."""
        flows = (found["ib"] >= 0.0) & (found["ic"] >= self.leak) & (found["vbe"] >= 0.0)
        return np.asarray(flows & (found["i_ref"] >= 0.0))

    def corner(self, ends: Mapping[str, bool], lo: Array, hi: Array) -> dict[str, Array]:
        rows = enumerate(self.own)
        return {role: self.most[role][hi[:, j]] if ends[role] else self.least[role][lo[:, j]] for j, role in rows}

    def bound(self, name: str, side: int, lo: Array, hi: Array) -> Array:
        """Least of side times a quantity over each block; minus infinity where the signs do not tell."""
        signs, nothing = self.space["signs"].get(name), np.full(len(lo), -np.inf)
        kind, _, role = name.partition("_")
        if signs is None and kind in ("u", "p") and side > 0:
            current = np.maximum(self.bound(f"i_{role}", 1, lo, hi), 0.0)
            return np.asarray(current ** (1 if kind == "u" else 2) * self.corner(dict.fromkeys(self.own, False), lo, hi)[role])
        if name == "vc" and None in (signs or {"": None}).values() and "vee" not in self.volts:
            return self.bound("vce", side, lo, hi) + self.bound("ve", side, lo, hi)
        if signs is None and name in self.space["carries"]:
            return np.asarray(sum(self.bound(part, side, lo, hi) for part in self.space["carries"][name]))
        if signs is None:
            return nothing
        held, signs = np.ones(len(lo), dtype=bool), dict(signs)
        for quantity, role, sign, other in self.space["while"]:
            if quantity == name and signs.get(role, 0) is None:
                corner = self.corner({r: (self.space["signs"]["ic"][r] or 0) < 0 for r in self.own}, lo, hi)
                found = self.solve(corner)
                vt = 0.0 if self.space["device"]["fixed"] else self.vt
                held &= self.sound(found) & (found["ic"] * self.least[other][lo[:, list(self.own).index(other)]] >= vt)
                signs[role] = sign
        along = [role for role, sign in signs.items() if sign is None]
        if along and (name != "vce" or along != ["re"]):
            return nothing
        ends = {role: bool(sign is not None and sign * side < 0) for role, sign in signs.items()}
        corners = [self.corner({**ends, "re": end}, lo, hi) for end in (False, True)] if along else [self.corner(ends, lo, hi)]
        solved = [self.solve(corner) for corner in corners]
        values = [side * self.value(name, found) for found in solved]
        if along and side < 0 and not self.space["device"]["fixed"]:
            small, large = solved
            with np.errstate(divide="ignore", invalid="ignore"):
                flat = -self.vt / small["bend"]
                top = small["vce"] + small["bend"] * (flat - small["ic"]) + self.vt * np.log(flat / small["ic"])
                inside = (small["bend"] < 0.0) & (flat < small["ic"]) & (flat > large["ic"])
            values.append(np.where(inside, -top, np.inf))
        held &= np.logical_and.reduce([self.sound(found) for found in solved])
        return np.where(held, np.minimum.reduce(values), -np.inf)


def shape(space: dict[str, Any], need: dict[str, Any], side: int, lo: Array, hi: Array) -> Array:
    """A limit on resistances alone, at its favourable corner: the feed of the base, or the share of rc."""
    rises = {"rc": 1, "re": -1} if need["name"] == "collector_share" else dict.fromkeys(space["base_side"], 1)
    lists = {role: np.array(part["ohms"]) for role, part in space["lists"].items()}
    r = {role: x[(lo if rises.get(role, 0) * side > 0 else hi)[:, j]] for j, (role, x) in enumerate(lists.items())}
    if need["name"] == "collector_share":
        return np.asarray(side * r["rc"] / (r["rc"] + r["re"]))
    return side / np.asarray(sum(1.0 / r[role] for role in space["base_side"]))


def measured(space: dict[str, Any], test: dict[str, Any], lo: Array, hi: Array, leaf: bool) -> Array:
    """Least of side times what a test asks for, over each block."""
    if not test["names"]:
        return shape(space, space["needs"][test["need"]], test["side"], lo, hi)
    point = Point(space, test["point"])
    if not leaf:
        return np.asarray(sum(point.bound(name, test["side"], lo, hi) for name in test["names"]))
    found = point.solve({role: r[lo[:, j]] for j, (role, r) in enumerate(point.own.items())})
    return np.asarray(test["side"] * sum(point.value(name, found) for name in test["names"]))


def beyond(head: dict[str, Any], space: dict[str, Any], test: dict[str, Any], bound: Array) -> Array:
    """Whether bounds put what a test asks for beyond the limit of the search, or outside of what a requirement allows."""
    side = test["side"]
    if test["need"] is None:
        (name,) = test["names"]
        score = head["weights"][name] * (bound / head["aims"][name] - side)
        return np.asarray(score > (np.inf if head["limit"] is None else head["limit"]))
    if test["need"] == -1:
        return np.asarray(-bound <= CUT_OFF)
    need = space["needs"][test["need"]]
    check(not test["point"] or not need["nominal"], "a shape rule holds at nominal values:", test)
    end = need["high"] if side > 0 else need["low"]
    check(end is not None, "nothing is asked on this side:", test)
    return np.asarray(bound > side * (end + need["offset"]))


def verify(lines: Iterator[str]) -> tuple[int, int]:
    """Check a certificate; the numbers of blocks and of candidates in it."""
    head = json.loads(next(lines))
    rows: dict[int, list[Any]] = {k: [] for k in range(len(head["spaces"]))}
    for line in lines:
        number, *row = json.loads(line)
        rows[number].append(row)
    scores = []
    for number, space in enumerate(head["spaces"]):
        lo, hi = (np.array([row[k] for row in rows[number]], dtype=int) for k in (0, 1))
        bounds = np.array([row[3] for row in rows[number]])
        sizes = np.array([len(part["ohms"]) for part in space["lists"].values()])
        check(len(lo) and covers(lo, hi, 0 * sizes, sizes - 1), "space", number, "is not covered")
        tests = np.array([row[2] if isinstance(row[2], int) else -1 for row in rows[number]])
        for k, test in enumerate(space["tests"]):
            own = np.flatnonzero(tests == k)
            if own.size:
                value = measured(space, test, lo[own], hi[own], leaf=False)
                holds = (value >= bounds[own] - ROUNDING * np.abs(bounds[own])) & beyond(head, space, test, bounds[own])
                check(holds.all(), "space", number, "test", k, "does not exclude", lo[own][~holds][:1], hi[own][~holds][:1])
        for k in np.flatnonzero(tests < 0):
            test, place = rows[number][k][2], lo[[k]]
            check((place == hi[[k]]).all(), "a candidate is one:", place)
            value = measured(space, test, place, place, leaf=True)
            check(abs(value - bounds[k]) <= ROUNDING * abs(bounds[k]), "candidate", place, "does not reach", bounds[k])
            if test["listed"]:
                (name,) = test["names"]
                check(test["need"] is None, "a listed candidate has a drift:", place)
                scores.append(head["weights"][name] * (bounds[k] / head["aims"][name] - test["side"]))
            else:
                check(beyond(head, space, test, bounds[[k]])[0], "candidate", place, "is not excluded")
    scores.sort()
    limit = scores[head["top"] - 1] if len(scores) >= head["top"] else None
    check((limit is None) == (head["limit"] is None), "the limit is not that of the last candidate listed")
    if limit is not None:
        check(abs(limit - head["limit"]) <= ROUNDING * limit, "the limit is not that of the last candidate listed")
    check(all(score <= limit * (1.0 + ROUNDING) for score in scores) if limit else True, "a candidate is beyond the limit")
    return sum(len(own) for own in rows.values()), len(scores)


if __name__ == "__main__":
    try:
        with open(sys.argv[1], encoding="utf-8") as file:
            blocks, listed = verify(file)
    except Refused as reason:
        sys.exit(f"refused: {reason}")
    print(f"proved: {blocks} blocks and candidates fill the space, {listed} candidates are listed and nothing else qualifies below")
