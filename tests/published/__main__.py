"""Print every published figure beside the one that this code computes.

    python -m tests.published

Exit status 1 if any figure is off.
"""

import sys
from collections import Counter
from textwrap import fill

from synth.networks import NETWORKS

from .worked_examples import Check, checks

UNITS = {"V": "V", "mV": "mV", "A": "A", "mA": "mA", "uA": "µA", "ohm": "Ω", "kohm": "kΩ", "percent": "%"}
HEAD = ("example", "network", "quantity", "source", "published", "computed", "off by", "rule", "allowed", "")
NUMBERS = range(4, 9)
"""Columns that are set flush right."""
NOTE = """
off by, rule and allowed count units of the last published figure. rule: what the source's own approximation leaves out,
the exact circuit against the source's rule. allowed: rule, half a unit for the rounding of the published figure, and what
the source rounded on its way to it. ok: within that, and equal to the exact figure derived by hand to its six digits.
"""


def quantity(key: str) -> str:
    """A key such as ``VCE_V_beta100`` in words: ``VCE [V] beta100``."""
    words = key.replace("A_per_V", "A/V").replace("_over_", "/").split("_")
    return " ".join(f"[{UNITS.get(w, w)}]" if i and w in (*UNITS, "A/V") else w for i, w in enumerate(words))


def computed(check: Check) -> str:
    """The computed figure with two places more than the printed one, in its power of ten."""
    mantissa, mark, power = check.printed.partition("e")
    places = len(mantissa.partition(".")[2]) + 2
    return f"{check.computed / 10.0 ** int(power or 0):.{places}f}{mark}{power}"


def units(check: Check, value: float) -> str:
    """A signed number of units of the last printed figure; the 0.0 keeps the sign of a vanishing one off."""
    return f"{round(value / check.last_digit, 2) + 0.0:+.2f}"


def line(check: Check) -> tuple[str, ...]:
    return (
        check.row.id,
        check.network,
        quantity(check.key),
        check.row.source.partition(",")[0],
        check.printed,
        computed(check),
        units(check, check.difference),
        units(check, check.approximation),
        f"{check.allowed / check.last_digit:.2f}",
        "ok" if check.ok else "OFF",
    )


def main() -> int:
    """Print the table.

    Returns
    -------
    int
        Exit status: 0 if every figure agrees, else 1.
    """
    every = list(checks())
    rows = [HEAD, *map(line, every)]
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for row in rows:
        cells = (c.rjust(w) if i in NUMBERS else c.ljust(w) for i, (c, w) in enumerate(zip(row, widths, strict=True)))
        print("  ".join(cells).rstrip())
    print(NOTE)
    recalled = dict.fromkeys(check.row.id for check in every if check.row.memory)
    evidence = f"Recalled from memory, the others seen in a public text or a transcription of it: {', '.join(recalled)}."
    print(fill(evidence, 120))
    examples = Counter({check.row.id: check.network for check in every}.values())
    without = [network for network in NETWORKS if not examples[network]]
    if without:
        print(f"No worked example of a single transistor in our sources: {', '.join(without)}.")
    off = sum(not check.ok for check in every)
    counts = ", ".join(f"{network} {examples[network]}" for network in NETWORKS)
    print(f"{examples.total()} examples, {len(every)} figures, {off} off: {counts}")
    return 1 if off else 0


if __name__ == "__main__":
    sys.exit(main())
