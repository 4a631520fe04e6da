"""The prepared reference: everything about the subsets that no later frame can change."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.correlation.filters import noise_gains
from dic.correlation.flags import Flag
from dic.correlation.moments import gram
from dic.correlation.splines import Image, blur, flat, gradients, smooth

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

#: A subset whose u or v would scatter by more than this for one of 255 grey levels of noise is useless.
MOST_SPREAD_PX = 0.1
#: Share of clipped pixels above which a subset's grey no longer follows its pattern.  Common practice.
MOST_CLIPPED = 0.1


@dataclass(frozen=True)
class Settings:
    """How subsets are matched.

    Attributes
    ----------
    kind
        Kind of spline, a key of `dic.correlation.filters.SPLINES`.
    smoothing
        Sigma of the Gaussian that all images get, px.
    quadratic
        Whether subsets may bend: quadratic shape functions instead of affine ones.
    full_scale
        Largest grey value that the camera can give.
    """

    kind: str = "twofold"
    smoothing: float = 0.5
    quadratic: bool = False
    full_scale: float = 255.0

    @property
    def shape(self) -> tuple[int, ...]:
        """Marker for the kernels, as long as u has parameters."""
        return (0,) * (6 if self.quadratic else 3)


@dataclass(frozen=True)
class Estimator:
    """Gauss–Newton for each subset, with grey gain and offset projected out.

    p is the number of parameters, 6 or 12.

    Attributes
    ----------
    pixels
        Pixels that count, shape (n,).
    mean, norm
        Mean of the subset's grey and the norm of what remains, shape (n,).
    average, along
        Each steepest-descent image's mean, and its share along the centred and normed grey,
        shape (n, p): what is projected out.
    inverse
        Inverse of the projected Hessian, shape (n, p, p); NaN where the texture does not determine
        the motion.
    """

    pixels: Floats
    mean: Floats
    norm: Floats
    average: Floats
    along: Floats
    inverse: Floats

    def information(self) -> Floats:
        """Return how well each subset's affine parameters are determined: inverse covariances, (n, 6, 6).

        In units of the reciprocal noise variance; the order is u, uₓ, u_y, v, vₓ, v_y.
        """
        half = self.average.shape[1] // 2
        which = np.array([0, 1, 2, half, half + 1, half + 2])
        return np.asarray(np.linalg.inv(self.inverse[:, which[:, None], which]), float)

    def noise(self, products: Floats, kept: float) -> tuple[Floats, Floats]:
        """Return how pixel noise enters displacements and residual.

        Parameters
        ----------
        products
            `dic.correlation.moments.gram` of the images smoothed once more, which is how the noise of
            raw pixels reaches the sums, shape (n, 2 + p, 2 + p).
        kept
            Variance that white noise of variance one keeps after smoothing.

        Returns
        -------
        spread
            Variances of u and v for raw noise of variance one, shape (n, 2).
        freedom
            Expected sum of squared residuals for raw noise of variance one, shape (n,): the pixels'
            share less what the fitted parameters, gain and offset absorb of it.
        """
        # A step is inverse · (J − average·1 − along·(f − mean)/norm): write it as A·(1, f, J).
        size = self.average.shape[1]
        with np.errstate(invalid="ignore", divide="ignore"):  # NaN where there is no texture
            along = self.along / self.norm[:, None]
            clean = np.empty((len(self.mean), size, 2 + size))
            clean[:, :, 0] = along * self.mean[:, None] - self.average
            clean[:, :, 1] = -along
            clean[:, :, 2:] = np.eye(size)
            noise = clean @ products @ clean.transpose(0, 2, 1)
            covariance = self.inverse @ noise @ self.inverse
            centred = products[:, 1, 1] - 2 * self.mean * products[:, 0, 1] + self.mean**2 * products[:, 0, 0]
            absorbed = np.einsum("nij,nji->n", self.inverse, noise) + 1.0 + centred / self.norm**2
        return covariance[:, [0, size // 2], [0, size // 2]], kept * self.pixels - absorbed


def estimator(products: Floats) -> Estimator:
    """Turn the sums of products over each subset, shape (n, 2 + p, 2 + p), into its estimator."""
    pixels = products[:, 0, 0]
    mean = products[:, 0, 1] / pixels
    norm = np.sqrt(np.maximum(products[:, 1, 1] - pixels * mean**2, 0.0))
    average = products[:, 0, 2:] / pixels[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        along = (products[:, 1, 2:] - (pixels * mean)[:, None] * average) / norm[:, None]
    hessian = products[:, 2:, 2:] - pixels[:, None, None] * average[:, :, None] * average[:, None, :]
    hessian -= along[:, :, None] * along[:, None, :]
    inverse = np.full_like(hessian, np.nan)
    # Scaled to a unit diagonal, so that the subset's size does not look like a weak direction.
    with np.errstate(invalid="ignore", divide="ignore"):
        scale = 1 / np.sqrt(np.einsum("nii->ni", hessian))
        scaled = hessian * scale[:, :, None] * scale[:, None, :]
    sound = np.asarray(np.isfinite(scaled).all(axis=(1, 2)))
    sound[sound] = np.linalg.cond(scaled[sound]) < 1e8
    inverse[sound] = np.linalg.inv(scaled[sound]) * scale[sound][:, :, None] * scale[sound][:, None, :]
    return Estimator(pixels, mean, norm, average, along, inverse)


@dataclass(frozen=True)
class Reference:
    """A reference picture prepared for matching; arrays of subsets have shape (n,).

    Attributes
    ----------
    x, y
        Columns and rows of the subset centres.
    half
        Pixels on either side of a centre.
    shape
        Rows and columns of the picture.
    settings
        How subsets are matched.
    frames
        How many frames were averaged into the picture.
    f, fx, fy, mask
        Smoothed grey, gradients and the pixels that count, flat.
    estimator
        What the matching needs of every subset.
    spread, freedom
        How raw pixel noise enters displacements and residual, see `Estimator.noise`.
    unusable
        `Flag` of each subset that cannot be matched, `Flag.CONVERGED` for the others.
    """

    x: Ints
    y: Ints
    half: int
    shape: tuple[int, int]
    settings: Settings
    frames: int
    f: Image
    fx: Image
    fy: Image
    mask: Image
    estimator: Estimator
    spread: Floats
    freedom: Floats
    unusable: NDArray[np.uint8]

    @property
    def usable(self) -> NDArray[np.bool_]:
        """Which subsets can be matched."""
        return self.unusable == Flag.CONVERGED

    @property
    def places(self) -> Floats:
        """Centres of the subsets, x and y, px, shape (n, 2)."""
        return np.stack([self.x, self.y], axis=1).astype(float)

    @property
    def subset(self) -> int:
        """Side of a subset, px."""
        return 2 * self.half + 1


def prepare_reference(
    image: NDArray[np.integer | np.floating],
    x: Ints,
    y: Ints,
    *,
    subset: int,
    settings: Settings,
    mask: NDArray[np.bool_] | None = None,
    frames: int = 1,
) -> Reference:
    """Prepare a reference picture for a whole sequence.

    Parameters
    ----------
    image
        Reference grey values, shape (rows, columns); the mean of `frames` frames.
    x, y
        Columns and rows of the subset centres, shape (n,); every subset lies wholly in the picture.
    subset
        Odd side of a subset, px.
    settings
        How subsets are matched.
    mask
        Pixels that count, shape (rows, columns); None for all.
    frames
        How many frames were averaged.

    Returns
    -------
    Reference
        To be handed to `match_frame` with every frame.
    """
    smoothing, half = settings.smoothing, subset // 2
    grey = smooth(image, smoothing)
    fx, fy = gradients(image, settings.kind, smoothing)
    counts = flat(np.ones(grey.shape, np.float32) if mask is None else mask.astype(np.float32))
    where = counts, grey.shape[1], x, y, half, 2 * len(settings.shape)
    kit = estimator(gram(flat(grey), flat(fx), flat(fy), *where))
    again = gram(*(flat(blur(part, smoothing)) for part in (grey, fx, fy)), *where)
    kept, _ = noise_gains(settings.kind, smoothing)
    spread, freedom = kit.noise(again, kept)
    one_level = settings.full_scale / 255.0
    unusable = np.full(len(x), Flag.CONVERGED, np.uint8)
    clipped = _share(np.asarray(image.astype(float) >= settings.full_scale), x, y, half)
    unusable[clipped > MOST_CLIPPED] = Flag.SATURATED
    unusable[~(spread < (MOST_SPREAD_PX / one_level) ** 2).all(axis=1)] = Flag.LOW_TEXTURE
    return Reference(
        x=x,
        y=y,
        half=half,
        shape=(grey.shape[0], grey.shape[1]),
        settings=settings,
        frames=frames,
        f=flat(grey),
        fx=flat(fx),
        fy=flat(fy),
        mask=counts,
        estimator=kit,
        spread=spread,
        freedom=freedom,
        unusable=unusable,
    )


def _share(pixels: NDArray[np.bool_], x: Ints, y: Ints, half: int) -> Floats:
    """Return the share of each subset's pixels that are marked, from a summed-area table."""
    table = np.pad(pixels.astype(np.int64), ((1, 0), (1, 0))).cumsum(axis=0).cumsum(axis=1)
    top, bottom, left, right = y - half, y + half + 1, x - half, x + half + 1
    total = table[bottom, right] - table[top, right] - table[bottom, left] + table[top, left]
    return total / (2 * half + 1) ** 2
