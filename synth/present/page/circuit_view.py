"""The circuit of a candidate as shapes and texts that the template draws.

A page whose policy admits no style but its own can hold no attribute of style, so each is turned into a class; lines of one
kind are put together, which leaves a third of the size.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from xml.etree import ElementTree

from synth.answer import Answer, Candidate

PLACES = 2
"""Decimals of a coordinate [-]: a hundredth of a point of print."""


@dataclass(frozen=True, kw_only=True)
class Shape:
    """One shape: its element, its class, and the attributes that say where it is."""

    element: str
    kind: str
    place: Mapping[str, str]


@dataclass(frozen=True, kw_only=True)
class Text:
    """A line of text: its place in the units of the drawing [-], and which end of it stands there."""

    x: float
    y: float
    anchor: str
    text: str


@dataclass(frozen=True, kw_only=True)
class Circuit:
    """What a circuit draws, its size in points of print [-], and a sentence for who cannot see it."""

    box: str
    width: float
    shapes: Sequence[Shape]
    texts: Sequence[Text]
    summary: str


def circuit(answer: Answer, c: Candidate, name: str, designators: Mapping[str, str] | None = None) -> Circuit:
    """The circuit of a candidate with values and node voltages.

    Parameters
    ----------
    answer : Answer
        Where it comes from.
    c : Candidate
        One of its candidates.
    name : str
        What the page calls it.
    designators : mapping of str to str, optional
        Name of the part in each role.

    Returns
    -------
    Circuit
        Shapes and texts, nothing of it markup.
    """
    from synth.present.circuit import to_svg

    root = ElementTree.fromstring(to_svg(answer, c, designators=designators))
    lines: dict[str, list[str]] = {}
    shapes, texts = [], []
    for element in root:
        tag = element.tag.rpartition("}")[2]
        if tag == "text":
            # The base line stands one step of the font below the place of the element.
            inner = element[0]
            y = float(element.attrib["y"]) + float(inner.attrib["dy"])
            x, anchor = float(element.attrib["x"]), element.attrib["text-anchor"]
            texts.append(Text(x=round(x, PLACES), y=round(y, PLACES), anchor=anchor, text=inner.text or ""))
            continue
        kind = _kind(element.attrib.get("style", ""))
        place = {name: _shorter(value) for name, value in element.attrib.items() if name != "style"}
        if tag == "path":
            lines.setdefault(kind, []).append(place["d"])
        else:
            shapes.append(Shape(element=tag, kind=kind, place=place))
    drawn = [Shape(element="path", kind=kind, place={"d": " ".join(parts)}) for kind, parts in lines.items()]
    parts = "; ".join(f"{role.upper()} from {duty.between[0]} to {duty.between[1]}" for role, duty in c.roles.items())
    return Circuit(
        box=_shorter(root.attrib["viewBox"]),
        width=round(float(root.attrib["viewBox"].split()[2]), 1),
        shapes=[*drawn, *shapes],
        texts=texts,
        summary=f"Circuit of {name}: {parts}",
    )


def _kind(style: str) -> str:
    """Class of a shape: how its inside and its line are drawn."""
    rules = dict(rule.split(":", 1) for rule in style.split(";") if rule)
    fill = rules.get("fill", "none").lower()
    if fill != "none":
        return "open" if fill == "white" else "full"
    return "wire" if rules.get("stroke-dasharray", "-") == "-" else "dashed"


def _shorter(text: str) -> str:
    """Coordinates with fewer decimals."""
    return " ".join(",".join(_rounded(part) for part in word.split(",")) for word in text.split())


def _rounded(word: str) -> str:
    try:
        return f"{round(float(word), PLACES) + 0.0:g}"
    except ValueError:
        return word
