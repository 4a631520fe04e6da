"""A camera: integrates a scene over its pixels, adds noise and uneven light, and rounds to grey levels."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from math import ceil

import numpy as np
from numpy.polynomial.hermite_e import hermegauss
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Scene = Callable[[Floats, Floats], Floats]

#: Sample points that are evaluated at a time; they stay in the processor's cache.
_BLOCK = 60_000


def picture(scene: Scene, shape: tuple[int, int], *, samples: int = 3, blur: float = 0.0) -> Floats:
    """Return the mean of a scene over each pixel.

    Parameters
    ----------
    scene
        Called with picture coordinates x, shape (1, m), and y, shape (n, 1), px; returns the
        reflectance, shape (n, m).  The scene evaluates its texture at the material points that
        have come to these spots; no picture is ever warped.
    shape
        (rows, columns).
    samples
        Points of the Gauss quadrature per pixel and direction for a sharp lens.
    blur
        Sigma of a Gaussian lens blur, px; adds the points that it needs.

    Returns
    -------
    ndarray
        Reflectance, shape (rows, columns).
    """
    rows, columns = shape
    # Measured on dots of 4.5 px with edges of 0.5 px: as near to converged as the sharp lens is.
    samples += ceil(8 * blur * (1 + blur))
    nodes, weights = aperture(samples, blur)
    x = (np.arange(columns)[:, None] + nodes).reshape(1, -1)
    image = np.empty(shape)
    height = max(1, _BLOCK // (x.size * samples))
    for top in range(0, rows, height):
        some = np.arange(top, min(top + height, rows))
        y = (some[:, None] + nodes).reshape(-1, 1)
        values = scene(x, y).reshape(len(some), samples, columns, samples)
        image[some] = _weigh(_weigh(values, weights, 1), weights, 2)
    return image


def _weigh(values: Floats, weights: Floats, axis: int) -> Floats:
    # A plain sum in fixed order: a matrix product's rounding may depend on the number of threads.
    total = weights[0] * values.take(0, axis)
    for i in range(1, len(weights)):
        total += weights[i] * values.take(i, axis)
    return total


@cache
def aperture(samples: int, blur: float = 0.0) -> tuple[Floats, Floats]:
    """Return nodes (px from the pixel's centre) and weights of the pixel's aperture in one direction.

    Without blur these are Gauss–Legendre's.  With blur the weight function is the pixel convolved
    with the lens' Gaussian, and its Gauss rule comes from the Jacobi matrix of that measure by
    Golub & Welsch (Math. Comp. 23 (1969) 221-230, doi 10.1090/S0025-5718-69-99647-1), the measure
    being carried by a rule with many more points.
    """
    flat, flat_weights = leggauss(samples if blur == 0 else 4 * samples)
    flat, flat_weights = flat / 2, flat_weights / 2
    if blur == 0:
        return flat, flat_weights
    bell, bell_weights = hermegauss(4 * samples)
    points = np.add.outer(flat, blur * bell).ravel()
    masses = np.multiply.outer(flat_weights, bell_weights / bell_weights.sum()).ravel()
    diagonal, beside = np.empty(samples), np.empty(samples)
    before, now = np.zeros_like(points), np.ones_like(points)
    for k in range(samples):
        diagonal[k] = np.sum(masses * points * now**2)
        onward = (points - diagonal[k]) * now - (beside[k - 1] * before if k else 0.0)
        beside[k] = np.sqrt(np.sum(masses * onward**2))
        before, now = now, onward / beside[k]
    jacobi = np.diag(diagonal) + np.diag(beside[:-1], 1) + np.diag(beside[:-1], -1)
    nodes, vectors = np.linalg.eigh(jacobi)
    return nodes, vectors[0] ** 2


@dataclass(frozen=True)
class Camera:
    """How reflectance becomes grey levels.

    Attributes
    ----------
    bits
        Bit depth, 8 to 16; more than 8 are stored in 16, in the low bits.
    black, white
        Grey of reflectance 0 and 1 in full light, as shares of full scale.
    noise
        Sigma of plain Gaussian noise, as a share of full scale.
    dark_noise
        Sigma of the noise without light, in grey levels.
    gain
        Photon noise: variance per grey level, in grey levels (EMVA 1288's linear model: variance =
        dark variance + gain × grey value).
    blur
        Sigma of the lens blur, px.
    samples
        Quadrature points per pixel and direction, for a sharp lens; see `picture`.
    vignette
        Share of light that is missing in the picture's corners.
    gradient
        Change of light from left to right, as a share of the light in the middle.
    drift
        Change of light from one frame to the next, as a share of the first.
    """

    bits: int = 8
    black: float = 0.10
    white: float = 0.85
    noise: float = 0.0
    dark_noise: float = 0.0
    gain: float = 0.0
    blur: float = 0.0
    samples: int = 3
    vignette: float = 0.0
    gradient: float = 0.0
    drift: float = 0.0

    @property
    def full_scale(self) -> int:
        """Largest grey level."""
        return 2**self.bits - 1

    def photograph(self, scene: Scene, shape: tuple[int, int], *, frame: int = 0, seed: int = 0) -> NDArray:
        """Take one frame of a scene; see `picture` and `expose`."""
        return self.expose(picture(scene, shape, samples=self.samples, blur=self.blur), frame, seed)

    def expose(self, reflectance: Floats, frame: int = 0, seed: int = 0) -> NDArray:
        """Turn reflectance into grey levels.

        Parameters
        ----------
        reflectance
            Means over the pixels, shape (rows, columns).
        frame
            Number of the frame: light drifts with it, and each frame has its own noise, the same
            in whatever order frames are taken.
        seed
            Seed of the noise.

        Returns
        -------
        ndarray
            Grey levels, uint8 or uint16, shape (rows, columns).
        """
        grey = self.grey(reflectance, frame)
        plain = (self.noise * self.full_scale) ** 2 + self.dark_noise**2
        if plain or self.gain:
            rng = np.random.default_rng([seed, frame])
            draw = rng.standard_normal(grey.shape, dtype=np.float32)
            grey = grey + np.sqrt(plain + self.gain * grey) * draw
        kind = np.uint8 if self.bits == 8 else np.uint16
        return np.clip(np.rint(grey), 0, self.full_scale).astype(kind)

    def grey(self, reflectance: Floats, frame: int = 0) -> Floats:
        """Return the noise-free grey values, in grey levels but not rounded."""
        share = self.black + (self.white - self.black) * reflectance
        return self.full_scale * share * self.light(reflectance.shape, frame)

    def light(self, shape: tuple[int, ...], frame: int = 0) -> Floats:
        """Return the light on each pixel, 1 in the middle of the first frame."""
        v, h = (np.linspace(-1, 1, n) if n > 1 else np.zeros(1) for n in shape)
        fall = 1 - self.vignette / 2 * (h[None, :] ** 2 + v[:, None] ** 2)
        return fall * (1 + self.gradient / 2 * h[None, :]) * (1 + self.drift * frame)
