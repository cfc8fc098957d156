"""What the readings of a unit say, as a table of at most 100 columns and as plain data."""

from __future__ import annotations

import json
from math import inf

from synth import __version__
from synth.answer import plain
from synth.diagnosis import TRANSISTOR, Diagnosis, Span, Suspect
from synth.explain import percent
from synth.present.terminal import figure, section, span, wrapped
from synth.quantities import format_quantity, format_resistance

SCHEMA = "restpoint/diagnosis/1"


def render_diagnosis(found: Diagnosis, name: str) -> str:
    """The diagnosis as text.

    Parameters
    ----------
    found : Diagnosis
        Any diagnosis.
    name : str
        Name of the stage.

    Returns
    -------
    str
        Lines of at most 100 columns, a trailing newline.
    """
    blamed = [suspect.name.upper() if suspect.name != TRANSISTOR else TRANSISTOR for suspect in found.blamed]
    if found.sound:
        head = f"SOUND  {name}: the readings fit a unit without a fault"
    elif len(blamed) == 1:
        head = f"FAULT  {name}: of single faults only {blamed[0]} explains the readings"
    elif blamed:
        head = f"FAULT  {name}: any one of {', '.join(blamed)} explains the readings; measure these next"
    else:
        head = f"FAULT  {name}: no single part or rail explains the readings; two faults, or a reading is wrong"
    rows = [["", "between", ""]]
    rows += [
        ["IC", _words(found.ic, "current"), "what readings and resistors alone leave room for"],
        ["IB", _words(found.ib, "current"), ""],
        ["hFE", _words(found.hfe, "gain"), "IC over IB"],
        ["hFE likely", _words(found.likely_hfe, "gain"), "of these, what the type allows"],
        ["VBE read", _words(found.vbe, "voltage"), "" if found.vbe_expected is None else
         f"a sound junction at this current has {_words(found.vbe_expected, 'voltage')}"],
        ["VCE read", _words(found.vce, "voltage"), ""],
    ]
    blocks = [wrapped(head, "       "), section("What the readings leave room for", rows)]
    if not found.sound:
        blocks.append(section("Suspects, each freed alone", [_row(suspect) for suspect in found.suspects]))
    blocks.append(
        wrapped(
            "Intervals from the accuracy of the readings, the band of each resistor and the spread of the supply: a small fault"
            " may hide inside them. A meter of 10 MΩ lowers the base voltage of a feed above some 100 kΩ.",
            "  ",
        )
    )
    return "\n\n".join(blocks) + "\n"


def _row(suspect: Suspect) -> list[str]:
    name = suspect.name.upper() if suspect.name != TRANSISTOR else TRANSISTOR
    if suspect.needed is None or suspect.nominal is None:
        return [name, suspect.text]
    kind = "voltage" if suspect.name.startswith("v") else "resistance"
    nominal = format_resistance(suspect.nominal) if kind == "resistance" else format_quantity(suspect.nominal, kind)
    ends = [percent(end / suspect.nominal - 1.0) if end < inf else "open" for end in suspect.needed]
    return [name, f"{suspect.text} if it is {_words(suspect.needed, kind)} instead of {nominal} ({ends[0]} to {ends[1]})"]


def _words(ends: Span | None, kind: str) -> str:
    if ends is None:
        return "nothing"
    if ends.high == inf:
        return f"{figure(ends.low, kind)} or more"
    return span(ends.low, ends.high, kind)


def diagnosis_json(found: Diagnosis, name: str, command: str = "") -> str:
    """The diagnosis as JSON text.

    Parameters
    ----------
    found : Diagnosis
        Any diagnosis.
    name : str
        Name of the stage.
    command : str
        The command that asked.

    Returns
    -------
    str
        SI numbers; an end that is not finite is null; one trailing newline.
    """
    body = {"schema": SCHEMA, "version": __version__, "command": command, "stage": name}
    body |= plain({key: value for key, value in vars(found).items() if key != "suspects"})
    rows = {"suspects": [plain(vars(suspect)) for suspect in found.suspects], "blamed": [s.name for s in found.blamed]}
    return json.dumps({**body, **rows}, indent=1, ensure_ascii=False, allow_nan=False) + "\n"
