"""The Q-point of a network and a transistor: exact, vectorised, in every region.

Active: with IB = (IC − (h+1)·ICBO)/h the base loop is one equation in IC,

    VBE_ref + δ + VT·ln(IC/IC0) = E − Z·IC,   E = e_b + z_bb·(h+1)·ICBO/h,   Z = z_bb/h + z_bc,

and w = Z·IC/VT obeys w + ln w = (E − VBE_ref − δ)/VT + ln(Z·IC0/VT): the Wright omega function of the right-hand side.

Saturated: VCE = VCE(sat) in both two-port equations; IB = (e_b − VBE − z_bc·IC)/z_bb leaves

    D·IC − k·VT·ln(IC/IC0) = C,   k = z_cb/z_bb,   D = z_cc − k·z_bc,   C = e_c − VCE(sat) − k·(e_b − VBE_ref − δ),

whose larger root is the physical one: w − ln w = C/(k·VT) − ln(D·IC0/(k·VT)) with w = D·IC/(k·VT), or IC = C/D where
k = 0. The transistor saturates only if this is less than the active law gives.

Gain that moves with the Q-point: h = hFE·s(IC)·e(VCE), by rows of the data sheet and the Early effect. With λ = ln h and IC(λ),
VCE(λ) from the closed form above, F(λ) = λ − ln hFE − ln s(IC(λ)) − ln e(VCE(λ)) has one root, bracketed by the least and the
greatest of s and e. It rises, because

- d ln IC/dλ = 1/(IC/(IC − I0) + IC·(z_bc + VT/IC)/(z_bb·(IB + I0))) lies between 0 and 1 (I0 = ICBO), and d ln s/d ln IC is
  at most STEEPEST_GAIN;
- along the base loop IC·dVCE/dIC = −(z_cc − z_cb·z_bc/z_bb)·IC + (z_cb/z_bb)·VT, of which the bracket is not negative in a
  network of resistors and z_cb ≤ z_bb, so d ln e/d ln IC ≤ VT/(VA + VCE), a few per cent at most.

So every element has one Q-point, and none is a mere last iterate: the bracket closes on it.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.special import wrightomega

from synth.networks import NETWORKS
from synth.networks.form import Network, QPoint, Rails, Resistances, TwoPort
from synth.quantities import RestpointError, Spread
from synth.transistor import CUT_OFF_CURRENT, T0, Material, Transistor, thermal_voltage

Array = NDArray[np.float64]

ACTIVE, SATURATED, CUT_OFF = 0, 1, 2
REGIONS = ("active", "saturated", "cut off")
"""Names of the region codes, in order."""


class UnknownNetwork(RestpointError):
    """A network was asked for that no file describes."""


class WrongCircuit(RestpointError):
    """Rails or resistors that do not make up the network."""


def active_current(
    two_port: TwoPort, transistor: Transistor, hfe: Array, icbo: Array, delta: Array, temperature: Array
) -> Array:
    """Collector current by the active-region law, whatever VCE comes out.

    Parameters
    ----------
    two_port : TwoPort
        The network as the transistor sees it [V, ohm], broadcast.
    transistor : Transistor
        Its base-emitter law.
    hfe, icbo, delta, temperature : ndarray
        Gain at this temperature [-], leakage at this temperature [A], distance from the nominal VBE [V] and junction
        temperature [K], broadcast.

    Returns
    -------
    ndarray
        IC [A], the broadcast shape; never negative.

    Notes
    -----
    Exact to rounding for any positive resistances: the logarithm of the argument is formed, so nothing overflows unless
    IC itself would. With no resistance at all in the base loop IC = IC0·exp((e_b − VBE_ref − δ)/VT).
    """
    slope = two_port.z_bb / hfe + two_port.z_bc
    drive = two_port.e_b + two_port.z_bb * (icbo + icbo / hfe) - transistor.vbe_at_reference(temperature) - delta
    if transistor.vbe_model == "fixed":
        # A fixed drop blocks below its voltage; with no resistance behind it nothing bounds the current.
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(np.where(drive > 0.0, drive / slope, 0.0))
    vt = thermal_voltage(temperature)
    # log(0) is -inf where the loop has no resistance; that branch is taken from its own closed form below.
    with np.errstate(divide="ignore", invalid="ignore", over="ignore", under="ignore"):
        omega = wrightomega(drive / vt + np.log(slope * (transistor.vbe_ic / vt)))
        current = omega * vt / slope
        bare = np.asarray(slope) == 0.0
        if bare.any():
            current = np.where(bare, transistor.vbe_ic * np.exp(drive / vt), current)
    return np.asarray(current)


SETTLED, SECTIONS = 4e-16, 80
"""Relative change of the gain that ends the search for it [-], and the most sections of its bracket."""


def settled_gain(
    two_port: TwoPort, transistor: Transistor, hfe: Array, icbo: Array, delta: Array, temperature: Array, va: Array | None,
    lift: Array | float | None = None,
) -> Array:
    """Gain of a transistor whose gain moves with the Q-point, at the Q-point that it gives itself.

    Parameters
    ----------
    two_port : TwoPort
        The network as the transistor sees it [V, ohm], broadcast.
    transistor : Transistor
        With rows or an Early voltage.
    hfe, icbo, delta, temperature : ndarray
        As in `active_current`; hfe at the rows' own current and at the voltage of the test [-].
    va : ndarray, optional
        Early voltage of the unit [V]; None leaves VCE without a say.
    lift : array_like, optional
        Factor on the gain, besides rows and Early voltage [-].

    Returns
    -------
    ndarray
        Gain [-], the broadcast shape.
    """
    rows = transistor.hfe_rows
    unit = hfe / transistor.gain_factor(temperature)
    start = np.log(hfe) if lift is None else np.log(hfe * np.asarray(lift))

    def moved(level: Array) -> Array:
        """Ln of the gain that the Q-point of a gain brings, relative to hfe."""
        h = np.exp(level)
        ic, _, _, vce = _active(two_port, transistor, h, icbo, delta, temperature)
        found = np.zeros(np.shape(ic)) if rows is None else rows.lift(unit, ic)
        return found if va is None else found + np.log(transistor.early_factor(va, vce))

    shape = np.broadcast_shapes(*(np.shape(x) for x in (*two_port, start, icbo, delta, temperature, 0.0 if va is None else va)))
    low, high = (np.zeros(shape), np.zeros(shape)) if rows is None else rows.reach(unit, 0.0, np.inf)
    if va is not None:
        # Leakage out of the base may lift the collector above its open-circuit voltage.
        most = two_port.e_c + two_port.z_cb * (2.0 * icbo)
        low = low + np.log(transistor.early_factor(va, 0.0))
        high = high + np.log(transistor.early_factor(va, np.maximum(most, 0.0)))
    a, b = (np.broadcast_to(start + end, shape).copy() for end in (low, high))
    fa, fb = a - start - moved(a), b - start - moved(b)
    side = np.zeros(shape, dtype=np.int8)
    c = a
    for _ in range(SECTIONS):
        with np.errstate(divide="ignore", invalid="ignore"):
            c = np.where(fb > fa, b - fb * (b - a) / (fb - fa), a)
        c = np.clip(np.where(np.isfinite(c), c, 0.5 * (a + b)), a, b)
        fc = c - start - moved(c)
        if np.all((np.abs(fc) <= SETTLED * (1.0 + np.abs(c))) | (b - a <= SETTLED * (1.0 + np.abs(c)))):
            break
        below = fc < 0.0
        # Regula falsi stalls on a convex function unless the end that stays is halved.
        fb = np.where(below & (side < 0), 0.5 * fb, np.where(below, fb, fc))
        fa = np.where(~below & (side > 0), 0.5 * fa, np.where(below, fc, fa))
        a, b = np.where(below, c, a), np.where(below, b, c)
        side = np.where(below, np.int8(-1), np.int8(1))
    return np.asarray(np.exp(c))


def _active(
    port: TwoPort, transistor: Transistor, h: Array, i0: Array, d: Array, t: Array
) -> tuple[Array, Array, Array, Array]:
    ic = active_current(port, transistor, h, i0, d, t)
    ib = ic / h - i0 - i0 / h
    # The base loop itself gives VBE: it stays exact where IC underflows to zero.
    vbe = np.asarray(port.e_b - port.z_bb * ib - port.z_bc * ic)
    return ic, ib, vbe, np.asarray(port.e_c - port.z_cb * ib - port.z_cc * ic)


def solve_active(
    network: Network,
    transistor: Transistor,
    rails: Rails,
    r: Resistances,
    *,
    hfe: Array | float,
    icbo: Array | float,
    delta: Array | float,
    temperature: Array | float,
    va: Array | float | None = None,
    lift: Array | float | None = None,
) -> QPoint:
    """Q-point by the active-region law alone: below VCE(sat) it is the analytic continuation, no real Q-point.

    The search needs it: a smooth law that agrees with `solve` wherever the transistor is active.

    Parameters
    ----------
    network, transistor, rails, r
        As in `solve` [V, -].
    hfe, icbo, delta, temperature : array_like
        As in `solve`: gain [-], leakage [A], distance from the nominal VBE [V], temperature [K], broadcast.
    va, lift : array_like, optional
        As in `solve` [V, -].

    Returns
    -------
    QPoint
        Of the broadcast shape, every region code "active".
    """
    h, i0, d, t = (np.asarray(x, dtype=float) for x in (hfe, icbo, delta, temperature))
    port = network.two_port(rails, r, t)
    if transistor.gain_moves or lift is not None:
        h = _gain(port, transistor, h, i0, d, t, va, lift)
    ic, ib, vbe, vce = np.broadcast_arrays(*_active(port, transistor, h, i0, d, t))
    return QPoint(ic, ib, vbe, vce, np.zeros(ic.shape, dtype=np.int8))


def _gain(
    port: TwoPort, transistor: Transistor, h: Array, i0: Array, d: Array, t: Array, va: Array | float | None,
    lift: Array | float | None,
) -> Array:
    """Gain at the Q-point, where it moves with it or is lifted as a whole."""
    if not transistor.gain_moves:
        return np.asarray(h * np.asarray(lift))
    early = None if transistor.va is None else np.asarray(transistor.va.nominal if va is None else va, dtype=float)
    return settled_gain(port, transistor, h, i0, d, t, early, lift)


def saturated_current(two_port: TwoPort, transistor: Transistor, delta: Array, temperature: Array) -> Array:
    """Collector current with VCE held at VCE(sat): what the load line and the base drive together allow.

    Parameters
    ----------
    two_port : TwoPort
        The network as the transistor sees it [V, ohm], broadcast; z_bb above 0.
    transistor : Transistor
        Its base-emitter law and VCE(sat).
    delta, temperature : ndarray
        Distance from the nominal VBE [V] and junction temperature [K], broadcast.

    Returns
    -------
    ndarray
        IC [A]; NaN where no current satisfies both equations.
    """
    k = two_port.z_cb / two_port.z_bb
    d = two_port.z_cc - k * two_port.z_bc
    reference = transistor.vbe_at_reference(temperature) + delta
    c = two_port.e_c - transistor.vce_sat - k * (two_port.e_b - reference)
    # k = 0 divides by zero in the coupled branch and is taken from the plain one; a < 1 has no root and becomes NaN.
    with np.errstate(divide="ignore", invalid="ignore"):
        plain = c / d
        if transistor.vbe_model == "fixed":
            return np.asarray(np.where(plain > 0.0, plain, np.nan))
        scale = k * thermal_voltage(temperature)
        a = c / scale - np.log(d * transistor.vbe_ic / scale)
        w = _upper_root(np.asarray(a, dtype=float))
        current = np.where(np.asarray(scale) > 0.0, w * scale / d, plain)
        return np.asarray(np.where(current > 0.0, current, np.nan))


def _upper_root(a: Array) -> Array:
    """Root w ≥ 1 of w − ln w = a, by Newton from above on a convex function; NaN where a < 1."""
    a = np.where(a >= 1.0, a, np.nan)
    w = a + np.log(a) + np.sqrt(2.0 * (a - 1.0)) + 1.0
    for _ in range(60):
        step = (w - np.log(w) - a) * w / (w - 1.0)
        w = w - step
        if not np.any(np.abs(step) > 1e-15 * w):
            break
    return w


def solve(
    network: Network,
    transistor: Transistor,
    rails: Rails,
    r: Resistances,
    *,
    hfe: Array | float,
    icbo: Array | float,
    delta: Array | float,
    temperature: Array | float,
    va: Array | float | None = None,
    lift: Array | float | None = None,
) -> QPoint:
    """Q-point and region of every element.

    Parameters
    ----------
    network : Network
        The bias network.
    transistor : Transistor
        The transistor's laws.
    rails : mapping of str to array_like
        Rail voltages, magnitudes [V], broadcast.
    r : mapping of str to array_like
        Resistance of every role used [ohm], broadcast.
    hfe : array_like
        Gain at `temperature` [-], broadcast.
    icbo : array_like
        Leakage at `temperature` [A], broadcast.
    delta : array_like
        Distance of this unit from the nominal VBE [V], broadcast.
    temperature : array_like
        Junction temperature [K], broadcast.
    va : array_like, optional
        Early voltage of this unit [V], broadcast; nominal when not given.
    lift : array_like, optional
        Factor on the gain besides all else [-], broadcast.

    Returns
    -------
    QPoint
        Of the broadcast shape. In saturation hFE no longer governs and IC lies on the load line; where even the
        saturated equations have no solution every figure is NaN.
    """
    h, i0, d, t = (np.asarray(x, dtype=float) for x in (hfe, icbo, delta, temperature))
    port = network.two_port(rails, r, t)
    if transistor.gain_moves or lift is not None:
        h = _gain(port, transistor, h, i0, d, t, va, lift)
    ic, ib, vbe, vce = _active(port, transistor, h, i0, d, t)
    region = np.where(ic < CUT_OFF_CURRENT + (h + 1.0) * i0, CUT_OFF, ACTIVE).astype(np.int8)
    saturated = vce < transistor.vce_sat
    if np.any(saturated):
        on_line = saturated_current(port, transistor, d, t)
        # Less VCE than VCE(sat) for want of voltage, not of gain: the transistor is off, and the active law stays.
        saturated = saturated & ~(on_line > ic)
        vbe_sat = transistor.vbe_at(on_line, t, d)
        ib_sat = (port.e_b - vbe_sat - port.z_bc * on_line) / port.z_bb
        ic = np.where(saturated, on_line, ic)
        ib = np.where(saturated, ib_sat, ib)
        vbe = np.where(saturated, vbe_sat, vbe)
        vce = np.where(saturated, np.where(np.isnan(on_line), np.nan, transistor.vce_sat), vce)
        region = np.where(saturated, np.int8(SATURATED), region)
    ic, ib, vbe, vce, region = np.broadcast_arrays(ic, ib, vbe, vce, region)
    return QPoint(ic, ib, vbe, vce, region)


def _require(field: str, given: Mapping[str, Array | float], needed: Iterable[str], known: Collection[str]) -> None:
    for name in needed:
        if name not in given:
            raise WrongCircuit(f"{field}: {name} is not given, accepted are {', '.join(known)}")
    for name, value in given.items():
        if name not in known:
            raise WrongCircuit(f"{field}: read {name!r}, accepted are {', '.join(known)}")
        if not np.all(np.asarray(value, dtype=float) > 0.0):
            raise WrongCircuit(f"{field}: read {name} = {value}, accepted is more than 0")


def operating_point(
    *,
    network: str,
    rails: Mapping[str, Array | float],
    resistors: Mapping[str, Array | float],
    hfe: Array | float,
    temperature: Array | float = T0,
    vbe: float = 0.65,
    vbe_ic: float = 2e-3,
    vbe_model: Literal["junction", "fixed"] = "junction",
    icbo: Array | float = 0.0,
    vce_sat: float = 0.2,
    material: Material = "silicon",
) -> QPoint:
    """Q-point of a network by name, for use from Python; everything broadcasts.

    Parameters
    ----------
    network : str
        Name of a registered network.
    rails : mapping of str to array_like
        Rail voltages, magnitudes [V].
    resistors : mapping of str to array_like
        Resistance of every role used [ohm].
    hfe : array_like
        Gain at `temperature` [-].
    temperature : array_like
        Junction temperature [K].
    vbe, vbe_ic : float
        Base-emitter voltage at 25 °C [V] and the collector current at which it holds [A].
    vbe_model : {"junction", "fixed"}
        Whether VBE follows IC and temperature.
    icbo : array_like
        Leakage at `temperature` [A].
    vce_sat : float
        VCE of the saturated transistor [V].
    material : {"silicon", "germanium"}
        Of the transistor.

    Returns
    -------
    QPoint
        Currents [A], voltages [V] and region codes of the broadcast shape.

    Raises
    ------
    UnknownNetwork
        If no network has this name.
    WrongCircuit
        If a rail or resistor is missing, unknown, or not above zero.

    Examples
    --------
    >>> q = operating_point(network="divider", rails={"vcc": 12.0}, hfe=220.0,
    ...                     resistors={"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3})
    >>> round(float(q.ic) * 1e3, 2)
    1.94
    """
    if network not in NETWORKS:
        raise UnknownNetwork(f"network: read {network!r}, accepted is one of {', '.join(NETWORKS)}")
    form = NETWORKS[network]
    needed = [role.name for role in form.roles if not role.optional]
    _require("rails", rails, form.rails, (*form.rails, *form.optional_rails))
    _require("resistors", resistors, needed, form.role_names)
    exact = Spread.exact
    device = Transistor(
        hfe=exact(1.0), vbe=exact(vbe), vbe_ic=vbe_ic, vbe_model=vbe_model, vce_sat=vce_sat, material=material
    )
    return solve(
        NETWORKS[network],
        device,
        {name: np.asarray(v, dtype=float) for name, v in rails.items()},
        {name: np.asarray(v, dtype=float) for name, v in resistors.items()},
        hfe=hfe,
        icbo=icbo,
        delta=0.0,
        temperature=temperature,
    )
