"""The circuit of a candidate, drawn from the nodes and roles of its network.

Nothing here knows a network by name. Every node has a level, and a resistor asks for room between the levels of its two
nodes; resistors at the base stand in columns on the left, those of the collector and the emitter in the column of the
transistor, others on the right. A PNP stage is the mirror image: its positive rail is on top too. Symbols follow
IEC 60617, values IEC 60062.
"""

from __future__ import annotations

import io
import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cache
from typing import TYPE_CHECKING, Any, Literal, NamedTuple

from synth.answer import Answer, Candidate
from synth.explain import place
from synth.networks import NETWORKS, Network, Role
from synth.present.terminal import figure, span
from synth.quantities import format_quantity, format_resistance

if TYPE_CHECKING:
    import schemdraw
    from matplotlib.axes import Axes

Point = tuple[float, float]
Side = Literal["left", "right"]
Ends = tuple[float, float, float]

POINTS = 36.0
"""Points of print in a unit of the drawing [-]."""
FONT_SIZE = 11.0
"""Of every text [pt]."""
PITCH = 14.0 / POINTS
"""From one line of text to the next; lengths here and below are in units of the drawing."""
GAP = 0.2
"""Least distance of a text from a line that it does not name."""
BESIDE = 0.4
"""From the axis of a part to its text."""
LENGTH = 2.6
"""Room that a resistor asks for between its nodes."""
SERIES, PARALLEL = 1.6, 0.9
"""What a second part adds: to the height in series, to the width in parallel."""
DIODE = 1.3
"""Room that a diode of the reference element asks for."""
PIN = 1.35
"""From the level of the base to that of collector and emitter."""
WIDTH, HEIGHT = 0.75, 0.65
"""From the line of collector and emitter to the base pin, and from there to theirs, of the transistor's symbol."""
COLUMN = 2.0
"""From there to the nearest column on the left."""
STUB = 0.5
"""Length of a wire that ends in a terminal."""
MARGIN = 0.25
RANK = {"vee": 0, "0": 0, "m": 1, "e": 2, "b": 3, "c": 4, "vcc": 5, "vbb": 5, "vload": 5}
"""Which of two nodes is drawn higher: the order of their voltages in an NPN stage."""
TOP = frozenset(node for node, rank in RANK.items() if rank == 5)
FONTS = "DejaVu Sans, Verdana, sans-serif"
"""The first is the one that texts are measured in; the second is as wide."""


class Label(NamedTuple):
    """Lines of text beside a point: their box is left or right of `x` and centred on `y` [units of the drawing]."""

    lines: tuple[str, ...]
    x: float
    y: float
    side: Side

    @property
    def width(self) -> float:
        """Of the widest line [units of the drawing]."""
        return max((_width(line) for line in self.lines), default=0.0)

    @property
    def box(self) -> tuple[float, float, float, float]:
        """Left, bottom, right and top [units of the drawing]."""
        half = 0.5 * PITCH * len(self.lines)
        left = self.x if self.side == "right" else self.x - self.width
        return left, self.y - half, left + self.width, self.y + half


@dataclass
class Plan:
    """Where everything goes, before the mirror: parts, wires and dots by their points, and texts."""

    parts: list[tuple[str, Point, Point]] = field(default_factory=list)
    wires: list[tuple[Point, Point]] = field(default_factory=list)
    dots: list[Point] = field(default_factory=list)
    terminals: list[Point] = field(default_factory=list)
    grounds: list[Point] = field(default_factory=list)
    labels: list[Label] = field(default_factory=list)
    transistor: Point = (0.0, 0.0)

    def mirrored(self) -> Plan:
        """The same upside down; texts stay upright.

        Returns
        -------
        Plan
            Another plan.
        """

        def turn(point: Point) -> Point:
            return point[0], -point[1]

        return Plan(
            parts=[(kind, turn(a), turn(b)) for kind, a, b in self.parts],
            wires=[(turn(a), turn(b)) for a, b in self.wires],
            dots=[turn(p) for p in self.dots],
            terminals=[turn(p) for p in self.terminals],
            grounds=[turn(p) for p in self.grounds],
            labels=[label._replace(y=-label.y) for label in self.labels],
            transistor=turn(self.transistor),
        )

    @property
    def box(self) -> tuple[float, float, float, float]:
        """Left, bottom, right and top of everything, with a margin [units of the drawing]."""
        ends = [*self.wires, *((a, b) for _, a, b in self.parts), *((p, p) for p in (*self.terminals, *self.dots))]
        points = [p for pair in ends for p in pair] + [(x, y - 0.6) for x, y in self.grounds]
        boxes = [label.box for label in self.labels]
        # Half the width of a part counts on both sides of its axis.
        left = min([x - 0.5 for x, _ in points] + [b[0] for b in boxes])
        right = max([x + 0.5 for x, _ in points] + [b[2] for b in boxes])
        bottom = min([y - 0.1 for _, y in points] + [b[1] for b in boxes])
        top = max([y + 0.1 for _, y in points] + [b[3] for b in boxes])
        return left - MARGIN, bottom - MARGIN, right + MARGIN, top + MARGIN


def to_svg(
    answer: Answer,
    candidate: Candidate,
    *,
    zigzag: bool = False,
    designators: Mapping[str, str] | None = None,
    on_white: bool = False,
) -> str:
    """The circuit as SVG, its texts as text; lines and texts have the colour of the text around.

    Parameters
    ----------
    answer : Answer
        Where the candidate comes from.
    candidate : Candidate
        What is drawn.
    zigzag : bool
        Zigzag lines for resistors in place of the rectangles of IEC 60617.
    designators : mapping of str to str, optional
        Name of the part in each role; ``R1``, ``RE``... by its role when not given, ``R1A`` and ``R1B`` of a pair, which
        go by ``r1a`` and ``r1b`` here.
    on_white : bool
        Black on white, for where there is no text around.

    Returns
    -------
    str
        An ``svg`` element, the same for the same candidate.
    """
    color = "black" if on_white else "currentColor"
    sheet = _sheet(plan_of(answer, candidate, designators or {}), _is_pnp(answer), zigzag, color, FONTS)
    if on_white:
        sheet.config(bgcolor="white")
    from schemdraw.backends import svg

    before = svg.config._text
    svg.config._text = "text"
    try:
        return sheet.get_imagedata("svg").decode("utf-8")
    finally:
        svg.config._text = before


def to_axes(
    ax: Axes,
    answer: Answer,
    candidate: Candidate,
    *,
    zigzag: bool = False,
    designators: Mapping[str, str] | None = None,
    resize: bool = False,
) -> Axes:
    """The circuit on matplotlib axes.

    Parameters
    ----------
    ax : Axes
        Where to draw; its frame and ticks are taken away.
    answer, candidate, zigzag, designators
        As in `to_svg`.
    resize : bool
        Whether the figure, with these axes all over it, takes the size that the texts are drawn for.

    Returns
    -------
    Axes
        The same.
    """
    plan = plan_of(answer, candidate, designators or {})
    left, bottom, right, top = plan.box
    if resize:
        ax.set_position((0.0, 0.0, 1.0, 1.0))
        figure_of = ax.get_figure(root=True)
        assert figure_of is not None
        figure_of.set_size_inches((right - left) * POINTS / 72.0, (top - bottom) * POINTS / 72.0)
    ax.set_axis_off()
    ax.set_aspect("equal")
    _sheet(plan, _is_pnp(answer), zigzag, "black", "DejaVu Sans").draw(show=False, canvas=ax)
    ax.set_xlim(left, right)
    ax.set_ylim(bottom, top)
    return ax


def to_png(
    answer: Answer,
    candidate: Candidate,
    *,
    zigzag: bool = False,
    designators: Mapping[str, str] | None = None,
    dpi: float = 200.0,
) -> bytes:
    """The circuit as a PNG picture on white.

    Parameters
    ----------
    answer, candidate, zigzag, designators
        As in `to_svg`.
    dpi : float
        Dots an inch [1/inch].

    Returns
    -------
    bytes
        The file.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    picture = Figure(facecolor="white")
    FigureCanvasAgg(picture)
    to_axes(picture.add_axes((0.0, 0.0, 1.0, 1.0)), answer, candidate, zigzag=zigzag, designators=designators, resize=True)
    out = io.BytesIO()
    picture.savefig(out, format="png", dpi=dpi, metadata={"Software": None})
    return out.getvalue()


# --- What there is to draw ----------------------------------------------------------------------------------------


def _is_pnp(answer: Answer) -> bool:
    return bool(answer.stage["transistor"]["polarity"] == "pnp")


@dataclass(frozen=True, kw_only=True)
class _Circuit:
    """The network of a candidate with what is absent taken out: nodes that have become one have one name."""

    answer: Answer
    candidate: Candidate
    network: Network
    designators: Mapping[str, str]

    @property
    def stage(self) -> Mapping[str, Any]:
        return self.answer.stage

    @property
    def pnp(self) -> bool:
        return _is_pnp(self.answer)

    @property
    def ground(self) -> str:
        """What is 0 V, as `synth.spaces` has it."""
        ground: str = self.stage["supply"]["ground"]
        return "common" if ground == "middle" and "vee" in self.stage["supply"] else ground

    @property
    def rails(self) -> dict[str, Ends]:
        """Rails given that the network uses [V]."""
        supply = self.stage["supply"]
        return {r: tuple(supply[r]) for r in (*self.network.rails, *self.network.optional_rails) if r in supply}

    @property
    def reference(self) -> Mapping[str, Any] | None:
        return self.stage["reference"] if self.network.reference != "no" else None

    @property
    def same(self) -> dict[str, str]:
        """Name that stands for a node."""
        joined = {rail: "vcc" for rail in self.network.optional_rails if rail not in self.rails}
        if self.reference is None:
            joined["m"] = "0"
        for role in self.network.roles:
            if role.name not in self.candidate.resistors and role.absent == "short":
                low, high = sorted(role.nodes, key=RANK.__getitem__)
                # The name of a rail wins over that of a node, and a pin of the transistor over the reference.
                gone, kept = (low, high) if high in TOP or low == "m" else (high, low)
                joined[gone] = joined.get(kept, kept)
        if not self.network.sinks:
            joined |= dict(self.network.tied)

        def end(node: str) -> str:
            while joined.get(node, node) != node:
                node = joined[node]
            return node

        return {node: end(node) for node in RANK}

    @property
    def roles(self) -> list[Role]:
        return [role for role in self.network.roles if role.name in self.candidate.resistors]

    def ends(self, role: Role) -> tuple[str, str]:
        """Its nodes, the lower one first."""
        low, high = sorted((self.same[node] for node in role.nodes), key=RANK.__getitem__)
        return low, high

    def join(self, role: Role) -> str:
        """How the parts of a role are joined: ``single``, ``series`` or ``parallel``."""
        pair = self.candidate.parts.get(role.name)
        return "single" if pair is None else pair.join

    def lines(self, role: Role) -> list[tuple[str, ...]]:
        """What stands beside each part of a role."""
        name = self.designators.get(role.name, role.name.upper())
        pair = self.candidate.parts.get(role.name)
        if pair is None:
            return [(name, format_resistance(self.candidate.resistors[role.name]))]
        halves = [self.designators.get(f"{role.name}{letter}", f"{name}{letter.upper()}") for letter in "ab"]
        return [(who, format_resistance(ohms)) for who, ohms in zip(halves, pair.ohms, strict=True)]

    def node(self, node: str) -> tuple[str, ...]:
        """What stands beside a node: its voltage and the range of it."""
        name = "VREF" if node == "m" else f"V{node.upper()}"
        value = self.candidate.nominal.nodes[node]
        read = self.candidate.readings
        ends = read.nodes.get(node) if read is not None else None
        return _with_range(name, value, ends and (ends[0], ends[2]))

    def rail(self, node: str) -> tuple[str, ...]:
        """What stands beside a rail: its name, its voltage against 0 V and the range of it."""
        every = [dict(zip(self.rails, values, strict=True)) for values in itertools.product(*self.rails.values())]
        against = [_potential(node, rails, self.ground, self.pnp) for rails in every]
        if not any(against):
            return ("0 V",)
        name = place(node, self.stage["transistor"]["polarity"], self.ground)
        middle = _potential(node, {rail: ends[1] for rail, ends in self.rails.items()}, self.ground, self.pnp)
        if node == "0" and "vee" in self.rails:
            name = "common"
        return _with_range(name, middle, (min(against), max(against)))

    def transistor(self) -> tuple[str, ...]:
        """What stands beside the transistor: designator, type or gain, and its current."""
        device = self.stage["transistor"]
        low, _, high = device["hfe"]
        kind = device.get("type") or f"hFE {format_quantity(low, 'gain')} to {format_quantity(high, 'gain')}"
        current = span(*self.candidate.worst.ic, "current")
        return self.designators.get("q", "Q1"), kind, f"IC {figure(self.candidate.nominal.ic, 'current')}", current


def _with_range(name: str, value: float, ends: tuple[float, float] | None) -> tuple[str, ...]:
    first = f"{name} {figure(value, 'voltage')}"
    if ends is None or ends[0] == ends[1] or ends != ends:
        return (first.replace("-", "−"),)
    return first.replace("-", "−"), span(*ends, "voltage").replace("-", "−")


def _potential(node: str, rails: Mapping[str, float], ground: str, pnp: bool) -> float:
    """Voltage of a rail as a meter reads it against 0 V."""
    low, high = -rails.get("vee", 0.0), rails["vcc"]
    zero = {"negative": high, "positive": low} if pnp else {"negative": low, "positive": high}
    own = {"0": 0.0, "vee": low}.get(node, rails.get(node, high))
    against = own - {**zero, "middle": 0.5 * (low + high), "common": 0.0}[ground]
    return (-against if pnp else against) + 0.0


# --- Where it goes ------------------------------------------------------------------------------------------------


@cache
def _width(text: str) -> float:
    """Width of a line of text, in units of the drawing."""
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import text_to_path

    font = FontProperties(family=["DejaVu Sans"], size=FONT_SIZE)
    return float(text_to_path.get_text_width_height_descent(text, font, ismath=False)[0]) / POINTS


def plan_of(answer: Answer, candidate: Candidate, designators: Mapping[str, str]) -> Plan:
    """The places of everything in the drawing of a candidate.

    Parameters
    ----------
    answer : Answer
        Where the candidate comes from.
    candidate : Candidate
        What is drawn.
    designators : mapping of str to str
        Name of the part in a role, where it is not that of the role; ``q`` names the transistor.

    Returns
    -------
    Plan
        With the positive rail on top for either polarity.
    """
    network = NETWORKS[candidate.network]
    circuit = _Circuit(answer=answer, candidate=candidate, network=network, designators=designators)
    plan = _Layout(circuit).run()
    return plan.mirrored() if _is_pnp(answer) else plan


@dataclass
class _Layout:
    """Places the parts of a circuit, as an NPN stage."""

    circuit: _Circuit

    def __post_init__(self) -> None:
        self.plan = Plan()
        self.same = self.circuit.same
        self.low = "vee" if "vee" in self.circuit.network.rails else "0"
        # What hangs on a node: the place, and whether it comes from above (+1), below (-1) or the side (0).
        self.joints: dict[str, list[tuple[Point, int]]] = {}

    def run(self) -> Plan:
        """The finished plan."""
        self._levels(LENGTH)
        if self._columns():
            # Voltages of nodes with a wire to the right stand above or below it, where the middle column has to make room.
            self._levels(LENGTH + 3 * PITCH)
            self._columns()
        self._parts()
        self._transistor()
        self._nodes()
        self._rails()
        return self.plan

    def _local_ground(self, node: str) -> bool:
        """Whether a node is 0 V between two supplies, drawn as a symbol of its own at each part."""
        return node == "0" and self.low != "0"

    def _levels(self, least: float) -> None:
        """Least height of every node that leaves the parts between them room, `least` for a resistor."""
        same, circuit = self.same, self.circuit
        room: list[tuple[str, str, float]] = []
        if circuit.reference is not None:
            # Its voltage stands beside the node above it, where that is not the base.
            named = PITCH if same["m"] == "m" else 0.0
            room.append((same["0"], same["m"], DIODE * circuit.reference["number"] + named))
        for lower, upper in (("e", "b"), ("b", "c")):
            short = {same[lower], same[upper]} & {"0", "vee", *TOP}
            room.append((same[lower], same[upper], PIN + (0.5 if short else 0.0)))
        if circuit.network.sinks:
            room.append((same["c"], same["vload"], LENGTH))
        for role in circuit.roles:
            lower, upper = circuit.ends(role)
            if not self._local_ground(lower):
                room.append((lower, upper, least + self._more(role)))
        self.level = dict.fromkeys(RANK, 0.0)
        for _ in RANK:
            for lower, upper, length in room:
                self.level[upper] = max(self.level[upper], self.level[lower] + length)
            # Rails of the collector's side are drawn at one height.
            self.level |= dict.fromkeys(TOP, max(self.level[node] for node in TOP))

    def _more(self, role: Role) -> float:
        """Height that a pair in series takes besides that of one resistor."""
        return SERIES if self.circuit.join(role) == "series" else 0.0

    def _aside(self, role: Role) -> float:
        """How far out the second part of a pair in parallel stands."""
        return PARALLEL if self.circuit.join(role) == "parallel" else 0.0

    def _span(self, role: Role) -> tuple[float, float]:
        lower, upper = self.circuit.ends(role)
        high = self.level[upper]
        return (high - LENGTH - self._more(role) if self._local_ground(lower) else self.level[lower]), high

    def _columns(self) -> bool:
        """Which resistors stand above one another, and how far apart the columns are; whether there are any on the right."""
        same = self.same
        base, own = same["b"], {same["c"], same["e"]}
        left: list[list[Role]] = []
        right: list[list[Role]] = []
        middle: list[Role] = []
        roles = self.circuit.roles
        # A resistor from the base to collector or emitter keeps next to the transistor, so that no wire crosses another.
        for role in sorted(roles, key=lambda role: not own & set(self.circuit.ends(role))):
            ends = self.circuit.ends(role)
            if base in ends:
                self._pack(role, left)
            elif own & set(ends) and not own >= set(ends) and not any(self._meet(role, other) for other in middle):
                middle.append(role)
            else:
                self._pack(role, right)
        self.x: dict[str, float] = {role.name: 0.0 for role in middle}
        x = -COLUMN
        for column in left:
            self.x |= {role.name: x for role in column}
            x -= BESIDE + max(self._reach(role) for role in column) + GAP + 0.3
        labels = [self._reach(role) for role in middle]
        labels += [max(map(_width, lines)) for lines in (self.circuit.transistor(), *map(self.circuit.node, "ce"))]
        x = BESIDE + max(labels) + GAP + 0.4
        for column in right:
            self.x |= {role.name: x for role in column}
            x += BESIDE + max(self._reach(role) for role in column) + GAP + 0.3
        return bool(right)

    def _meet(self, one: Role, other: Role) -> bool:
        (low, high), (bottom, top) = self._span(one), self._span(other)
        return low < top and bottom < high

    def _pack(self, role: Role, columns: list[list[Role]]) -> None:
        for column in columns:
            if not any(self._meet(role, other) for other in column):
                column.append(role)
                return
        columns.append([role])

    def _reach(self, role: Role) -> float:
        """Room that the texts of a role take beside its column, with a second part in between."""
        return self._aside(role) + max(_width(line) for lines in self.circuit.lines(role) for line in lines)

    def _resistor(self, role: Role) -> None:
        """The part of a role, or both parts of a pair, each with its name and value."""
        plan, x, (low, high) = self.plan, self.x[role.name], self._span(role)
        side: Side = "left" if x < 0.0 else "right"
        out = -1.0 if side == "left" else 1.0
        middle, texts, aside = 0.5 * (low + high), self.circuit.lines(role), self._aside(role)
        if len(texts) == 1:
            plan.parts.append(("resistor", (x, high), (x, low)))
            places = [middle]
        elif aside:
            # The two stand side by side, the texts of both beyond the outer one.
            outer, top, bottom = x + out * aside, middle + 0.75, middle - 0.75
            plan.parts += [("resistor", (x, high), (x, low)), ("resistor", (outer, top), (outer, bottom))]
            plan.wires += [((x, top), (outer, top)), ((x, bottom), (outer, bottom))]
            plan.dots += [(x, top), (x, bottom)]
            places = [middle + PITCH, middle - PITCH]
        else:
            plan.parts += [("resistor", (x, high), (x, middle)), ("resistor", (x, middle), (x, low))]
            places = [0.5 * (high + middle), 0.5 * (middle + low)]
        for lines, y in zip(texts, places, strict=True):
            plan.labels.append(Label(lines, x + out * (aside + BESIDE), y, side))

    def _parts(self) -> None:
        """Resistors, reference elements and the load of a sink."""
        plan, circuit = self.plan, self.circuit
        for role in circuit.roles:
            x, (low, high) = self.x[role.name], self._span(role)
            lower, upper = circuit.ends(role)
            self._resistor(role)
            self._join(upper, (x, high), -1)
            if self._local_ground(lower):
                self._between((x, low))
            else:
                self._join(lower, (x, low), 1)
        if circuit.reference is not None:
            self._reference(circuit.reference)
        if circuit.network.sinks:
            low, high = self.level["c"], self.level["vload"]
            plan.parts.append(("load", (0.0, high), (0.0, low)))
            plan.labels.append(Label(("load",), BESIDE + 0.2, 0.5 * (low + high), "right"))
            self._join(self.same["vload"], (0.0, high), -1)
            self._join("c", (0.0, low), 1)

    def _reference(self, reference: Mapping[str, Any]) -> None:
        """The elements in series, in the column of what they hold up."""
        plan, same = self.plan, self.same
        upper = same["m"]
        above = [p for p, _ in self.joints.get(upper, ())]
        x = min((p[0] for p in above if p[0] < 0.0), default=-COLUMN)
        count = reference["number"]
        high, low = self.level[upper] - (PITCH if upper == "m" else 0.0), self.level[same["0"]]
        words = {"diode": "D", "led": "LED", "zener": "D"}[reference["kind"]]
        for k in range(count):
            top = high - k * (high - low) / count
            bottom = high - (k + 1) * (high - low) / count
            plan.parts.append((reference["kind"], (x, top), (x, bottom)))
            name = self.circuit.designators.get("ref", words) + (str(k + 1) if count > 1 or words == "D" else "")
            # The voltage of a diode is that of the transistor's own law.
            volts = () if reference["kind"] == "diode" else (figure(reference["voltage"][1] / count, "voltage"),)
            plan.labels.append(Label((name, *volts), x - BESIDE - 0.1, 0.5 * (top + bottom), "left"))
        self._join(upper, (x, high), -1)
        self._join(same["0"], (x, low), 1)

    def _join(self, node: str, point: Point, way: int) -> None:
        self.joints.setdefault(node, []).append((point, way))

    def _between(self, point: Point) -> None:
        """0 V between two supplies: a symbol of its own at each part, or a terminal where something else is 0 V."""
        aside = (point[0] - 0.7, point[1])
        lines = self.circuit.rail("0")
        if lines == ("0 V",):
            # The symbol hangs down in the mirror image too.
            here = aside if self.circuit.pnp else point
            self.plan.grounds.append(here)
        else:
            here = aside
            self.plan.terminals.append(here)
            self.plan.labels.append(Label(lines, here[0] - GAP, here[1], "left"))
        self.plan.wires.append((point, here))

    def _transistor(self) -> None:
        """The transistor and the wires at its pins."""
        same, y = self.same, self.level[self.same["b"]]
        self.plan.transistor = (0.0, y)
        self.plan.labels.append(Label(self.circuit.transistor(), GAP + 0.05, y, "right"))
        self._join(same["c"], (0.0, y + HEIGHT), -1)
        self._join(same["e"], (0.0, y - HEIGHT), 1)
        self._join(same["b"], (-WIDTH, y), 0)

    def _nodes(self) -> None:
        """Wires that join what meets in a node of the transistor, and its voltage."""
        for node in ("m", "b", "c", "e"):
            if self.same[node] != node or node not in self.joints:
                continue
            y = self.level[node]
            xs = self._bus(node, y)
            to_right = max(xs) > 0.0
            if node in ("b", "m"):
                self.plan.labels.append(Label(self.circuit.node(node), min(xs) - GAP, y, "left"))
            elif not (node == "c" and self.circuit.network.sinks):
                lines = self.circuit.node(node)
                # A wire to the right leaves room only on the side away from the transistor.
                away = (1.0 if node == "c" else -1.0) * (0.5 * PITCH * len(lines) + GAP / 2) if to_right else 0.0
                self.plan.labels.append(Label(lines, GAP, y + away, "right"))

    def _bus(self, node: str, y: float) -> list[float]:
        """Wire along a node, with a dot wherever three branches meet; where its branches are."""
        joints = self.joints[node]
        xs = sorted({point[0] for point, _ in joints})
        for one, two in itertools.pairwise(xs):
            self.plan.wires.append(((one, y), (two, y)))
        for (x, there), _ in joints:
            if there != y:
                self.plan.wires.append(((x, there), (x, y)))
        for x in xs:
            branches = sum(1 for point, way in joints if point[0] == x and (way or node == "b"))
            branches += (x > xs[0]) + (x < xs[-1])
            if branches > 2:
                self.plan.dots.append((x, y))
        return xs

    def _rails(self) -> None:
        """Rails as lines at the top and at the bottom, each with a terminal, its voltage, and the symbol of 0 V."""
        rails = [node for node in self.joints if node in ("0", "vee", *TOP)]
        used: dict[float, list[tuple[float, float]]] = {}
        for node in sorted(rails, key=lambda node: -max(p[0] for p, _ in self.joints[node])):
            y, xs = self.level[node], [p[0] for p, _ in self.joints[node]]
            side: Side = "right" if max(xs) >= 0.0 else "left"
            # Two rails of one side would lie on each other where their parts stand in turn.
            while any(min(xs) <= right and left <= max(xs) for left, right in used.get(y, ())):
                y += (1.0 if node in TOP else -1.0) * (2 * PITCH + GAP)
            used.setdefault(y, []).append((min(xs), max(xs)))
            self._bus(node, y)
            start = max(xs) if side == "right" else min(xs)
            end = start + (STUB if side == "right" else -STUB)
            self.plan.wires.append(((start, y), (end, y)))
            self.plan.terminals.append((end, y))
            lines = self.circuit.rail(node)
            self.plan.labels.append(Label(lines, end + (GAP if side == "right" else -GAP), y, side))
            is_low = (node in TOP) == self.circuit.pnp
            branches = sum(p[0] == start for p, _ in self.joints[node]) + (len(set(xs)) > 1) + 1
            if lines == ("0 V",) and is_low:
                self.plan.grounds.append((start, y))
                branches += 1
            if branches > 2 and (start, y) not in self.plan.dots:
                self.plan.dots.append((start, y))


# --- How it looks -------------------------------------------------------------------------------------------------


def _sheet(plan: Plan, pnp: bool, zigzag: bool, color: str, font: str) -> schemdraw.Drawing:
    """The plan as a drawing of the library."""
    import schemdraw
    from schemdraw import elements as elm
    from schemdraw.segments import Segment, SegmentText
    from schemdraw.types import BBox

    class Sheet(schemdraw.Drawing):
        def get_bbox(self) -> BBox:
            # Texts are measured here as they are set, where the library can only estimate them.
            return BBox(*plan.box)

    sheet = Sheet(show=False, canvas="svg")
    sheet.config(color=color, font=font, fontsize=FONT_SIZE, lw=1.4, margin=0.0, inches_per_unit=POINTS / 72.0)
    for start, end in plan.wires:
        if start != end:
            sheet.add(elm.Line().at(start).to(end))
    resistor = elm.ResistorIEEE if zigzag else elm.ResistorIEC
    symbols: dict[str, type[elm.Element2Term]] = {"diode": elm.Diode, "led": elm.LED, "zener": elm.Zener}
    for kind, upper, lower in plan.parts:
        if kind == "resistor":
            sheet.add(resistor().at(upper).to(lower))
        elif kind == "load":
            x, middle, half = upper[0], 0.5 * (upper[1] + lower[1]), 0.7
            up = 1.0 if upper[1] > lower[1] else -1.0
            sheet.add(elm.Line().at(upper).to((x, middle + up * half)))
            sheet.add(elm.Line().at((x, middle - up * half)).to(lower))
            box = elm.Element()
            box.segments.append(Segment([(dx, dy) for dx, dy in _corners(0.45, half)], ls="--"))
            sheet.add(box.at((x, middle)).right())
        else:
            # A Zener diode carries its current backwards, and every current of a PNP stage runs from its lower node up.
            start, end = (upper, lower) if (kind == "zener") == pnp else (lower, upper)
            sheet.add(symbols[kind]().at(start).to(end))
    x, y = plan.transistor
    device = elm.BjtPnp() if pnp else elm.BjtNpn()
    sheet.add(device.anchor("center").at((x, y)).right())
    for point in plan.dots:
        sheet.add(elm.Dot(radius=0.07).at(point))
    for point in plan.terminals:
        sheet.add(elm.Dot(radius=0.09, open=True).at(point))
    for point in plan.grounds:
        sheet.add(elm.Ground().at(point))
    for label in plan.labels:
        for k, line in enumerate(label.lines):
            middle = label.y + PITCH * (0.5 * (len(label.lines) - 1) - k)
            text = elm.Element()
            # A capital is 0.73 of the size high; half of it below the middle is the base line.
            place_of = (label.x, middle - 0.365 * FONT_SIZE / POINTS)
            across: Side = "left" if label.side == "right" else "right"
            text.segments.append(SegmentText(place_of, line, align=(across, "base"), fontsize=FONT_SIZE, font=font))
            sheet.add(text.at((0.0, 0.0)).right())
    return sheet


def _corners(width: float, height: float) -> Sequence[Point]:
    """A closed rectangle around 0."""
    return [(-width, -height), (width, -height), (width, height), (-width, height), (-width, -height)]
