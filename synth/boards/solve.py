"""Many stages, one BOM: the fewest new line items, then the least cost, then the least drift, proved."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from synth import __version__
from synth.answer import Candidate
from synth.boards.answer import BoardAnswer, BoardSearch, StageResult
from synth.boards.bom import Place, alternates_of, lines, merges, placed
from synth.boards.candidates import Choice, Choices, choices, useful
from synth.boards.compare import changes, read_bom
from synth.boards.file import ALLOWANCE, Board, BoardStage
from synth.boards.judging import judged
from synth.boards.model import Demand, Selection, choose
from synth.boards.purchase import Part, distinct
from synth.networks import NETWORKS
from synth.search import search
from synth.spaces import goal_of, spaces_of
from synth.stage import Stage

if TYPE_CHECKING:
    import os

Progress = Callable[[str], None]

MOST = 5000
"""Candidates of one stage after which its list ends."""


def board(
    stages: Board | Iterable[Stage | BoardStage],
    *,
    stock: str | os.PathLike[str] | None = None,
    on_board: Sequence[str | float] = (),
    most_new: int | None = None,
    allowance: float = ALLOWANCE,
    most: int = MOST,
    seconds: float = 60.0,
    workers: int = 1,
    progress: Progress | None = None,
    against: str | os.PathLike[str] | None = None,
    command: str = "",
) -> BoardAnswer:
    """Choose the resistors of many stages together.

    Parameters
    ----------
    stages : Board, or iterable of Stage or BoardStage
        The request; the next four arguments belong to bare stages only.
    stock : path, optional
        Stock list that every resistor is taken from.
    on_board : sequence of str or float
        Values on the board already [ohm].
    most_new : int, optional
        Largest number of new line items [-].
    allowance : float
        Drift beyond its own best that each stage may spend [-].
    most : int
        Candidates of one stage after which its list ends [-].
    seconds : float
        Time for each objective [s].
    workers : int
        Threads of the solver [-].
    progress : callable, optional
        Is told what is being done.
    against : path, optional
        BOM of an earlier run, in CSV, to be compared with.
    command : str
        The command that asked, for the record.

    Returns
    -------
    BoardAnswer
        With `infeasible` filled when there is none.

    Raises
    ------
    RestpointError
        If the request contradicts itself.
    """
    start = time.perf_counter()
    old = None if against is None else read_bom(against)
    if isinstance(stages, Board):
        request = stages
    else:
        request = Board.of(stages, stock=stock, on_board=on_board, most_new=most_new, allowance=allowance)
    say = progress or (lambda text: None)
    sets = []
    for number, entry in enumerate(request.stages, 1):
        say(f"candidates of stage {number} of {len(request.stages)}, {entry.stage.name}")
        sets.append(_choices(request, entry, most))
    selection, kept, candidates = _settled(request, sets, most_new=request.most_new, seconds=seconds, workers=workers, say=say)
    record = BoardSearch(
        status=selection.status,
        complete=selection.status in ("optimal", "infeasible"),
        objectives=selection.bounds,
        combinations=sum(s.combinations for s in sets),
        evaluated=sum(s.evaluated for s in sets),
        candidates=sum(s.found for s in sets),
        seconds=time.perf_counter() - start,
    )
    answer = BoardAnswer(
        version=__version__, command=command, name=request.name, assumed=request.assumed, search=record, request=request
    )
    if not selection.chosen:
        return replace(answer, infeasible=_why_not(request, sets, selection.status))
    say("BOM")
    answer, places = _with_bom(answer, sets, kept, selection, candidates)
    if old is None:
        return answer
    say("what changed")

    def kept_as_it_was(stage: int, like: tuple[Choice, ...]) -> Selection:
        parts = _parts(request, sets)
        held = [replace(s, kept=like, reached=None) if k == stage else s for k, s in enumerate(kept)]
        demands = [Demand(choices=s, count=e.count) for s, e in zip(held, request.stages, strict=True)]
        return choose(demands, parts, most_new=request.most_new, seconds=seconds, workers=workers)

    return replace(answer, changes=changes(old, places, selection, sets, request, kept_as_it_was))


def _choices(request: Board, entry: BoardStage, most: int) -> Choices:
    """Candidates of one stage within its allowance."""
    roles = {role for network in entry.stage.networks for role in NETWORKS[network].role_names}
    return choices(
        entry.stage,
        parts=request.parts,
        allowance=entry.allowance,
        bought=roles - entry.outside,
        extra=request.on_board,
        most=most,
    )


def _parts(request: Board, sets: Sequence[Choices]) -> tuple[Part, ...]:
    """What can be fitted: the stock list, and beside it what the stages ask for that it does not have."""
    known = request.parts or ()
    needs = dict.fromkeys(need for s in sets for c in s.kept for need in c.pieces)
    served = {n for n in needs if any(p.there and p.serves(n) for p in known)} if known else set()
    generic = [
        Part(
            value=need.value,
            tolerance=need.tolerance,
            tcr_low=need.tcr_low,
            tcr_high=need.tcr_high,
            style=need.style,
            new=need.value not in request.on_board,
        )
        for need in needs
        if need not in served
    ]
    return distinct((*known, *generic))


def _settled(
    request: Board, sets: list[Choices], *, most_new: int | None, seconds: float, workers: int, say: Progress
) -> tuple[Selection, list[Choices], list[Candidate]]:
    """The choice, in which every candidate passes all that only `check` judges; what does not is taken out and chosen anew."""
    while True:
        parts = _parts(request, sets)
        pieces = sum(entry.count * entry.most_resistors for entry in request.stages)
        kept = [useful(s, parts, e.count, pieces) for s, e in zip(sets, request.stages, strict=True)]
        demands = [Demand(choices=s, count=e.count) for s, e in zip(kept, request.stages, strict=True)]
        selection = choose(demands, parts, most_new=most_new, seconds=seconds, workers=workers, progress=say)
        reviewed = [judged(e.stage, choice) for e, choice in zip(request.stages, selection.chosen, strict=False)]
        failed = [k for k, candidate in enumerate(reviewed) if candidate.verdict != "pass"]
        if not failed:
            return selection, kept, reviewed
        for k in failed:
            rest = tuple(c for c in sets[k].kept if c is not selection.chosen[k])
            sets[k] = replace(sets[k], kept=rest)


def _why_not(request: Board, sets: Sequence[Choices], status: str) -> tuple[str, ...]:
    """Why there is no BOM."""
    reasons = []
    for entry, found in zip(request.stages, sets, strict=True):
        if found.kept:
            continue
        name = entry.stage.name
        if request.parts is None:
            reasons.append(f"{name}: no combination meets every limit; ask restpoint find for what conflicts")
            continue
        own = search(spaces_of(entry.stage), goal_of(entry.stage), top=1)
        would = f"; its own choice of values would drift {100.0 * own.found[0].drift:.3g} %" if own.found else ""
        reasons.append(f"{name}: no combination of the stock list meets every limit{would}")
    if not reasons and status == "infeasible":
        limit = "" if request.most_new is None else f" and at most {request.most_new} new line items"
        reasons.append(f"each stage has candidates, but not all together with the pieces there are{limit}")
    elif not reasons:
        reasons.append("no choice was found in the time given; whether there is one is open")
    return tuple(reasons)


def _with_bom(
    answer: BoardAnswer, sets: Sequence[Choices], kept: Sequence[Choices], selection: Selection, candidates: Sequence[Candidate]
) -> tuple[BoardAnswer, tuple[Place, ...]]:
    request, chosen = answer.request, selection.chosen
    entries = request.stages
    names = [entry.stage.name for entry in entries]
    places = placed(chosen, [entry.count for entry in entries], request.numbers(), selection.fitted)
    goals = [goal_of(entry.stage) for entry in entries]
    parts = _parts(request, sets)
    bom = lines(
        places,
        candidates,
        names,
        priced=request.parts is not None,
        alternates=lambda group: alternates_of(group, chosen, goals, parts),
    )
    stages = [
        StageResult(
            name=names[k],
            count=entry.count,
            designators=_numbers(places, k, entry.count),
            candidate=candidates[k],
            drift=chosen[k].drift,
            best=sets[k].best,
            allowed=sets[k].allowed,
            found=sets[k].found,
            kept=len(kept[k].kept),
            reached=sets[k].reached,
        )
        for k, entry in enumerate(entries)
    ]
    done = replace(answer, stages=tuple(stages), bom=bom, merges=merges(bom, places, chosen, sets, names))
    return done, places


def _numbers(places: Sequence[Place], stage: int, count: int) -> tuple[dict[str, str], ...]:
    own = [place for place in places if place.stage == stage]
    return tuple({place.role: place.designator for place in own if place.copy == copy} for copy in range(count))
