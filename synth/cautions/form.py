"""The form of a warning: its name, when it is given, why it matters, and the function that looks for it."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Literal

from synth.answer import Candidate
from synth.box import Box
from synth.spaces import Space
from synth.stage import Stage

Told = Literal["reading", "request", "candidate", "substitution"]


@dataclass(frozen=True, kw_only=True)
class Seen:
    """What the warnings about a candidate look at: it, its box (of one candidate), where it comes from, what was asked."""

    candidate: Candidate
    box: Box
    space: Space
    stage: Stage

    @property
    def span(self) -> float:
        """Greatest voltage between the outermost rails of the collector and the emitter [V]."""
        rails = self.box.rails
        return rails.get("vload", rails["vcc"]).high + (rails["vee"].high if "vee" in rails else 0.0)

    @property
    def grounded(self) -> bool:
        """Whether nothing stands between the emitter and its rail, nor the collector feeds the base."""
        nodes = [set(role.nodes) for role in self.box.network.roles if role.name in self.box.parts]
        return "re" not in self.box.parts and {"b", "c"} not in nodes


@dataclass(frozen=True, kw_only=True)
class CautionRule:
    """One named warning.

    Parameters
    ----------
    name : str
        Name in answers.
    threshold : str
        When it is given, with the figure.
    reason : str
        The physical reason, one sentence.
    told : {"reading", "request", "candidate", "substitution"}
        While a stage is read (by `synth.stage`), of the request, of a candidate, or of another transistor in its place.
    of_request : callable, optional
        ``of_request(stage)``: the texts it deserves.
    of_candidate : callable, optional
        ``of_candidate(seen)``: the texts it deserves.
    """

    name: str
    threshold: str
    reason: str
    told: Told
    of_request: Callable[[Stage], Iterable[str]] | None = None
    of_candidate: Callable[[Seen], Iterable[str]] | None = None


def share(fraction: float) -> str:
    """A threshold in per cent.

    Parameters
    ----------
    fraction : float
        A share [-].

    Returns
    -------
    str
        ``20 %``.
    """
    return f"{100.0 * fraction:g} %"
