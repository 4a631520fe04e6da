"""Tracking in time: each frame starts where the last ones say the subsets will be.

When the pattern has changed so much that correlation falls, a later frame becomes the reference: a
new *link*.  Displacements are chained back to the first reference, and each link's matching error
stays in the uncertainty.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from dic.correlation.flags import Flag
from dic.correlation.matching import Match, boxes, lost_match, match_frame, residual_gain
from dic.correlation.noise import probe_noise
from dic.correlation.reference import Reference, prepare_reference
from dic.correlation.seeding import find_again
from dic.correlation.splines import Prefilter, SplineImage, smooth

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Frame = NDArray[np.integer | np.floating]

#: Below this share of converged subsets the prediction is not trusted and the frame is seeded anew.
LEAST_SHARE = 0.5
#: A frame becomes the next reference when its median correlation has fallen to this share of the
#: first frames'; low enough that links stay few, high enough that no subset is lost before.
RENEW_BELOW = 0.9
#: Smoothing with which matching starts from several px away: measured capture 100 % from 4 px.
ROUGH_PX = 1.5
#: Measured subsets from which a plane is extrapolated to those that lie apart.
LEAST_FOR_PLANE = 6
#: Subsets matched roughly around the place that seeding found.
SEEDS = 9
#: Subsets that are tried before all others: where a start is wrong, each takes all its iterations.
PROBES = 40
#: ... where they are at the most one in so many, so that they cost little.
LEAST_PER_PROBE = 10


def track(frames: Iterable[Frame | Flag], reference: Reference, neighbours: Ints) -> Iterator[Match]:
    """Match frame after frame, each predicted from the two before it.

    Parameters
    ----------
    frames
        Grey values, shape (rows, columns) each, of the reference's size; for a frame that
        is missing the flag that says why.
    reference
        The prepared reference, n subsets.
    neighbours
        Numbers of each subset's neighbours, −1 for none, shape (n, 8).

    Yields
    ------
    Match
        One per frame, in order, displacements from the reference.  A frame in which all is lost does
        not harm the next one, which is predicted from the last good frames or seeded anew.
    """
    yield from map(Tracker(reference, neighbours).follow, frames)


class Tracker:
    """Follows the subsets of a reference from frame to frame; see `track`."""

    def __init__(self, reference: Reference, neighbours: Ints) -> None:
        self._first = reference
        self._neighbours = neighbours
        self._prefilter = Prefilter(reference.shape, reference.settings.kind, reference.settings.smoothing)
        self._base: Match | None = None  # motion from the first reference to the present one
        self._links = 0
        self._begin(reference, None)

    def _begin(self, reference: Reference, start: Floats | None) -> None:
        """Take up a reference; `start` says where its subsets are, None if that is unknown."""
        self._reference, self._probe = reference, probe_noise(reference)
        self._gain = residual_gain(reference)
        self._last, self._pace = start, 0.0 * start if start is not None else None
        self._fresh = np.nan  # correlation that the reference starts with
        self._missed, self._patience = 0, 1

    def follow(self, frame: Frame | Flag) -> Match:
        """Match the next frame; for one that is missing stands the flag that says why."""
        if isinstance(frame, Flag):
            return self._pass_over(frame)
        match, spline = self._match(frame)
        match = match.with_noise(self._probe.felt(self._reference, spline, match.parameters, self._gain))
        if match.converged.any():
            now = completed(match, self._reference, self._neighbours)
            self._pace = now - self._last if self._last is not None else None
            self._last = now
        else:
            self._pace = None
        whole = self._chained(match)
        self._renew(frame, match, whole)
        return whole

    def _pass_over(self, why: Flag) -> Match:
        """Go on over a frame that is missing; the next one is predicted from what the motion was."""
        if self._last is not None and self._pace is not None:
            self._last = self._last + self._pace
        return lost_match(self._first, why, self._links)

    def _match(self, frame: Frame) -> tuple[Match, SplineImage]:
        reference = self._reference
        best: Match | None = None
        if self._last is not None:
            best, spline = self._from(frame, self._last if self._pace is None else self._last + self._pace)
            if share(best, reference) < LEAST_SHARE and self._pace is not None:
                # A jump: the coupon may have stopped or slipped since the last frame.
                again, spline = self._from(frame, self._last)
                best = _better(best, again)
        spline = self._prefilter(frame) if best is None or self._incomplete(best) else spline
        if best is None or share(best, reference) < LEAST_SHARE:
            return self._searched(frame, spline, best), spline
        self._missed, self._patience = 0, 1
        if self._incomplete(best):
            best = grow(reference, spline, best, self._neighbours)
        return best, spline

    def _incomplete(self, match: Match) -> bool:
        """Whether subsets are lost that may still be in the picture."""
        return bool((self._reference.usable & ~match.converged & (match.flag != Flag.OUT_OF_VIEW)).any())

    def _from(self, frame: Frame, start: Floats) -> tuple[Match, SplineImage]:
        spline = self._prefilter(frame, boxes(self._reference, start))
        hopeless = self._probed(spline, start)
        return match_frame(self._reference, spline, start) if hopeless is None else hopeless, spline

    def _probed(self, spline: SplineImage, start: Floats) -> Match | None:
        """Return a match in which all is lost, if that is what a few subsets all over the field find."""
        usable = np.flatnonzero(self._reference.usable)
        if len(usable) < LEAST_PER_PROBE * PROBES:
            return None
        probed = usable[:: len(usable) // PROBES]
        few = np.full_like(start, np.nan)
        few[probed] = start[probed]
        match = match_frame(self._reference, spline, few)
        # Subsets out of view take no time, so that each may as well be flagged as such.
        unseen = (match.flag == Flag.OUT_OF_VIEW).sum()
        return match if not match.converged.any() and 2 * unseen < len(probed) else None

    def _searched(self, frame: Frame, spline: SplineImage, best: Match | None) -> Match:
        """Look for the coupon anew; after each failure twice as many frames pass before the next search."""
        self._missed += 1
        if best is not None and self._missed < self._patience:
            return best
        seeded = seed(self._reference, frame, spline, self._neighbours)
        found = share(seeded, self._reference) >= LEAST_SHARE
        self._missed, self._patience = 0, 1 if found else 2 * self._patience
        return seeded if best is None else _better(best, seeded)

    def _chained(self, match: Match) -> Match:
        if self._base is None:
            return match
        x, y = self._first.x + self._base.u, self._first.y + self._base.v
        return chain(self._base, match, x - self._reference.x, y - self._reference.y, self._links)

    def _renew(self, frame: Frame, match: Match, whole: Match) -> None:
        """Make the frame the reference if correlation has fallen."""
        if share(match, self._reference) < LEAST_SHARE:
            return
        level = float(np.median(match.correlation[match.converged]))
        if not np.isfinite(self._fresh):
            self._fresh = level
        if level >= RENEW_BELOW * self._fresh:
            return
        self._base, self._links = whole, self._links + 1
        start = np.zeros((len(whole.u), 2 * len(self._first.settings.shape)))
        start[~whole.converged] = np.nan
        self._begin(renewed(self._first, frame, self._first.x + whole.u, self._first.y + whole.v), start)


def share(match: Match, reference: Reference) -> float:
    """Return the share of the usable subsets that were measured."""
    return float(match.converged.sum() / max(int(reference.usable.sum()), 1))


def _better(one: Match, other: Match) -> Match:
    return other if other.converged.sum() > one.converged.sum() else one


def seed(reference: Reference, frame: Frame, spline: SplineImage, neighbours: Ints) -> Match:
    """Match a frame about which nothing is known, outwards from a few subsets that were found again.

    Parameters
    ----------
    reference, neighbours
        As for `track`.
    frame, spline
        Grey values and their coefficients, whole.

    Returns
    -------
    Match
        All not converged where the coupon was not found.
    """
    picture = reference.f[: reference.shape[0] * reference.shape[1]].reshape(reference.shape)
    usable = np.flatnonzero(reference.usable)
    size = 2 * len(reference.settings.shape)
    start = np.full((len(reference.x), size), np.nan)
    if len(usable):
        found = find_again(picture, smooth(frame, 0.0), reference.x[usable], reference.y[usable])
        away = (reference.x[usable] - found.place[0]) ** 2 + (reference.y[usable] - found.place[1]) ** 2
        near = usable[np.argsort(away, kind="stable")[:SEEDS]]
        start[near] = _guess(found.shift, found.gradient, found.place, reference, near)
        start = settle(reference, picture, frame, start)
    return grow(reference, spline, match_frame(reference, spline, start), neighbours)


def _guess(shift: Floats, gradient: Floats, place: Floats, reference: Reference, which: Ints) -> Floats:
    size = 2 * len(reference.settings.shape)
    start = np.zeros((len(which), size))
    away = np.stack([reference.x[which], reference.y[which]], axis=1) - place
    for first, row in ((0, 0), (size // 2, 1)):
        start[:, first] = shift[row] + away @ gradient[row]
        start[:, first + 1 : first + 3] = gradient[row]
    return start


def settle(reference: Reference, picture: Frame, frame: Frame, start: Floats) -> Floats:
    """Mend starts that are several px off by matching on strongly smoothed pictures.

    Parameters
    ----------
    reference
        The prepared reference.
    picture
        Its grey values, shape (rows, columns).
    frame
        The frame's, alike.
    start
        Starting parameters, shape (n, p); rows of NaN are left out.

    Returns
    -------
    ndarray
        Better starts, shape (n, p); NaN where the rough matching failed too.
    """
    which = np.flatnonzero(np.isfinite(start).all(axis=1))
    settings = replace(reference.settings, smoothing=ROUGH_PX)
    rough = prepare_reference(
        picture, reference.x[which], reference.y[which], subset=reference.subset, settings=settings
    )
    spline = Prefilter(reference.shape, settings.kind, ROUGH_PX)(frame, boxes(rough, start[which]))
    better = np.full_like(start, np.nan)
    better[which] = match_frame(rough, spline, start[which]).parameters
    return better


def grow(reference: Reference, spline: SplineImage, match: Match, neighbours: Ints) -> Match:
    """Try lost subsets again, each from its best-matched neighbour, until no more are found.

    Reliability-guided order (Pan 2009, doi 10.1364/AO.48.001535), a whole front of subsets at a time.
    Subsets that no front can reach, because they lie apart, start from the plane through all others.
    """
    tried, leapt = np.zeros(len(reference.x), bool), False
    while True:
        lost = reference.usable & ~match.converged & ~tried
        front = np.flatnonzero(lost & _known_beside(match.converged, neighbours))
        start = np.full_like(match.parameters, np.nan)
        if len(front):
            start[front] = _from_neighbours(reference, match, neighbours[front], front)
            tried[front] = True
        elif lost.any() and not leapt and match.converged.sum() >= LEAST_FOR_PLANE:
            leapt, front = True, np.flatnonzero(lost)
            start[front] = _from_plane(reference, match)[front]
        else:
            return match
        again = match_frame(reference, spline, start)
        # A subset that failed may succeed from a neighbour that is found later.
        tried &= ~_known_beside(again.converged, neighbours)
        match = match.filled_from(again)


def _known_beside(known: NDArray[np.bool_], neighbours: Ints) -> NDArray[np.bool_]:
    """Tell which subsets have a neighbour that is known."""
    return np.asarray((known[neighbours] & (neighbours >= 0)).any(axis=1))


def _from_plane(reference: Reference, match: Match) -> Floats:
    """Extrapolate the plane through all measured displacements to every subset."""
    good = match.converged
    x, y = reference.x - reference.x[good].mean(), reference.y - reference.y[good].mean()
    basis = np.column_stack([np.ones(len(x)), x, y])
    start = np.zeros_like(match.parameters)
    for first in (0, start.shape[1] // 2):
        plane = np.linalg.lstsq(basis[good], match.parameters[good, first], rcond=None)[0]
        start[:, first], start[:, first + 1 : first + 3] = basis @ plane, plane[1:]
    return start


def _from_neighbours(reference: Reference, match: Match, around: Ints, which: Ints) -> Floats:
    """Extrapolate the best-matched neighbour's motion to each subset of `which`."""
    score = np.where((around >= 0) & match.converged[around], match.correlation[around], -1.0)
    best = around[np.arange(len(which)), np.argmax(score, axis=1)]
    start = match.parameters[best].copy()
    dx, dy = reference.x[which] - reference.x[best], reference.y[which] - reference.y[best]
    for first in (0, start.shape[1] // 2):
        start[:, first] += start[:, first + 1] * dx + start[:, first + 2] * dy
    return start


def completed(match: Match, reference: Reference, neighbours: Ints) -> Floats:
    """Fill lost subsets' parameters from their neighbours', or from the plane through all others.

    Starting values, never results.
    """
    filled, known = match.parameters.copy(), match.converged.copy()
    if known.all():
        return filled
    if known.sum() >= LEAST_FOR_PLANE:
        filled[~known] = _from_plane(reference, match)[~known]
    while not known.all():
        front = np.flatnonzero(~known & _known_beside(known, neighbours))
        if not len(front):
            break
        flag = np.where(known, Flag.CONVERGED, Flag.NOT_CONVERGED)
        guess = replace(match, parameters=filled, flag=flag, correlation=np.where(known, 1.0, np.nan))
        filled[front] = _from_neighbours(reference, guess, neighbours[front], front)
        known[front] = True
    return filled


def renewed(first: Reference, frame: Frame, x: Floats, y: Floats) -> Reference:
    """Prepare a frame as the next reference, its subsets around the pixels nearest to x and y.

    Subsets that are lost or would reach out of the picture are flagged and stay so.
    """
    rows, columns = first.shape
    half = first.half
    with np.errstate(invalid="ignore"):
        held = (x >= half) & (x <= columns - 1 - half) & (y >= half) & (y <= rows - 1 - half)
    place_x = np.where(held, np.rint(np.where(held, x, 0)), half).astype(np.int64)
    place_y = np.where(held, np.rint(np.where(held, y, 0)), half).astype(np.int64)
    reference = prepare_reference(frame, place_x, place_y, subset=first.subset, settings=first.settings)
    flag = np.where(held, reference.unusable, Flag.OUT_OF_VIEW)
    flag = np.where(np.isfinite(x), flag, Flag.DECORRELATED)
    flag = np.where(first.usable, flag, first.unusable)
    return replace(reference, unusable=flag.astype(np.uint8))


def chain(base: Match, match: Match, dx: Floats, dy: Floats, links: int) -> Match:
    """Join the motion to the present reference with the motion from there.

    Parameters
    ----------
    base
        From the first reference to the present one.
    match
        From the present one, whose subsets sit at whole pixels near the points that `base` leads to.
    dx, dy
        From the present subsets' centres to those points, px, shape (n,).
    links
        How many references there are before the present one.

    Returns
    -------
    Match
        From the first reference; affine parameters; uncertainties added in squares.
    """
    n = match.parameters.shape[1] // 2
    p, b = match.parameters, base.parameters
    half = b.shape[1] // 2
    joined = np.empty((len(p), 6))
    joined[:, 0] = base.u + p[:, 0] + p[:, 1] * dx + p[:, 2] * dy
    joined[:, 3] = base.v + p[:, n] + p[:, n + 1] * dx + p[:, n + 2] * dy
    second = _deformation(p, n)
    gradient = second @ _deformation(b, half) - np.eye(2)
    joined[:, 1:3], joined[:, 4:6] = gradient[:, 0], gradient[:, 1]
    lost = ~match.converged
    joined[lost] = np.nan
    return replace(
        match,
        parameters=joined,
        sigma_u=np.hypot(base.sigma_u, match.sigma_u),
        sigma_v=np.hypot(base.sigma_v, match.sigma_v),
        links=links,
    )


def _deformation(parameters: Floats, n: int) -> Floats:
    rows = np.stack([parameters[:, 1:3], parameters[:, n + 1 : n + 3]], axis=1)
    return rows + np.eye(2)
