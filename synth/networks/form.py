"""The form that a network file fills in."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable, Mapping
from dataclasses import dataclass, field
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Value = NDArray[np.float64] | float
Rails = Mapping[str, Value]
"""Rail voltages by name, magnitudes [V]; arrays broadcast with the resistances.

Where a reference element stands in the circuit, it comes with them as the straight line ``vref`` + ``r_ref``·I: the voltage
that the line meets at no current [V] and the slope resistance [ohm].
"""
Resistances = Mapping[str, Value]
"""Resistances by role [ohm]; an absent optional role has no key."""
Sign = int | None
"""+1, −1 or 0 where proved, None where the sign depends on the values."""


class TwoPort(NamedTuple):
    """What the transistor sees: two open-circuit voltages [V] and four resistances [ohm]."""

    e_b: Value
    z_bb: Value
    z_bc: Value
    e_c: Value
    z_cb: Value
    z_cc: Value


class QPoint(NamedTuple):
    """A solved operating point: currents [A] and voltages [V] in NPN signs, and a region code of each element."""

    ic: Array
    ib: Array
    vbe: Array
    vce: Array
    region: NDArray[np.int8]

    @property
    def power(self) -> Array:
        """What the transistor dissipates [W]."""
        return np.asarray(self.vce * self.ic + self.vbe * self.ib)


def common_sign(signs: Iterable[Sign]) -> Sign:
    """Sign of a sum of terms, where their signs decide it.

    Parameters
    ----------
    signs : iterable of int or None
        Sign of each term.

    Returns
    -------
    int or None
        0 if all are; None where one is unknown or two disagree.
    """
    moving = set(signs) - {0}
    if not moving:
        return 0
    return moving.pop() if len(moving) == 1 else None


class Branches(NamedTuple):
    """Voltages and currents around the Q-point, NPN signs, against 0 V.

    `voltage` [V] and `current` [A] of each role count from its first node to its second; `rail` is the current drawn
    from each rail [A]; `nodes` are the voltages of base, collector and emitter [V].
    """

    voltage: dict[str, Value]
    current: dict[str, Value]
    rail: dict[str, Value]
    nodes: dict[str, Value]


@dataclass(frozen=True, kw_only=True)
class Role:
    """A resistor's place in a network.

    Parameters
    ----------
    name : str
        ``r1 r2 rb rc re``...
    meaning : str
        What it does, in a few words.
    nodes : tuple of str
        The two nodes it hangs between: rails by name, ``0`` for 0 V, ``b c e`` for the transistor, ``m`` for the upper end
        of the reference element, which is ``0`` where there is none.
    optional : bool or "reference"
        Whether the network also works without it; "reference": only where a reference element is given.
    absent : {"short", "open"}
        What stands in the place of an absent optional resistor: its two nodes in one, or nothing.
    """

    name: str
    meaning: str
    nodes: tuple[str, str]
    optional: bool | Literal["reference"] = False
    absent: Literal["short", "open"] = "short"


@dataclass(frozen=True, kw_only=True)
class Network:
    """One way of connecting the resistors.

    Parameters
    ----------
    name, title : str
        Identifier and plain title.
    summary : str
        One sentence: what the network is good for and what it costs.
    rails : tuple of str
        Rails that must be given; ``vcc`` first.
    optional_rails : tuple of str
        Rails that may be given; each stands for ``vcc`` when it is not.
    roles : tuple of Role
        In the order of output.
    two_port : callable
        ``two_port(rails, r, t)``: rails [V], resistances [ohm], temperature [K], all broadcast, to a `TwoPort`. It takes
        complex resistances and rails too, so that derivatives can be taken by a complex step.
    branches : callable
        ``branches(rails, r, q)``: a solved Q-point to `Branches`; holds in every region, since the network is linear.
    signs : mapping
        Proved signs of ``ic``, ``vce`` and of role currents ``i_<role>`` against each rail and role, and against
        ``delta hfe icbo``, and against ``delta_ref``, the voltage of the reference element, while current flows into the
        base (IB ≥ 0), IC exceeds ICBO, VBE is above 0 and the reference conducts. What is not named is None.
    signs_while : mapping
        Signs proved under a condition: ``{(quantity, parameter): (sign, role)}`` holds while the resistance of that role
        times IC is at least VT.
    vce_held : mapping
        Proved signs of VCE against each rail and role while IC and IB are held, IB ≥ 0 and IC ≥ 0: what the gain feels of a
        parameter under the Early effect. What is not named is unknown.
    draws : mapping
        Each rail's current as the sum of its parts, ``ic ib`` and role currents; a rail that is not given adds its parts
        to ``vcc``.
    bleeder : str, optional
        The role that carries the bleeder current.
    tied : mapping
        Nodes of the transistor that are wired to a rail without a resistor, such as the collector of a follower.
    shared_rails : bool
        Whether rc and re hang between the same two rails, so that they divide one supply voltage between them.
    base_side : tuple of str
        Roles whose parallel connection feeds the base.
    carries : mapping
        Currents whose sum each resistor carries, where the table of signs does not name it.
    reference : {"no", "optional", "needed"}
        Whether a reference element can stand between the nodes ``m`` and ``0``; its current is ``i_ref``.
    takes_signal : bool
        Whether a signal enters at the base, which the base feed would load.
    sinks : bool
        Whether the collector feeds a load of somebody else's on its own rail: VCE is then the load's affair and the limit
        ``compliance`` counts in its place.
    """

    name: str
    title: str
    summary: str
    rails: tuple[str, ...] = ("vcc",)
    optional_rails: tuple[str, ...] = ()
    roles: tuple[Role, ...]
    two_port: Callable[[Rails, Resistances, Value], TwoPort]
    branches: Callable[[Rails, Resistances, QPoint], Branches]
    signs: Mapping[str, Mapping[str, Sign]]
    draws: Mapping[str, tuple[str, ...]]
    signs_while: Mapping[tuple[str, str], tuple[int, str]] = field(default_factory=dict)
    vce_held: Mapping[str, Sign] = field(default_factory=dict)
    bleeder: str | None = None
    tied: Mapping[str, str] = field(default_factory=dict)
    shared_rails: bool = True
    base_side: tuple[str, ...] = ()
    carries: Mapping[str, tuple[str, ...]] = field(default_factory=lambda: {"rc": ("ic",), "re": ("ic", "ib")})
    reference: Literal["no", "optional", "needed"] = "no"
    takes_signal: bool = True
    sinks: bool = False

    def optional(self, role: Role, has_reference: bool) -> bool:
        """Whether the network works without a role.

        Parameters
        ----------
        role : Role
            One of its roles.
        has_reference : bool
            Whether a reference element is given.

        Returns
        -------
        bool
            True if the resistor may be absent.
        """
        return has_reference and self.reference != "no" if role.optional == "reference" else role.optional

    @property
    def role_names(self) -> tuple[str, ...]:
        """Names of the roles, in the order of output."""
        return tuple(role.name for role in self.roles)

    def role(self, name: str) -> Role:
        """The role of a name.

        Parameters
        ----------
        name : str
            One of `role_names`.

        Returns
        -------
        Role
            Its description.
        """
        return next(role for role in self.roles if role.name == name)

    def rail_parts(self, rails: Collection[str]) -> dict[str, tuple[str, ...]]:
        """Parts of the current drawn from each rail that is given.

        Parameters
        ----------
        rails : collection of str
            Names of the rails given.

        Returns
        -------
        dict
            Rail to the names of the currents that add up to its own.
        """
        parts: dict[str, tuple[str, ...]] = {}
        for rail, names in self.draws.items():
            owner = rail if rail in rails else "vcc"
            parts[owner] = parts.get(owner, ()) + names
        return parts

    def sign(self, quantity: str, parameter: str) -> Sign:
        """Proved sign of a quantity's derivative, or None.

        Parameters
        ----------
        quantity : str
            ``ic``, ``ib``, ``vce`` or ``i_<role>``.
        parameter : str
            A rail, a role, or ``delta hfe icbo delta_ref r_ref``.

        Returns
        -------
        int or None
            +1, −1, 0, or None where nothing is proved.
        """
        if quantity == "ib":
            # IB = IC/h − (1 + 1/h)·ICBO follows IC, except where the device itself changes: then the base loop lowers it.
            return -1 if parameter in ("hfe", "icbo") else self.signs["ic"].get(parameter)
        return self.signs.get(quantity, {}).get(parameter)
