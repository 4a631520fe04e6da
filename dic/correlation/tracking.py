"""Tracking in time: each frame starts where the last ones say the subsets will be."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import numpy as np
from numpy.typing import NDArray

from dic.correlation.flags import Flag
from dic.correlation.matching import Match, match_frame
from dic.correlation.reference import Reference
from dic.correlation.seeding import whole_pixel_shift
from dic.correlation.splines import smooth, spline_image

Floats = NDArray[np.float64]

#: Below this share of converged subsets the prediction is not trusted and the frame is seeded anew.
LEAST_SHARE = 0.5


def track(frames: Iterable[NDArray[np.generic]], reference: Reference) -> Iterator[Match]:
    """Match frame after frame, each predicted from the two before it.

    Parameters
    ----------
    frames
        Grey values, shape (rows, columns) each, of the reference's size.
    reference
        The prepared reference.

    Yields
    ------
    Match
        One per frame, in order.  A frame in which all is lost does not harm the next one, which is
        predicted from the last good frames or, failing that, seeded anew.
    """
    last: Floats | None = None
    pace = np.zeros((len(reference.x), 6))
    for frame in frames:
        match = _match_next(reference, frame, last, pace)
        if match.converged.any():
            now = _completed(match, reference)
            pace = now - last if last is not None else pace
            last = now
        else:
            pace = np.zeros_like(pace)
        yield match


def _match_next(reference: Reference, frame: NDArray[np.generic], last: Floats | None, pace: Floats) -> Match:
    smoothed = smooth(frame, reference.smoothing)
    spline = spline_image(smoothed)
    best: Match | None = None
    if last is not None:
        best = match_frame(reference, spline, last + pace)
        if _share(best, reference) < LEAST_SHARE:
            # A jump: the coupon may have stopped or slipped since the last frame.
            best = _better(best, match_frame(reference, spline, last))
    if best is None or _share(best, reference) < LEAST_SHARE:
        start = np.zeros((len(reference.x), 6))
        start[:, [0, 3]] = whole_pixel_shift(reference.grey, smoothed, reference.grid)
        seeded = match_frame(reference, spline, start)
        best = seeded if best is None else _better(best, seeded)
    lost = reference.usable & ~best.converged
    if lost.any() and best.converged.sum() >= 3:
        start = np.where(lost[:, None], _completed(best, reference), np.nan)
        best = best.filled_from(match_frame(reference, spline, start))
    return best


def _share(match: Match, reference: Reference) -> float:
    return float(match.converged.sum() / max(int(reference.usable.sum()), 1))


def _better(one: Match, other: Match) -> Match:
    return other if other.converged.sum() > one.converged.sum() else one


def _completed(match: Match, reference: Reference) -> Floats:
    """Fill lost subsets' parameters from a plane through the others: starting values, never results."""
    good = match.flag == Flag.CONVERGED
    filled = match.parameters.copy()
    if good.all():
        return filled
    x, y = reference.x.astype(float), reference.y.astype(float)
    basis = np.column_stack([np.ones(len(x)), x - x.mean(), y - y.mean()])
    plane, *_ = np.linalg.lstsq(basis[good], match.parameters[good][:, [0, 3]], rcond=None)
    filled[~good] = np.median(match.parameters[good], axis=0)
    filled[np.ix_(~good, [0, 3])] = basis[~good] @ plane
    return filled
