"""One frame against the prepared reference: a pure function of (reference, frame, prediction)."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.correlation.filters import noise_gains
from dic.correlation.flags import Flag
from dic.correlation.kernels import solve_subsets
from dic.correlation.reference import Reference
from dic.correlation.splines import MARGIN, SplineImage

Floats = NDArray[np.float64]

#: Error left by stopping the iteration, px; a tenth of the scatter of a very good subset.
TOLERANCE_PX = 1e-4
MOST_ITERATIONS = 25
#: Correlation below which a match is not believed.  Common practice, no published source.
LEAST_CORRELATION = 0.7
#: A subset that ends farther than this from where it started has found something else, or needs a
#: better start; coefficients are made this far around the starts.
TRAVEL_PX = 12.0


@dataclass(frozen=True)
class Match:
    """Displacements of all subsets in one frame, shape (n,) each, n as in the reference.

    Attributes
    ----------
    parameters
        u, uₓ, u_y (and uₓₓ/2, u_xy, u_yy/2 for quadratic shapes), then v alike, shape (n, p); NaN where
        not converged.
    correlation
        Zero-mean normalised cross-correlation, 0 to 1.
    sigma_u, sigma_v
        Standard uncertainties of u and v from the subset's own residual, px.
    flag
        Values of `Flag`.
    iterations
        Gauss–Newton iterations used.
    noise_grey
        Grey noise of one raw frame, median over the subsets, grey levels.
    links
        How many references lie between the first one and this frame; each adds its own matching error.
    in_picture
        `affine` as matched, where `parameters` have been freed from the lens' distortion; None elsewhere.
    """

    parameters: Floats
    correlation: Floats
    sigma_u: Floats
    sigma_v: Floats
    flag: NDArray[np.uint8]
    iterations: NDArray[np.uint8]
    noise_grey: float
    links: int = 0
    in_picture: Floats | None = None

    @property
    def u(self) -> Floats:
        """Displacement along x (to the right), px."""
        return self.parameters[:, 0]

    @property
    def v(self) -> Floats:
        """Displacement along y (down), px."""
        return self.parameters[:, self.parameters.shape[1] // 2]

    @property
    def affine(self) -> Floats:
        """u, uₓ, u_y, v, vₓ, v_y at the subset centres, px, shape (n, 6)."""
        half = self.parameters.shape[1] // 2
        return self.parameters[:, [0, 1, 2, half, half + 1, half + 2]]

    @property
    def as_matched(self) -> Floats:
        """The same in the picture itself, whatever the lens does, shape (n, 6)."""
        return self.affine if self.in_picture is None else self.in_picture

    @property
    def converged(self) -> NDArray[np.bool_]:
        """Which subsets were measured."""
        return self.flag == Flag.CONVERGED

    def noise_against(self, averaged: int) -> float:
        """Return the grey noise of a frame against a reference averaged over so many, grey levels."""
        # Each further link is matched between two single frames.
        return float(self.noise_grey * np.sqrt(1.0 + 1.0 / averaged + 2.0 * self.links))

    def with_noise(self, felt: float) -> Match:
        """Return this match with the noise as the matching feels it (`dic.correlation.noise`)."""
        if not (np.isfinite(felt) and self.noise_grey > 0):
            return self
        ratio = felt / self.noise_grey
        return replace(self, noise_grey=felt, sigma_u=ratio * self.sigma_u, sigma_v=ratio * self.sigma_v)

    def filled_from(self, other: Match) -> Match:
        """Return this match with the subsets that only `other` found taken from there."""
        take = other.converged & ~self.converged
        merged: dict[str, Any] = {
            name: np.where(take if mine.ndim == 1 else take[:, None], getattr(other, name), mine)
            for name, mine in vars(self).items()
            if isinstance(mine, np.ndarray)
        }
        return replace(self, **merged)


def match_frame(reference: Reference, frame: SplineImage, start: Floats) -> Match:
    """Match all subsets of the reference in one frame.

    Parameters
    ----------
    reference
        From `prepare_reference`.
    frame
        From `dic.correlation.splines.Prefilter`, with the reference's kind and smoothing.
    start
        Starting parameters, shape (n, p), within a few px of the truth; NaN rows are left out.

    Returns
    -------
    Match
        NaN and a flag where a subset was not found.

    Notes
    -----
    Inverse compositional Gauss–Newton (Baker & Matthews 2004, doi 10.1023/B:VISI.0000011205.11775.fd)
    on the zero-mean normalised sum of squared differences, gain and offset projected out.
    """
    rows, columns = frame.shape
    kit, settings = reference.estimator, reference.settings
    start = np.where(reference.usable[:, None], start, np.nan)
    p, correlation, residual, flag, iterations = solve_subsets(
        frame.taps, settings.shape, frame.coefficients, frame.sampling, frame.stride, frame.plane, MARGIN,
        rows, columns, reference.f, reference.fx, reference.fy, reference.mask,
        kit.pixels, kit.mean, kit.norm, kit.average, kit.along, kit.inverse,
        reference.x, reference.y, reference.half,
        np.ascontiguousarray(start), TOLERANCE_PX, TRAVEL_PX, MOST_ITERATIONS, LEAST_CORRELATION,
    )  # fmt: skip
    flag = np.where(reference.usable, flag, reference.unusable)
    noise = np.sqrt(residual / (reference.freedom * residual_gain(reference)))
    sigma = noise[:, None] * np.sqrt(reference.spread * (1.0 + 1.0 / reference.frames))
    found = noise[flag == Flag.CONVERGED]
    return Match(
        parameters=p,
        correlation=correlation,
        sigma_u=sigma[:, 0],
        sigma_v=sigma[:, 1],
        flag=flag,
        iterations=iterations,
        noise_grey=float(np.median(found)) if len(found) else float("nan"),
    )


def lost_match(reference: Reference, flag: Flag, links: int = 0) -> Match:
    """Return the match of a frame in which nothing is measured, every subset with the same flag."""
    count = len(reference.x)
    nowhere = np.full(count, np.nan)
    return Match(
        parameters=np.full((count, 2 * len(reference.settings.shape)), np.nan),
        correlation=nowhere,
        sigma_u=nowhere,
        sigma_v=nowhere,
        flag=np.full(count, flag, np.uint8),
        iterations=np.zeros(count, np.uint8),
        noise_grey=float("nan"),
        links=links,
    )


def residual_gain(reference: Reference) -> float:
    """Return the residual's variance per variance that one raw frame's noise keeps after smoothing.

    The frame's noise passes through the interpolation too, the reference's is that of a mean.
    """
    settings = reference.settings
    smoothed, between = noise_gains(settings.kind, settings.smoothing)
    return between / smoothed + 1.0 / reference.frames


def boxes(reference: Reference, start: Floats) -> Floats:
    """Return where in the frame subsets may end that start so: left, top, right, bottom, shape (n, 4)."""
    half, n = reference.half, start.shape[1] // 2
    reach_x = half * (1.0 + np.abs(start[:, 1]) + np.abs(start[:, 2])) + TRAVEL_PX
    reach_y = half * (1.0 + np.abs(start[:, n + 1]) + np.abs(start[:, n + 2])) + TRAVEL_PX
    x, y = reference.x + start[:, 0], reference.y + start[:, n]
    corners = np.stack([x - reach_x, y - reach_y, x + reach_x, y + reach_y], axis=1)
    return corners[np.isfinite(corners).all(axis=1)]
