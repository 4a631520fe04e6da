"""Calibration from boards that OpenCV's own renderer draws, seen through OpenCV's own lens model."""

import cv2
import numpy as np
import pytest
from PIL import Image

from dic.errors import TestFileError
from dic.optics import calibrate
from dic.testfile import Board

#: What the tests share is made once, also where workers share the tests.
pytestmark = pytest.mark.xdist_group("boards")

SHAPE = (480, 640)
MATRIX = np.array([[1500.0, 0, 330.0], [0, 1500.0, 235.0], [0, 0, 1]])
LENS = np.array([-0.4, 0.0, 0.0, 0.0, 0.0])
SQUARE, FINE = 5.0, 20
TURNS = ((0.0, 0.0), (0.5, 0.1), (-0.45, 0.2), (0.15, 0.5), (-0.1, -0.5), (0.35, -0.35))
CHARUCO = Board(
    source="board", kind="charuco", columns=9, rows=7, square=SQUARE, marker=3.5, dictionary="4X4_50"
)


def drawn(board):
    """Return the board with `FINE` px per mm as OpenCV draws it, and its size in mm."""
    size = board.columns * SQUARE, board.rows * SQUARE
    if board.kind == "charuco":
        markers = cv2.aruco.getPredefinedDictionary(cv2.aruco.DICT_4X4_50)
        target = cv2.aruco.CharucoBoard((board.columns, board.rows), SQUARE, board.marker, markers)
        return target.generateImage((int(size[0] * FINE), int(size[1] * FINE))), size
    y, x = np.indices((board.rows, board.columns))
    squares = np.where((x + y) % 2, 255, 0).astype(np.uint8)
    return np.kron(squares, np.ones((int(SQUARE * FINE),) * 2, np.uint8)), size


def seen(board, turn, distance=130.0):
    """Look at the board along each pixel's own ray, three samples each way, blurred by 0.7 px."""
    art, size = drawn(board)
    n = 3
    x, y = np.meshgrid((np.arange(SHAPE[1] * n) + 0.5) / n - 0.5, (np.arange(SHAPE[0] * n) + 0.5) / n - 0.5)
    points = np.stack([x.ravel(), y.ravel()], axis=1)[:, None]
    rays = cv2.undistortPoints(points, MATRIX, LENS)[:, 0]
    turning, _ = cv2.Rodrigues(np.array([turn[0], turn[1], 0.0]))
    middle = np.array([0.0, 0.0, distance]) - turning @ [size[0] / 2, size[1] / 2, 0.0]
    view = np.column_stack([turning[:, 0], turning[:, 1], middle])
    at = np.linalg.solve(view, np.c_[rays, np.ones(len(rays))].T)
    column, row = (np.floor(one / at[2] * FINE).astype(int) for one in at[:2])
    inside = (column >= 0) & (row >= 0) & (column < art.shape[1]) & (row < art.shape[0])
    grey = np.full(len(rays), 255.0)
    grey[inside] = art[row[inside], column[inside]]
    fine = cv2.GaussianBlur(grey.reshape(SHAPE[0] * n, SHAPE[1] * n), None, 0.7 * n)
    picture = fine.reshape(SHAPE[0], n, SHAPE[1], n).mean(axis=(1, 3))
    return np.rint(20 + picture * 0.8).astype(np.uint8)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    there = tmp_path_factory.mktemp("lens")
    (there / "board").mkdir()
    for number, turn in enumerate(TURNS):
        Image.fromarray(seen(CHARUCO, turn)).save(there / "board" / f"{number}.png")
    return there


def corner_error(found):
    """Return how far straight distances over the picture are wrong, against the true lens, in px."""
    x, y = (one.ravel() for one in np.meshgrid(np.linspace(60, 580, 9), np.linspace(60, 420, 7)))
    points = np.stack([x, y], axis=1)
    true = cv2.undistortPoints(points[:, None], MATRIX, LENS, P=MATRIX)[:, 0]
    straight = found.lens.straight(x, y)[0]
    # What strain needs is the shape; where the plane is and how large, is left open.
    design = np.column_stack([straight, np.ones(len(x))])
    return np.abs(true - design @ np.linalg.lstsq(design, true, rcond=None)[0]).max()


def test_a_charuco_board_gives_the_lens(folder):
    found = calibrate(CHARUCO, folder, SHAPE)
    assert found.boards == len(TURNS)
    assert found.rms_px < 0.15
    # Distortion is 11 px at the picture's corner; corners are found to 0.1 px.
    assert corner_error(found) < 0.3


def test_tilt_is_found_in_the_plane_of_the_coupon(folder):
    found = calibrate(CHARUCO.model_copy(update={"plane": "board/1.png"}), folder, SHAPE)
    normal = cv2.Rodrigues(np.array([*TURNS[1], 0.0]))[0][2, 2]
    assert found.tilt_deg == pytest.approx(np.degrees(np.arccos(normal)), abs=0.5)
    # 130 mm away under 1500 px: in the middle 0.0867 mm per px, lengthened along the tilt.
    middle = np.array([330.0, 235.0])
    assert found.mm_per_px(middle) == pytest.approx(130 / 1500 / np.sqrt(normal), rel=0.01)


def test_a_chessboard_is_found_too(tmp_path):
    board = Board(source="board", columns=8, rows=7, square=SQUARE)
    (tmp_path / "board").mkdir()
    for number, turn in enumerate(TURNS[1:5]):
        Image.fromarray(seen(board, turn)).save(tmp_path / "board" / f"{number}.png")
    found = calibrate(board, tmp_path, SHAPE)
    assert found.rms_px < 0.15
    assert corner_error(found) < 0.5


def test_what_is_no_board_is_named(folder, tmp_path):
    (tmp_path / "board").mkdir()
    for number in range(4):
        Image.fromarray(np.full(SHAPE, 128, np.uint8)).save(tmp_path / "board" / f"grey_{number}.png")
    with pytest.raises(TestFileError, match=r"found in 0 of 4 pictures \(not in grey_0.png.*9 × 7 squares"):
        calibrate(CHARUCO, tmp_path, SHAPE)
    with pytest.raises(TestFileError, match=r"0.png is 640 × 480 px, the frames are 100 × 90 px"):
        calibrate(CHARUCO, folder, (90, 100))
    (tmp_path / "few").mkdir()
    with pytest.raises(TestFileError, match="few holds 0 pictures"):
        calibrate(CHARUCO.model_copy(update={"source": "few"}), tmp_path, SHAPE)
    named = CHARUCO.model_copy(update={"source": str(folder / "board"), "plane": "board/grey_1.png"})
    with pytest.raises(TestFileError, match=r"not found in board/grey_1.png"):
        calibrate(named, tmp_path, SHAPE)
