"""The prepared reference: everything about the subsets that no later frame can change."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.correlation.grid import Grid
from dic.correlation.kernels import gram
from dic.correlation.splines import Image, blur, flat, gradients, smooth

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Estimator:
    """Gauss–Newton for each subset, with grey gain and offset projected out.

    Attributes
    ----------
    mean, norm
        Mean of the subset's grey and the norm of what remains, shape (n,).
    average, along
        Each steepest-descent image's mean, and its share along the centred and normed grey,
        shape (n, 6): what is projected out.
    inverse
        Inverse of the projected Hessian, shape (n, 6, 6); NaN where the texture does not determine
        the motion.
    """

    mean: Floats
    norm: Floats
    average: Floats
    along: Floats
    inverse: Floats

    def noise_gain(self, products: Floats) -> Floats:
        """Return the variances of u and v for pixel noise of variance one, shape (n, 2).

        Parameters
        ----------
        products
            `dic.correlation.kernels.gram` of the images smoothed twice, shape (n, 8, 8).
        """
        # The update is inverse · (J − average·1 − along·(f − mean)/norm): write it as A·(1, f, J).
        along = self.along / self.norm[:, None]
        clean = np.empty((len(self.mean), 6, 8))
        clean[:, :, 0] = along * self.mean[:, None] - self.average
        clean[:, :, 1] = -along
        clean[:, :, 2:] = np.eye(6)
        weights = self.inverse @ clean
        covariance = weights @ products @ weights.transpose(0, 2, 1)
        return covariance[:, [0, 3], [0, 3]]


def _estimator(products: Floats, pixels: int) -> Estimator:
    mean = products[:, 0, 1] / pixels
    norm = np.sqrt(np.maximum(products[:, 1, 1] - pixels * mean**2, 0.0))
    average = products[:, 0, 2:] / pixels
    with np.errstate(invalid="ignore", divide="ignore"):
        along = (products[:, 1, 2:] - pixels * mean[:, None] * average) / norm[:, None]
    hessian = products[:, 2:, 2:] - pixels * average[:, :, None] * average[:, None, :]
    hessian -= along[:, :, None] * along[:, None, :]
    inverse = np.full_like(hessian, np.nan)
    # Twelve digits of the sixteen lost: no texture in some direction.
    sound = np.asarray(np.isfinite(hessian).all(axis=(1, 2)))
    sound[sound] = np.linalg.cond(hessian[sound]) < 1e12
    inverse[sound] = np.linalg.inv(hessian[sound])
    return Estimator(mean, norm, average, along, inverse)


@dataclass(frozen=True)
class Reference:
    """A reference picture prepared for matching; arrays of subsets have shape (n,) or (n, 6).

    Attributes
    ----------
    grid
        Where the subsets sit; n is the number of its inside points.
    shape
        Rows and columns of the picture.
    smoothing
        Sigma of the Gaussian that all images get, px.
    frames
        How many frames were averaged into the picture.
    grey
        The smoothed picture, float32, about its mean.
    f, fx, fy
        Grey and gradients, flat.
    estimator
        What the matching needs of every subset.
    spread
        Variances of u and v for raw pixel noise of variance one in one frame, px², shape (n, 2).
    usable
        False where the texture cannot locate the subset.
    """

    grid: Grid
    shape: tuple[int, int]
    smoothing: float
    frames: int
    grey: Image
    f: Image
    fx: Image
    fy: Image
    estimator: Estimator
    spread: Floats
    usable: NDArray[np.bool_]

    @property
    def x(self) -> NDArray[np.int64]:
        """Columns of the inside subsets' centres, shape (n,)."""
        return np.broadcast_to(self.grid.x, self.grid.shape)[self.grid.inside]

    @property
    def y(self) -> NDArray[np.int64]:
        """Rows of the inside subsets' centres, shape (n,)."""
        return np.broadcast_to(self.grid.y[:, None], self.grid.shape)[self.grid.inside]


#: A subset whose u or v would scatter by more than this for 1 grey level of noise (8 bits) is useless.
MOST_SPREAD_PX = 0.1


def prepare_reference(
    image: NDArray[np.generic], grid: Grid, *, smoothing: float, frames: int = 1, full_scale: float = 255.0
) -> Reference:
    """Prepare a reference picture for a whole sequence.

    Parameters
    ----------
    image
        Reference grey values, shape (rows, columns); the mean of `frames` frames.
    grid
        Subsets, wholly inside the picture.
    smoothing
        Sigma of the Gaussian applied to this and to every later image, px.
    frames
        How many frames were averaged.
    full_scale
        Largest grey value that the camera can give; sets what counts as texture.

    Returns
    -------
    Reference
        To be handed to `match_frame` with every frame.
    """
    grey = smooth(image, smoothing)
    fx, fy = gradients(grey)
    row, column = np.nonzero(grid.inside)
    where = grey.shape[1], grid.x[column], grid.y[row], grid.half
    estimator = _estimator(gram(flat(grey), flat(fx), flat(fy), *where), grid.subset**2)
    # The raw noise of a pixel reaches the sums through the smoothing once more.
    spread = estimator.noise_gain(gram(*(flat(blur(part, smoothing)) for part in (grey, fx, fy)), *where))
    one_level = full_scale / 255.0
    usable = np.asarray((spread < (MOST_SPREAD_PX / one_level) ** 2).all(axis=1))
    return Reference(
        grid=grid,
        shape=(grey.shape[0], grey.shape[1]),
        smoothing=smoothing,
        frames=frames,
        grey=grey,
        f=flat(grey),
        fx=flat(fx),
        fy=flat(fy),
        estimator=estimator,
        spread=spread,
        usable=usable,
    )
