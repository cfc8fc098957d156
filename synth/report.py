"""The worst-case report of an answer: what a reviewer asks for, as titles, paragraphs and tables of text.

Content and wording live here once; `synth.present` gives them the form of a document. Every figure stands in the answer.
"""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from synth.answer import Answer, Candidate, Verdict
from synth.explain import cause_words, percent, point_words
from synth.limits import RULES
from synth.networks import NETWORKS
from synth.quantities import Spread, format_quantity, format_resistance
from synth.review import budget_words
from synth.stage_keys import KEYS
from synth.statistics import LEVEL, SHAPES, SIGMAS, SPREADS
from synth.transistor import T0

NONE = "–"
HIGH_VOLTAGE = 50.0
"""Rail above which the report says who may work on it [V]."""


@dataclass(frozen=True, kw_only=True)
class Table:
    """A table of texts: one heading for each column, rows of as many cells."""

    headings: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, kw_only=True)
class Section:
    """A section of a report: paragraphs, then tables, then points of a list."""

    title: str
    paragraphs: tuple[str, ...] = ()
    tables: tuple[Table, ...] = ()
    points: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Report:
    """A whole report: its title, the verdict in a sentence, and its sections in order."""

    title: str
    verdict: str
    sections: tuple[Section, ...]


def report(answer: Answer) -> Report:
    """The worst-case report of the first candidate of an answer.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`; the statistics are told where it has them.

    Returns
    -------
    Report
        Title, verdict and sections.
    """
    best = answer.best
    title = f"Worst-case report: {answer.stage['name']}"
    if best is None:
        sections = [_scope_alone(answer), _why_nothing(answer), *_unverified(answer), _repeat(answer)]
        return Report(title=title, verdict="FAIL: nothing meets every limit.", sections=tuple(sections))
    failed = [v.name for v in best.limits if v.verdict == "fail"]
    verdict = f"FAIL: {', '.join(failed)}." if failed else "PASS: every limit holds at every point of the box."
    parts = [
        _scope(answer, best), _attributes(answer, best), _parameters(answer, best), _methods(), _equations(answer),
        _extremes(best), _verdicts(best), _actions(best), _budget(best), _sensitivity(best), *_three(answer, best),
        _stress(answer, best), *_signal(best), _faults(best), _resistors(best), _readings(best), *_unverified(answer),
        _repeat(answer),
    ]  # fmt: skip
    return Report(title=title, verdict=verdict, sections=tuple(part for part in parts if part is not None))


# --- What is judged ---------------------------------------------------------------------------------------------------


def _scope_alone(answer: Answer) -> Section:
    names = ", ".join(answer.stage["network"])
    return Section(title="Scope", paragraphs=(f"Bias of one transistor stage; networks in question: {names}.",))


def _scope(answer: Answer, c: Candidate) -> Section:
    network = NETWORKS[c.network]
    device = answer.stage["transistor"]
    kind = device["type"] or "given by its figures"
    lines = [
        f"DC bias of one {device['polarity'].upper()} transistor ({kind}), network: {network.title}. {network.summary}",
        "The table below is the schematic reference: each resistor by its designator, with the two nodes it hangs between.",
    ]
    if device["polarity"] == "pnp":
        lines.append("A PNP is an NPN mirrored: currents, VBE and VCE are magnitudes, node voltages carry their sign.")
    if answer.search is not None:
        bound = answer.search.bound
        proof = "" if bound is None else f"; every combination that is not listed drifts {percent(bound)} or more"
        state = "Proved" if answer.search.complete else "Not proved, since the search was stopped"
        lines.append(f"{state} among {answer.search.combinations:.3g} combinations of preferred values{proof}.")
    rows = [
        (role.upper(), format_resistance(c.resistors[role]), " to ".join(duty.between), duty.meaning)
        for role, duty in c.roles.items()
    ]
    table = Table(headings=("designator", "value", "nodes", "purpose"), rows=tuple(rows))
    return Section(title="Scope", paragraphs=tuple(lines), tables=(table,))


def _limit(v: Verdict) -> str:
    if isinstance(v.limit, tuple):
        return f"{format_quantity(v.limit[0], v.kind)} to {format_quantity(v.limit[1], v.kind)}"
    return f"{v.sense} {format_quantity(v.limit, v.kind)}"


def _meaning(v: Verdict) -> str:
    head, _, part = v.name.partition(".")
    if head == "target":
        return f"window of {part.upper()}"
    rule = RULES.get(head)
    if part:
        of, _, what = part.rpartition(".")
        basis = "the style" if of else "the ratings"
        what = {"vceo": "VCE once cut off", "ic": "IC", "junction": "junction temperature"}.get(what, what)
        return f"{what}{f' of {of.upper()}' if of else ' of the transistor'}: what {basis} and the policy allow when hot"
    return v.name if rule is None else rule.meaning


def _attributes(answer: Answer, c: Candidate) -> Section:
    assumed = {note.key for note in answer.assumed}
    rows = []
    for v in c.limits:
        head = v.name.partition(".")[0]
        key = v.name if head == "target" else f"limits.{head}"
        # The limit on VCE is always there: the stage has to stay active.
        source = "assumed" if key in assumed else "always" if head == "vce" else "given"
        rule = RULES.get(head)
        where = "nominal values" if rule is not None and rule.judged == "nominal" else "the whole box"
        rows.append((v.name, _limit(v), where, source, _meaning(v)))
    table = Table(headings=("attribute", "limit", "judged at", "source", "meaning"), rows=tuple(rows))
    return Section(title="Attributes and limits", tables=(table,))


def _source(answer: Answer, *keys: str) -> str:
    for note in answer.assumed:
        if note.key in keys:
            return f"assumed: {note.why}" if note.why != "not given" else "assumed"
    return "given"


def _row(name: str, ends: Sequence[float], kind: str, source: str) -> tuple[str, ...]:
    return (name, *(format_quantity(x, kind) for x in ends), source)


def _share(fraction: float) -> str:
    """A fraction in per cent, three figures."""
    return f"{100.0 * fraction:.3g} %"


def _band_source(answer: Answer, role: str) -> str:
    """Which fields of the band of a resistor were given."""
    fields = {"tolerance": "tolerance", "life": "life", "tcr": "coefficient"}
    own = answer.stage["resistors"][role]
    taken = []
    for leaf, word in fields.items():
        for note in answer.assumed:
            if note.key in (f"resistors.{role}.{leaf}", f"resistors.{leaf}"):
                value = KEYS[note.key].read(note.value)
                plain = [value.low, value.nominal, value.high] if isinstance(value, Spread) else value
                # What is assumed for all may have been given for this one.
                taken += [word] if plain == own[leaf] else []
    if not taken:
        return "given"
    given = [word for word in fields.values() if word not in taken]
    parts = [f"{' and '.join(words)} {state}" for words, state in ((given, "given"), (taken, "assumed")) if words]
    return ", ".join(parts)


def _parameters(answer: Answer, c: Candidate) -> Section:
    stage, rows = answer.stage, []
    measured = stage["measured"]
    for rail in (r for r in ("vcc", "vee", "vbb", "vload") if r in stage["supply"]):
        rows.append(_row(rail.upper(), stage["supply"][rail], "voltage", _source(answer, f"supply.{rail}")))
    around, device = stage["ambient"]["temperature"], stage["transistor"]
    rows.append(_row("ambient temperature", around, "temperature", _source(answer, "ambient.temperature")))
    spreads = (("hFE", "hfe", "gain"), ("VBE", "vbe", "voltage"), ("ICBO", "icbo", "current"))
    for name, leaf, kind in spreads:
        source = "measured" if leaf in measured else _source(answer, f"transistor.{leaf}")
        rows.append(_row(f"{name} at 25 °C", device[leaf], kind, source))
    for name, leaf, kind in (("current at which VBE holds", "vbe_ic", "current"), ("VCE(sat)", "vce_sat", "voltage")):
        rows.append(_row(name, (device[leaf],) * 3, kind, _source(answer, f"transistor.{leaf}")))
    if (reference := stage["reference"]) is not None:
        for leaf, kind in (("voltage", "voltage"), ("tc", "voltage_per_kelvin"), ("slope", "resistance")):
            rows.append(_row(f"reference {leaf}", reference[leaf], kind, _source(answer, f"reference.{leaf}")))
    hot = max(abs(t - T0) for t in around)
    bands = []
    for role, ohms in c.resistors.items():
        setting = stage["resistors"][role]
        tolerance, life, tcr = setting["tolerance"], setting["life"], max(abs(end) for end in setting["tcr"])
        source = _band_source(answer, role)
        if role in measured:
            low, nominal, high = measured[role]
            tolerance, source = max(high / nominal - 1.0, 1.0 - low / nominal), "measured"
        band = tolerance + life + tcr * hot
        rows.append(_row(role.upper(), (ohms * (1.0 - band), ohms, ohms * (1.0 + band)), "resistance", source))
        coefficient = format_quantity(tcr, "temperature_coefficient")
        parts = (_share(tolerance), _share(life), f"{coefficient} over {hot:.0f} K = {_share(tcr * hot)}", _share(band))
        bands.append((role.upper(), *parts))
    first = Table(headings=("parameter", "min", "nominal", "max", "source"), rows=tuple(rows))
    second = Table(headings=("resistor", "tolerance", "life", "temperature coefficient", "sum"), rows=tuple(bands))
    return Section(
        title="Parameters",
        paragraphs=(
            "Every parameter of the box with its ends. The band of a resistor is the sum of three fields, shown apart in the "
            "second table; a row of a stock list with a tolerance of its own counts with that instead.",
        ),
        tables=(first, second),
    )


# --- Method -----------------------------------------------------------------------------------------------------------


def _methods() -> Section:
    points = (
        "Extreme value: can any unit fail? The verdict. Every spread may stand anywhere between its ends, at once and "
        "independently; the true extremes over that box are found, not guessed from small sensitivities: proved ends where a "
        "quantity is monotone, both ends and the stationary points between them elsewhere, and the whole range of temperature.",
        f"Root-sum-square: how many sigma fit? Independent random causes add in squares, their ends standing for {SIGMAS:g} "
        "sigma; what goes one way for all parts together (temperature, coefficients, life) adds linearly. An estimate of the "
        "usual unit, never a worst case.",
        "Monte Carlo: what do built units look like? Each unit is drawn from the distributions named, solved exactly, and "
        "counted against every limit.",
    )
    closing = "Not claimed: correlation. Resistors of one batch may track each other, and that is not relied on."
    return Section(title="Methods", points=(*points, closing))


def _equations(answer: Answer) -> Section:
    fixed = answer.stage["transistor"]["vbe_model"] == "fixed"
    law = (
        "VBE is one constant with its spread."
        if fixed
        else "VBE(IC, T) = VG - (VG - VBE0)·T/T0 - XTI·VT·ln(T/T0) + VT·ln(IC/IC0) + δ, with VT = kT/q, T0 = 298.15 K, "
        "XTI = 3, VG = 1.17 V for silicon and 0.744 V for germanium, and δ the spread from unit to unit."
    )
    points = (
        "The network is one two-port seen by the transistor: VBE = e_b - z_bb·IB - z_bc·IC, VCE = e_c - z_cb·IB - z_cc·IC.",
        law,
        "IC = hFE·IB + (hFE + 1)·ICBO, hFE(T) = hFE(25 °C)·(T/T0)^X with X = 1.5 above and 2.5 below 25 °C; ICBO doubles per "
        "10 K or runs through the printed hot limit.",
        "Saturated where VCE would fall below VCE(sat): both equations with VCE = VCE(sat), hFE no longer governs.",
        "Resistor in the box: R·(1 ± (tolerance + life + TCR·|T - 25 °C|)).",
    )
    return Section(title="Equations", points=points)


# --- Worst case -------------------------------------------------------------------------------------------------------

KIND_OF = {"hfe": "gain", "icbo": "current", "temperature": "temperature", "r_ref": "resistance"}


def _cell(name: str, value: float) -> str:
    if name in ("delta", "delta_ref") and value > 0.0:
        return f"+{format_quantity(value, 'voltage')}"
    kind = KIND_OF.get(name, "voltage" if name.startswith(("v", "delta")) else "resistance")
    return format_quantity(value, kind)


INPUT = {
    "delta": "VBE against nominal", "hfe": "hFE at 25 °C", "icbo": "ICBO at 25 °C", "temperature": "ambient temperature",
    "delta_ref": "reference against nominal", "r_ref": "reference slope",
}  # fmt: skip


def _extremes(c: Candidate) -> Section:
    names = list(c.corners)
    rows = []
    for axis in next(iter(c.corners.values()), {}):
        rows.append((INPUT.get(axis, axis.upper()), *(_cell(axis, c.corners[name][axis]) for name in names)))
    values = [c.worst[name.split()[0]][name.endswith("high")] for name in names]
    kinds = ["current" if name.startswith("ic") else "voltage" for name in names]
    result = ("result", *(format_quantity(v, kind) for v, kind in zip(values, kinds, strict=True)))
    heads = tuple(f"{name.split()[0].upper()} {name.split()[1]}est" for name in names)
    words = f"Over the box the stage is {' and '.join(c.regions)}."
    table = Table(headings=("input", *heads), rows=(*rows, result))
    return Section(
        title="Extreme of every input",
        paragraphs=(
            f"Where each input stands at the extremes of the Q-point; one that stays nominal has no effect there. {words}",
        ),
        tables=(table,),
    )


def _margin(v: Verdict) -> str:
    return percent(v.margin) if math.isfinite(v.margin) else NONE


def _verdicts(c: Candidate) -> Section:
    rows = []
    for v in c.limits:
        worst = NONE if math.isnan(v.worst) else format_quantity(v.worst, v.kind)
        rule = RULES.get(v.name)
        nominal = not v.at or (rule is not None and rule.judged == "nominal")
        at = "nominal values" if nominal else point_words(v.at, skip=tuple(c.resistors))
        if v.name.endswith(".junction"):
            at = "the point of most power, hot"
        rows.append((v.name, _limit(v), worst, _margin(v), v.verdict.upper(), at))
    table = Table(headings=("attribute", "limit", "worst", "margin", "verdict", "decided at"), rows=tuple(rows))
    lines = "A margin is the distance to the limit, relative to it; of a window, relative to the target. Negative fails."
    return Section(title="Verdicts and margins", paragraphs=(lines,), tables=(table,))


def _actions(c: Candidate) -> Section:
    failed = [v for v in c.limits if v.verdict == "fail"]
    if not failed:
        tight = [v for v in c.limits if math.isfinite(v.margin)]
        least = min(tight, key=lambda v: v.margin) if tight else None
        text = "None." if least is None else f"None. The least margin is that of {least.name}, {percent(least.margin)}."
        return Section(title="Non-compliances and proposed action", paragraphs=(text,))
    points = []
    for v in failed:
        worst = "no point of rest" if math.isnan(v.worst) else format_quantity(v.worst, v.kind)
        helps = [n for n in c.neighbours if v.name not in n.fails and n.drift is not None]
        better = [f"{n.role.upper()} {format_resistance(n.value)}" for n in helps]
        action = f"a single step that cures it: {', '.join(better)}" if better else (
            "no single step of one resistor cures it: search again with restpoint find, or relax the limit"
        )
        points.append(f"{v.name}: {worst} at worst against {_limit(v)}, margin {_margin(v)}. Proposed: {action}.")
    return Section(title="Non-compliances and proposed action", points=tuple(points))


def _why_nothing(answer: Answer) -> Section:
    why = answer.infeasible
    if why is None:
        return Section(title="Non-compliances and proposed action", paragraphs=("The search was stopped before it found any.",))
    changes = [
        f"{', '.join(f'{key} = {text}' for key, text in r.change.items())}: the best then drifts {percent(r.drift)}."
        for r in why.relaxations
    ]
    lines = f"These cannot be met together: {', '.join(why.binding)}."
    extra = "Any one of these changes would do:" if changes else "No change of one limit alone would do."
    return Section(title="Non-compliances and proposed action", paragraphs=(lines, extra), points=tuple(changes))


def _budget(c: Candidate) -> Section:
    causes = list(dict.fromkeys(s.cause for shares in c.budget.values() for s in shares))
    by = {q: {s.cause: s.share for s in shares} for q, shares in c.budget.items()}
    rows = [
        (cause_words(cause), *(percent(by[q][cause]) if cause in by[q] else NONE for q in by))
        for cause in causes
        if any(percent(by[q].get(cause, 0.0)) != "0 %" for q in by)
    ]
    totals = ("sum: drift", *(percent(c.drift.of()[q]) for q in by))
    table = Table(headings=("cause", *(q.upper() for q in by)), rows=(*rows, totals))
    text = (
        "What each cause brings to the drift at its deciding point: the mean of its effect over every order of moving the "
        "inputs there. The shares add up to the drift; a negative one helps."
    )
    return Section(title="Budget of the drift", paragraphs=(text,), tables=(table,))


PARAMETERS = {
    "vbe": ("VBE", "V"), "hfe": ("hFE", ""), "icbo": ("ICBO", "A"), "reference": ("reference voltage", "V"),
    "reference_slope": ("reference slope", "Ω"),
}  # fmt: skip
"""Name and unit of each parameter that is no rail and no resistor."""


def _sensitivity(c: Candidate) -> Section:
    title = "Sensitivities and stability factors"
    if not c.sensitivities:
        text = "The nominal point is saturated: neither gain nor leakage governs IC, and no stability factor is told."
        return Section(title=title, paragraphs=(text,))
    ranked = sorted(c.sensitivities, key=lambda row: -max(abs(row.ic_relative or 0.0), abs(row.vce_relative or 0.0)))
    rows = []
    for row in ranked:
        name, unit = PARAMETERS.get(row.parameter, (row.parameter.upper(), "V" if row.parameter.startswith("v") else "Ω"))
        per = f"/{unit}" if unit else ""
        relative = [NONE if x is None else f"{x:+.3f} %" if x else "0 %" for x in (row.ic_relative, row.vce_relative)]
        rows.append((name, *relative, f"{row.ic:.4g} A{per}", f"{row.vce:.4g} V{per}"))
    first = Table(headings=("parameter", "IC per 1 %", "VCE per 1 %", "dIC", "dVCE"), rows=tuple(rows))
    second = Table(
        headings=("VBE", "S = dIC/dICO", "dIC/dVBE", "dIC/dhFE"),
        rows=tuple(
            (words, f"{f.ico:.4g}", f"{1e3 * f.vbe:.4g} mA/V", format_quantity(f.hfe, "current", 4))
            for name, words in (("vbe_held", "held, as published"), ("vbe_follows", "following IC, as solved here"))
            if (f := c.stability.get(name)) is not None
        ),
    )
    return Section(
        title=title,
        paragraphs=("At the nominal point, strongest first; exact derivatives of the solver.",),
        tables=(first, second),
    )


# --- Statistics -------------------------------------------------------------------------------------------------------


def _three(answer: Answer, c: Candidate) -> list[Section]:
    if c.statistics is None:
        return []
    lot = c.statistics.monte_carlo
    rows, terms = [], []
    samples = {sample.quantity: sample for sample in lot.samples}
    for row in c.statistics.rss:
        kind = "current" if row.quantity == "ic" else "voltage"

        def span(low: float, high: float, kind: str = kind) -> str:
            return f"{format_quantity(low, kind)} to {format_quantity(high, kind)}"

        sample = samples[row.quantity]
        lots = ((sample.quantiles[0], sample.quantiles[-1]), (sample.least, sample.greatest))
        spans = (c.worst[row.quantity], (row.low.value, row.high.value), *lots)
        rows.append((row.quantity.upper(), format_quantity(row.nominal, kind), *(span(*ends) for ends in spans)))
        for end, side in (("least", row.low), ("greatest", row.high)):
            parts = [f"{budget_words(t.cause)} {format_quantity(t.change, kind)} ({t.kind})" for t in side.terms[:5]]
            sigmas = NONE if side.sigmas is None else f"{side.sigmas:.1f}"
            at = format_quantity(side.temperature, "temperature")
            cells = (f"{row.quantity.upper()} {end}", at, format_quantity(side.centre, kind), format_quantity(side.total, kind))
            terms.append((*cells, format_quantity(side.value, kind), sigmas, ", ".join(parts)))
    methods = ("extreme value", f"root-sum-square, {SIGMAS:g} sigma", "Monte Carlo, 0.135 % to 99.865 %", "all its units")
    first = Table(headings=("quantity", "nominal", *methods), rows=tuple(rows))
    ends = ("end", "at", "all else nominal", "sum", "solved there", "sigma to the limit", "largest causes")
    second = Table(headings=ends, rows=tuple(terms))
    three = Section(
        title="Three methods side by side",
        paragraphs=(
            "The extreme value is the verdict; the other two say how seldom it is met.",
            "Root-sum-square: the sum of the second table is that of a straight line; the stage is solved at the point that it "
            "stands for. It takes the worst temperature; Monte Carlo draws the temperature too.",
        ),
        tables=(first, second),
    )
    return [three, _yield(answer, c)]


def _law(words: str) -> str:
    return SHAPES.get(words.replace("-", "_"), "each measured value is equally likely")


def _drawn(answer: Answer, c: Candidate) -> list[str]:
    """Spreads that the stage has."""
    stage = answer.stage
    settings = [stage["resistors"][role] for role in c.resistors]
    absent = {rail for rail in ("vcc", "vee", "vbb", "vload") if rail not in stage["supply"]}
    absent |= {"icbo"} if stage["transistor"]["icbo"][2] == 0.0 else set()
    absent |= {"reference"} if stage["reference"] is None else set()
    absent |= {"life"} if all(setting["life"] == 0.0 for setting in settings) else set()
    absent |= {"tcr"} if all(end == 0.0 for setting in settings for end in setting["tcr"]) else set()
    return [name for name in SPREADS if name not in absent]


def _yield(answer: Answer, c: Candidate) -> Section:
    assert c.statistics is not None
    lot = c.statistics.monte_carlo
    yields = [
        ("every one of them" if y.name == "all" else y.name, f"{y.passed} of {lot.units}", f"{100.0 * y.share:.4g} %",
         f"{100.0 * y.low:.5g} % to {100.0 * y.high:.5g} %")
        for y in lot.yields
    ]  # fmt: skip
    interval = f"{100.0 * LEVEL:g} % interval (Clopper-Pearson)"
    first = Table(headings=("limit", "units that meet it", "yield", interval), rows=tuple(yields))
    laws = [(SPREADS[name].removeprefix("of "), words, _law(words)) for name in _drawn(answer, c)
            for words in (lot.laws.get(name, "uniform"),)]  # fmt: skip
    second = Table(headings=("spread", "distribution", "meaning"), rows=tuple(laws))
    regions = ", ".join(f"{count} {region}" for region, count in lot.regions.items())
    points = "scrambled Sobol points" if lot.points == "sobol" else "pseudo-random points"
    lines = (
        f"{lot.units} units on {points}, seed {lot.seed}; by region: {regions}.",
        "The interval is exact for independent draws; Sobol points fill the box more evenly, so with them it is as a rule "
        "wider than need be.",
        "Distributions are assumptions unless they were measured: a lot may lie at one end of its spread.",
    )
    return Section(title="Yield", paragraphs=lines, tables=(first, second))


# --- Stress, signal, faults, parts, readings --------------------------------------------------------------------------


def _stress(answer: Answer, c: Candidate) -> Section:
    hot = format_quantity(answer.stage["ambient"]["temperature"][2], "temperature")
    rows = []
    for name, s in c.stress.items():
        cells = []
        for worst, allowed, used, kind in (
            (s.power, s.power_allowed, s.power_used, "power"), (s.voltage, s.voltage_allowed, s.voltage_used, "voltage")
        ):  # fmt: skip
            cells += [format_quantity(worst, kind), NONE if allowed is None else format_quantity(allowed, kind)]
            cells.append(NONE if used is None else percent(used))
        rows.append((name.upper(), s.style or NONE, *cells, s.smallest or "none in the table"))
    heads = ("part", "style", "power", "allowed", "used", "voltage", "allowed", "used", "smallest style")
    tables = [Table(headings=heads, rows=tuple(rows))]
    load = c.transistor
    if load is not None:
        named = {"power": ("dissipation", load.power, "power"), "vceo": ("VCE once cut off", load.vceo, "voltage"),
                 "ic": ("IC", load.ic, "current")}  # fmt: skip
        body = []
        for name, (words, worst, kind) in named.items():
            allowed = load.allowed.get(name)
            limit = "rating not known" if allowed is None else format_quantity(allowed, kind)
            body.append((words, format_quantity(worst, kind), limit, percent(load.used[name]) if name in load.used else NONE))
        if load.junction is not None:
            body.append(("junction temperature", format_quantity(load.junction, "temperature"), NONE, NONE))
        tables.append(Table(headings=("transistor", "worst", "allowed", "used"), rows=tuple(body)))
    basis = (
        f"Each at its own worst point of the box. Derating basis: policy {answer.stage['derating']} at an ambient of up to "
        f"{hot}; a part without a style or rating is told with what it carries and has no verdict."
    )
    return Section(title="Stress and derating", paragraphs=(basis,), tables=tuple(tables))


SIGNAL = {
    "gm": ("transconductance gm", "conductance"), "r_pi": ("r pi", "resistance"),
    "r_intrinsic": ("intrinsic emitter resistance VT/IE", "resistance"),
    "input_resistance": ("input resistance", "resistance"), "output_resistance": ("output resistance", "resistance"),
    "gain": ("voltage gain, magnitude", "gain"),
    "swing": ("peak output swing", "voltage"), "bypass_capacitor": ("bypass capacitor of re", "capacitance"),
}  # fmt: skip


def _signal(c: Candidate) -> list[Section]:
    rows = []
    for name, ends in c.signal.items():
        words, kind = SIGNAL.get(name, (name.replace("_", " "), "gain"))
        rows.append((words, *(NONE if math.isnan(x) else format_quantity(x, kind) for x in ends)))
    if not rows:
        return []
    table = Table(headings=("figure", "min", "nominal", "max"), rows=tuple(rows))
    return [Section(title="Small signal over the box", tables=(table,))]


def _faults(c: Candidate) -> Section:
    rows = []
    for f in c.faults:
        nodes = ", ".join(f"V{n.upper()} {format_quantity(v, 'voltage')}" for n, v in f.nodes.items())
        nodes += "".join(f", {n.upper()} floats" for n in f.floats)
        ic = NONE if f.ic is None else format_quantity(f.ic, "current")
        vce = NONE if f.vce is None else format_quantity(f.vce, "voltage")
        over = ", ".join(f.over) or "none"
        rows.append((f.role.upper(), f.kind, f.region, ic, vce, nodes.lstrip(", ") or NONE, over))
    heads = ("resistor", "fault", "region", "IC", "VCE", "readings", "exceeds its rating")
    table = Table(headings=heads, rows=tuple(rows))
    text = (
        "One resistor at a time open or shorted, all else nominal. Overstress is judged at the highest rails and the hot "
        "ambient against the ratings as printed, without derating; a part without a style or rating is not judged. A node "
        "that floats reads whatever the meter makes of it."
    )
    return Section(title="Single faults", paragraphs=(text,), tables=(table,))


def _resistors(c: Candidate) -> Section:
    points = []
    for role, duty in c.roles.items():
        if duty.record is not None:
            points.append(f"{role.upper()} {format_resistance(c.resistors[role])}: {' '.join(duty.record.text)}")
    return Section(title="Rationale of each resistor", points=tuple(points))


def _readings(c: Candidate) -> Section:
    rows = []
    if c.bench is not None and c.readings is not None:
        for label, here, over in (
            *((f"V{n.upper()}", c.bench.nodes[n], c.readings.nodes[n]) for n in c.bench.nodes),
            *((f"across {n.upper()}", c.bench.drops[n], c.readings.drops[n]) for n in c.bench.drops),
        ):
            ends = (f"{format_quantity(x[0], 'voltage')} to {format_quantity(x[2], 'voltage')}" for x in (here, over))
            rows.append((label, format_quantity(here[1], "voltage"), *ends))
        conditions = ", ".join(
            f"temperature {_ends(ends, 'temperature')}" if name == "temperature" else f"{name.upper()} {_ends(ends, 'voltage')}"
            for name, ends in c.bench.conditions.items()
        )
    else:
        conditions = "nominal"
    tables = [Table(headings=("reading", "nominal parts", "sound units on the bench", "over the box"), rows=tuple(rows))]
    lines = [
        f"Against 0 V, on the bench at {conditions}. A reading outside the range of sound units tells of a fault, of a part "
        "out of tolerance or of a meter that loads the stage."
    ]
    if c.comparisons:
        body = [
            (row.reading.upper(), _ends(row.expected, "voltage"), _ends(row.measured, "voltage"),
             row.verdict if row.off == 0.0 else f"{row.verdict} by {format_quantity(row.off, 'voltage')}")
            for row in c.comparisons
        ]  # fmt: skip
        tables.append(Table(headings=("reading", "expected", "measured", "result"), rows=tuple(body)))
    return Section(title="Meter readings", paragraphs=tuple(lines), tables=tuple(tables))


def _ends(ends: Sequence[float], kind: str) -> str:
    if ends[0] == ends[2]:
        return format_quantity(ends[1], kind, 4)
    return f"{format_quantity(ends[0], kind, 4)} to {format_quantity(ends[2], kind, 4)}"


# --- Assumptions and repetition ---------------------------------------------------------------------------------------


def _unverified(answer: Answer) -> list[Section]:
    rows = tuple((note.key, note.value, note.why) for note in answer.assumed)
    lines = [
        "Taken because they were not given; each is to be confirmed before release. Data sheets in force have the last word."
    ]
    rails = [ends[2] for name, ends in answer.stage["supply"].items() if name != "ground"]
    if max(rails) > HIGH_VOLTAGE:
        lines.append("Rails above 50 V can injure or kill: local electrical codes apply, and such work is for the licensed.")
    lines.append(
        "Parts that dissipate noticeable power get hot enough to burn. Nothing here is certified for safety-critical use."
    )
    found = [
        Section(
            title="Unverified assumptions",
            paragraphs=tuple(lines),
            tables=(Table(headings=("key", "value", "why"), rows=rows),) if rows else (),
        )
    ]
    if answer.warnings:
        found.append(Section(title="Cautions", points=tuple(f"{w.name}: {w.text}" for w in answer.warnings)))
    return found


def stage_hash(stage: Mapping[str, object]) -> str:
    """Hash of a stage, the same wherever it is read.

    Parameters
    ----------
    stage : mapping
        As `synth.stage.Stage.as_dict` gives it.

    Returns
    -------
    str
        First 16 hexadecimal digits of the SHA-256 of its canonical JSON.
    """
    # The place of a stock list on this machine is no part of the request.
    text = json.dumps(stage, sort_keys=True, separators=(",", ":"), default=str)
    return hashlib.sha256(text.encode("utf-8")).hexdigest()[:16]


def _repeat(answer: Answer) -> Section:
    lot = None if answer.best is None or answer.best.statistics is None else answer.best.statistics.monte_carlo
    rows = [("version", f"restpoint {answer.version}"), ("stage hash (SHA-256)", stage_hash(answer.stage))]
    if lot is not None:
        rows += [("seed", str(lot.seed)), ("units drawn", str(lot.units))]
    rows.append(("command", answer.command or "called from Python"))
    return Section(title="To repeat this report", tables=(Table(headings=("what", "value"), rows=tuple(rows)),))
