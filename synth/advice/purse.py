"""What advice may spend: every statement is a search, and searches that conflict by a hair take long."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace

from synth.quantities import RestpointError
from synth.search import Outcome, Stop, search
from synth.spaces import Space, goal_of, spaces_of
from synth.stage import Stage

EFFORT = 5e6
"""Q-point solves that one search for advice may take, about a second; what it leaves open is not claimed."""
LOOK = 8e5
"""Q-point solves of a search that only asks whether a change of the surroundings would do."""
BUDGET = 1.2e7
"""Q-point solves for all of the advice together, some seconds; what is left then is not looked at."""
GAP = 0.005
"""Relative gap left in the drifts that advice quotes [-]; they are drifts of real candidates all the same."""


class Purse:
    """The solves that are left for advice.

    Parameters
    ----------
    left : float, optional
        Q-point solves [-]; `BUDGET` when not given.
    stop : callable, optional
        Asked often; from True on nothing is searched any more.
    """

    def __init__(self, left: float | None = None, stop: Stop | None = None) -> None:
        self.left = BUDGET if left is None else left
        self.stop = stop

    def search(
        self,
        stage: Stage,
        without: Collection[str] = (),
        *,
        first: bool = False,
        most: float = EFFORT,
        spaces: Sequence[Space] | None = None,
    ) -> Outcome:
        """Search for one candidate.

        Parameters
        ----------
        stage : Stage
            The request.
        without : collection of str
            Requirements to leave out.
        first : bool
            Whether anything that qualifies will do; else the best, within `GAP`.
        most : float
            Q-point solves after which to stop [-].
        spaces : sequence of Space, optional
            What to search in place of what the stage allows.

        Returns
        -------
        Outcome
            Its status is "unknown" where the solves did not suffice.
        """
        rooms = spaces_of(stage, without) if spaces is None else spaces
        gap = 0.0 if first else GAP
        most = min(most, max(self.left, 0.0))
        outcome = search(rooms, goal_of(stage), top=1, gap=gap, first=first, most=most, stop=self.stop)
        self.left -= outcome.evaluated
        return outcome

    def drift(self, stage: Stage) -> float | None:
        """Best drift of a stage.

        Parameters
        ----------
        stage : Stage
            The request.

        Returns
        -------
        float or None
            Of a real candidate, within `GAP` of the best [-]; None where none was found.
        """
        outcome = self.search(stage)
        return outcome.found[0].drift if outcome.found else None

    def tried(self, stage: Stage, change: Mapping[str, str]) -> Outcome | None:
        """Whether some candidate qualifies after a change.

        Parameters
        ----------
        stage : Stage
            The request.
        change : mapping of str to str
            Keys and texts to be given anew.

        Returns
        -------
        Outcome or None
            With anything that does, not always the best; None where the change is refused.
        """
        try:
            changed = stage.with_keys(dict(change))
        except RestpointError:
            return None
        return self.search(changed, first=True, most=LOOK)


@dataclass(frozen=True, kw_only=True)
class Grade:
    """One degree of a change: stage-file keys and texts, how far it moves the request [-], a drift that it is known for [-]."""

    change: Mapping[str, str]
    size: float
    drift: float | None = None


def least(grades: Sequence[Grade], stage: Stage, purse: Purse, *, bad: int = -1) -> Grade | None:
    """The least of some degrees of a change that does, by bisection.

    Parameters
    ----------
    grades : sequence of Grade
        From the least to the greatest.
    stage : Stage
        A request that nothing meets.
    purse : Purse
        What it may cost.
    bad : int
        Greatest position that is known not to do [-]; -1 if none is.

    Returns
    -------
    Grade or None
        Verified by a search of its own, and the least as far as the solves sufficed to tell; None where not even the
        greatest does.
    """
    outcome = purse.tried(stage, grades[-1].change) if grades else None
    if outcome is None or not outcome.found:
        return None
    good, drift = len(grades) - 1, outcome.found[0].drift
    while good - bad > 1:
        middle = (good + bad) // 2
        some = purse.tried(stage, grades[middle].change)
        if some is not None and some.found:
            good, drift = middle, some.found[0].drift
        elif some is not None and some.status == "unknown":
            # Nearer to the conflict it only takes longer to tell.
            break
        else:
            bad = middle
    return replace(grades[good], drift=drift)
