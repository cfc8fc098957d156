"""A scan of many transistors as a table of at most 100 columns, as plain data and as CSV."""

from __future__ import annotations

import csv
import io
import json
from typing import Any

from synth import __version__
from synth.answer import plain
from synth.explain import percent
from synth.present.export import escaped, inert
from synth.present.terminal import section, wrapped
from synth.quantities import format_quantity, format_resistance
from synth.replacement import Scan, Tried

SCHEMA = "restpoint/among/1"
WORDS = {"kept": "every resistor stays", "one": "one resistor changes", "no": "no single change will do",
         "refused": "cannot be counted in this stage"}  # fmt: skip


def render_scan(scan: Scan) -> str:
    """The whole scan as text.

    Parameters
    ----------
    scan : Scan
        Any scan.

    Returns
    -------
    str
        Lines of at most 100 columns, a trailing newline.
    """
    count = {kind: sum(row.does == kind for row in scan.tried) for kind in WORDS}
    verdict = "PASS" if scan.passed else "FAIL"
    head = f"{verdict}  {scan.stage}: {len(scan.tried)} transistors tried in place of {scan.old.label} in {scan.seconds:.2f} s;"
    head += f" {count['kept']} with every resistor kept, {count['one']} with one changed"
    blocks = [wrapped(head, "      ")]
    for kind in ("kept", "one"):
        rows = [row for row in scan.tried if row.does == kind]
        if rows:
            cells = [["type", "hFE assumed", "at", "package", "VCEO", "change", "drift", "cautions"], *map(_cells, rows)]
            blocks.append(section(f"{WORDS[kind][0].upper()}{WORDS[kind][1:]}", cells, right=(6,)))
    for kind in ("no", "refused"):
        names = [row.label for row in scan.tried if row.does == kind]
        if names:
            blocks.append(wrapped(f"{WORDS[kind][0].upper()}{WORDS[kind][1:]}: {', '.join(names)}", "  "))
    if scan.left_out:
        blocks.append(f"Left out by polarity or filter: {scan.left_out}.")
    texts = {c.name: c.text for row in scan.tried if row.does in ("kept", "one") for c in row.cautions}
    if texts:
        lines = (wrapped(f"  {name}: {text}", "    ") for name, text in texts.items())
        blocks.append("\n".join(["Cautions, each with one example", *lines]))
    blocks.append(
        wrapped(
            "Not verified: pinout of any of them, outline, gain-bandwidth, noise, heating of the junction itself; the gains are"
            " those of the table or list, at the current shown.",
            "  ",
        )
    )
    blocks.append("Next: --to TYPE judges one of them whole and finds the fewest changes.")
    return "\n\n".join(blocks) + "\n"


def _cells(row: Tried) -> list[str]:
    d = row.device
    change = "–" if row.role is None or row.value is None else f"{row.role.upper()} {format_resistance(row.value)}"
    if d is None:
        return [row.label, "–", "–", "–", "–", change, "–", ""]
    return [
        row.label,
        f"{d.hfe[0]:g} to {d.hfe[2]:g}",
        "given" if d.gain_ic is None else format_quantity(d.gain_ic, "current"),
        d.package or "–",
        "–" if d.vceo is None else format_quantity(d.vceo, "voltage"),
        change,
        "–" if row.drift is None else percent(row.drift),
        ", ".join(c.name for c in row.cautions),
    ]


def scan_json(scan: Scan, command: str = "") -> str:
    """The scan as JSON text.

    Parameters
    ----------
    scan : Scan
        Any scan.
    command : str
        The command that asked.

    Returns
    -------
    str
        SI numbers, one trailing newline.
    """
    body: dict[str, Any] = {
        "schema": SCHEMA,
        "version": __version__,
        "command": command,
        "stage": scan.stage,
        "source": scan.source,
        "before": plain(vars(scan.old)),
        "left_out": scan.left_out,
        "seconds": scan.seconds,
        "types": [
            {**plain({k: v for k, v in vars(row).items() if k not in ("device", "cautions")}),
             "transistor": None if row.device is None else plain(vars(row.device)),
             "cautions": [plain(vars(c)) for c in row.cautions]}
            for row in scan.tried
        ],
    }  # fmt: skip
    return json.dumps(body, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def scan_csv(scan: Scan) -> str:
    """The scan as CSV, a row a transistor.

    Parameters
    ----------
    scan : Scan
        Any scan.

    Returns
    -------
    str
        Lines with a header; texts that a spreadsheet would run are made inert.
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["type", "does", "drift", "role", "value_ohm", "hfe_min", "hfe_max", "package", "fails", "cautions"])
    for row in scan.tried:
        d = row.device
        gains: list[object] = ["", ""] if d is None else [d.hfe[0], d.hfe[2]]
        writer.writerow(
            [inert(row.label), row.does, "" if row.drift is None else row.drift, row.role or "", row.value or "", *gains,
             inert((d.package if d else "") or ""), inert("; ".join(row.fails)), inert("; ".join(c.name for c in row.cautions))]
        )
    return out.getvalue()


def scan_markdown(scan: Scan) -> str:
    """The scan as a section of a document.

    Parameters
    ----------
    scan : Scan
        Any scan.

    Returns
    -------
    str
        A heading and a table.
    """
    rows = [["type", "with", "change", "drift", "hFE assumed", "package", "cautions"]]
    for row in scan.tried:
        name, gain, _, package, _, change, drift, cautions = _cells(row)
        rows.append([escaped(cell) for cell in (name, WORDS[row.does], change, drift, gain, package, cautions)])
    lines = ["| " + " | ".join(row) + " |" for row in rows]
    table = "\n".join([lines[0], "|" + "---|" * len(rows[0]), *lines[1:]])
    return f"# {escaped(scan.stage)}: transistors in place of {escaped(scan.old.label)}\n\n{table}\n"
