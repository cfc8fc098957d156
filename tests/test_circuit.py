"""The drawing of a circuit: what is drawn, and that no text lies on a line or on another text.

Overlaps are looked for in the finished picture, with the extents that matplotlib gives to its own texts and lines. Values
and ranges are lengthened to the longest that can occur. Symbols: IEC 60617; values: IEC 60062. The stages are invented.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import replace
from functools import cache
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure

import synth
from synth.answer import Answer, Candidate, Pair
from synth.networks import NETWORKS, Role
from synth.present import circuit
from synth.present.circuit import plan_of, to_axes, to_png, to_svg

STAGE = {"ic": "2 mA", "hfe": "200 : 300", "tolerance": "1 %", "supply": "12 V ± 5 %"}
CASES: dict[str, tuple[dict[str, str], dict[str, str]]] = {
    "fixed_base": ({"vce": "5 V"}, {"rb": "1M5", "rc": "3k3"}),
    "fixed_base, re, VBB": ({"vbb": "5 V ± 1 %", "vce": "5 V"}, {"rb": "180k", "rc": "1k", "re": "1k"}),
    "divider": ({"vce": "5 V"}, {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}),
    "divider, positive": ({"ground": "positive", "vce": "5 V"}, {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}),
    "divider, middle": ({"ground": "middle", "vce": "5 V"}, {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}),
    "collector_feedback": ({"vce": "5 V"}, {"rb": "470k", "rc": "3k3"}),
    "collector_feedback, re": ({"vce": "5 V"}, {"rb": "270k", "rc": "2k2", "re": "1k"}),
    "collector_divider": ({"vce": "5 V"}, {"r1": "39k", "r2": "4k7", "rc": "2k7"}),
    "collector_divider, re": ({"vce": "5 V"}, {"r1": "20k", "r2": "20k", "rc": "1k8", "re": "1k6"}),
    "two_supply": ({"vee": "12 V ± 5 %", "vce": "6 V"}, {"rb": "4k7", "rc": "3k3", "re": "5k6"}),
    "two_supply, negative": (
        {"vee": "12 V ± 5 %", "ground": "negative", "vce": "6 V"}, {"rb": "4k7", "rc": "3k3", "re": "5k6"},
    ),
    "follower": ({"vce": "6 V"}, {"r1": "220k", "re": "2k7"}),
    "follower, r2": ({"vce": "6 V"}, {"r1": "22k", "r2": "27k", "re": "2k7"}),
    "diode_divider": ({"vce": "5 V", "reference_kind": "diode"}, {"r1": "22k", "r2": "10k", "rc": "1k8", "re": "1k8"}),
    "diode_divider, 3": (
        {"vce": "5 V", "reference_kind": "diode", "reference_number": "3"},
        {"r1": "22k", "r2": "4k7", "rc": "1k8", "re": "1k8"},
    ),
    "sink": ({}, {"r1": "8k2", "r2": "2k7", "re": "1k"}),
    "sink, Zener": (
        {"vload": "24 V ± 5 %", "reference_kind": "zener", "reference_voltage": "5.1 V ± 5 %"}, {"r1": "1k2", "re": "2k2"},
    ),
    "sink, LED": (
        {"vload": "24 V ± 5 %", "reference_kind": "led", "reference_voltage": "1.8 V ± 0.1 V"}, {"r1": "4k7", "re": "560R"},
    ),
    "sink, 2 diodes": (
        {"reference_kind": "diode", "reference_number": "2"}, {"r1": "22k", "r2": "1k", "re": "330R"},
    ),
}  # fmt: skip
"""Every network with and without its optional parts, every reference element, every choice of what is 0 V."""

every_case = pytest.mark.parametrize("case", CASES)
both_polarities = pytest.mark.parametrize("polarity", ["npn", "pnp"])
RAILS = ("VCC", "VEE", "VBB", "VLOAD", "0 V", "common")


@cache
def drawn(case: str, polarity: str = "npn") -> tuple[Answer, Candidate]:
    keys, values = CASES[case]
    stage = synth.Stage(network=case.split(",")[0], polarity=polarity, **{**STAGE, **keys})
    answer = synth.check(stage, **values)
    assert answer.best is not None
    return answer, answer.best


def longest(candidate: Candidate) -> Candidate:
    """The same with the longest values, voltages and ranges that can occur."""
    nodes = dict.fromkeys(candidate.nominal.nodes, -128.4)
    seen = dict.fromkeys(nodes, (-134.1, -128.4, -123.5))
    found = replace(candidate, resistors=dict.fromkeys(candidate.resistors, 4.99e6))
    assert found.readings is not None
    return replace(
        found, nominal=replace(candidate.nominal, nodes=nodes, ic=888.8e-6), readings=replace(found.readings, nodes=seen)
    )


def picture(answer: Answer, candidate: Candidate, **options: Any) -> Axes:
    figure = Figure(dpi=100.0)
    ax = to_axes(figure.add_axes((0.0, 0.0, 1.0, 1.0)), answer, candidate, resize=True, **options)
    figure.draw_without_rendering()
    return ax


def outlines(ax: Axes) -> list[np.ndarray]:
    """Every line and outline of a picture as a path [pixel]."""
    paths = [line.get_transform().transform(line.get_xydata()) for line in ax.lines]
    for patch in ax.patches:
        paths += [np.asarray(p) for p in patch.get_transform().transform_path(patch.get_path()).to_polygons()]
    return paths


def hits(box: tuple[float, float, float, float], path: np.ndarray) -> bool:
    """Whether a path enters a box; sampled far more finely than any text is small."""
    left, bottom, right, top = box
    x, y = path[np.isfinite(path).all(axis=1)].T
    if x.max() <= left or x.min() >= right or y.max() <= bottom or y.min() >= top:
        return False
    for a, b in itertools.pairwise(path):
        if not np.isfinite([*a, *b]).all():
            continue
        steps = np.linspace(0.0, 1.0, 2 + int(np.hypot(*(b - a)) / 0.5))[:, None]
        x, y = (a + (b - a) * steps).T
        if np.any((x > left) & (x < right) & (y > bottom) & (y < top)):
            return True
    return False


def extents(ax: Axes) -> dict[tuple[str, int], tuple[float, float, float, float]]:
    return {(text.get_text(), k): tuple(text.get_window_extent().extents) for k, text in enumerate(ax.texts)}


def no_text_is_hidden(ax: Axes) -> None:
    """No text lies over a line, over another text, or beyond the edge."""
    width, height = ax.figure.get_size_inches() * ax.figure.dpi
    boxes, paths = extents(ax), outlines(ax)
    for (text, _), (left, bottom, right, top) in boxes.items():
        assert min(left, bottom, width - right, height - top) > 0.0, f"{text!r} is cut"
        # Two pixels at 100 an inch: a line of 1.4 points is as wide.
        around = (left - 2.0, bottom - 2.0, right + 2.0, top + 2.0)
        assert not any(hits(around, path) for path in paths), f"a line through {text!r}"
    for ((one, _), a), ((two, _), b) in itertools.combinations(boxes.items(), 2):
        apart = a[2] <= b[0] or b[2] <= a[0] or a[3] <= b[1] or b[3] <= a[1]
        assert apart, f"{one!r} over {two!r}"
    for path in paths:
        x, y = path[np.isfinite(path).all(axis=1)].T
        assert min(x.min(), y.min(), width - x.max(), height - y.max()) > 0.0, "a line is cut"


@every_case
@both_polarities
def test_no_text_lies_over_anything(case: str, polarity: str) -> None:
    answer, candidate = drawn(case, polarity)
    # A zigzag line is as wide as a rectangle; the one form of each polarity stands for both.
    no_text_is_hidden(picture(answer, longest(candidate), zigzag=polarity == "pnp"))


def test_a_hidden_text_is_seen() -> None:
    """The check above would notice a text over a line and one over another."""
    ax = picture(*drawn("divider"))
    no_text_is_hidden(ax)
    ax.text(0.0, 0.0, "on the transistor's line")
    with pytest.raises(AssertionError, match="on the transistor's line"):
        no_text_is_hidden(ax)


def test_cases_cover_every_network() -> None:
    assert {case.split(",")[0] for case in CASES} == set(NETWORKS)


@every_case
@both_polarities
def test_every_part_is_named_with_its_value(case: str, polarity: str) -> None:
    """IEC 60062: the letter stands in place of the decimal mark."""
    answer, candidate = drawn(case, polarity)
    texts = [text.get_text() for text in picture(answer, candidate).texts]
    given = {role: text.upper() for role, text in CASES[case][1].items()}
    for role, value in given.items():
        at = texts.index(role.upper())
        assert texts[at + 1] == value
    assert {text for text in texts if text in {r.upper() for r in ("r1", "r2", "rb", "rc", "re")}} == {r.upper() for r in given}


@every_case
@both_polarities
def test_the_positive_rail_is_on_top(case: str, polarity: str) -> None:
    """Common practice: potential falls from the top of a drawing to its bottom, for both polarities."""
    answer, candidate = drawn(case, polarity)
    labels = plan_of(answer, candidate, {}).labels

    def volts(line: str) -> float:
        if line == "0 V":
            return 0.0
        return float(line.split(" ")[-2].replace("−", "-")) * {"V": 1.0, "mV": 1e-3}[line.split(" ")[-1]]

    heights = {}
    for label in labels:
        name = label.lines[0].split(" ")[0].lstrip("−")
        if name.startswith(RAILS) or label.lines[0] == "0 V":
            heights[label.lines[0]] = (volts(label.lines[0]), label.y)
    assert len(heights) >= 2
    ends = sorted(heights.values(), key=lambda pair: pair[1])
    assert ends[0][0] < ends[-1][0]
    for node in ("E", "C"):
        own = [label for label in labels if label.lines[0].startswith(f"V{node} ")]
        assert len(own) <= 1
    order = [volts(label.lines[0]) for label in sorted(labels, key=lambda label: label.y) if label.lines[0][:2] in ("VC", "VE")
             and label.lines[0][2] == " "]  # fmt: skip
    assert order == sorted(order)


def test_the_mirror_image_turns_round() -> None:
    """A PNP stage has its emitter on the upper rail, and its transistor, diodes and Zener diodes conduct downwards."""
    for polarity in ("npn", "pnp"):
        plan = plan_of(*drawn("diode_divider", polarity), {})
        by_name = {label.lines[0]: label.y for label in plan.labels}
        assert (by_name["RE"] > by_name["RC"]) == (polarity == "pnp")
        assert (by_name["D1"] > by_name["R1"]) == (polarity == "pnp")


@pytest.mark.parametrize(("kind", "down"), [("diode_divider", True), ("sink, LED", True), ("sink, Zener", False)])
@both_polarities
def test_diodes_point_along_the_current(kind: str, down: bool, polarity: str) -> None:
    """Current runs down the page; a Zener diode lies against it, as it is used beyond its breakdown (common practice)."""
    ax = picture(*drawn(kind, polarity))
    triangles = [p.get_xy()[:3] for p in ax.patches if type(p).__name__ == "Polygon" and len(p.get_xy()) == 4]
    big = max(triangles, key=lambda t: np.ptp(t[:, 0]) * np.ptp(t[:, 1]))
    _x, y = big.T
    tip = int(np.argmax([abs(y[k] - np.delete(y, k).mean()) if abs(np.ptp(np.delete(y, k))) < 1e-9 else 0.0 for k in range(3)]))
    assert (y[tip] < np.delete(y, tip).mean()) == down


def test_ranges_of_nodes_are_those_of_a_meter() -> None:
    """The node voltages are those of the answer, with the range over the box."""
    answer, candidate = drawn("divider")
    assert candidate.readings is not None
    low, middle, high = candidate.readings.nodes["b"]
    lines = next(label.lines for label in plan_of(answer, candidate, {}).labels if label.lines[0].startswith("VB "))
    assert lines == (f"VB {middle:.2f} V", f"{low:.2f} to {high:.2f} V")


def test_rails_carry_their_range() -> None:
    """12 V ± 5 % is 11.4 V to 12.6 V; against the positive rail the lower one is as far below 0 V."""
    lines = [label.lines for label in plan_of(*drawn("divider"), {}).labels]
    assert ("VCC 12.0 V", "11.4 to 12.6 V") in lines
    assert ("0 V",) in lines
    lines = [label.lines for label in plan_of(*drawn("divider, positive"), {}).labels]
    assert ("−VCC −12.0 V", "−12.6 to −11.4 V") in lines
    assert ("0 V",) in lines
    lines = [label.lines for label in plan_of(*drawn("divider, middle"), {}).labels]
    assert ("VCC/2 6.00 V", "5.70 to 6.30 V") in lines
    assert ("−VCC/2 −6.00 V", "−6.30 to −5.70 V") in lines


def test_absent_resistors_are_not_drawn() -> None:
    """With re absent the emitter is wired to the rail, and its voltage is not worth a label."""
    with_re, without = (plan_of(*drawn(case), {}) for case in ("collector_feedback, re", "collector_feedback"))
    assert sum(kind == "resistor" for kind, *_ in with_re.parts) == 3
    assert sum(kind == "resistor" for kind, *_ in without.parts) == 2
    assert not [label for label in without.labels if label.lines[0].startswith("VE ")]


def test_designators_of_a_board_take_the_place_of_roles() -> None:
    answer, candidate = drawn("divider")
    names = {"r1": "R17", "r2": "R18", "rc": "R19", "re": "R20", "q": "Q3"}
    first = [label.lines[0] for label in plan_of(answer, candidate, names).labels]
    assert set(names.values()) <= set(first)
    assert "R17" in to_svg(answer, candidate, designators=names)


def test_svg_has_its_texts_as_text_and_no_colour_of_its_own() -> None:
    answer, candidate = drawn("sink, LED", "pnp")
    svg = to_svg(answer, candidate)
    root = ElementTree.fromstring(svg)
    words = ["".join(e.itertext()) for e in root.iter("{http://www.w3.org/2000/svg}text")]
    assert words.count("560R") == 1
    assert "LED" in words
    assert "black" not in svg.lower()
    assert "currentcolor" in svg.lower()
    assert "http" not in svg.replace("http://www.w3.org/", "")


def test_svg_and_png_are_the_same_every_time() -> None:
    answer, candidate = drawn("divider")
    assert to_svg(answer, candidate) == to_svg(answer, candidate)
    assert to_png(answer, candidate, dpi=50.0) == to_png(answer, candidate, dpi=50.0)


def test_resistors_are_rectangles_unless_asked() -> None:
    """IEC 60617-4: a resistor is a rectangle, three times as long as wide or so; the zigzag is the other form."""

    def closed(zigzag: bool) -> int:
        rectangles = [p for p in outlines(picture(*drawn("divider"), zigzag=zigzag)) if is_rectangle(p)]
        return len(rectangles)

    assert (closed(False), closed(True)) == (4, 0)


def is_rectangle(path: np.ndarray) -> bool:
    """Whether a path goes round a rectangle, the ends of its leads apart."""
    points = path[np.isfinite(path).all(axis=1)]
    steps = np.diff(points, axis=0)
    across = np.abs(steps[:, 0]) > 1.0
    along = np.abs(steps[:, 1]) > 1.0
    width, height = np.ptp(points[:, 0]), np.ptp(points[:, 1])
    return len(points) > 5 and not np.any(across & along) and 0.0 < width < height


PAIRED = [
    ("divider", {"r1": "series", "r2": "parallel", "rc": "parallel", "re": "series"}),
    ("divider", {"r1": "parallel", "r2": "series", "rc": "series", "re": "parallel"}),
    ("collector_divider, re", {"r1": "parallel", "r2": "parallel"}),
    ("two_supply", {"rb": "series", "re": "parallel"}),
    ("sink, Zener", {"r1": "parallel", "re": "series"}),
    ("fixed_base, re, VBB", {"rb": "series"}),
]


@pytest.mark.parametrize(("case", "joins"), PAIRED, ids=str)
@both_polarities
def test_pairs_are_drawn_as_two_parts(case: str, joins: dict[str, Any], polarity: str) -> None:
    """Two in series stand above one another, two in parallel side by side, each with its own name and value."""
    answer, candidate = drawn(case, polarity)
    made = {role: Pair(join=join, ohms=(4.7e6, 3.3e6)) for role, join in joins.items()}
    paired = replace(longest(candidate), parts=made)
    plan = plan_of(answer, paired, {})
    first = [label.lines for label in plan.labels]
    for role, join in joins.items():
        assert {(f"{role.upper()}A", "4M7"), (f"{role.upper()}B", "3M3")} <= set(first), join
    assert sum(kind == "resistor" for kind, *_ in plan.parts) == len(candidate.resistors) + len(joins)
    no_text_is_hidden(picture(answer, paired))


def new_network(*extra: Role) -> Mapping[str, Any]:
    own = NETWORKS["divider"]
    return {"divider": replace(own, roles=(*own.roles, *extra))}


@both_polarities
@pytest.mark.parametrize(
    "nodes",
    [
        [("c", "b")], [("c", "0")], [("b", "e")], [("c", "e")], [("vcc", "b")], [("vcc", "e")], [("b", "0"), ("c", "0")],
        [("c", "b"), ("b", "e")],
    ],
    ids=str,
)  # fmt: skip
def test_a_new_network_is_drawn_from_its_nodes(
    nodes: list[tuple[str, str]], polarity: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Roles that no network has today find their place too."""
    answer, candidate = drawn("divider", polarity)
    extra = [Role(name=f"r{k}", meaning="extra", nodes=pair) for k, pair in enumerate(nodes, start=3)]
    monkeypatch.setattr(circuit, "NETWORKS", new_network(*extra))
    wider = replace(candidate, resistors={**candidate.resistors, **{role.name: 4.99e6 for role in extra}})
    ax = picture(answer, longest(wider))
    no_text_is_hidden(ax)
    texts = [text.get_text() for text in ax.texts]
    assert {role.name.upper() for role in extra} <= set(texts)
