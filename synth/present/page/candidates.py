"""The list of candidates, and everything that the page shows of one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from math import inf

from synth.answer import Answer, Candidate, Load
from synth.explain import cause_words, made_of, percent, point_words
from synth.present.page.circuit_view import Circuit, circuit
from synth.present.page.load_line import Picture, picture
from synth.present.page.parts import Cell, Table, bars, number, used, words
from synth.present.terminal import SIGNAL_WORDS, figure, limit_words, resistors, span
from synth.quantities import format_quantity, format_resistance

METER = 10e6
"""Input resistance of a usual digital voltmeter [ohm] (common practice)."""


@dataclass(frozen=True, kw_only=True)
class Entry:
    """One candidate of a page: its key, what its row and its heading call it, the answer that it stands in, more cells.

    `more` are cells of its row by the name of their column; every entry of a page has the same columns. `designators` name
    the part of each role, one for each copy that is built, where they are not made from the role.
    """

    key: str
    label: str
    name: str
    answer: Answer
    candidate: Candidate
    more: Mapping[str, Cell] = field(default_factory=dict)
    designators: Sequence[Mapping[str, str]] = ()


@dataclass(frozen=True, kw_only=True)
class View:
    """One candidate: its heading, verdict, picture and tables."""

    key: str
    name: str
    network: str
    resistors: str
    verdict: str
    drift: str
    picture: Picture | None
    circuit: Circuit
    q_point: Table
    roles: Table
    readings: Table | None
    budgets: Sequence[Table]
    limits: Table
    stress: Table | None
    signal: Table | None
    neighbours: Table | None
    explanation: Sequence[str]


@dataclass(frozen=True, kw_only=True)
class Listing:
    """The table of candidates, the key that each row chooses, the networks to filter by, and what is shown at first."""

    table: Table
    keys: Sequence[str]
    networks: Sequence[str]
    first: str
    beside: str = ""


def entries(answer: Answer) -> list[Entry]:
    """The candidates of an answer as entries of a page.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    list of Entry
        Best first.
    """
    return [
        Entry(
            key=str(c.rank),
            label=str(c.rank),
            name=f"Candidate {c.rank}" if answer.kind == "find" else "Fitted",
            answer=answer,
            candidate=c,
        )
        for c in answer.candidates
    ]


def listing(title: str, column: str, found: Sequence[Entry], *, first: str = "", beside: str = "") -> Listing | None:
    """One row an entry, each cell with the number it sorts by.

    Parameters
    ----------
    title : str
        What the list is of.
    column : str
        Head of the first column, where the labels stand.
    found : sequence of Entry
        In the order of the list.
    first, beside : str
        Keys of the entries that are shown at first, the first of the list and none when not given.

    Returns
    -------
    Listing or None
        None where there is no entry.
    """
    if not found:
        return None
    every = [e.candidate for e in found]
    networks = list(dict.fromkeys(c.network for c in every))
    roles = list(dict.fromkeys(role for c in every for role in c.resistors))
    volts = list(every[0].worst)[-1]
    head = [column, *found[0].more, *(["network"] if len(networks) > 1 else []), *map(str.upper, roles)]
    scored = any(c.score is not None for c in every)
    head += ["IC over the box", f"{volts.upper()} over the box", "drift", *(["metric"] if scored else [])]
    head += ["centring", "supply", "verdict"]
    rows = []
    for place, (entry, c) in enumerate(zip(found, every, strict=True)):
        # Ranks stand like numbers, names like words.
        label = number(entry.label, place) if entry.label.isdigit() else words(entry.label, place)
        row = [label, *entry.more.values(), *([words(c.network)] if len(networks) > 1 else [])]
        row += [
            number(made_of(c.resistors[r], c.parts.get(r)), c.resistors[r]) if r in c.resistors else number("–", inf)
            for r in roles
        ]
        ends = c.worst.get(volts, c.worst.vce)
        row += [number(span(*c.worst.ic, "current"), c.worst.ic[0]), number(span(*ends, "voltage"), ends[0])]
        row.append(number(percent(c.drift.q_point), c.drift.q_point))
        if scored:
            row.append(number("–", inf) if c.score is None else number(percent(c.score), c.score))
        row.append(number(percent(c.centring), c.centring))
        row += [number(figure(c.supply_current, "current"), c.supply_current), words(c.verdict, mark=c.verdict)]
        rows.append(row)
    return Listing(
        table=Table(title=title, head=head, rows=rows),
        keys=[e.key for e in found],
        networks=networks,
        first=first or found[0].key,
        beside=beside,
    )


def views(found: Sequence[Entry], *, alike: bool = True) -> list[View]:
    """Everything that the page shows of each candidate.

    Parameters
    ----------
    found : sequence of Entry
        All of one page.
    alike : bool
        Whether they answer one request, so that their load lines share their axes.

    Returns
    -------
    list of View
        Texts and places, nothing left to compute.
    """
    every = [entry.candidate for entry in found]
    return [_view(entry, every if alike else [entry.candidate]) for entry in found]


def _view(entry: Entry, among: Sequence[Candidate]) -> View:
    answer, c = entry.answer, entry.candidate
    return View(
        key=entry.key,
        name=entry.name,
        network=c.network,
        resistors=resistors(c),
        verdict=c.verdict,
        drift=percent(c.drift.q_point),
        picture=picture(answer, c, among, entry.name),
        circuit=circuit(answer, c, entry.name, entry.designators[0] if entry.designators else {}),
        q_point=_q_point(answer, c),
        roles=_roles(entry),
        readings=_readings(c),
        budgets=_budgets(c),
        limits=_limits(c),
        stress=_stress(answer, c),
        signal=_signal(c),
        neighbours=_neighbours(c),
        explanation=c.explanation,
    )


def _q_point(answer: Answer, c: Candidate) -> Table:
    target = answer.stage.get("target", {})
    rows = []
    for quantity in c.worst:
        kind = "current" if quantity == "ic" else "voltage"
        drift, aim = c.drift.of().get(quantity), (target.get(quantity) or [None, None, None])[1]
        low, high = c.worst[quantity]
        cells = [figure(getattr(c.nominal, quantity), kind), figure(low, kind), figure(high, kind)]
        cells += ["–" if aim is None else format_quantity(aim, kind), "–" if drift is None else percent(drift)]
        rows.append([words(quantity.upper()), *map(number, cells)])
    regions = ", ".join(c.regions)
    return Table(
        title="Q-point",
        head=("", "nominal", "least", "greatest", "target", "drift"),
        rows=rows,
        note=f"Least and greatest over the whole box; region: {regions}. Nominal Q-point {percent(c.centring)} off target.",
    )


def _roles(entry: Entry) -> Table:
    rows, c = [], entry.candidate
    for role, duty in c.roles.items():
        value = made_of(c.resistors[role], c.parts.get(role))
        drop, current = figure(duty.drop, "voltage"), figure(duty.current, "current")
        between = f"{duty.between[0]} to {duty.between[1]}"
        numbers = ", ".join(names[role] for names in entry.designators if role in names)
        part = words(f"{role.upper()} ({numbers})" if numbers else role.upper())
        rows.append([part, number(value), words(between), number(drop), number(current), words(duty.meaning)])
    return Table(title="Resistors", head=("", "value", "between", "drop", "current", "purpose"), rows=rows)


def _readings(c: Candidate) -> Table | None:
    if c.readings is None:
        return None
    names = {"b": "VB, base to 0 V", "c": "VC, collector to 0 V", "e": "VE, emitter to 0 V", "m": "VM, reference to 0 V"}
    rows = [
        [words(names.get(node, node)), *(number(figure(volts, "voltage")) for volts in (middle, low, high))]
        for node, (low, middle, high) in c.readings.nodes.items()
    ]
    rows += [
        [words(f"across {role.upper()}"), *(number(figure(volts, "voltage")) for volts in (middle, low, high))]
        for role, (low, middle, high) in c.readings.drops.items()
    ]
    least = percent(c.base_feed / (c.base_feed + METER))
    return Table(
        title="Meter readings",
        head=("", "nominal", "least", "greatest"),
        rows=rows,
        note="A sound unit reads between least and greatest anywhere in the box. "
        f"A meter of 10 MΩ lowers the reading at the base by at most {least}.",
    )


def _budgets(c: Candidate) -> list[Table]:
    tables = []
    for quantity, shares in c.budget.items():
        total = c.drift.of().get(quantity)
        if not shares or total is None:
            continue
        drawn = bars([s.share for s in shares])
        rows = [
            [words(cause_words(s.cause)), number(percent(s.share), s.share, bar)]
            for s, bar in zip(shares, drawn, strict=True)
        ]
        title = f"Budget of {quantity.upper()}: {percent(total)}"
        tables.append(Table(title=title, head=("cause", "share of the drift"), rows=rows))
    return tables


def _limits(c: Candidate) -> Table:
    rows = []
    for v in c.limits:
        if v.worst != v.worst:
            cells = [words(v.name), words(limit_words(v)), number("none"), number("–"), words(v.verdict, mark=v.verdict)]
            rows.append([*cells, words("no temperature at which it settles")])
            continue
        at = point_words(v.at, skip=tuple(c.resistors)) if v.at and v.name != "bleeder_current" else "nominal"
        saturates = v.name == "vce" and v.verdict == "fail" and v.worst == v.limit
        margin = "saturates" if saturates else percent(v.margin) if abs(v.margin) < inf else "–"
        cells = [words(v.name), words(limit_words(v)), number(figure(v.worst, v.kind)), number(margin)]
        rows.append([*cells, words(v.verdict, mark=v.verdict), words(at)])
    head = ("limit", "allowed", "worst", "margin", "verdict", "decided at")
    return Table(title="Limits and windows", head=head, rows=rows)


def _stress(answer: Answer, c: Candidate) -> Table | None:
    if not c.stress and c.transistor is None:
        return None
    rows = []
    for role, s in c.stress.items():
        part = words(f"{role.upper()} {format_resistance(c.pieces[role])}")
        smallest = s.smallest or "none in the table"
        if s.string is not None:
            smallest += f"; or {s.string} x {s.style} in series"
        rows.append([part, words("power"), *_against(s.power, s.power_allowed, "power"), words(smallest)])
        rows.append([part, words("voltage"), *_against(s.voltage, s.voltage_allowed, "voltage"), words("")])
    if c.transistor is not None:
        rows += _transistor(c.transistor)
    hot = format_quantity(answer.stage["ambient"]["temperature"][2], "temperature")
    policy = str(answer.stage.get("derating", "none")).replace("_", " ")
    return Table(
        title="Stress of every part at its own worst point",
        head=("part", "what", "worst", "allowed", "used", "smallest style that does"),
        rows=rows,
        note=f"Derating {policy}, ambient up to {hot}. Parts near their rating get hot; the data sheet of the part decides.",
    )


def _against(worst: float, allowed: float | None, kind: str) -> list[Cell]:
    """What is carried, what may be, and the share as a number with a bar."""
    if allowed is None:
        return [number(figure(worst, kind)), number("–"), number("–")]
    share = worst / allowed if allowed > 0.0 else inf
    text = percent(share) if share < inf else "none allowed"
    limit = format_quantity(allowed, kind)
    return [number(figure(worst, kind)), number(limit), number(text, share, used(share), "fail" if share > 1.0 else "")]


def _transistor(load: Load) -> list[list[Cell]]:
    part = words("transistor")
    labels = {
        "power": ("dissipates", "power"),
        "vceo": ("holds cut off", "voltage"),
        "veb": ("reverse VEB at switch-off", "voltage"),
        "ic": ("carries", "current"),
    }
    rows = [
        [part, words(what), *_against(getattr(load, name), load.allowed.get(name), kind), words("")]
        for name, (what, kind) in labels.items()
        if name == "power" or name in load.allowed
    ]
    if load.junction is not None and load.thermal_resistance is not None:
        at = f"with {format_quantity(load.thermal_resistance, 'thermal_resistance')} to the ambient"
        settled = number(format_quantity(load.junction, "temperature"))
        rows.append([part, words("junction"), settled, number("–"), number("–"), words(at)])
    elif load.state is not None:
        state = "beyond its limit" if load.too_hot else load.state
        rows.append([part, words("junction"), words(state, mark="fail"), number("–"), number("–"), words("")])
    return rows


def _signal(c: Candidate) -> Table | None:
    if not c.signal:
        return None
    rows = []
    for name, (low, middle, high) in c.signal.items():
        what, kind = SIGNAL_WORDS[name]
        most = "–" if high != high else figure(high, kind)
        rows.append([words(what), number(figure(middle, kind)), number(figure(low, kind)), number(most)])
    return Table(title="Signal", head=("", "nominal", "least", "greatest"), rows=rows)


def _neighbours(c: Candidate) -> Table | None:
    if not c.neighbours:
        return None
    rows = []
    for n in c.neighbours:
        drift = "saturates" if n.drift is None else percent(n.drift)
        fails = ", ".join(n.fails) or "–"
        cells = [words(n.role.upper()), number(made_of(n.value, n.pair)), number(drift)]
        rows.append([*cells, words(n.verdict, mark=n.verdict), words(fails)])
    return Table(title="One value up or down", head=("", "value", "drift", "verdict", "what fails"), rows=rows)
