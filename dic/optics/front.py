"""What is known of camera and lens before the first frame is tracked."""

from __future__ import annotations

from dataclasses import dataclass
from math import nan
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.correlation.grid import Grid
from dic.correlation.matching import Match
from dic.errors import TestFileError
from dic.optics.board import Calibration, calibrate
from dic.optics.lens import Lens
from dic.optics.patch import StillPatch
from dic.optics.scale import Scale
from dic.optics.towards import bound, receding
from dic.strain.rates import Moved
from dic.testfile import Camera, Specimen, TestFile

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Optics:
    """Scale, lens and reference patch of one test.

    Attributes
    ----------
    scale
        Size of a pixel on the coupon.
    lens
        Settled in the gauge's middle; None where distortion and tilt are not known.
    calibration
        What the board pictures gave; None where there are none.
    patch
        The still patch; None where there is none.
    """

    scale: Scale
    lens: Lens | None = None
    calibration: Calibration | None = None
    patch: StillPatch | None = None

    def straight(self, match: Match, x: Any, y: Any) -> Match:
        """Return a match in straight coordinates, as it is where no lens is known."""
        return match if self.lens is None else self.lens.straighten(match, x, y)

    def places(self, x: Any, y: Any) -> Floats | None:
        """Return straight coordinates of subsets, shape (n, 2); None where no lens is known."""
        return None if self.lens is None else self.lens.straight(x, y)[0]

    def straight_motion(self, moved: Moved, grid: Grid) -> Moved:
        """Return one frame's displacements on the grid in straight coordinates."""
        if self.lens is None:
            return moved
        u, v = self.lens.displaced(*np.meshgrid(grid.columns, grid.rows), moved.u, moved.v)
        return moved._replace(u=u, v=v)

    def unbending(self, grid: Grid) -> Floats | None:
        """Return slopes of picture coordinates in straight ones on the grid; None where no lens is known."""
        if self.lens is None:
            return None
        slopes = self.lens.straight(*np.meshgrid(grid.columns, grid.rows))[1]
        return np.asarray(np.linalg.inv(slopes), float)

    def figures(self, camera: Camera, specimen: Specimen) -> dict[str, Any]:
        """Return what ``results.json`` says: what is known, and what was taken off the strains."""
        said: dict[str, Any] = {
            "scale_mm_per_px": self.scale.mm,
            "u_scale_relative": self.scale.u_relative,
            "scale_source": self.scale.source,
        }
        if self.lens is not None:
            said["distortion"] = dict(
                zip(("k1", "k2", "p1", "p2", "k3"), self.lens.coefficients, strict=True)
            )
            said["focal_px"] = self.lens.focal[0]
            said["principal_point_px"] = self.lens.centre
        if self.calibration is not None:
            said["boards"] = self.calibration.boards
            said["reprojection_rms_px"] = self.calibration.rms_px
            said["tilt_deg"] = self.calibration.tilt_deg
        return {
            **said,
            "still_patch_px": camera.still_patch,
            "u_strain_towards_camera": bound(camera),
            "thinning_corrected": receding(camera, specimen) > 0,
        }


def lens_of(
    test: TestFile, shape: tuple[int, int], middle: Floats, axial: Floats
) -> tuple[Lens | None, Calibration | None, float]:
    """Return the lens as the test file gives it or the board shows it, and the board's scale.

    Parameters
    ----------
    test
        The test file.
    shape
        Rows and columns of the frames.
    middle, axial
        Where straight coordinates agree with the picture's: place x, y (px) and the axis' unit vector.

    Returns
    -------
    lens, calibration, mm_per_px
        None, None and NaN where nothing is said.

    Raises
    ------
    TestFileError
        If the board cannot be found, or the lens folds the picture.
    """
    camera = test.camera
    if camera.board is not None:
        found = calibrate(camera.board, test.path.parent, shape)
        return found.lens.settled(middle, axial), found, found.mm_per_px(middle)
    if camera.distortion is None:
        return None, None, nan
    said = camera.distortion
    centre = said.centre or ((shape[1] - 1) / 2, (shape[0] - 1) / 2)
    lens = Lens.level((said.focal,) * 2, centre, (said.k1, said.k2, said.p1, said.p2, said.k3))
    if not lens.shows(shape):
        raise TestFileError(
            "these coefficients fold the picture",
            where="camera.distortion",
            remedy="check their signs, and that focal is in px",
        )
    return lens.settled(middle, axial), None, nan
