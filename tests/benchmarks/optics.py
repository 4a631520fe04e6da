"""Motion towards the camera, with and without a still patch; a bending lens, calibrated from boards."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray
from scenes import Settings, clean, grid_on, matched, noisy, reference_of, rigid, start_at
from table import Bench

from dic.correlation import Grid
from dic.optics import Lens, bound, lay_patch
from dic.optics.towards import without
from dic.pattern import axes
from dic.strain import GaugeReader, Region
from dic.testfile import Camera
from synthetic_images import homogeneous

Floats = NDArray[np.float64]

SHAPE = (700, 640)
MIDDLE = ((SHAPE[1] - 1) / 2, (SHAPE[0] - 1) / 2)
#: The coupon in the left part, the patch beside it.
COUPON, PATCH = (40, 40, 300, 620), (380, 40, 220, 620)
AXIAL, TRANSVERSE = 0.001, -0.0003
#: 0.5 mm nearer at 500 mm.
NEARER = 1.0 / (1.0 - 0.5 / 500.0)
DRAWS = 8


def box(x: int, y: int, width: int, height: int) -> NDArray[np.bool_]:
    mask = np.zeros(SHAPE, bool)
    mask[y : y + height, x : x + width] = True
    return mask


def within(grid: Grid, mask: NDArray[np.bool_]) -> Grid:
    return Grid(
        grid.columns, grid.rows, grid.inside & mask[np.ix_(grid.rows, grid.columns)], grid.subset, grid.step
    )


def towards() -> tuple[Floats, Floats]:
    """Return errors of axial and transverse strain with and without the patch, shape (draws, 2) each."""
    coupon = homogeneous(
        NEARER * (1 + AXIAL) - 1, NEARER * (1 + TRANSVERSE) - 1, centre=MIDDLE, shift=(0.3, -4.2)
    )
    still = homogeneous(NEARER - 1, NEARER - 1, centre=MIDDLE, shift=(0.3, 0.1))
    first = clean("sharp", rigid(0.0, 0.0), SHAPE)
    second = np.where(box(360, 0, 280, 700), clean("sharp", still, SHAPE), clean("sharp", coupon, SHAPE))
    grid = within(grid_on(SHAPE, step=10, margin=40), box(*COUPON))
    mask = box(*COUPON)
    true = np.array([AXIAL, TRANSVERSE])
    bare, taken = [], []
    for draw in range(DRAWS):
        reference = reference_of(noisy(first, 2 * draw), grid, Settings(), frames=1)
        reader = GaugeReader(reference, grid, Region.around(mask, *axes(0.0)))
        picture = noisy(second, 2 * draw + 1)
        read = reader.read(matched(reference, picture, start_at(reference, coupon)))
        patch = lay_patch(
            noisy(first, 2 * draw).astype(float), PATCH, mask,
            subset=31, step=10, settings=Settings(), frames=1, lens=None,
        )  # fmt: skip
        seen = patch.apparent(matched(patch.reference, picture, start_at(patch.reference, still)))
        strains = np.array([read.axial, read.transverse])
        bare.append(strains - true)
        taken.append(without(strains, np.float64(seen.strain)) - true)
    return np.array(bare), np.array(taken)


@dataclass(frozen=True)
class Behind:
    """A motion seen through a lens, as `synthetic_images` wants motions: material to picture and back.

    The material is laid out as the undisturbed picture shows it straight.
    """

    lens: Lens
    motion: Any

    def __call__(self, x: Any, y: Any) -> tuple[Floats, Floats]:
        """Return where the lens shows material points."""
        at = np.stack(self.motion(np.asarray(x, float), np.asarray(y, float)), axis=-1)
        return shown(self.lens, at)

    def inverse(self, x: Any, y: Any) -> tuple[Floats, Floats]:
        """Return which material points the lens shows at places of the picture."""
        straight = self.lens.straight(x, y)[0]
        return self.motion.inverse(straight[..., 0], straight[..., 1])


def matrix(lens: Lens) -> Floats:
    return np.array([[lens.focal[0], 0, lens.centre[0]], [0, lens.focal[1], lens.centre[1]], [0, 0, 1]])


def shown(lens: Lens, at: Floats) -> tuple[Floats, Floats]:
    """Return where OpenCV's model shows straight points, shape (..., 2)."""
    ideal = (at.reshape(-1, 2) - lens.centre) / lens.focal
    points = cv2.projectPoints(
        np.c_[ideal, np.ones(len(ideal))], np.zeros(3), np.zeros(3), matrix(lens), np.array(lens.coefficients)
    )[0].reshape(at.shape)
    return points[..., 0], points[..., 1]


def calibrated(lens: Lens, noise_px: float, boards: int = 12) -> Lens:
    """Return what OpenCV's calibration finds from corners that it projects itself, with noise added."""
    rng = np.random.default_rng(5)
    grid = np.zeros((13 * 11, 3), np.float32)
    grid[:, :2] = 5.0 * np.mgrid[:13, :11].T.reshape(-1, 2) - [30.0, 25.0]
    seen = []
    for _ in range(boards):
        turn = np.array([*rng.uniform(-0.5, 0.5, 2), rng.uniform(-0.2, 0.2)])
        place = np.array([*rng.uniform(-4, 4, 2), 0.105 * lens.focal[0]])
        points = cv2.projectPoints(grid, turn, place, matrix(lens), np.array(lens.coefficients))[0]
        seen.append((points + noise_px * rng.standard_normal(points.shape)).astype(np.float32))
    start = np.array([[1000.0, 0, SHAPE[1] / 2], [0, 1000.0, SHAPE[0] / 2], [0, 0, 1]])
    _, found, coefficients, _, _ = cv2.calibrateCamera(
        [grid] * boards, seen, SHAPE[::-1], start, np.zeros(5),
        flags=cv2.CALIB_FIX_ASPECT_RATIO | cv2.CALIB_FIX_K3,
    )  # fmt: skip
    k = np.ravel(coefficients)
    return Lens.level(
        (found[0, 0], found[1, 1]), (found[0, 2], found[1, 2]), tuple(float(one) for one in k[:5])
    )


def barrel() -> Lens:
    """Return a lens that draws the picture's corner in by 1 % of its distance from the middle."""
    focal = 1500.0
    corner = np.hypot(*MIDDLE) / focal
    return Lens.level((focal, focal), MIDDLE, (-0.01 / corner**2, 0.0, 0.0, 0.0, 0.0))


def travelled(lens: Lens | None, draws: int) -> Floats:
    """Return axial and transverse strain after 50 px of travel behind the true lens, shape (draws, 2)."""
    true = barrel()
    moved = Behind(true, rigid(0.0, -50.0))
    first = clean("sharp", Behind(true, rigid(0.0, 0.0)), SHAPE)
    second = clean("sharp", moved, SHAPE)
    mask = box(80, 120, 480, 480)
    grid = within(grid_on(SHAPE, step=10, margin=40), mask)
    found = []
    for draw in range(draws):
        reference = reference_of(noisy(first, 100 + 2 * draw), grid, Settings(), frames=1)
        region = Region.around(mask, *axes(0.0))
        x, y = reference.x.astype(float), reference.y.astype(float)
        ends = [
            Behind(true, moved.motion)(*true.straight(x + dx, y + dy)[0].T)
            for dx, dy in ((0, 0), (1, 0), (0, 1))
        ]
        start = np.zeros((len(x), 6))
        start[:, 0], start[:, 3] = ends[0][0] - x, ends[0][1] - y
        for column, (dx, dy) in ((1, (1, 0)), (2, (0, 1))):
            start[:, column] = ends[column][0] - ends[0][0] - dx
            start[:, 3 + column] = ends[column][1] - ends[0][1] - dy
        match = matched(reference, noisy(second, 101 + 2 * draw), start)
        settled = None if lens is None else lens.settled(region.centre, region.axial)
        if settled is not None:
            match = settled.straighten(match, x, y)
        places = None if settled is None else settled.straight(x, y)[0]
        read = GaugeReader(reference, grid, region, places=places).read(match)
        found.append((read.axial, read.transverse))
    return np.array(found)


def run() -> Bench:
    bench = Bench()
    bare, taken = towards()
    for k, name in enumerate(("axial", "transverse")):
        worst = 1e6 * np.abs(taken[:, k]).max()
        bench.add(
            f"0.5 mm nearer at 500 mm, patch: {name} strain, worst of {DRAWS}", worst, "µm/m", high=10.0
        )
    u = bound(Camera(stand_off="500 mm", out_of_plane="0.5 mm"))
    assert u is not None
    bench.add("the same without: false strain", 1e6 * bare.mean(), "µm/m")
    bench.add("false strain / k = 2 interval of the budget", np.abs(bare).max() / (2 * u), high=1.0)
    raw = 1e6 * np.abs(travelled(None, 1)).max()
    bench.add("1 % barrel, 50 px of travel: not calibrated", raw, "µm/m")
    true = 1e6 * np.abs(travelled(barrel(), 3)).max()
    bench.add("the same, the true lens", true, "µm/m", high=10.0)
    found = calibrated(barrel(), 0.03)
    worst = 1e6 * np.abs(travelled(found, 3)).max()
    bench.add("the same, calibrated from 12 boards, corners to 0.03 px", worst, "µm/m", high=10.0)
    return bench
