"""Every way to the same resistors, measured in one run.

    python -m tests.bench                     # everything, some minutes
    python -m tests.bench search [NAME ...]   # the search alone: series, pairs, networks, requests
    python -m tests.bench integer [SERIES ...]
    python -m tests.bench rivals [NUMBER]
    python -m tests.bench statistics [UNITS ...]
"""

import sys
from collections.abc import Callable, Sequence
from pathlib import Path

# As pytest does for the tests beside these modules.
sys.path.insert(0, str(Path(__file__).resolve().parent))

import bench_search
import bench_statistics
import integer_model
import rivals

PARTS: dict[str, Callable[[Sequence[str]], int]] = {
    "search": bench_search.main,
    "integer": integer_model.main,
    "rivals": rivals.main,
    "statistics": bench_statistics.main,
}


def main(words: Sequence[str]) -> int:
    """Print one table or all of them."""
    if not words:
        for part in PARTS.values():
            part([])
            print()
        return 0
    if words[0] not in PARTS:
        print(f"bench: read {words[0]!r}, accepted are {' '.join(PARTS)}", file=sys.stderr)
        return 2
    return PARTS[words[0]](words[1:])


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
