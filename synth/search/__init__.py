"""Exact search: the candidates of least drift, or the frontier of several axes, proved by branch and bound."""

from synth.search.axes import AXES, Axis
from synth.search.best_first import Frontier, Outcome, Progress, Stop, frontier, search
from synth.search.certificate import NoCertificate, certificate, refuse
from synth.search.pools import Member

__all__ = [
    "AXES",
    "Axis",
    "Frontier",
    "Member",
    "NoCertificate",
    "Outcome",
    "Progress",
    "Stop",
    "certificate",
    "frontier",
    "refuse",
    "search",
]
