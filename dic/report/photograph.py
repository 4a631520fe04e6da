"""The photograph of the coupon as a ground for maps and outlines, and the colours laid over it."""

from __future__ import annotations

from functools import cache
from math import floor, isfinite, log10
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.colorbar import Colorbar
from matplotlib.colors import Colormap, ListedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Polygon
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from dic.measurement import Scene
from dic.report.figures import TRANSVERSE, WIDTH, Floats, sheet

if TYPE_CHECKING:
    import xarray as xr

#: Left, right, top and bottom of a part of the photograph, px.
View = tuple[float, float, float, float]

#: Pixels of the photograph that a printed panel can show across.
_MOST_PIXELS = 900


def whole_photograph(scene: Scene, fade: float) -> tuple[Figure, Axes]:
    """Return a figure that shows the whole photograph."""
    rows, columns = scene.photograph.shape
    figure, (axes,) = sheet(height=float(np.clip(WIDTH * rows / columns, 2.2, 5.4)) + 0.5)
    _photograph_on(axes, scene, (0, columns, 0, rows), fade)
    return figure, axes


def panels_over(scene: Scene, view: View, count: int) -> tuple[Figure, list[Axes]]:
    """Return a figure with panels that show one part of the photograph, side by side if it is tall."""
    left, right, top, bottom = view
    ratio = (bottom - top) / (right - left)
    if ratio > 1:
        figure, panels = sheet(1, count, height=float(np.clip(WIDTH / count * ratio + 0.9, 2.4, 6.0)))
    else:
        height = float(np.clip(count * (WIDTH * ratio + 0.45), count, 7.5))
        figure, panels = sheet(count, 1, height=height)
    for axes in panels:
        _photograph_on(axes, scene, view, fade=0.55)
    return figure, panels


def lay_over(
    axes: Axes,
    values: Floats,
    extent: tuple[float, float, float, float],
    span: tuple[float, float],
    colours: Colormap | str = "cividis",
) -> None:
    """Lay a map over the photograph in `axes`, its colours from the one end of `span` to the other."""
    low, high = of_some_width(*span)
    picture = axes.imshow(
        values, extent=extent, cmap=colours, vmin=low, vmax=high, interpolation="nearest", alpha=0.9
    )
    (left, right), (bottom, top) = axes.get_xlim(), axes.get_ylim()
    colour_bar(axes, picture, tall=bottom - top > right - left)


def middle_of(values: Floats) -> tuple[float, float]:
    """Return the ends of the middle 98 % of the values."""
    low, high = np.nanpercentile(values, [1, 99])
    return float(low), float(high)


def of_some_width(low: float, high: float) -> tuple[float, float]:
    """Return a span of colours, widened where a field without any variation gives it none."""
    margin = 0.0 if high > low else max(abs(high) * 1e-3, 1e-6)
    return low - margin, high + margin


def colour_bar(axes: Axes, picture: ScalarMappable, *, tall: bool) -> Colorbar:
    """Put the colours' scale below a tall panel or beside a wide one, and return it."""
    bar = axes.figure.colorbar(
        picture,
        ax=axes,
        location="bottom" if tall else "right",
        extend="both",
        fraction=0.05,
        pad=0.02,
        aspect=14,
    )
    bar.locator = MaxNLocator(nbins=2 if tall else 4)
    bar.ax.tick_params(labelsize=7)
    bar.update_ticks()
    return bar


@cache
def zero_colours() -> Colormap:
    """Return a colour map from blue over near-white to brown, even on both sides of the middle.

    Straight lines in CIELAB make equal steps of value equal steps to the eye, and the two ends differ
    for colour-blind people as well.
    """
    from skimage.color import lab2rgb

    side = np.linspace(1.0, 0.0, 128)[:, np.newaxis]
    middle, blue, brown = (
        np.array([95.0, 0.0, 0.0]),
        np.array([35.0, 0.0, -36.0]),
        np.array([35.0, 20.0, 38.0]),
    )
    halves = [middle + side * (blue - middle), (middle + side * (brown - middle))[::-1]]
    return ListedColormap(np.clip(lab2rgb(np.concatenate(halves)), 0.0, 1.0), name="about_zero")


def map_extent(field: xr.Dataset) -> tuple[float, float, float, float]:
    """Return left, right, bottom and top of one frame's map, px."""
    return extent_of(field["x"].values, field["y"].values, float(field.attrs["step_px"]))


def extent_of(
    x: NDArray[np.float64], y: NDArray[np.float64], step_px: float
) -> tuple[float, float, float, float]:
    """Return left, right, bottom and top of a map, px: half a step beyond the outer subset centres."""
    half = 0.5 * step_px
    return float(x.min()) - half, float(x.max()) + half, float(y.max()) + half, float(y.min()) - half


def view_of(field: xr.Dataset, scene: Scene) -> View:
    """Return left, right, top and bottom of the part of the photograph that is shown, px."""
    left, right, bottom, top = map_extent(field)
    border = 0.12 * min(right - left, bottom - top)
    rows, columns = scene.photograph.shape
    return (
        max(left - border, 0),
        min(right + border, columns),
        max(top - border, 0),
        min(bottom + border, rows),
    )


def _photograph_on(axes: Axes, scene: Scene, view: View, fade: float) -> None:
    """Show the photograph, lightened by `fade` so that what lies on it stands out."""
    left, right, top, bottom = view
    stride = max(1, round(max(right - left, bottom - top) / _MOST_PIXELS))
    grey = scene.photograph[::stride, ::stride] / 255.0
    rows, columns = scene.photograph.shape
    axes.imshow(
        fade + (1.0 - fade) * grey,
        extent=(-0.5, columns - 0.5, rows - 0.5, -0.5),
        cmap="gray",
        vmin=0.0,
        vmax=1.0,
    )
    axes.set(xlim=(left, right), ylim=(bottom, top), xticks=[], yticks=[], aspect="equal", autoscale_on=False)
    axes.grid(visible=False)
    axes.spines[:].set_visible(False)


def outline(scene: Scene, lw: float, label: str = "") -> Polygon:
    """Return the outline of the gauge region."""
    return Polygon(scene.region, closed=True, fill=False, ec=TRANSVERSE, lw=lw, label=label)


def scale_bar(axes: Axes, scene: Scene) -> None:
    """Draw a bar of a round number of millimetres, where the scale is known."""
    if not (isfinite(scene.scale_mm) and scene.scale_mm > 0):
        return
    (left, right), (bottom, top) = axes.get_xlim(), axes.get_ylim()
    length = _round_length(0.4 * (right - left) * scene.scale_mm)
    start, level = left + 0.06 * (right - left), bottom - 0.03 * (bottom - top)
    axes.plot(
        [start, start + length / scene.scale_mm], [level, level], color="black", lw=2.5, solid_capstyle="butt"
    )
    text = axes.annotate(
        f"{length:g} mm", (start, level), xytext=(1, 5), textcoords="offset points", fontsize=7
    )
    text.set_bbox({"boxstyle": "square,pad=0.15", "fc": "white", "ec": "none", "alpha": 0.8})


def _round_length(length: float) -> float:
    """Return the largest of 1, 2, 5, 10, ... that is not longer."""
    power = 10.0 ** floor(log10(length))
    # Just below a power of ten the logarithm rounds up, and that power is the answer as nearly as can be.
    return max((step * power for step in (1.0, 2.0, 5.0) if step * power <= length), default=power)
