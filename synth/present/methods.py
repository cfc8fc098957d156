"""Root-sum-square and Monte Carlo beside the worst case, as lines of text."""

from __future__ import annotations

from collections.abc import Callable

from synth.answer import Candidate
from synth.statistics import LEVEL, SIGMAS


def three_methods(
    candidate: Candidate, span: Callable[[float, float, str], str]
) -> tuple[list[list[str]], list[str]]:
    """The three methods side by side, and what is said of the lot.

    Parameters
    ----------
    candidate : Candidate
        With or without statistics.
    span : callable
        ``span(low, high, kind)``: a range in words.

    Returns
    -------
    rows : list of list of str
        Cells of a table; empty without statistics.
    lines : list of str
        Sentences below it.
    """
    if candidate.statistics is None:
        return [], []
    lot = candidate.statistics.monte_carlo
    samples = {sample.quantity: sample for sample in lot.samples}
    quantities = [row.quantity for row in candidate.statistics.rss]

    def cells(ends: list[tuple[float, float]]) -> list[str]:
        return [span(*end, "current" if q == "ic" else "voltage") for q, end in zip(quantities, ends, strict=True)]

    sums = [(row.low.value, row.high.value) for row in candidate.statistics.rss]
    middle = [(samples[q].quantiles[0], samples[q].quantiles[-1]) for q in quantities]
    rows = [
        ["method", *(q.upper() for q in quantities), "its question"],
        ["extreme value", *cells([candidate.worst[q] for q in quantities]), "can any unit fail? the verdict"],
        [f"root-sum-square, {SIGMAS:g} sigma", *cells(sums), "how many sigma fit?"],
        ["Monte Carlo, 99.73 %", *cells(middle), "what do built units look like?"],
    ]
    worst = [y for y in lot.yields if y.name == "all"]
    regions = ", ".join(f"{count} {region}" for region, count in lot.regions.items())
    points = "Sobol points" if lot.points == "sobol" else "pseudo-random points"
    lines = [f"  {lot.units} units on {points}, seed {lot.seed}: {regions}"]
    for y in worst:
        ends = f"{100.0 * y.low:.5g} % to {100.0 * y.high:.5g} %"
        lines.append(f"  yield {100.0 * y.share:.4g} %, {100.0 * LEVEL:g} % interval {ends} (Clopper-Pearson)")
    poor = sorted((y for y in lot.yields if y.name != "all" and y.share < 1.0), key=lambda y: y.share)
    if poor:
        lines.append(f"  by limit: {', '.join(f'{y.name} {100.0 * y.share:.4g} %' for y in poor)}")
    return rows, lines
