"""What every figure of the report shares: its look, its words and how it becomes a file."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from io import BytesIO
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from numpy.typing import NDArray

from dic.quantities import factor

Floats = NDArray[np.float64]

#: One column of the page, in; drawn narrow, so that the lettering can be read on a phone as well.
WIDTH = 4.8

# Dark blue and burnt orange differ in lightness too, and line styles differ besides.
AXIAL, TRANSVERSE, AID, FAINT = "#14506e", "#b8560f", "#3c3c3c", "#9a9a94"

_STYLE: Any = {
    "image.composite_image": False,  # compositing would resample every photograph twice
    "font.family": "DejaVu Sans",  # comes with matplotlib: the same drawing on every machine
    "font.size": 9,
    "text.color": "#222222",
    "text.usetex": False,
    "text.parse_math": False,  # a "$" in a label is a dollar, not a formula
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": "#6b6b66",
    "axes.linewidth": 0.8,
    "axes.grid": True,
    "axes.axisbelow": True,
    "grid.color": "#e4e2dc",
    "grid.linewidth": 0.6,
    "xtick.color": "#4a4a46",
    "ytick.color": "#4a4a46",
    "legend.frameon": False,
    "legend.fontsize": 8,
    "svg.fonttype": "path",
    "svg.hashsalt": "tauten",  # element names by content, not at random: the same input, the same bytes
}

#: Sharp on paper at this width, and on a phone's screen.
_DPI = 150

#: Photographs hardly shrink under the slower compression.
_QUICK = {"compress_level": 3}

#: Foot of each figure that is kept for the coupon's label, in.
_STRIP = 0.16

#: More points than this cannot be told apart on paper.
_MOST_POINTS = 3000


@dataclass(frozen=True)
class Drawing:
    """A figure with the words that go with it.

    Attributes
    ----------
    name
        Stem of its files and its anchor in the page.
    title
        Heading.
    reading
        What to read off it, in plain words.
    alt
        What it shows, for those who cannot see it.
    figure
        The figure itself.
    vector
        Whether the page carries it as SVG (curves) or PNG (pictures).
    """

    name: str
    title: str
    reading: str
    alt: str
    figure: Figure
    vector: bool = True


@contextmanager
def house_style() -> Iterator[None]:
    """Draw and save in the report's look, and leave matplotlib's settings as they were."""
    with mpl.rc_context(_STYLE), warnings.catch_warnings():
        # A label in a script that the font lacks is drawn as boxes; the page itself shows it.
        warnings.filterwarnings("ignore", message=r"Glyph \d+")
        yield


def sheet(rows: int = 1, columns: int = 1, *, height: float) -> tuple[Figure, list[Axes]]:
    """Return an empty figure, one column wide and `height` inches high, and its axes in reading order."""
    strip = _STRIP / height
    figure = Figure(
        figsize=(WIDTH, height), dpi=_DPI, layout=ConstrainedLayoutEngine(rect=(0, strip, 1, 1 - strip))
    )
    axes = figure.subplots(rows, columns, squeeze=False)
    return figure, list(axes.ravel())


def render(drawing: Drawing, label: str) -> dict[str, bytes]:
    """Return the figure's bytes by file ending, ``svg`` and ``png``, marked with the coupon's label."""
    figure = drawing.figure
    shown = printable(label)
    strip = _STRIP / figure.get_figheight()
    figure.text(0.99, 0.2 * strip, shown[:70], ha="right", va="bottom", fontsize=6, color=FAINT)
    # The layout is the costly part and the same for both files.
    if (engine := figure.get_layout_engine()) is not None:
        engine.execute(figure)
    figure.set_layout_engine("none")
    title = f"{drawing.title} - {shown}"
    svg, png = BytesIO(), BytesIO()
    # The canvases' own writers: `savefig` would draw everything once more, only to lay it out.
    FigureCanvasAgg(figure).print_png(png, metadata={"Software": None, "Title": title}, pil_kwargs=_QUICK)
    FigureCanvasSVG(figure).print_svg(svg, metadata={"Date": None, "Creator": None, "Title": title})
    return {"svg": svg.getvalue(), "png": png.getvalue()}


def printable(text: str) -> str:
    """Replace what cannot be printed; control characters would break an SVG."""
    return "".join(character if character.isprintable() else " " for character in text)


def strain_unit(strain: Floats | float) -> tuple[float, str]:
    """Return the factor and the unit that suit strains of this size: µm/m, or % from 0.5 % up."""
    largest = np.max(np.abs(strain), initial=0.0, where=np.isfinite(strain))
    unit = "%" if largest >= 0.005 else "µm/m"
    return 1.0 / factor(unit, "strain"), unit


def thinned(*series: Floats) -> tuple[Floats, ...]:
    """Return equally long series with every n-th point only, where there are too many to draw."""
    stride = -(-len(series[0]) // _MOST_POINTS)
    return tuple(values[:: max(stride, 1)] for values in series)


def legend_above(axes: Axes, columns: int = 2) -> None:
    """Put the legend above the axes, where it can hide no data."""
    axes.legend(
        loc="lower left", bbox_to_anchor=(-0.02, 1.0), ncols=columns, handlelength=2.2, borderaxespad=0.2
    )
