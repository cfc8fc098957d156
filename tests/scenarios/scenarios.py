"""The eight shared scenarios: what each request comes to, and the point of the box that decides."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import synth
from synth.answer import Answer, Verdict
from synth.explain import percent, point_words
from synth.limits import RULES
from synth.quantities import format_quantity, format_resistance
from synth.stage import Stage

FOLDER = Path(__file__).parent
FILES = sorted(FOLDER.glob("*.toml"))


@dataclass(frozen=True)
class Outcome:
    """A scenario with the answer of `find`, or of `check` where resistors are fitted."""

    file: Path
    answer: Answer

    @property
    def tightest(self) -> Verdict | None:
        """The verdict over the box of least margin, of the best or the fitted candidate."""
        best = self.answer.best
        shape = {name for name, rule in RULES.items() if rule.judged == "nominal"}
        judged = [] if best is None else [v for v in best.limits if v.at and v.name not in {*shape, "vce"}]
        return min(judged, key=lambda v: v.margin, default=None)

    def lines(self) -> list[str]:
        """What the scenario comes to, in words."""
        verdict = "PASS" if self.answer.passed else "FAIL"
        head = f"{verdict}  {self.file.stem} ({self.answer.kind}): {self.answer.stage['name']}"
        best, why = self.answer.best, self.answer.infeasible
        lines = [head]
        if best is not None:
            values = ", ".join(f"{role.upper()} {format_resistance(value)}" for role, value in best.resistors.items())
            lines.append(f"      {best.network}: {values}; drift {percent(best.drift.q_point)}")
        if (v := self.tightest) is not None:
            at = point_words(v.at, skip=tuple(best.resistors) if best else ())
            lines.append(f"      decides: {v.name} {format_quantity(v.worst, v.kind)}, margin {percent(v.margin)}, at {at}")
        if why is not None:
            lines.append(f"      conflict: {', '.join(why.binding)}")
            lines += [f"      {name}: {note}" for name, note in why.notes.items()]
            lines += [f"      would do: {change} = {text!r}" for r in why.relaxations for change, text in r.change.items()]
        return lines


def outcome(file: Path) -> Outcome:
    """The answer to one scenario."""
    stage = Stage.read(file)
    return Outcome(file, synth.check(stage) if stage.values else synth.find(stage))
