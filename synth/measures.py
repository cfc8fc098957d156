"""Every quantity that a limit can ask for: its value at a solved point, and what is proved of its slopes.

Names are ``ic ib vce vbe``; ``vc``, the collector against 0 V, and ``ve``, the drop of re; ``i_<role>``, ``u_<role>`` and
``p_<role>`` for the current, voltage and power of a resistor; ``u_<role>a``, ``p_<role>b`` and so on for one part of a pair,
``umax_<role>`` and ``pmax_<role>`` for the more loaded one; ``i_ref`` for the reference element; ``rail_<rail>`` for what
is drawn from a rail; ``span`` for the voltage that stands across the transistor once it is cut off; ``p_q`` for what the
transistor dissipates; ``v_<node>_<ground>`` for a node against what is 0 V, in NPN signs; and the small-signal
parameters ``gm r_pi r_intrinsic`` and figures of `synth.signal`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from synth.networks.form import Array, Branches, Network, QPoint, Rails, Resistances, Sign, Value, common_sign
from synth.parts import HALVES, Parts
from synth.signal import CORNER, FIGURES, Signal, SmallSignal, signs
from synth.transistor import Transistor

POWER_OF_TRANSISTOR = "p_q"
PARAMETERS_OF_SIGNAL = ("gm", "r_pi", "r_intrinsic")
BYPASS = "bypass_resistance"
"""Resistance that the bypass capacitor of re sees; only where there is one."""
UPPER = "upper_re"
"""Upper part of a re in two parts: a parameter that only small-signal figures depend on [ohm]."""
PARAMETERS_OF_DEVICE = ("delta", "hfe", "icbo", "va", "delta_ref", "r_ref")


@dataclass(frozen=True, kw_only=True, eq=False)
class Setting:
    """What a quantity depends on besides the values of the parameters.

    Parameters
    ----------
    network : Network
        How the resistors are connected.
    transistor : Transistor
        Its laws.
    roles : tuple of str
        Roles used.
    signal : Signal
        What the signal meets.
    parts : mapping of str to Parts
        The resistors of each role; needed for what one part of a pair carries.
    """

    network: Network
    transistor: Transistor
    roles: tuple[str, ...]
    signal: Signal
    parts: Mapping[str, Parts] = field(default_factory=dict)


def is_figure(name: str) -> bool:
    """Whether a quantity is a small-signal figure.

    Parameters
    ----------
    name : str
        Name of a quantity.

    Returns
    -------
    bool
        True for those of `synth.signal`.
    """
    return name in FIGURES or name == CORNER


def share_of(name: str, roles: Sequence[str]) -> tuple[str, str, tuple[int, ...]] | None:
    """What a quantity of one part of a pair is a share of.

    Parameters
    ----------
    name : str
        Name of a quantity.
    roles : sequence of str
        Roles used; no unit matters.

    Returns
    -------
    tuple of (str, str, tuple of int) or None
        ``p`` or ``u``, the role, and which parts, of which the more loaded one counts; None for any other quantity.
    """
    kind, _, what = name.partition("_")
    if kind in ("pmax", "umax") and what in roles:
        return kind[0], what, (0, 1)
    if kind in ("p", "u") and what not in roles and what[:-1] in roles and what[-1:] in HALVES:
        return kind, what[:-1], (HALVES.index(what[-1]),)
    return None


def power_of(name: str, roles: Sequence[str]) -> str | None:
    """The resistor whose power a quantity is, or is a share of.

    Parameters
    ----------
    name : str
        Name of a quantity.
    roles : sequence of str
        Roles used; no unit matters.

    Returns
    -------
    str or None
        Its role; None for a quantity that is no power of a resistor.
    """
    kind, role, _ = share_of(name, roles) or (*name.partition("_")[::2], ())
    return role if kind == "p" and role in roles else None


def small_signal(
    setting: Setting, sources: Rails, r: Resistances, q: QPoint, gain: Array, temperature: Array
) -> SmallSignal:
    """The small-signal stage at solved points.

    Parameters
    ----------
    setting : Setting
        Network and signal.
    sources : mapping of str to array_like
        Rails and reference element [V, ohm].
    r : mapping of str to array_like
        Resistances [ohm].
    q : QPoint
        The Q-point.
    gain, temperature : ndarray
        hFE at that temperature [-], and the temperature [K].

    Returns
    -------
    SmallSignal
        Its figures, of the broadcast shape.
    """
    return SmallSignal(
        network=setting.network,
        r=r,
        q=q,
        hfe=gain,
        temperature=temperature,
        vce_sat=setting.transistor.vce_sat,
        signal=setting.signal,
        r_ref=sources.get("r_ref"),
        upper=sources.get(UPPER),
    )


def measure(
    name: str, setting: Setting, sources: Rails, r: Resistances, q: QPoint, branches: Branches, gain: Array, temperature: Array
) -> Array:
    """One quantity at solved points.

    Parameters
    ----------
    name : str
        Its name.
    setting : Setting
        Network and signal.
    sources : mapping of str to array_like
        Rails and reference element [V, ohm].
    r : mapping of str to array_like
        Resistances [ohm].
    q : QPoint
        The Q-point.
    branches : Branches
        Voltages and currents around it.
    gain, temperature : ndarray
        hFE at that temperature [-], and the temperature [K].

    Returns
    -------
    ndarray
        Of the broadcast shape [A, V, W, ohm or -].
    """
    if name in QPoint._fields:
        return np.asarray(getattr(q, name))
    if name == POWER_OF_TRANSISTOR:
        return q.power
    if name == "vc":
        return np.asarray(branches.nodes["c"])
    if name == "ve":
        return np.asarray(branches.voltage.get("re", 0.0 * q.ic))
    if name == "span":
        return np.asarray(sources.get("vload", sources["vcc"]) + sources.get("vee", 0.0) + 0.0 * q.ic)
    if is_figure(name) or name in (*PARAMETERS_OF_SIGNAL, BYPASS):
        return np.asarray(getattr(small_signal(setting, sources, r, q, gain, temperature), name))
    shared = share_of(name, setting.roles)
    if shared is not None:
        of, role, halves = shared
        whole = measure(f"{of}_{role}", setting, sources, r, q, branches, gain, temperature)
        shares = [setting.parts[role].shares(half, np.asarray(r[role]), temperature) for half in halves]
        return np.asarray(np.maximum.reduce([power if of == "p" else voltage for power, voltage in shares]) * whole)
    kind, _, what = name.partition("_")
    if kind == "rail":
        return np.asarray(branches.rail[what])
    if kind == "v":
        node, _, ground = what.partition("_")
        return np.asarray(branches.nodes[node] - ground_voltage(sources, ground, setting.transistor.polarity) + 0.0 * q.ic)
    if kind == "p":
        return np.asarray(branches.voltage[what] * branches.current[what])
    return np.asarray(branches.voltage[what] if kind == "u" else branches.current[what])


def sign(name: str, axis: str, setting: Setting) -> Sign:
    """Proved sign of a quantity along an axis of the box.

    Parameters
    ----------
    name : str
        Its name.
    axis : str
        A rail, a role, or ``delta hfe icbo delta_ref r_ref``.
    setting : Setting
        Network and signal.

    Returns
    -------
    int or None
        +1, −1, 0, or None where nothing is proved.

    Notes
    -----
    Gain that goes with IC alone changes nothing: at given device and temperature IB stays a rising function of IC. Under the
    Early effect the device says d IB·(1/(IB + I0) − κ·z_cb) = d IC·(1/(IC − I0) − s/IC + κ·z_cc) − κ·V, where κ = 1/(VA + VCE),
    s is the slope of the rows and V what a parameter does to VCE while IC and IB are held (`Network.vce_held`); the first
    bracket is positive under the premise z_cb·(e_b/z_bb + I0) ≤ VA, since IB ≤ e_b/z_bb. So

    - where V is 0, as along everything that belongs to the base alone, IB is a rising function of IC and every proof stands;
    - elsewhere IC follows the common sign of V and of what the parameter does to the base loop;
    - where the base loop does not feel the parameter, IC and IB move apart, so the gain moves with IC, and with it VCE;
    - of anything else nothing is claimed, nor of the Early voltage itself.

    A resistor's current is positive where the signs of its network hold. u = R·i and p = R·i² follow it along every axis
    but their own; along their own they rise where the current does not depend on it.
    """
    if axis == UPPER:
        return None if is_figure(name) or name == BYPASS else 0
    if setting.transistor.va is None or name == "span":
        return _sign(name, axis, setting)
    network = setting.network
    held = 0 if axis in PARAMETERS_OF_DEVICE else network.vce_held.get(axis)
    if axis == "va" or held is None:
        return None
    if held == 0:
        return _sign(name, axis, setting)
    loop = network.sign("ic", axis)
    if name == "ic":
        return common_sign((loop, held))
    return held if name == "vce" and loop == 0 else None


def _sign(name: str, axis: str, setting: Setting) -> Sign:
    """Proved sign where VCE has no say in the gain."""
    network = setting.network
    if name == "span":
        return 0 if axis in (*setting.roles, *PARAMETERS_OF_DEVICE) else 1
    if name in (POWER_OF_TRANSISTOR, BYPASS):
        return None
    if name in PARAMETERS_OF_SIGNAL:
        behind = ("ic", "ib") if name == "r_intrinsic" else ("ic",)
        current = common_sign(network.sign(part, axis) for part in behind)
        if name == "gm" or current is None:
            return current
        # IC/h = IB + (1 + 1/h)·ICBO falls along hfe, as IB does.
        return 1 if name == "r_pi" and axis == "hfe" else -current
    if is_figure(name):
        moves = setting.transistor.gain_moves
        return signs(network, name, setting.signal.bypass, roles=setting.roles, gain_moves=moves).get(axis)
    shared = share_of(name, setting.roles)
    if shared is not None:
        # The share depends on the total and the temperature alone.
        return None if axis == shared[1] else current_sign(network, shared[1], axis)
    kind, _, role = name.partition("_")
    if kind == "v":
        node, _, ground = role.partition("_")
        return _node_sign(node, ground, axis, setting)
    if kind in ("i", "u", "p") and role in setting.roles:
        current = current_sign(network, role, axis)
        if kind == "i" or axis != role:
            return current
        if kind == "u" and role == "re":
            return network.sign("ve", "re")
        return 1 if current == 0 else None
    return network.sign(name, axis)


def ground_voltage(sources: Rails, ground: str, polarity: str) -> Value:
    """Voltage of what is 0 V to a meter, against the node ``0`` of the network, in NPN signs.

    Parameters
    ----------
    sources : mapping of str to array_like
        Rails, magnitudes [V].
    ground : {"negative", "positive", "middle", "common"}
        A rail, half-way between the two, or the common point of two supplies.
    polarity : {"npn", "pnp"}
        A PNP stage is the mirror image: its emitter side hangs on the positive rail.

    Returns
    -------
    array_like
        Of the shape of the rails [V].
    """
    return sum((share * sources[rail] for rail, share in _ground_shares("vee" in sources, ground, polarity).items()), 0.0)


def _ground_shares(two_rails: bool, ground: str, polarity: str) -> dict[str, float]:
    """What is 0 V as a sum of rails, each with its factor [-]."""
    emitter_side, collector_side = ({"vee": -1.0} if two_rails else {}), {"vcc": 1.0}
    if ground == "common":
        return {}
    if ground == "middle":
        return {rail: 0.5 * share for rail, share in (emitter_side | collector_side).items()}
    return collector_side if (ground == "positive") != (polarity == "pnp") else emitter_side


def _node_sign(node: str, ground: str, axis: str, setting: Setting) -> Sign:
    """Proved sign of a node's voltage: that of a rail and of the one resistor between the two, wherever both agree."""
    network = setting.network
    zero = _ground_shares("vee" in network.rails, ground, setting.transistor.polarity)
    for role in network.roles:
        if node not in role.nodes:
            continue
        first = role.nodes[0] == node
        other = role.nodes[1] if first else role.nodes[0]
        absent = role.name not in setting.roles
        if other in ("b", "c", "e", "m") or (absent and role.absent == "open"):
            continue
        # An optional rail that is not given stands for vcc: a claim has to hold for both.
        stands_for = (other, "vcc") if other in network.optional_rails else (other,)
        levels = [float(axis == rail and rail != "0") * (-1.0 if rail == "vee" else 1.0) for rail in stands_for]
        drop = 0 if absent else sign(f"u_{role.name}", axis, setting)
        moving = [round(float(np.sign(level - zero.get(axis, 0.0)))) for level in levels]
        found = common_sign([*moving, drop if first or drop is None else -drop])
        if found is not None:
            return found
    return None


def current_sign(network: Network, role: str, axis: str) -> Sign:
    """Proved sign of a resistor's current along an axis.

    Parameters
    ----------
    network : Network
        Its network.
    role : str
        The resistor.
    axis : str
        As in `sign`.

    Returns
    -------
    int or None
        Of the network's own table, or the common sign of the currents that the resistor carries together.
    """
    if f"i_{role}" in network.signs:
        return network.sign(f"i_{role}", axis)
    carried = network.carries.get(role)
    return common_sign(network.sign(part, axis) for part in carried) if carried else None


def parts_of_current(network: Network, role: str) -> tuple[str, ...]:
    """Currents whose sum a resistor carries.

    Parameters
    ----------
    network : Network
        Its network.
    role : str
        The resistor.

    Returns
    -------
    tuple of str
        Names of quantities with proved signs of their own.
    """
    return (f"i_{role}",) if f"i_{role}" in network.signs else network.carries.get(role, ())
