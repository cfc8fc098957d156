"""What a meter should read on a stage that is sound, and the load line that its Q-point sits on."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from synth.answer import LoadLine, Readings
from synth.box import Box, Extreme
from synth.networks.form import Array, QPoint


def readings(box: Box, ground: str, law: Callable[[Sequence[str], int], Extreme] | None = None) -> list[Readings]:
    """Voltages of nodes and across resistors, each with its own least and greatest value over the box.

    Parameters
    ----------
    box : Box
        n candidates.
    ground : {"negative", "positive", "middle", "common"}
        What is 0 V, see `synth.measures.ground_voltage`.
    law : callable, optional
        ``law(names, side)``: extreme of a sum of quantities; that of the active region when not given.

    Returns
    -------
    list of Readings
        One for each candidate [V]. Nodes carry the sign that a meter shows, those of a PNP stage mirrored.
    """
    law = law or box.extreme
    values = box.nominal()
    q = box.solve(values)
    nodes = box.branches(values, q).nodes
    mirrored = box.transistor.polarity == "pnp"

    def ends(name: str) -> tuple[Array, Array, Array]:
        middle = np.broadcast_to(box.measure((name,), values, q), (box.size,))
        low, high = law((name,), -1).value, law((name,), 1).value
        # A voltage that nothing moves differs from its extremes by rounding only.
        return np.minimum(low, middle), middle, np.maximum(high, middle)

    def seen(node: str) -> tuple[Array, Array, Array]:
        low, middle, high = ends(f"v_{node}_{ground}")
        return (-high, -middle, -low) if mirrored else (low, middle, high)

    read = {node: seen(node) for node in nodes}
    drops = {role: ends(f"u_{role}") for role in box.parts}

    def one(found: tuple[Array, Array, Array], k: int) -> tuple[float, float, float]:
        # Adding 0 turns a negative zero into the one that is printed without a sign.
        return float(found[0][k]) + 0.0, float(found[1][k]) + 0.0, float(found[2][k]) + 0.0

    return [
        Readings(
            nodes={node: one(found, k) for node, found in read.items()},
            drops={role: one(found, k) for role, found in drops.items()},
        )
        for k in range(box.size)
    ]


def load_lines(box: Box) -> list[LoadLine]:
    """The static load line at nominal values.

    Parameters
    ----------
    box : Box
        n candidates.

    Returns
    -------
    list of LoadLine
        One for each candidate [V, A].

    Notes
    -----
    VCE = e_c − z_cb·IB − z_cc·IC of the network's two-port, drawn with IB at the share of IC that it has at the nominal
    Q-point, so that the line passes through that point.
    """
    values = box.nominal()
    q: QPoint = box.solve(values)
    r = {role: values[role] for role in box.parts}
    port = box.network.two_port(box.sources(values), r, values["temperature"])
    share = np.asarray(q.ib / q.ic)
    most = np.broadcast_to(port.e_c / (port.z_cc + port.z_cb * share), (box.size,))
    open_circuit = np.broadcast_to(np.asarray(port.e_c, dtype=float), (box.size,))
    return [
        LoadLine(vce=float(open_circuit[k]), ic=float(most[k]), vce_sat=box.transistor.vce_sat) for k in range(box.size)
    ]
