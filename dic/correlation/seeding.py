"""Where the coupon went between two pictures, from nothing known.

Both pictures are looked at coarsely; a patch of the first, turned and scaled in steps, is looked for
in the second.  The best place gives a few subsets a start within a few px, which matching on strongly
smoothed pictures then mends.
"""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.correlation.splines import Image

Floats = NDArray[np.float64]

#: Longer side of the coarse pictures, px: speckles blur but their clusters remain.
COARSE_PX = 400
#: Side of a patch in the coarse picture: a rotation half a step off moves its rim by half a pixel.
PATCH_PX = 49
TURNS_DEG = np.arange(-10.0, 10.1, 2.5)
SCALES = np.arange(0.90, 1.101, 0.05)
#: Score from which the plain patch, neither turned nor scaled, settles the matter.
PLAIN_SCORE = 0.8


@dataclass(frozen=True)
class Found:
    """A patch found again.

    Attributes
    ----------
    place
        x and y of its centre in the reference, px.
    shift
        Where it went, px.
    gradient
        Turn and scale as a displacement gradient, shape (2, 2).
    score
        Normalised cross-correlation of the coarse pictures.
    """

    place: Floats
    shift: Floats
    gradient: Floats
    score: float


def find_again(reference: Image, frame: Image, x: NDArray[np.int64], y: NDArray[np.int64]) -> Found:
    """Look for patches of the reference in a frame.

    Parameters
    ----------
    reference, frame
        Pictures of one size, shape (rows, columns).
    x, y
        Centres of the subsets; patches lie among them: in their middle, and towards the four sides,
        so that one stays in view when the others leave it.

    Returns
    -------
    Found
        The best of all patches, turns (±10°) and scales (±10 %).

    Notes
    -----
    Plain normalised cross-correlation (whitened phase correlation is biased on small windows); it is
    good to about one coarse pixel, and all sub-pixel work is left to the matching.
    """
    factor = max(1, round(max(reference.shape) / COARSE_PX))
    coarse, look = _coarse(reference, factor), _coarse(frame, factor)
    side = min(PATCH_PX, *(2 * (edge // 6) + 1 for edge in coarse.shape))
    places = [_inward(place, reference.shape, side * factor / 2) for place in _places(x, y)]
    plain = [_look(coarse, look, place, factor, side, 0.0, 1.0) for place in places]
    best = max(plain, key=lambda found: found.score)
    if best.score >= PLAIN_SCORE:
        return best
    turned = [
        _look(coarse, look, place, factor, side, turn, scale)
        for place in places
        for turn in TURNS_DEG
        for scale in SCALES
    ]
    return max([best, *turned], key=lambda found: found.score)


def _places(x: NDArray[np.int64], y: NDArray[np.int64]) -> list[Floats]:
    """Return the middle of the subsets and points half way to each side, each moved onto a subset."""
    low, middle, high = (np.percentile(np.stack([x, y], axis=1), q, axis=0) for q in (20, 50, 80))
    wanted = [(middle[0], middle[1]), *((a, b) for a in (low[0], high[0]) for b in (low[1], high[1]))]
    nearest = [int(np.argmin((x - a) ** 2 + (y - b) ** 2)) for a, b in wanted]
    return [np.array([float(x[i]), float(y[i])]) for i in nearest]


def _inward(place: Floats, shape: tuple[int, ...], half: float) -> Floats:
    """Move a place so far from the picture's rim that the patch around it is whole."""
    most = np.array([shape[1] - 1 - half, shape[0] - 1 - half])
    return np.clip(place, np.minimum(half, most), np.maximum(half, most))


def _coarse(image: Image, factor: int) -> Image:
    rows, columns = (edge // factor for edge in image.shape)
    blocks = image[: rows * factor, : columns * factor].reshape(rows, factor, columns, factor)
    return np.ascontiguousarray(blocks.mean(axis=(1, 3), dtype=np.float32))


def _look(
    coarse: Image, look: Image, place: Floats, factor: int, side: int, turn_deg: float, scale: float
) -> Found:
    c, s = scale * np.cos(np.radians(turn_deg)), scale * np.sin(np.radians(turn_deg))
    forward = np.array([[c, -s], [s, c]])
    back = np.linalg.inv(forward)
    offset = np.arange(side) - side // 2
    dx, dy = np.meshgrid(offset, offset)
    centre = (place + 0.5) / factor - 0.5  # a coarse pixel's centre lies amid its block
    where = [
        centre[1] + back[1, 0] * dx + back[1, 1] * dy,
        centre[0] + back[0, 0] * dx + back[0, 1] * dy,
    ]
    patch = ndimage.map_coordinates(coarse, where, order=1, mode="nearest").astype(np.float32)
    score = cv2.matchTemplate(look, patch, cv2.TM_CCOEFF_NORMED)
    row, column = np.unravel_index(int(np.argmax(score)), score.shape)
    shift = (np.array([column, row]) + side // 2 - centre) * factor
    return Found(place, shift, forward - np.eye(2), float(score[row, column]))
