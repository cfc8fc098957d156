"""Named warnings: every mistake worth catching, with its threshold and its physical reason.

`RULES` is the one registry: an answer, the table ``restpoint tables warnings`` and the tests read it. A warning whose
texts come from a lower room (`told` is "reading") is listed here so that its threshold can be looked up.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from synth.answer import Candidate, Caution
from synth.box import Box
from synth.cautions import bias, parts, request
from synth.cautions.form import CautionRule, Seen
from synth.cautions.request import pinout
from synth.spaces import Space
from synth.stage import Stage

__all__ = ["RULES", "CautionRule", "Seen", "cautions", "pinout", "request_cautions"]

RULES: Mapping[str, CautionRule] = MappingProxyType(
    {rule.name: rule for rule in (*request.RULES, *bias.RULES, *parts.RULES)}
)
"""Every warning by name."""


def request_cautions(stage: Stage) -> tuple[Caution, ...]:
    """Warnings that a request deserves, whatever the answer is.

    Parameters
    ----------
    stage : Stage
        The request.

    Returns
    -------
    tuple of Caution
        Those noted while it was read, then the others in the order of `RULES`.
    """
    noted = tuple(Caution(name=note.name, text=note.text) for note in stage.warnings)
    return noted + tuple(
        Caution(name=rule.name, text=text)
        for rule in RULES.values()
        if rule.of_request is not None
        for text in rule.of_request(stage)
    )


def cautions(candidate: Candidate, box: Box, space: Space, stage: Stage) -> tuple[Caution, ...]:
    """Warnings that a candidate deserves.

    Parameters
    ----------
    candidate : Candidate
        With its stress and figures.
    box : Box
        Its box, of one candidate.
    space : Space
        Where it comes from.
    stage : Stage
        The request.

    Returns
    -------
    tuple of Caution
        In the order of `RULES`.
    """
    seen = Seen(candidate=candidate, box=box, space=space, stage=stage)
    return tuple(
        Caution(name=rule.name, text=text)
        for rule in RULES.values()
        if rule.of_candidate is not None
        for text in rule.of_candidate(seen)
    )
