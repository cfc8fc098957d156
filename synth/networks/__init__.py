"""The bias networks: each file of this folder describes one, and is found by being there.

A network is the two-port that its transistor sees,

    VBE = e_b − z_bb·IB − z_bc·IC,      VCE = e_c − z_cb·IB − z_cc·IC,

the branch laws that lead back from the Q-point to every resistor, and the signs that its author has proved.
"""

from __future__ import annotations

import importlib
import pkgutil
from collections.abc import Mapping
from types import MappingProxyType

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort

__all__ = ["NETWORKS", "Branches", "Network", "QPoint", "Rails", "Resistances", "Role", "TwoPort", "register_package"]


def register_package(package: str) -> dict[str, Network]:
    """Import every module of a package and collect the networks that they define as ``NETWORK``.

    Parameters
    ----------
    package : str
        Importable name of a package whose modules are network files.

    Returns
    -------
    dict of str to Network
        The networks by name, in alphabetical order of their files.

    Raises
    ------
    ValueError
        If two files give the same name.
    """
    found: dict[str, Network] = {}
    path = importlib.import_module(package).__path__
    for module in sorted(info.name for info in pkgutil.iter_modules(path)):
        network = getattr(importlib.import_module(f"{package}.{module}"), "NETWORK", None)
        if not isinstance(network, Network):
            continue
        if network.name in found:
            raise ValueError(f"two network files give the name {network.name!r}")
        found[network.name] = network
    return found


NETWORKS: Mapping[str, Network] = MappingProxyType(register_package(__name__))
"""Every network of this package, by name."""
