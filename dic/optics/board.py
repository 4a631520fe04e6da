"""Lens and tilt from pictures of a chessboard or ChArUco board, by OpenCV's calibration."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError, Notice, TestFileError, listed
from dic.frames.readers import list_pages, read_page
from dic.optics.lens import Lens
from dic.testfile import Board

Floats = NDArray[np.float64]
Points = NDArray[np.float32]

#: Boards below which focal length and distortion cannot be told apart.
LEAST_BOARDS = 3
#: Boards from which a third radial coefficient is worth fitting; with fewer it only follows the noise.
FOR_THIRD = 8
#: Corners that a picture has to show.
LEAST_CORNERS = 8
#: Files that are looked at, at the most.
MOST_PICTURES = 200
#: Half the side of the window in which a ChArUco board's corners are refined, px, and when that ends.
REFINED_PX = 5
REFINING = (cv2.TERM_CRITERIA_EPS + cv2.TERM_CRITERIA_COUNT, 50, 1e-3)
WHERE = "camera.board"
#: Reprojection error above which something is wrong, px.  Common practice, no published source.
GOOD_RMS_PX = 0.3


@dataclass(frozen=True)
class Calibration:
    """What the board pictures gave.

    Attributes
    ----------
    lens
        Distortion, and tilt where a picture shows the board in the coupon's plane.
    rms_px
        Root mean square distance between corners as found and as the model shows them, px.
    boards
        How many pictures were used.
    tilt_deg
        Angle between the camera's axis and the normal of the coupon's plane; NaN where no picture shows it.
    notices
        Doubts.
    """

    lens: Lens
    rms_px: float
    boards: int
    tilt_deg: float
    notices: tuple[Notice, ...]

    def mm_per_px(self, middle: Floats) -> float:
        """Return the scale at a place in the picture, x and y in px; NaN where no picture shows the plane."""
        if np.isnan(self.tilt_deg):
            return float("nan")
        return float(np.sqrt(np.linalg.det(self.lens.straight(*middle)[1])))


def calibrate(board: Board, folder: Path, shape: tuple[int, int]) -> Calibration:
    """Find the board in its pictures and fit the lens.

    Parameters
    ----------
    board
        As described in the test file.
    folder
        Where file names count from.
    shape
        Rows and columns of the frames, which the board pictures must share.

    Raises
    ------
    TestFileError
        If there are too few pictures, or the board is not found in enough of them.
    """
    found: list[tuple[str, tuple[Points, Points]]] = []
    missed: list[str] = []
    for path in _pictures(folder / board.source):
        points = find_board(_grey(path, shape), board)
        if points is None:
            missed.append(path.name)
        else:
            found.append((path.name, points))
    if len(found) < LEAST_BOARDS:
        raise TestFileError(
            f"the board was found in {len(found)} of {len(found) + len(missed)} pictures"
            + (f" (not in {listed(missed, 5)})" if missed else ""),
            where=f"{WHERE}.source",
            remedy=f"at least {LEAST_BOARDS} are needed, tilted differently: {_advice(board)}",
        )
    pairs = [points for _, points in found]
    flags = cv2.CALIB_FIX_ASPECT_RATIO | (0 if len(pairs) >= FOR_THIRD else cv2.CALIB_FIX_K3)
    start = np.array([[shape[1], 0, shape[1] / 2], [0, shape[1], shape[0] / 2], [0, 0, 1]], float)
    rms, matrix, coefficients, _, _ = cv2.calibrateCamera(
        [solid for solid, _ in pairs],
        [seen for _, seen in pairs],
        shape[::-1],
        start,
        np.zeros(5),
        flags=flags,
    )
    k1, k2, p1, p2, k3 = (float(one) for one in np.ravel(coefficients)[:5])
    lens = Lens.level(
        (float(matrix[0, 0]), float(matrix[1, 1])),
        (float(matrix[0, 2]), float(matrix[1, 2])),
        (k1, k2, p1, p2, k3),
    )
    if not lens.shows(shape):
        raise TestFileError(
            "the board pictures give a lens that folds the picture",
            where=f"{WHERE}.source",
            remedy="show the board over the whole picture, corners included, tilted differently",
        )
    tilt = float("nan")
    if board.plane is not None:
        points = find_board(_grey(folder / board.plane, shape), board)
        if points is None:
            raise TestFileError(
                f"the board was not found in {board.plane}", where=f"{WHERE}.plane", remedy=_advice(board)
            )
        lens, tilt = _tilted(lens, matrix, coefficients, points, shape)
    return Calibration(lens, float(rms), len(pairs), tilt, tuple(_doubts(rms, missed)))


def _doubts(rms: float, missed: list[str]) -> list[Notice]:
    doubts = []
    if missed:
        names = listed(missed, 5)
        doubts.append(Notice("board_missed", f"The board was not found in {names}; the others were used."))
    if rms > GOOD_RMS_PX:
        doubts.append(
            Notice(
                "board_misfit",
                f"The board's corners lie {rms:.2f} px (root mean square) from where the lens shows them; "
                "check that the board is flat, sharp, and as large as camera.board says.",
            )
        )
    return doubts


def find_board(grey: NDArray[np.uint8], board: Board) -> tuple[Points, Points] | None:
    """Return the corners on the board (mm, z = 0) and in a picture (px); None where it is not found."""
    target = charuco(board)
    if target is None:
        size = (board.columns - 1, board.rows - 1)
        flags = cv2.CALIB_CB_EXHAUSTIVE | cv2.CALIB_CB_ACCURACY
        there, corners = cv2.findChessboardCornersSB(grey, size, flags=flags)
        if not there:
            return None
        solid = np.zeros((size[0] * size[1], 3), np.float32)
        solid[:, :2] = board.square * np.mgrid[: size[0], : size[1]].T.reshape(-1, 2)
        return solid, np.asarray(corners, np.float32).reshape(-1, 2)
    corners, numbers, _, _ = cv2.aruco.CharucoDetector(target).detectBoard(grey)
    if numbers is None or len(numbers) < LEAST_CORNERS:
        return None
    # The detector's own refinement leaves a tenth of a pixel.
    found: Any = cv2.cornerSubPix(grey, corners, (REFINED_PX, REFINED_PX), (-1, -1), REFINING)
    at, seen = target.matchImagePoints(found, numbers)
    return np.asarray(at, np.float32).reshape(-1, 3), np.asarray(seen, np.float32).reshape(-1, 2)


def charuco(board: Board) -> cv2.aruco.CharucoBoard | None:
    """Return OpenCV's description of a ChArUco board; None for a chessboard."""
    if board.marker is None:
        return None
    markers = cv2.aruco.getPredefinedDictionary(getattr(cv2.aruco, f"DICT_{board.dictionary}"))
    return cv2.aruco.CharucoBoard((board.columns, board.rows), board.square, board.marker, markers)


def _tilted(
    lens: Lens, matrix: Any, coefficients: Any, points: tuple[Points, Points], shape: tuple[int, int]
) -> tuple[Lens, float]:
    """Return the lens with the coupon's plane, in mm on the board, and the tilt in deg."""
    _, turning, place = cv2.solvePnP(*points, matrix, coefficients)
    turn, _ = cv2.Rodrigues(turning)
    view = np.column_stack([turn[:, 0], turn[:, 1], np.ravel(place)])
    tilt = np.degrees(np.arccos(min(abs(float(turn[2, 2])), 1.0)))
    plane = np.linalg.inv(view)
    level = Lens(lens.focal, lens.centre, lens.coefficients, plane / plane[2, 2])
    if np.linalg.det(level.straight(shape[1] / 2, shape[0] / 2)[1]) < 0:  # its corners were counted mirrored
        level = replace(level, plane=np.diag([1.0, -1.0, 1.0]) @ level.plane)
    return level, float(tilt)


def _pictures(source: Path) -> list[Path]:
    from natsort import natsorted

    from dic.frames.readers import READERS

    there = source.iterdir() if source.is_dir() else source.parent.glob(source.name)
    paths = natsorted(path for path in there if path.suffix.lower() in READERS)
    if not LEAST_BOARDS <= len(paths) <= MOST_PICTURES:
        raise TestFileError(
            f"{source.name} holds {len(paths)} pictures of the board",
            where=f"{WHERE}.source",
            remedy=f"name a folder of {LEAST_BOARDS} to {MOST_PICTURES}, the board tilted differently",
        )
    return paths


def _grey(path: Path, shape: tuple[int, int]) -> NDArray[np.uint8]:
    """Return a board picture with 8 bits, which is what the board's finders take."""
    try:
        grey = read_page(list_pages(path)[0])
    except (FrameError, KeyError) as error:
        what = error.what if isinstance(error, FrameError) else "is no picture"
        raise TestFileError(f"{path.name} {what}", where=WHERE, remedy="remove or replace it") from error
    if grey.shape != shape:
        raise TestFileError(
            f"{path.name} is {grey.shape[1]} × {grey.shape[0]} px, the frames are {shape[1]} × {shape[0]} px",
            where=WHERE,
            remedy="take the board with the same camera settings as the frames",
        )
    low, high = float(grey.min()), float(grey.max())
    return np.rint((grey - low) * (255 / max(high - low, 1.0))).astype(np.uint8)


def _advice(board: Board) -> str:
    squares = f"{board.columns} × {board.rows} squares"
    whole = "all in view, " if board.kind == "chessboard" else ""
    return f"{whole}sharp, evenly lit, with a white rim; check that the board has {squares}"
