"""The answer as a table of at most 100 columns."""

from __future__ import annotations

from collections.abc import Sequence
from math import inf

from synth.answer import Answer, Candidate, Outlook, Tradeoff, Verdict
from synth.explain import cause_words, made_of, percent, point_words
from synth.present.methods import three_methods
from synth.quantities import format_quantity, format_resistance
from synth.search import AXES
from synth.stage_keys import KEYS
from synth.tradeoff import figure_text, made_up

WIDTH = 100
FIGURES = 3
ROWS = 20
"""Rows of a frontier that the table shows."""
STRESS = ("resistor_stress.", "transistor_stress.")
LEGEND = """Words
  over the box  worst case over every spread at once: gain, VBE, temperature, supply, resistors
  drift         largest excursion from target over the box, relative to the target
  centring      how far the nominal Q-point is off target
  margin        distance to the limit, relative to it"""
NO_BREAK = "\u00a0"


def render(answer: Answer) -> str:
    """The whole answer as text.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    str
        Lines of at most 100 columns, a trailing newline.
    """
    blocks = [_headline(answer)]
    if answer.infeasible is not None:
        blocks.append(infeasible_words(answer))
    best = answer.best
    if best is not None:
        if answer.kind == "find":
            blocks.append(_ranking(answer.candidates))
        blocks += [_first(answer, best), _causes(best), limits_table(best), _stress(answer, best), _signal(answer, best)]
        blocks.append(_methods(best))
    if answer.alternatives:
        blocks.append(
            section(
                "Worth a look",
                [[f"rank {a.rank}" if a.rank else "frontier", a.reason, a.text] for a in answer.alternatives],
            )
        )
    if answer.frontier is not None:
        blocks.append(_frontier(answer.frontier))
    if len(answer.networks) > 1:
        rows = [[n.network, "–" if n.best is None else percent(n.best), n.why] for n in answer.networks]
        blocks.append(section("Networks", rows))
    if answer.outlook is not None:
        blocks.append(_outlook(answer.outlook))
    if answer.warnings:
        blocks.append("\n".join(["Cautions", *(wrapped(f"  {w.name}: {w.text}", "    ") for w in answer.warnings)]))
    if answer.assumed:
        # A long list would push the reasons of all others out of sight.
        long = [len(n.value) > LONGEST_VALUE for n in answer.assumed]
        rows = [
            [n.key, "as follows", f"{n.value}; {n.why}"] if too_long else [n.key, n.value, n.why]
            for n, too_long in zip(answer.assumed, long, strict=True)
        ]
        blocks.append(section("Assumed, since not given", rows))
    if best is not None:
        blocks.append(LEGEND)
    blocks.append(_next(answer))
    text = "\n\n".join(block for block in blocks if block)
    return "\n".join(wrapped(line, "    ") for line in text.split("\n")) + "\n"


def explanation(answer: Answer, rank: int) -> str:
    """Explanation of one candidate, wrapped.

    Parameters
    ----------
    answer : Answer
        Any answer.
    rank : int
        1 is the best [-].

    Returns
    -------
    str
        A paragraph a fact, a trailing newline.
    """
    c = answer.candidate(rank)
    head = f"Candidate {rank}: {c.network}, {resistors(c)}"
    return "\n".join([head, *(wrapped(f"  {line}", "    ") for line in c.explanation)]) + "\n"


def resistors(candidate: Candidate) -> str:
    """Resistors of a candidate in a row.

    Parameters
    ----------
    candidate : Candidate
        Any candidate.

    Returns
    -------
    str
        ``R1 38K3, R2 21K, ...``.
    """
    made = candidate.parts
    return ", ".join(f"{role.upper()} {made_of(value, made.get(role))}" for role, value in candidate.resistors.items())


def table(rows: Sequence[Sequence[str]], right: Sequence[int] = (), indent: str = "  ") -> str:
    """Rows in aligned columns; the last column wraps.

    Parameters
    ----------
    rows : sequence of sequence of str
        Cells.
    right : sequence of int
        Columns to align to the right.
    indent : str
        In front of every line.

    Returns
    -------
    str
        Lines of at most 100 columns.
    """
    widths = [max(len(row[j]) for row in rows) for j in range(len(rows[0]))]
    lines = []
    for row in rows:
        cells = [c.rjust(widths[j]) if j in right else c.ljust(widths[j]) for j, c in enumerate(row[:-1])]
        lead = indent + "".join(cell + "  " for cell in cells)
        last = row[-1].rjust(widths[-1]) if len(row) - 1 in right else row[-1]
        lines.append(wrapped(lead + last, " " * len(lead)))
    return "\n".join(lines)


def wrapped(text: str, hang: str) -> str:
    """A line broken at spaces.

    Parameters
    ----------
    text : str
        The line.
    hang : str
        What continuation lines start with.

    Returns
    -------
    str
        Lines of at most 100 columns.
    """
    if len(hang) > WIDTH // 2:
        hang = "    "
    lines, line = [], text
    while len(line) > WIDTH:
        cut = line.rfind(" ", len(hang) + 1, WIDTH + 1)
        # A word longer than a line is cut rather than let through.
        end, rest = (cut, cut + 1) if cut > 0 else (WIDTH, WIDTH)
        lines.append(line[:end].rstrip())
        line = hang + line[rest:]
    return "\n".join([*lines, line.rstrip()])


def section(title: str, rows: Sequence[Sequence[str]], right: Sequence[int] = ()) -> str:
    """A title with a table below.

    Parameters
    ----------
    title : str
        The title.
    rows : sequence of sequence of str
        Cells.
    right : sequence of int
        Columns to align to the right.

    Returns
    -------
    str
        Lines of at most 100 columns.
    """
    return f"{title}\n{table(rows, right)}"


def _count(number: int) -> str:
    return f"{number:,}".replace(",", NO_BREAK) if number < 10**7 else f"{number:.3g}"


def _headline(answer: Answer) -> str:
    name = answer.stage.get("name") or "stage"
    search = answer.search
    if search is None:
        best = answer.best
        verdict = "no network" if best is None else best.verdict.upper()
        return f"{verdict}  {name}"
    effort = f"{_count(search.evaluated)} Q-points solved in {search.seconds:.2f} s"
    space = f"{_count(search.combinations)} combinations"
    if search.status == "optimal":
        count = len(answer.candidates)
        only = "the only candidate" if search.bound is None else "the best"
        listed = only if count == 1 else f"the best {count}"
        does = "drifts" if search.metric == "corners" else f"by {search.metric} comes to"
        beyond = "" if search.bound is None else f"; every other {does} {percent(search.bound)} or more"
        # A junction that does not settle is found out when the candidates are reviewed.
        verdict = "PASS" if answer.passed else "FAIL"
        return wrapped(f"{verdict}  {name}: {listed} of {space}, proved{beyond} ({effort})", "      ")
    if search.status == "infeasible":
        return wrapped(f"FAIL  {name}: none of {space} meets every limit, proved ({effort})", "      ")
    if not answer.candidates:
        does = "drifts" if search.metric == "corners" else f"by {search.metric} comes to"
        bound = f", and what is left {does} {percent(search.bound)} or more" if search.bound else ""
        text = f"stopped before any of {space} was found to meet every limit; it is open whether one does{bound}"
        return wrapped(f"OPEN  {name}: {text} ({effort})", "      ")
    first, least = _measure(answer.candidates[0]), search.bound
    if least is None or least >= first:
        text = "none is better than the first, but the rest of the list may change"
    elif least > 0.0:
        does = "drift" if search.metric == "corners" else f"by {search.metric} come to"
        text = f"nothing can {does} less than {percent(least)}, a gap of {percent(1.0 - least / first)} of the best so far"
    else:
        text = "of the rest nothing is known yet"
    verdict = "PASS" if answer.passed else "FAIL"
    return wrapped(f"{verdict}  {name}: stopped early, the best so far of {space}; {text} ({effort})", "      ")


def _measure(c: Candidate) -> float:
    return c.drift.q_point if c.score is None else c.score


def figure(value: float, kind: str) -> str:
    """A measured value with its three figures shown, trailing zeros included, so that columns line up.

    Parameters
    ----------
    value : float
        Measured, SI [-].
    kind : str
        Kind of quantity.

    Returns
    -------
    str
        ``2.20 mA``.
    """
    number, _, unit = format_quantity(value, kind).rpartition(" ")
    figures = sum(c.isdigit() for c in number.lstrip("-0."))
    if number[-1:].isdigit() and 0 < figures < FIGURES:
        number += ("" if "." in number else ".") + "0" * (FIGURES - figures)
    return f"{number} {unit}".strip()


def span(low: float, high: float, kind: str) -> str:
    """A range with the unit once where both ends share it.

    Parameters
    ----------
    low, high : float
        Ends, SI [-].
    kind : str
        Kind of quantity.

    Returns
    -------
    str
        ``1.78 to 2.19 mA``.
    """
    a, b = figure(low, kind), figure(high, kind)
    if a.split(" ")[-1] == b.split(" ")[-1]:
        return f"{a.split(' ')[0]} to {b}"
    return f"{a} to {b}"


def _ranking(candidates: Sequence[Candidate]) -> str:
    same = len({(c.network, tuple(c.resistors)) for c in candidates}) == 1
    roles = list(candidates[0].resistors) if same else []
    head = ["rank", *(["network"] if not same else []), *([r.upper() for r in roles] if same else ["resistors"])]
    # Beside the names of networks and roles, or beside pairs, there is no room for the supply current.
    # The voltage that has the target, if another than VCE has it.
    volts = list(candidates[0].worst)[-1]
    slim = same and not any(c.parts for c in candidates)
    head += ["IC over the box", f"{volts.upper()} over the box", "drift"]
    head += ["metric"] if candidates[0].score is not None else ["supply"] if slim else []
    rows = [head]
    for c in candidates:
        values = [made_of(c.resistors[r], c.parts.get(r)) for r in roles] if same else [
            ("; " if c.parts else " ").join(f"{r.upper()} {made_of(v, c.parts.get(r))}" for r, v in c.resistors.items())
        ]
        last = [figure(c.supply_current, "current")] if slim else []
        rows.append(
            [
                str(c.rank),
                *([c.network] if not same else []),
                *values,
                span(*c.worst["ic"], "current"),
                span(*c.worst[volts], "voltage"),
                percent(c.drift.q_point),
                *(last if c.score is None else [percent(c.score)]),
            ]
        )
    return table(rows, right=(0, *(j for j, name in enumerate(head) if name in ("drift", "supply", "metric"))))


def _frontier(front: Tradeoff) -> str:
    """The points that nothing beats, thinned out evenly where there are many."""
    axes = [AXES[name] for name in front.axes]
    count = len(front.points)
    rows = min(count, ROWS)
    shown = [round(k * (count - 1) / max(rows - 1, 1)) for k in range(rows)]
    names = [axis.name.replace("_", " ") for axis in axes]
    cells = [["drift", *names, "network", "resistors"]]
    for point in (front.points[k] for k in shown):
        figures = [figure_text(axis, point.figures[axis.name]) for axis in axes]
        cells.append([percent(point.drift), *figures, point.network, made_up(point)])
    title = f"Frontier of drift and {', '.join(names)}: {count} candidates that none beats"
    if not front.complete:
        title += ", not all" if front.bound is None else f", all there are below {percent(front.bound)}"
    title += f" ({len(shown)} shown; --format json has all)" if len(shown) < count else ""
    return wrapped(title, "  ") + ("\n" + table(cells, right=range(1 + len(axes))) if count else "")


def _first(answer: Answer, c: Candidate) -> str:
    title = f"{'Best' if answer.kind == 'find' else 'Fitted'}: {c.network}, {resistors(c)}"
    if c.nominal.region != "active" or len(c.regions) > 1:
        title += f" ({', '.join(c.regions)} over the box)"
    target = answer.stage.get("target", {})
    rows = [["", "nominal", "over the box", "target", "drift"]]
    for quantity in c.worst:
        kind = "current" if quantity == "ic" else "voltage"
        drift = c.drift.of().get(quantity)
        aim = (target.get(quantity) or [None, None, None])[1]
        rows.append(
            [
                quantity.upper(),
                figure(getattr(c.nominal, quantity), kind),
                span(*c.worst[quantity], kind),
                "–" if aim is None else format_quantity(aim, kind),
                "–" if drift is None else percent(drift),
            ]
        )
    nodes = ", ".join(f"V{n.upper()} {figure(v, 'voltage')}" for n, v in c.nominal.nodes.items())
    return f"{title}\n{table(rows, right=(4,))}\n  nominal node voltages against 0 V: {nodes}"


def _causes(c: Candidate) -> str:
    rows = []
    for quantity, shares in c.budget.items():
        total = c.drift.of().get(quantity)
        top = [f"{cause_words(s.cause)} {percent(s.share)}" for s in shares[:3] if s.share > 0.0]
        if top and total is not None:
            rows.append([f"{quantity.upper()} {percent(total)}", ", ".join(top)])
    return section("Three largest causes of drift", rows) if rows else ""


def limit_words(v: Verdict) -> str:
    """What a verdict's limit allows.

    Parameters
    ----------
    v : Verdict
        Any verdict.

    Returns
    -------
    str
        ``<= 200 µA``.
    """
    if isinstance(v.limit, tuple):
        return f"{format_quantity(v.limit[0], v.kind)} to {format_quantity(v.limit[1], v.kind)}"
    return f"{v.sense} {format_quantity(v.limit, v.kind)}"


def limits_table(c: Candidate) -> str:
    """Every verdict of a candidate that is worth a line: those on stress only where they fail.

    Parameters
    ----------
    c : Candidate
        Any candidate.

    Returns
    -------
    str
        Lines of at most 100 columns; "" where nothing was judged.
    """
    rows = [["limit", "allowed", "worst", "margin", "", "decided at"]]
    for v in c.limits:
        if v.verdict == "pass" and v.name.startswith(STRESS):
            continue
        if v.worst != v.worst:
            rows.append([v.name, limit_words(v), "none", "–", v.verdict, "no temperature at which it settles"])
            continue
        decides = point_words(v.at, skip=tuple(c.resistors)) if v.at and v.name not in ("bleeder_current",) else "nominal"
        saturates = v.name == "vce" and v.verdict == "fail" and v.worst == v.limit
        margin = "saturates" if saturates else percent(v.margin) if abs(v.margin) < inf else "–"
        rows.append([v.name, limit_words(v), figure(v.worst, v.kind), margin, v.verdict, decides])
    return section("Limits and windows", rows, right=(3,)) if len(rows) > 1 else ""


def _used(worst: float, allowed: float | None, kind: str) -> str:
    """A worst value with the share used of what is allowed."""
    if allowed is None:
        return figure(worst, kind)
    share = percent(worst / allowed) if allowed > 0.0 else "none allowed"
    return f"{figure(worst, kind)}, {share} of {format_quantity(allowed, kind)}"


def _stress(answer: Answer, c: Candidate) -> str:
    """What every part carries at its own worst point, against its rating."""
    if not c.stress or c.transistor is None:
        return ""
    policy = answer.stage.get("derating", "none")
    hot = format_quantity(answer.stage["ambient"]["temperature"][2], "temperature")
    rows = [["part", "style", "power", "voltage", "smallest style that does"]]
    for role, s in c.stress.items():
        smallest = s.smallest or "none in the table"
        if s.string is not None:
            smallest += f"; or {s.string} x {s.style} in series"
        power, volts = _used(s.power, s.power_allowed, "power"), _used(s.voltage, s.voltage_allowed, "voltage")
        rows.append([f"{role.upper()} {format_resistance(c.pieces[role])}", s.style or "–", power, volts, smallest])
    lines = [table(rows)]
    load = c.transistor
    labels = {
        "power": ("dissipates", "power"), "vceo": ("cut off it holds", "voltage"),
        "veb": ("reverse VEB at switch-off", "voltage"), "ic": ("carries", "current"),
    }  # fmt: skip
    parts = [
        f"{words} {_used(getattr(load, name), load.allowed.get(name), kind)}"
        for name, (words, kind) in labels.items()
        if name == "power" or name in load.allowed
    ]
    if c.transistor.junction is not None and c.transistor.thermal_resistance is not None:
        at = format_quantity(c.transistor.thermal_resistance, "thermal_resistance")
        gain = "" if load.loop_gain is None else f", thermal loop gain {percent(load.loop_gain)}"
        parts.append(f"junction at {format_quantity(c.transistor.junction, 'temperature')} with {at}{gain}")
        if load.worst:
            spans = [span(*ends, "current" if name == "ic" else "voltage") for name, ends in load.worst.items()]
            parts.append(f"heating itself IC spans {spans[0]}, VCE {spans[-1]}")
    elif load.state is not None:
        parts.append("junction beyond its limit" if load.too_hot else f"junction: {load.state}")
    lines.append(wrapped(f"  transistor: {'; '.join(parts)}", "    "))
    title = f"Stress of every part at its own worst point (derating {policy}, ambient up to {hot})"
    return "\n".join([title, *lines])


SIGNAL_WORDS = {
    "gm": ("transconductance gm", "conductance"),
    "r_pi": ("r pi", "resistance"),
    "r_intrinsic": ("intrinsic emitter resistance VT/IE", "resistance"),
    "input_resistance": ("input resistance, feed included", "resistance"),
    "output_resistance": ("output resistance", "resistance"),
    "gain": ("voltage gain", "gain"),
    "swing": ("peak output swing", "voltage"),
    "lower_corner": ("corner of the bypass capacitor", "frequency"),
    "bypass_capacitor": ("bypass capacitor of re", "capacitance"),
}


def ends_words(low: float, high: float, kind: str) -> str:
    """A range of which the upper end may not be known.

    Parameters
    ----------
    low, high : float
        Ends, SI [-]; `high` may be NaN.
    kind : str
        Kind of quantity.

    Returns
    -------
    str
        ``2.55 V or more``, else as `span`.
    """
    return f"{figure(low, kind)} or more" if high != high else span(low, high, kind)


def _methods(c: Candidate) -> str:
    rows, lines = three_methods(c, span)
    return "\n".join([section("Three methods", rows), *lines]) if rows else ""


def _signal(answer: Answer, c: Candidate) -> str:
    """Small-signal figures over the box."""
    if not c.signal:
        return ""
    around = answer.stage["signal"]
    bypass = {"full": "re bypassed", "none": "re not bypassed", "part": "re partly bypassed"}[around["bypass"]]
    load = "no load" if around["load"] is None else f"load {format_quantity(around['load'], 'resistance')}"
    source = format_quantity(around["source"], "resistance")
    notes = [bypass] if "re" in c.resistors and c.network != "follower" else []
    if around.get("corner") is not None:
        notes.append(f"down to {format_quantity(around['corner'], 'frequency')}")
    rows = [["", "nominal", "over the box"]]
    for name, (low, middle, high) in c.signal.items():
        words, kind = SIGNAL_WORDS[name]
        rows.append([words, figure(middle, kind), ends_words(low, high, kind)])
    return section(f"Signal ({', '.join([*notes, load, f'source {source}'])})", rows)


def infeasible_words(answer: Answer) -> str:
    """Why nothing qualifies, and what would do.

    Parameters
    ----------
    answer : Answer
        One that is infeasible.

    Returns
    -------
    str
        Lines of at most 100 columns.
    """
    why = answer.infeasible
    assert why is not None
    one = len(why.binding) == 1
    lines = [f"{'This limit cannot be met' if one else 'These limits cannot be met together'}: {', '.join(why.binding)}"]
    lines += [f"  {name}: {note}" for name, note in why.notes.items()]
    for name, drift in why.best_without.items():
        effect = "other limits still conflict" if drift is None else f"the best candidate drifts {percent(drift)}"
        if name in why.unsettled:
            effect = "not settled, the search for advice was stopped"
        lines.append(f"  without {name}: {effect}")
    if why.relaxations:
        lines.append("Any one of these changes would do (each verified by a search of its own):")
        for r in why.relaxations:
            change = ", ".join(f"{key} = \"{text}\"" for key, text in r.change.items())
            lines.append(f"  {change}: best drift {percent(r.drift)}")
    elif why.unsettled:
        lines.append("Whether a single change would do is not known: the search for advice was stopped.")
    else:
        lines.append("No single change would do: of a limit, the supply, the gain, the resistors, the ambient or the network.")
    return "\n".join(wrapped(line, "    ") for line in lines)


def _outlook(outlook: Outlook) -> str:
    """Levers on the best drift, each from a search of its own."""
    floors = [f"{floor.values} {percent(floor.drift)}" for floor in outlook.floors]
    title = f"What would change the best drift of {percent(outlook.drift)} (each from a search of its own)"
    lines = [f"  with the bands as they are, the values of {', '.join(floors)}"] if floors else []
    rows = []
    for kind, changes in (("better", outlook.upgrades), ("cheaper", outlook.savings)):
        for row in changes:
            change = ", ".join(f'{key} = "{text}"' for key, text in row.change.items())
            rows.append([kind, row.name, "nothing qualifies" if row.drift is None else percent(row.drift), change])
    if rows:
        lines.append(table(rows, (2,)))
    return "\n".join([title, *lines])


def _next(answer: Answer) -> str:
    if answer.kind == "find" and answer.candidates:
        return "Next: --explain 1 gives the reasons, --advise the levers; --save stage.toml keeps the request."
    if answer.infeasible is not None and answer.infeasible.relaxations:
        change = answer.infeasible.relaxations[0].change
        options = " ".join(f"{KEYS[key].options[0]} '{text}'" for key, text in change.items())
        return f"Next: repeat the command with {options}"
    if answer.kind == "check":
        return "Next: restpoint find with the same request shows the best values for it."
    return "Next: add --network any to try every network, or widen a window or limit named above."
LONGEST_VALUE = 30
"""Length above which an assumed value stands with its reason [-]."""
