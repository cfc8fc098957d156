"""Stability factors and sensitivities of the Q-point, in closed form from the two-port of any network.

The base loop is F(IC) = e_b − z_bb·IB − z_bc·IC − VBE = 0 with IB = IC/h − (1 + 1/h)·ICBO, so that with

    D = z_bb + h·z_bc                  VBE held constant, as the published definitions have it,
    D = z_bb + h·z_bc + h·VT/IC        VBE following IC, as the solver has it,

dIC/dICBO = (1+h)·z_bb/D,  dIC/dVBE = −h/D,  dIC/dh = z_bb·(IC − ICBO)/(h·D), and for anything else x that enters the
two-port dIC/dx = h·(∂F/∂x)/D at fixed IC. VCE follows from VCE = e_c − z_cb·IB − z_cc·IC.

With z_bb = RB + RF and z_bc = RF these are the published forms S = (1+β)(RB+RF)/D, S' = −β/D and
S'' = (RB+RF)(V − VBE + RB·ICO)/D².
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from synth.box import Box, Values
from synth.networks.form import Array, TwoPort
from synth.q_point import SATURATED
from synth.transistor import thermal_voltage

STEP = 1e-30
"""Complex step of the partial derivatives of a two-port, relative: far below rounding, so nothing is cancelled."""
DIFFERENCE = 1e-5
"""Relative step of a central difference [-]: its own error and that of rounding are both about 1e-10."""


@dataclass(frozen=True, kw_only=True)
class Stability:
    """Stability factors: dIC/dICO `ico` [-], dIC/dVBE `vbe` [A/V] and dIC/dhFE `hfe` [A], the others held."""

    ico: float
    vbe: float
    hfe: float


@dataclass(frozen=True, kw_only=True)
class Sensitivity:
    """How IC and VCE follow one parameter at the nominal point.

    `ic` and `vce` are the derivatives [A and V per unit of the parameter: V, ohm, A or -]; `ic_relative` and `vce_relative`
    what 1 % of the parameter moves, in per cent [-], None where the parameter is zero.
    """

    parameter: str
    value: float
    ic: float
    vce: float
    ic_relative: float | None
    vce_relative: float | None


def factors(
    port: TwoPort, *, hfe: Array | float, ic: Array | float, icbo: Array | float = 0.0, loop: Array | float = 0.0
) -> tuple[Array, Array, Array]:
    """Stability factors of an active stage from its two-port.

    Parameters
    ----------
    port : TwoPort
        The network as the transistor sees it [V, ohm], broadcast.
    hfe, ic, icbo : array_like
        Gain [-], collector current [A] and leakage [A] at the operating temperature, broadcast.
    loop : array_like
        What VBE itself does with IC, dVBE/dIC = VT/IC; 0 for the published definitions, which hold VBE [ohm].

    Returns
    -------
    ico, vbe, hfe : ndarray
        dIC/dICO [-], dIC/dVBE [A/V] and dIC/dhFE [A].

    References
    ----------
    Definitions S, S' and S'': J. Millman and C. C. Halkias, Integrated Electronics, ch. 9 (bias stability).

    Examples
    --------
    >>> port = TwoPort(6.0, 11e3, 1e3, 12.0, 1e3, 3e3)
    >>> s, s_vbe, s_hfe = factors(port, hfe=100.0, ic=2e-3)
    >>> round(float(s), 3), round(float(s_vbe) * 1e3, 3)
    (10.009, -0.901)
    """
    h, i, i0 = (np.asarray(x, dtype=float) for x in (hfe, ic, icbo))
    d = port.z_bb + h * (port.z_bc + np.asarray(loop))
    return np.asarray((1.0 + h) * port.z_bb / d), np.asarray(-h / d), np.asarray(port.z_bb * (i - i0) / (h * d))


def gain_change(port: TwoPort, *, before: Array | float, after: Array | float, ic: Array | float) -> Array:
    """Stability factor for a finite change of gain, VBE constant and no leakage.

    Parameters
    ----------
    port : TwoPort
        The network as the transistor sees it [V, ohm], broadcast.
    before, after : array_like
        hFE before and after [-], broadcast.
    ic : array_like
        Collector current before [A], broadcast.

    Returns
    -------
    ndarray
        (IC after − IC before)/(`after` − `before`), exact for any change [A].

    Notes
    -----
    IC1·S2/(β1·(1+β2)) with S2 the factor dIC/dICO at the gain after the change.
    """
    one, two = np.asarray(before, dtype=float), np.asarray(after, dtype=float)
    s2 = (1.0 + two) * port.z_bb / (port.z_bb + two * port.z_bc)
    return np.asarray(np.asarray(ic) * s2 / (one * (1.0 + two)))


def _port(box: Box, values: Mapping[str, Array]) -> TwoPort:
    sources = {rail: values[rail] for rail in box.rails}
    if box.reference is not None:
        sources |= box.reference.line(values["delta_ref"], values["r_ref"], values["temperature"])
    return box.network.two_port(sources, {role: values[role] for role in box.parts}, values["temperature"])


def _is_saturated(box: Box, values: Values) -> bool:
    return bool(np.any(box.solve(values).region == SATURATED))


def stability(box: Box, *, follows: bool = False) -> Stability | None:
    """Stability factors of a candidate at its nominal point.

    Parameters
    ----------
    box : Box
        Of one candidate.
    follows : bool
        Whether VBE follows IC by its law; False holds it, as the published definitions do.

    Returns
    -------
    Stability or None
        None where the nominal point is saturated: there neither gain nor leakage governs IC.
    """
    values = box.nominal()
    if _is_saturated(box, values):
        return None
    q = box.solve(values, active_law=True)
    t = values["temperature"]
    h = box.gain(values, q)
    leakage = values["icbo"] * box.transistor.leakage_factor(t)
    loop = thermal_voltage(t) / q.ic if follows and box.transistor.vbe_model == "junction" else 0.0
    found = factors(_port(box, values), hfe=h, ic=q.ic, icbo=leakage, loop=loop)
    ico, vbe, hfe = (float(np.ravel(x)[0]) for x in found)
    return Stability(ico=ico, vbe=vbe, hfe=hfe)


def gradients(box: Box, values: Values) -> dict[str, tuple[Array, Array]]:
    """Derivatives of IC and VCE along every parameter but temperature, by the active-region law.

    Parameters
    ----------
    box : Box
        n candidates.
    values : dict
        The point, see `synth.box.Values`; broadcast.

    Returns
    -------
    dict
        Rail, role, ``delta hfe icbo delta_ref r_ref`` to dIC and dVCE [A and V per unit of the parameter]; hfe [-] and
        icbo [A] are the figures at 25 °C.

    Notes
    -----
    The two-port is differentiated by a complex step, the base loop as an implicit function: exact to rounding. Where the gain
    moves with the Q-point, central differences take their place, exact to about eight digits except at a row of the gain.
    """
    q = box.solve(values, active_law=True)
    if box.transistor.gain_moves:
        return _differences(box, values)
    t = values["temperature"]
    gain, leak = box.transistor.gain_factor(t), box.transistor.leakage_factor(t)
    h, i0 = values["hfe"] * gain, values["icbo"] * leak
    port = _port(box, values)
    loop = thermal_voltage(t) / q.ic if box.transistor.vbe_model == "junction" else 0.0
    slope = 1.0 / (port.z_bb / h + port.z_bc + loop)
    along = -(port.z_cb / h + port.z_cc)
    found: dict[str, tuple[Array, Array]] = {}

    def keep(name: str, of_loop: Array, of_vce: Array, scale: Array | float = 1.0) -> None:
        ic = slope * of_loop * scale
        found[name] = (np.asarray(ic), np.asarray(of_vce * scale + along * ic))

    shape = np.zeros(np.broadcast_shapes(*(np.shape(v) for v in values.values())))
    keep("delta", -1.0 + shape, shape)
    # IB at fixed IC falls by (IC − ICBO)/h² with h and by 1 + 1/h with ICBO.
    by_gain, by_leak = (q.ic - i0) / h**2, 1.0 + 1.0 / h
    keep("hfe", port.z_bb * by_gain, port.z_cb * by_gain, gain)
    keep("icbo", port.z_bb * by_leak, port.z_cb * by_leak, leak)
    for name in (name for name in values if name not in (*found, "temperature")):
        step = STEP * np.maximum(np.abs(values[name]), 1.0)
        moved = _port(box, {**values, name: values[name] + 1j * step})
        # Rails and resistances enter linearly or as a quotient: no step is too small.
        d = [np.asarray(np.imag(x)) / step for x in moved]
        keep(name, d[0] - d[1] * q.ib - d[2] * q.ic, d[3] - d[4] * q.ib - d[5] * q.ic)
    return found


def _differences(box: Box, values: Values) -> dict[str, tuple[Array, Array]]:
    """Derivatives by central differences of solved Q-points."""
    found: dict[str, tuple[Array, Array]] = {}
    for name in (name for name in values if name != "temperature"):
        # VBE and leakage are small or nothing: their own scale is VT, and a nanoampere.
        scale = {"delta": 0.025, "delta_ref": 0.025, "icbo": 1e-9}.get(name, 0.0)
        step = DIFFERENCE * np.maximum(np.abs(values[name]), scale)
        ends = [box.solve({**values, name: values[name] + side * step}, active_law=True) for side in (1.0, -1.0)]
        found[name] = (
            np.asarray((ends[0].ic - ends[1].ic) / (2.0 * step)),
            np.asarray((ends[0].vce - ends[1].vce) / (2.0 * step)),
        )
    return found


def sensitivities(box: Box) -> tuple[Sensitivity, ...]:
    """How IC and VCE of a candidate follow every parameter at the nominal point.

    Parameters
    ----------
    box : Box
        Of one candidate.

    Returns
    -------
    tuple of Sensitivity
        Rails, ``vbe hfe icbo``, those of a reference element, then the roles; empty where the nominal point is saturated.
    """
    values = box.nominal()
    if _is_saturated(box, values):
        return ()
    q = box.solve(values, active_law=True)
    found = gradients(box, values)
    order = (*box.rails, "delta", "hfe", "icbo", *(n for n in ("va", "delta_ref", "r_ref") if n in found), *box.parts)
    rows = []
    for name in order:
        ic, vce = (float(np.ravel(d)[0]) for d in found[name])
        at = float(np.ravel(values[name])[0])
        if name == "delta":
            name, at = "vbe", box.transistor.vbe.nominal
        elif name == "delta_ref" and box.reference is not None:
            name, at = "reference", float(box.reference.nominal(values["temperature"]))
        elif name == "r_ref":
            name = "reference_slope"
        parts = [at * d / float(np.ravel(x)[0]) if at else None for d, x in ((ic, q.ic), (vce, q.vce))]
        rows.append(
            Sensitivity(parameter=name, value=at, ic=ic, vce=vce, ic_relative=parts[0], vce_relative=parts[1])
        )
    return tuple(rows)
