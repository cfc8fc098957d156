"""What reviewers ask besides the worst case: root-sum-square, Monte Carlo, stability factors and sensitivities.

Three methods answer three questions about one stage. The extreme value (`synth.box`) tells whether any unit can fail and is
the verdict; root-sum-square tells how many sigma a window has room for; Monte Carlo tells what built units look like.
"""

from synth.statistics.distribution import SHAPES, SIGMAS, SPREADS, Distribution, DistributionError, Lot
from synth.statistics.monte_carlo import LEVEL, QUANTILES, MonteCarlo, Sample, Yield, draws, interval, monte_carlo
from synth.statistics.rss import Rss, Side, Term, linear_sigma, rss
from synth.statistics.stability import (
    Sensitivity,
    Stability,
    factors,
    gain_change,
    gradients,
    sensitivities,
    stability,
)

__all__ = [
    "LEVEL",
    "QUANTILES",
    "SHAPES",
    "SIGMAS",
    "SPREADS",
    "Distribution",
    "DistributionError",
    "Lot",
    "MonteCarlo",
    "Rss",
    "Sample",
    "Sensitivity",
    "Side",
    "Stability",
    "Term",
    "Yield",
    "draws",
    "factors",
    "gain_change",
    "gradients",
    "interval",
    "linear_sigma",
    "monte_carlo",
    "rss",
    "sensitivities",
    "stability",
]
