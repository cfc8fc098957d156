"""The three lines on top of a page, and what stands below its candidates."""

from __future__ import annotations

from synth.answer import Answer, Candidate, Search
from synth.explain import cause_words, percent
from synth.networks import NETWORKS
from synth.present.page.parts import NO_BREAK, Note, Part, Review, Table, number, words
from synth.present.terminal import resistors, span
from synth.quantities import format_quantity
from synth.report import report
from synth.search import AXES
from synth.tradeoff import figure_text, made_up

RAISED = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")
SHORT = 9
"""Characters up to which a cell of the report stays on one line."""
WORDS = (
    ("over the box", "worst case over every spread at once: gain, VBE, temperature, supply, resistors"),
    ("drift", "largest excursion from target over the box, relative to the target"),
    ("centring", "how far the nominal Q-point is off target"),
    ("margin", "distance to the limit, relative to it"),
)


def count_words(count: int) -> str:
    """A large whole number for reading.

    Parameters
    ----------
    count : int
        0 or more [-].

    Returns
    -------
    str
        ``129 257``, from ten million on ``1.01·10⁸``.
    """
    if count < 10**7:
        return f"{count:,}".replace(",", "\u00a0")
    digits, _, power = f"{count:.2e}".partition("e")
    return f"{digits}·10{str(int(power)).translate(RAISED)}"


def title(answer: Answer) -> str:
    """What the page is about.

    Parameters
    ----------
    answer : Answer
        Any answer.

    Returns
    -------
    str
        The name of the stage.
    """
    return str(answer.stage.get("name") or "stage")


def lead(answer: Answer) -> tuple[str, str, list[str]]:
    """The answer in three lines: the verdict and its proof, the values, and what they depend on.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    mark : str
        ``pass``, ``fail`` or ``open``.
    verdict : str
        The same as it is printed.
    lines : list of str
        Three sentences.
    """
    best, why = answer.best, answer.infeasible
    if best is not None:
        verdict = "pass" if answer.passed else "fail"
        return verdict, verdict.upper(), [_proof(answer, best), _values(best), _decides(best)]
    lines = [_proof(answer, None)]
    if why is None:
        return "open", "OPEN", [*lines, "No candidate was found so far.", "A longer search, or fewer networks, may settle it."]
    one = len(why.binding) == 1
    lines.append(f"{'This limit cannot be met' if one else 'These limits cannot be met together'}: {', '.join(why.binding)}.")
    if why.relaxations:
        first = why.relaxations[0]
        change = ", ".join(f"{key} = {text}" for key, text in first.change.items())
        lines.append(f"One change that would do: {change}, with a drift of {percent(first.drift)}.")
    else:
        lines.append("No change of one limit alone would do.")
    return "fail", "FAIL", lines


def _proof(answer: Answer, best: Candidate | None) -> str:
    search = answer.search
    if search is None:
        failed = [] if best is None else [v.name for v in best.limits if v.verdict == "fail"]
        if failed:
            return f"The fitted resistors fail {', '.join(failed)}."
        return "The fitted resistors pass every limit and window over the whole box."
    space = f"{count_words(search.combinations)} combinations"
    if search.status == "infeasible":
        return f"None of {space} meets every limit, proved."
    does = _measured(search)
    if search.status != "optimal":
        state = "its best so far are listed" if answer.candidates else "none that meets every limit was found so far"
        bound = f"; of the rest none {does} less than {percent(search.bound)}" if search.bound else ""
        return f"The search was stopped among {space}: {state}{bound}."
    count = len(answer.candidates)
    listed = "The best" if count == 1 else f"The best {count}"
    beyond = "; no other meets every limit" if search.bound is None else f"; every other {does} {percent(search.bound)} or more"
    return f"{listed} of {space}, proved{beyond}."


def _measured(search: Search) -> str:
    """What a candidate does in the metric that ranks it."""
    return "drifts" if search.metric == "corners" else f"by {search.metric} comes to"


def _values(c: Candidate) -> str:
    volts = list(c.worst)[-1]
    return (
        f"{NETWORKS[c.network].title.capitalize()} with {resistors(c)}: IC {span(*c.worst['ic'], 'current')}, {volts.upper()} "
        f"{span(*c.worst[volts], 'voltage')} over the whole box."
    )


def _decides(c: Candidate) -> str:
    quantity = c.drift.decides
    shares = [s for s in c.budget.get(quantity, ()) if s.share > 0.0]
    cause = f", most of all by {cause_words(shares[0].cause)} ({percent(shares[0].share)})" if shares else ""
    text = f"{quantity.upper()} drifts most, {percent(c.drift.q_point)} at worst{cause}"
    judged = [v for v in c.limits if abs(v.margin) < float("inf")]
    if judged:
        tight = min(judged, key=lambda v: v.margin)
        text += f"; the least margin is that of {tight.name}, {percent(tight.margin)}"
    return f"{text}."


def notes(answer: Answer) -> list[Note]:
    """What stands below the candidates.

    Parameters
    ----------
    answer : Answer
        Any answer.

    Returns
    -------
    list of Note
        Only those that have something to say.
    """
    makers = (_infeasible, _cautions, _alternatives, _frontier, _networks, _outlook, assumed_note, search_note)
    found = [note for make in makers if (note := make(answer)) is not None]
    return [*found, Note(key="words", title="Words", facts=WORDS)]


def review(answer: Answer) -> Review | None:
    """The worst-case report of the first candidate, as parts of the page.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    Review or None
        None where there is no candidate, since the notes say why.
    """
    if answer.best is None:
        return None
    told = report(answer)
    parts = [
        Part(
            title=section.title,
            lines=section.paragraphs,
            points=section.points,
            tables=[
                Table(
                    title=section.title,
                    head=table.headings,
                    rows=[[words(_kept(text)) for text in row] for row in table.rows],
                )
                for table in section.tables
            ],
        )
        for section in told.sections
    ]
    return Review(verdict=told.verdict, parts=parts)


def _kept(text: str) -> str:
    """A text too short to break keeps its number with its unit."""
    return text.replace(" ", NO_BREAK) if len(text) <= SHORT else text


def _infeasible(answer: Answer) -> Note | None:
    why = answer.infeasible
    if why is None:
        return None
    without = []
    for name, drift in why.best_without.items():
        effect = "other limits still conflict" if drift is None else f"the best candidate drifts {percent(drift)}"
        without.append((f"without {name}", "not settled, the search was stopped" if name in why.unsettled else effect))
    rows = [
        [words(", ".join(f'{key} = "{text}"' for key, text in r.change.items())), number(percent(r.drift), r.drift)]
        for r in why.relaxations
    ]
    would = Table(title="Any one of these changes would do", head=("change", "best drift"), rows=rows,
                  note="Each was verified by a search of its own.")  # fmt: skip
    return Note(
        key="infeasible",
        title="Why nothing qualifies",
        lines=[f"{name}: {note}" for name, note in why.notes.items()],
        facts=without,
        tables=(would,) if rows else (),
    )


def _cautions(answer: Answer) -> Note | None:
    if not answer.warnings:
        return None
    facts = [(w.name.replace("_", " "), w.text) for w in answer.warnings]
    return Note(key="cautions", title="Cautions", facts=facts)


def _alternatives(answer: Answer) -> Note | None:
    if not answer.alternatives:
        return None
    table = Table(
        title="Worth a look",
        head=("rank", "for its", "which means"),
        rows=[
            [number(str(a.rank), a.rank) if a.rank else number("frontier"), words(a.reason), words(a.text)]
            for a in answer.alternatives
        ],
    )
    return Note(key="alternatives", title="Worth a look for another reason than drift", tables=(table,))


def _frontier(answer: Answer) -> Note | None:
    front = answer.frontier
    if front is None:
        return None
    axes = [AXES[name] for name in front.axes]
    names = [axis.name.replace("_", " ") for axis in axes]
    metric = "" if answer.search is None or answer.search.metric == "corners" else answer.search.metric
    rows = [
        [
            *([number(percent(point.score), point.score)] if metric else []),
            number(percent(point.drift), point.drift),
            *(number(figure_text(axis, point.figures[axis.name])) for axis in axes),
            words(point.network),
            words(made_up(point)),
        ]
        for point in front.points
    ]
    whole = "These are all there are."
    if not front.complete:
        whole = "These are not all." if front.bound is None else f"Below {percent(front.bound)} these are all there are."
    table = Table(
        title=f"Frontier of drift and {', '.join(names)}",
        head=(*([f"by {metric}"] if metric else []), "drift", *names, "network", "resistors"),
        rows=rows,
        note=f"None of all combinations beats one of these along every axis. {whole}",
    )
    return Note(key="frontier", title="Frontier", tables=(table,))


def _outlook(answer: Answer) -> Note | None:
    outlook = answer.outlook
    if outlook is None:
        return None
    rows = []
    for kind, changes in (("better", outlook.upgrades), ("cheaper", outlook.savings)):
        for row in changes:
            change = ", ".join(f'{key} = "{text}"' for key, text in row.change.items())
            drift = number("nothing qualifies") if row.drift is None else number(percent(row.drift), row.drift)
            rows.append([words(kind), words(row.name), drift, words(change)])
    head = ("which way", "what", "best drift", "change")
    table = Table(title="Changes of the request", head=head, rows=rows, note="Each comes from a search of its own.")
    return Note(
        key="outlook",
        title="What would change the best drift",
        lines=[f"The best drift is {percent(outlook.drift)}."],
        facts=[(f"values of {floor.values}", f"{percent(floor.drift)} with the bands as they are") for floor in outlook.floors],
        tables=(table,) if rows else (),
    )


def _networks(answer: Answer) -> Note | None:
    if len(answer.networks) < 2:
        return None
    rows = [
        [words(n.network), number("–" if n.best is None else percent(n.best), n.best), words(n.why)] for n in answer.networks
    ]
    table = Table(title="Best of each network", head=("network", "drift", "why"), rows=rows)
    return Note(key="networks", title="Networks", tables=(table,))


def assumed_note(answer: Answer) -> Note | None:
    """What was not given.

    Parameters
    ----------
    answer : Answer
        Any answer.

    Returns
    -------
    Note or None
        None where all was given.
    """
    if not answer.assumed:
        return None
    rows = [[words(n.key), words(n.value), words(n.why)] for n in answer.assumed]
    table = Table(title="Assumed values", head=("key", "value", "why"), rows=rows)
    return Note(key="assumed", title="Assumed, since not given", tables=(table,))


def search_note(answer: Answer) -> Note | None:
    """What was searched and what is proved.

    Parameters
    ----------
    answer : Answer
        Any answer.

    Returns
    -------
    Note or None
        None where nothing was searched.
    """
    search = answer.search
    if search is None:
        return None
    state = "proved: everything not listed was excluded" if search.complete else "not complete: the search was stopped"
    facts = [
        ("searched", f"{count_words(search.combinations)} combinations"),
        ("solved", f"{count_words(search.evaluated)} Q-points in {format_quantity(search.seconds, 'time')}"),
        ("state", f"{search.status}, {state}"),
    ]
    if search.bound is not None:
        facts.append(("bound", f"no other candidate {_measured(search)} less than {percent(search.bound)}"))
    return Note(key="search", title="Search and proof", facts=facts)
