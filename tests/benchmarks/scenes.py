"""Truth pictures shared by the benchmarks: textures by formula, photographed after a motion."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.correlation import (
    Grid,
    Match,
    Prefilter,
    Reference,
    Settings,
    lay_grid,
    prepare_reference,
    spline_image,
)
from dic.correlation.filters import noise_gains
from dic.correlation.matching import match_frame, residual_gain
from dic.correlation.noise import probe_noise
from synthetic_images import Camera, Cosines, Dots, rigid

#: Smooth: random-phase cosines, feature 4 px ("speckle 5 px").  Sharp: discs, edges blurred by 0.5 px.
TEXTURES: dict[str, Callable[[], Any]] = {
    "smooth": lambda: Cosines(4.0, seed=11),
    "sharp": lambda: Dots(4.0, area=(2600, 2600), seed=11),
    "sharp 5 px": lambda: Dots(5.0, area=(2600, 2600), seed=11),
    "small": lambda: Dots(3.0, area=(2600, 2600), seed=11),
}
NOISE = 0.01
#: Noise of one 8-bit frame with 1 % of full scale, rounding included, grey levels.
SIGMA = float(np.hypot(0.01 * 255, 1 / np.sqrt(12)))


@cache
def texture(kind: str) -> Any:
    return TEXTURES[kind]()


def clean(kind: str, motion: Any, shape: tuple[int, int]) -> NDArray[np.float64]:
    """Return noise-free grey values, not rounded, on the 8-bit scale."""
    camera = Camera(bits=8)
    from synthetic_images.camera import picture

    source = texture(kind)
    return camera.grey(picture(lambda x, y: source(*motion.inverse(x, y)), shape))


def noisy(
    image: NDArray[np.float64], seed: int, noise: float = NOISE, *, mirrored: bool = False
) -> NDArray[np.uint8]:
    """Return a frame with camera noise, rounded to 8 bits; `mirrored` gives the same noise negated."""
    draw = np.random.default_rng(seed).standard_normal(image.shape, dtype=np.float32)
    draw = -draw if mirrored else draw
    return np.clip(np.rint(image + 255 * noise * draw), 0, 255).astype(np.uint8)


def grid_on(shape: tuple[int, int], subset: int = 31, step: int = 10, margin: int = 24) -> Grid:
    mask = np.zeros(shape, bool)
    mask[margin:-margin, margin:-margin] = True
    inner = lay_grid(mask, subset, step)
    return Grid(inner.columns[1:-1], inner.rows[1:-1], inner.inside[1:-1, 1:-1], inner.subset, inner.step)


def reference_of(image: NDArray[Any], grid: Grid, settings: Settings, frames: int = 1) -> Reference:
    return prepare_reference(image, grid.x, grid.y, subset=grid.subset, settings=settings, frames=frames)


def matched(reference: Reference, image: NDArray[Any], start: NDArray[np.float64]) -> Match:
    """Match a whole picture and state its noise as tracking does."""
    settings = reference.settings
    spline = spline_image(image, settings.kind, settings.smoothing)
    match = match_frame(reference, spline, start)
    return match.with_noise(
        probe_noise(reference).felt(reference, spline, match.parameters, residual_gain(reference))
    )


def moved(reference: Reference, motion: Any) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the true displacements of the subset centres."""
    x, y = reference.x.astype(float), reference.y.astype(float)
    to_x, to_y = motion(x, y)
    return to_x - x, to_y - y


def start_at(reference: Reference, motion: Any) -> NDArray[np.float64]:
    """Return starting values that are right to 0.05 px, as prediction gives them."""
    n = len(reference.settings.shape)
    start = np.zeros((len(reference.x), 2 * n))
    start[:, 0], start[:, n] = moved(reference, motion)
    start[:, [0, n]] += np.random.default_rng(0).uniform(-0.05, 0.05, (len(start), 2))
    h = 1.0
    x, y = reference.x.astype(float), reference.y.astype(float)
    here = np.array(motion(x, y))
    for column, (dx, dy) in ((1, (h, 0.0)), (2, (0.0, h))):
        slope = np.array(motion(x + dx, y + dy)) - here - np.array([[dx], [dy]])
        start[:, column], start[:, n + column] = slope
    return start


__all__ = [
    "NOISE", "SIGMA", "Prefilter", "Settings", "clean", "grid_on", "matched", "moved", "noise_gains", "noisy",
    "reference_of", "rigid", "start_at", "texture",
]  # fmt: skip
