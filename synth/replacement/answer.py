"""What a refit found out, as frozen values and as plain data; no computing, no printing."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from synth.answer import Answer, Candidate, Caution, Search, Worst, plain

Standing = Literal["better", "same", "worse", "moved"]


@dataclass(frozen=True, kw_only=True)
class Device:
    """A transistor as it was counted.

    `label` is its type or what it is called; `hfe` [-] and `vbe` [V] are spreads at 25 °C, the latter at `vbe_ic` [A];
    `gain_source` says where the gain comes from and `gain_ic` [A], `gain_vce` [V] where it was printed; ICBO [A] and VCE(sat)
    [V] are limits; what is not known of package, pins, transition frequency [Hz], VCEO [V], IC max [A] and power [W] is None.
    """

    label: str
    type: str
    polarity: str
    material: str
    hfe: tuple[float, float, float]
    gain_source: str
    gain_ic: float | None
    gain_vce: float | None
    vbe: tuple[float, float, float]
    vbe_ic: float
    icbo: float
    vce_sat: float
    package: str | None
    pins: str | None
    ft: float | None
    vceo: float | None
    ic_max: float | None
    ptot: float | None


@dataclass(frozen=True, kw_only=True)
class Compared:
    """One figure before and after, SI, either None where it is not known there.

    `by` is after less before of a drift, margin or share [-] and of a temperature [K], of any other figure the relative change
    [-]; `standing` says whether that is better, the same, worse, or for a figure without a good side that it moved.
    """

    name: str
    what: str
    kind: str
    before: float | tuple[float, float] | None
    after: float | tuple[float, float] | None
    by: float | None
    standing: Standing


@dataclass(frozen=True, kw_only=True)
class Cost:
    """What a change costs: resistors to replace [-], drift above the least there is [-], more supply current at nominal [A]."""

    parts: int
    drift: float
    supply_current: float


@dataclass(frozen=True, kw_only=True)
class Refitted:
    """A candidate with what it changes: roles, the values that were fitted there [ohm], where each new one comes from."""

    candidate: Candidate
    changed: tuple[str, ...]
    was: Mapping[str, float]
    source: Mapping[str, str]
    cost: Cost


@dataclass(frozen=True, kw_only=True)
class Step:
    """What a number of changed resistors can do.

    `status` is that of the search ("optimal" and "infeasible" are proved); `best` is the least drift of all that qualify [-],
    None if none does; `sets` counts the sets of roles, `combinations` the candidates, `evaluated` the Q-points solved [-].
    """

    changes: int
    status: str
    best: float | None
    sets: int
    combinations: int
    evaluated: int


@dataclass(frozen=True, kw_only=True)
class Single:
    """The best value of one role while every other resistor stays [ohm], and its drift [-]; None where no value qualifies."""

    role: str
    value: float | None
    drift: float | None


@dataclass(frozen=True, kw_only=True)
class Refit:
    """The answer to "the transistor is replaced: what changes?".

    Parameters
    ----------
    answer : Answer
        The request with the new transistor, what was searched, and the candidates by ascending number of changes.
    before, after : Answer
        Verdicts on the resistors fitted today, with the old and with the new transistor.
    old, new : Device
        The two transistors.
    comparison : tuple of Compared
        Side by side, on the resistors fitted today.
    keep : tuple of str
        Roles that were not to change.
    steps : tuple of Step
        What each number of changes can do.
    singles : tuple of Single
        What each role alone can do.
    changes : tuple of Refitted
        The candidates with what each changes and costs; the first is recommended.
    unconstrained : int or None
        Rank of the candidate of least drift [-]; None if nothing qualifies.
    cautions : tuple of Caution
        What the swap itself brings.
    not_verified : tuple of Caution
        What nobody has looked at.
    reasons : tuple of str
        Why the recommendation stands, a fact each.
    """

    answer: Answer
    before: Answer
    after: Answer
    old: Device
    new: Device
    comparison: tuple[Compared, ...]
    keep: tuple[str, ...] = ()
    steps: tuple[Step, ...] = ()
    singles: tuple[Single, ...] = ()
    changes: tuple[Refitted, ...] = ()
    unconstrained: int | None = None
    cautions: tuple[Caution, ...] = ()
    not_verified: tuple[Caution, ...] = ()
    reasons: tuple[str, ...] = field(default=())

    @property
    def best(self) -> Refitted | None:
        """The change that is recommended, None when nothing qualifies."""
        return self.changes[0] if self.changes else None

    @property
    def passed(self) -> bool:
        """Whether some change, or none at all, makes every verdict pass."""
        return bool(self.changes)

    @property
    def candidates(self) -> tuple[Candidate, ...]:
        """The candidates by ascending number of changes, then in the order of candidates."""
        return tuple(change.candidate for change in self.changes)

    @property
    def search(self) -> Search | None:
        """What was searched and proved, all numbers of changes together."""
        return self.answer.search

    @property
    def worst(self) -> Worst:
        """Extremes over the box of the resistors fitted today, with the new transistor."""
        return self.after.worst

    def as_dict(self) -> dict[str, Any]:
        """The answer as plain data in the layout of the JSON contract.

        Returns
        -------
        dict
            SI numbers; numbers that are not finite become None.
        """
        body = self.answer.as_dict()
        for entry, change in zip(body["candidates"], self.changes, strict=True):
            entry["changed"] = list(change.changed)
            entry["was"] = plain(change.was)
            entry["source"] = dict(change.source)
            entry["cost"] = plain(vars(change.cost))
        return body | {
            "before": self.before.as_dict(),
            "after": self.after.as_dict(),
            "transistors": {"before": plain(vars(self.old)), "after": plain(vars(self.new))},
            "comparison": [plain(vars(line)) for line in self.comparison],
            "keep": list(self.keep),
            "steps": [plain(vars(step)) for step in self.steps],
            "singles": [plain(vars(single)) for single in self.singles],
            "recommended": 1 if self.changes else None,
            "unconstrained": self.unconstrained,
            "cautions": [plain(vars(caution)) for caution in self.cautions],
            "not_verified": [plain(vars(caution)) for caution in self.not_verified],
            "reasons": list(self.reasons),
        }

    def to_json(self) -> str:
        """The answer as JSON text.

        Returns
        -------
        str
            Indented, one trailing newline; numbers with the digits that reproduce them.
        """
        return json.dumps(self.as_dict(), indent=1, ensure_ascii=False, allow_nan=False) + "\n"
