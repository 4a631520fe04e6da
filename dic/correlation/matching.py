"""One frame against the prepared reference: a pure function of (reference, frame, prediction)."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.correlation.flags import Flag
from dic.correlation.kernels import solve_subsets
from dic.correlation.reference import Reference
from dic.correlation.splines import MARGIN, SplineImage, blur

Floats = NDArray[np.float64]

#: Error left by stopping the iteration, px; a tenth of the scatter of a very good subset.
TOLERANCE_PX = 1e-4
MOST_ITERATIONS = 25
#: Correlation below which a match is not believed.  Common practice, no published source.
LEAST_CORRELATION = 0.7


@dataclass(frozen=True)
class Match:
    """Displacements of all inside subsets in one frame, shape (n,) each, n as in the reference.

    Attributes
    ----------
    parameters
        u, uₓ, u_y, v, vₓ, v_y, shape (n, 6); NaN where not converged.
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
    """

    parameters: Floats
    correlation: Floats
    sigma_u: Floats
    sigma_v: Floats
    flag: NDArray[np.uint8]
    iterations: NDArray[np.uint8]
    noise_grey: float

    @property
    def u(self) -> Floats:
        """Displacement along x (to the right), px."""
        return self.parameters[:, 0]

    @property
    def v(self) -> Floats:
        """Displacement along y (down), px."""
        return self.parameters[:, 3]

    def filled_from(self, other: Match) -> Match:
        """Return this match with the subsets that only `other` found taken from there."""
        take = other.converged & ~self.converged
        merged: dict[str, Any] = {
            name: np.where(take if mine.ndim == 1 else take[:, None], getattr(other, name), mine)
            for name, mine in vars(self).items()
            if isinstance(mine, np.ndarray)
        }
        return replace(self, **merged)

    @property
    def converged(self) -> NDArray[np.bool_]:
        """Which subsets were measured."""
        return self.flag == Flag.CONVERGED


def match_frame(reference: Reference, frame: SplineImage, start: Floats) -> Match:
    """Match all subsets of the reference in one frame.

    Parameters
    ----------
    reference
        From `prepare_reference`.
    frame
        From `spline_image` of the frame smoothed as the reference was.
    start
        Starting parameters, shape (n, 6), within a few px of the truth.

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
    kit = reference.estimator
    start = np.where(reference.usable[:, None], start, np.nan)
    p, correlation, residual, flag, iterations = solve_subsets(
        frame.coefficients, frame.stride, MARGIN, rows, columns,
        reference.f, reference.fx, reference.fy,
        kit.mean, kit.norm, kit.average, kit.along, kit.inverse,
        reference.x, reference.y, reference.grid.half,
        np.ascontiguousarray(start), TOLERANCE_PX, MOST_ITERATIONS, LEAST_CORRELATION,
    )  # fmt: skip
    flag[~reference.usable] = Flag.LOW_TEXTURE
    noise = residual / residual_share(reference.smoothing, reference.frames)
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


def residual_share(smoothing: float, frames: int) -> float:
    """Return the residual's standard deviation per unit of raw noise in one frame.

    Smoothing leaves Σk² of the noise's variance, and both pictures contribute.
    """
    impulse = np.zeros((33, 33), np.float32)
    impulse[16, 16] = 1.0
    return float(np.sqrt((blur(impulse, smoothing) ** 2).sum() * (1.0 + 1.0 / frames)))
