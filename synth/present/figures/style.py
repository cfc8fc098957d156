"""How every figure looks: colours that the colour-blind tell apart, prefixes on axes, keys that cover nothing.

The colours are those of a published set for all kinds of colour vision; what they tell apart, a hatch, dash or marker tells
apart too, so that a print in black and white says as much.

References
----------
M. Okabe and K. Ito, Color universal design: how to make figures and presentations that are friendly to colorblind people,
2002, revised 2008.
"""

from __future__ import annotations

import io
import math
from collections.abc import Sequence
from functools import cache
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    from contextlib import AbstractContextManager

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

BLUE, RED, GREEN, ORANGE, GREY = "#0072B2", "#D55E00", "#009E73", "#E69F00", "#7A7A7A"
FONT_SIZE = 8.5
WIDTH = 6.4
"""Of a figure of one column [inch]."""
DPI = 200.0
PREFIXES = {-12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}
STYLE: dict[str, Any] = {
    "font.family": ["DejaVu Sans"],
    "font.size": FONT_SIZE,
    "axes.titlesize": FONT_SIZE + 0.5,
    "axes.titlelocation": "left",
    "axes.labelsize": FONT_SIZE,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "axes.grid": True,
    "grid.color": "#DDDDDD",
    "grid.linewidth": 0.6,
    "xtick.labelsize": FONT_SIZE - 0.5,
    "ytick.labelsize": FONT_SIZE - 0.5,
    "legend.fontsize": FONT_SIZE - 0.5,
    "legend.frameon": False,
    "hatch.linewidth": 0.6,
    "lines.linewidth": 1.6,
    "figure.facecolor": "white",
    "savefig.facecolor": "white",
    "svg.fonttype": "none",
    "svg.hashsalt": "restpoint",
}


def styled() -> AbstractContextManager[None]:
    """The style of the figures, for as long as a ``with`` block lasts.

    Returns
    -------
    context manager
        The settings of before come back after it.
    """
    import matplotlib.style

    return matplotlib.style.context(["default", STYLE])


def sheet(width: float = WIDTH, height: float = 4.2) -> Figure:
    """An empty figure that no window shows.

    Parameters
    ----------
    width, height : float
        Of the figure [inch].

    Returns
    -------
    Figure
        With a layout that makes room for its texts.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width, height), layout="constrained")
    FigureCanvasAgg(figure)
    return figure


def saved(figure: Figure, form: Literal["svg", "png"]) -> bytes:
    """A figure as a file, the same bytes for the same content.

    Parameters
    ----------
    figure : Figure
        Any figure.
    form : {"svg", "png"}
        Which form.

    Returns
    -------
    bytes
        The file.
    """
    out = io.BytesIO()
    with styled():
        nameless = {"Date": None, "Creator": None} if form == "svg" else {"Software": None}
        figure.savefig(out, format=form, dpi=DPI, metadata=nameless)
    return out.getvalue()


@cache
def width_of(text: str, size: float = FONT_SIZE) -> float:
    """Width of a line of text.

    Parameters
    ----------
    text : str
        One line.
    size : float
        Of the font [pt].

    Returns
    -------
    float
        Its width [pt].
    """
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import text_to_path

    font = FontProperties(family=["DejaVu Sans"], size=size)
    return float(text_to_path.get_text_width_height_descent(text, font, ismath=False)[0])


def engineering(
    ax: Axes, side: Literal["x", "y"], low: float, high: float, name: str, unit: str, most: int = 6, zero: float = 0.0
) -> None:
    """Limits, ticks and label of an axis, with one SI prefix for all of it.

    Parameters
    ----------
    ax : Axes
        Whose axis.
    side : {"x", "y"}
        Which one.
    low, high : float
        Its limits, SI [-].
    name, unit : str
        What it shows, and the unit without prefix; ``%`` counts hundredths.
    most : int
        Most ticks [-].
    zero : float
        What the unit counts from, SI [-].
    """
    from matplotlib.ticker import MaxNLocator

    if not high > low:
        low, high = low - 0.5 * (abs(low) or 1.0), high + 0.5 * (abs(high) or 1.0)
    largest = max(abs(low - zero), abs(high - zero))
    exponent = min(max(3 * math.floor(math.log10(largest) / 3.0 + 1e-9), -12), 9)
    if unit in ("%", "", "°C"):
        scale, shown = (0.01 if unit == "%" else 1.0), unit
    else:
        scale, shown = 10.0**exponent, PREFIXES[exponent] + unit
    places = MaxNLocator(nbins=most, steps=[1, 2, 2.5, 5, 10]).tick_values((low - zero) / scale, (high - zero) / scale)
    step = float(places[1] - places[0])
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    decimals += not math.isclose(round(step, decimals), step, rel_tol=1e-6)
    inside = [float(x) for x in places if low - zero <= x * scale * (1.0 + 1e-12 * math.copysign(1.0, x)) <= high - zero]
    texts = [f"{x:.{decimals}f}".replace("-", "−") for x in inside]
    if side == "x":
        ax.set_xlim(low, high)
        ax.set_xticks([x * scale + zero for x in inside], texts)
        ax.set_xlabel(f"{name} [{shown}]" if shown else name)
    else:
        ax.set_ylim(low, high)
        ax.set_yticks([x * scale + zero for x in inside], texts)
        ax.set_ylabel(f"{name} [{shown}]" if shown else name)


def key(ax: Axes, handles: Sequence[Artist]) -> None:
    """A key above the axes, in as many columns as there is room for.

    Parameters
    ----------
    ax : Axes
        Whose key.
    handles : sequence of Artist
        What it explains, each with its label.
    """
    figure = ax.get_figure(root=True)
    assert figure is not None
    # A sample and its distance take about 40 points beside the text.
    widest = max(width_of(str(h.get_label()), FONT_SIZE - 0.5) for h in handles) + 40.0
    room = figure.get_size_inches()[0] * 72.0 * ax.get_position().width / 0.775 * 0.86
    columns = max(1, min(len(handles), int(room // widest)))
    ax.legend(
        handles=list(handles), loc="lower left", bbox_to_anchor=(0.0, 1.01), ncols=columns, borderaxespad=0.0, columnspacing=1.2
    )
