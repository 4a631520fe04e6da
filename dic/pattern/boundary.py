"""Where one texture ends and another begins along rays: the likelihood of each place.

A ray crosses from background to coupon.  What it shows is the lens' blur of background up to the edge and
of coupon from there on; so a place of the edge foretells the mean grey at each sample and how samples vary
together.  The place under which a ray's grey values are most likely needs no threshold, counts the lens'
blur, and works before a plain background as before a cluttered one.  Gaussian likelihood with the right
first two moments is consistent whatever the texture's distribution (quasi-likelihood; Gourieroux, Monfort
& Trognon, Econometrica 52 (1984) 681-700, doi 10.2307/1913471).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from scipy.linalg import toeplitz
from scipy.optimize import nnls
from scipy.special import ndtr

Floats = NDArray[np.float64]

#: Rays reach so far into the coupon, px.
INWARD_PX = 18
#: Places of the edge that are tried are so far apart, px.
PITCH_PX = 0.25
#: Points on which textures are thought to live are so far apart, px: finer than any blur.
FINE_PX = 0.5
#: Samples further in than this are coupon for certain, px.
SURE_IN = 6.0
#: Sigmas of the blur that are tried, px: pixel (0.29), interpolation (0.58) and a lens of 0.4 or more.
BLURS = np.array([0.75, 0.95, 1.2, 1.5, 1.9, 2.4, 3.0])
#: Sizes of the textures' features (sigma of a Gaussian covariance), px.
SIZES = np.array([0.5, 1.0, 1.5, 2.0, 3.0, 4.5, 7.0, 12.0])
#: Lags over which a texture's covariance is fitted, px.
LAGS = 10
#: Wave lengths of textures that repeat, px; infinite for those that do not.
WAVES = np.array([np.inf, 6.0, 9.0, 13.0, 18.0])
#: Greys are compared with the mean over so many px along the edge: light changes over more.
LOCAL_PX = 90.0
#: A model good to this share of the coupon's contrast: veil, halo and uneven light are not foretold.
MODEL_SHARE = 0.04
#: So many rays share one place of the edge while the blur is sought.
TOGETHER = 16
#: A ray that contradicts its neighbours by more than this does not count more: dust, scratches, holes.
MOST_SAID = 25.0


@dataclass(frozen=True)
class Reach:
    """How far rays go, px; positive inside the coupon, zero at its rough edge.

    Attributes
    ----------
    outward
        So far into the background.
    span
        The edge is looked for so far to either side of its rough place.
    """

    outward: int
    span: float

    @property
    def depth(self) -> Floats:
        """Samples along a ray."""
        return np.arange(-self.outward, INWARD_PX + 1.0)

    @property
    def places(self) -> Floats:
        """Places of the edge that are tried: four px of background are left beside the outermost."""
        return np.arange(max(4.0 - self.outward, -self.span), self.span + 0.01, PITCH_PX)

    @property
    def outer(self) -> NDArray[np.bool_]:
        """Samples that are background for certain."""
        return self.depth < max(-5.0, 3.5 - self.outward)

    @property
    def inner(self) -> NDArray[np.bool_]:
        """Samples that are coupon for certain."""
        return self.depth > SURE_IN


def rays(grey: NDArray[np.float32], x: Floats, y: Floats) -> Floats:
    """Sample grey values at points, NaN outside the picture.

    A cubic B-spline without its prefilter: it blurs alike at every phase, so nothing is shifted, and it
    needs no copy of the picture.
    """
    values = ndimage.map_coordinates(grey, [y, x], order=3, mode="nearest", prefilter=False).astype(float)
    outside = (x < 0) | (y < 0) | (x > grey.shape[1] - 1) | (y > grey.shape[0] - 1)
    values[outside] = np.nan
    return values


class Boundary:
    """What rays across one edge say about its place.

    Parameters
    ----------
    samples
        Grey values at the reach's depths, shape (rays, depths); NaN outside the picture.
    reach
        How far the rays go.
    pitch
        Distance between neighbouring rays, px.
    """

    def __init__(self, samples: Floats, reach: Reach, pitch: float) -> None:
        self.reach = reach
        self.whole: NDArray[np.bool_] = np.asarray(np.isfinite(samples).all(axis=1))
        self._samples, self._step = _levelled(samples[self.whole], reach, pitch)
        outer = self._samples[:, reach.outer]
        inner = self._samples[:, reach.inner] - self._step[:, None]
        self._beside, self._coupon = _covariance(outer), _covariance(inner)
        self._noise = min(_noise(self._beside), _noise(self._coupon))
        self._doubt = MODEL_SHARE**2 * max(self._coupon[0], float(np.mean(self._step**2)))

    def _said(self, blur: float) -> Floats:
        """Return the log-likelihood of each ray at each place, up to a constant."""
        depth, places = self.reach.depth, self.reach.places
        fine = np.arange(depth[0] - 8.0, depth[-1] + 8.0, FINE_PX)
        white = np.zeros(len(depth))
        white[:LAGS] = self._noise * _NOISE_SHAPE
        floor = toeplitz(white) + self._doubt * np.eye(len(depth))
        outer, inner = (
            toeplitz(_latent(side, self._noise, blur, fine - fine[0]))
            for side in (self._beside, self._coupon)
        )
        lens = np.exp(-((depth[:, None] - fine) ** 2) / 2 / blur**2)
        lens /= lens.sum(axis=1, keepdims=True)
        said = np.empty((len(self._samples), len(places)))
        for index, place in enumerate(places):
            on = np.clip((fine - place) / FINE_PX + 0.5, 0, 1)
            within, without = lens * on, lens * (1 - on)
            spread = within @ inner @ within.T + without @ outer @ without.T + floor
            root = np.linalg.inv(np.linalg.cholesky(spread))
            left = self._samples @ root.T - self._step[:, None] * (root @ ndtr((depth - place) / blur))
            said[:, index] = np.log(np.diag(root)).sum() - 0.5 * np.einsum("ij,ij->i", left, left)
        return said

    def places(self, blur: float) -> Floats:
        """Return the log-likelihood of each ray's places, shape (rays, places).

        Zero at a ray's best place; zero everywhere for a ray that leaves the picture.
        """
        table = np.zeros((len(self.whole), len(self.reach.places)))
        said = self._said(blur)
        table[self.whole] = np.maximum(said - said.max(axis=1, keepdims=True), -MOST_SAID)
        return table

    def blurs(self, use: NDArray[np.bool_]) -> Floats:
        """Return the log-likelihood of each of `BLURS`, shape (groups of neighbouring rays, blurs).

        Only rays marked in `use`, shape (rays,), are asked.

        The rays of a group have one place of the edge in common, the best one for each blur.
        """
        said = np.stack([self._said(blur) for blur in BLURS])[:, use[self.whole]]
        if not said.shape[1]:
            return np.empty((0, len(BLURS)))
        said = np.maximum(said - said.max(axis=(0, 2), keepdims=True), -MOST_SAID)
        starts = np.arange(0, said.shape[1], TOGETHER)
        return np.asarray(np.add.reduceat(said, starts, axis=1).max(axis=2).T)


def best_blur(said: Floats) -> tuple[float, float]:
    """Return the blur that fits best and its standard uncertainty, px, from what groups of rays say.

    The uncertainty is the jackknife's over a dozen stretches of edge (Efron & Tibshirani, An Introduction
    to the Bootstrap, 1993, ch. 11), because rays that share speckles are not independent.
    """
    parts = np.array_split(said, min(12, len(said)))
    sums = np.array([part.sum(axis=0) for part in parts])
    total = sums.sum(axis=0)
    left_out = np.array([_peak(total - one) for one in sums])
    n = len(sums)
    u = np.sqrt((n - 1) / n * np.sum((left_out - left_out.mean()) ** 2)) if n > 2 else np.inf
    return float(np.exp(_peak(total))), float(np.exp(_peak(total)) * u)


def _peak(total: Floats) -> float:
    """Return the logarithm of the blur at the top of a curve over `BLURS`."""
    best = min(max(int(np.argmax(total)), 1), len(BLURS) - 2)
    here = slice(best - 1, best + 2)
    bend, tilt, _ = np.polyfit(np.log(BLURS[here]), total[here], 2)
    top = -tilt / 2 / bend if bend < 0 else np.log(BLURS[np.argmax(total)])
    return float(np.clip(top, np.log(BLURS[best - 1]), np.log(BLURS[best + 1])))


def _levelled(samples: Floats, reach: Reach, pitch: float) -> tuple[Floats, Floats]:
    """Take off the local background, bring the coupon's scatter to one size; return also its mean step."""
    near = max(LOCAL_PX / pitch, 3.0)
    outer, inner = samples[:, reach.outer], samples[:, reach.inner]

    def local(values: Floats) -> Floats:
        return np.asarray(ndimage.gaussian_filter1d(values, near, mode="nearest"))

    beside, coupon = local(np.median(outer, axis=1)), local(inner.mean(axis=1))
    spread = np.sqrt(local(inner.var(axis=1) + (inner.mean(axis=1) - coupon) ** 2))
    scale = (np.median(spread) / np.maximum(spread, 1e-6)).clip(0.2, 5.0)
    return (samples - beside[:, None]) * scale[:, None], (coupon - beside) * scale


def _covariance(values: Floats) -> Floats:
    """Return the mean product of samples 0, 1, 2, … px apart along the rays, up to `LAGS`."""
    length = values.shape[1]
    return np.array(
        [np.mean(values[:, lag:] * values[:, : length - lag]) for lag in range(min(LAGS, length))]
    )


#: What the interpolation makes of white noise: a cubic B-spline's products at whole distances.
_NOISE_SHAPE = np.array([151 / 315, 397 / 1680, 1 / 42, 1 / 5040] + [0.0] * (LAGS - 4))


def _noise(covariance: Floats) -> float:
    """Return the camera's noise variance: the part of a covariance that ends within three px."""
    lag = np.arange(covariance.shape[0])
    basis = np.column_stack([_NOISE_SHAPE[lag], *(np.exp(-(lag**2) / 2 / size**2) for size in SIZES[2:])])
    return float(nnls(basis, covariance)[0][0])


def _waves(apart: Floats, sigma: float) -> Floats:
    """Return the covariances of which textures are composed, as a blur shows them, first axis the kinds.

    Each is a Gaussian times a cosine; the blur's own Gaussian widens it in closed form.
    """
    size, turn = (axis.ravel() for axis in np.meshgrid(SIZES, 2 * np.pi / WAVES))
    share = size**2 / (size**2 + 2 * sigma**2)
    size, turn, share = (axis.reshape(-1, *[1] * apart.ndim) for axis in (size, turn, share))
    return np.asarray(
        np.sqrt(share)
        * np.exp(-share * (apart**2 / size**2 + 2 * turn**2 * sigma**2) / 2)
        * np.cos(share * turn * apart)
    )


def _latent(covariance: Floats, noise: float, sigma: float, apart: Floats) -> Floats:
    """Return the covariance, over distances, of the texture that a blur turns into the one seen."""
    lag = np.arange(covariance.shape[0])
    parts, _ = nnls(_waves(lag.astype(float), sigma).T, covariance - noise * _NOISE_SHAPE[lag])
    return np.asarray(np.tensordot(parts, _waves(apart, 0.0), 1))
