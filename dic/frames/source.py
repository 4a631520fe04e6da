"""The frames of one test in order, each with its time; only one is in memory at a time."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import numpy as np
from natsort import natsorted, ns
from numpy.typing import NDArray

from dic.errors import FrameError, Notice
from dic.frames.clock import exposure_of, frame_clock
from dic.frames.readers import READERS, Grey, Page, list_pages, read_page
from dic.testfile import Frames

LEAST_FRAMES = 3


@dataclass(frozen=True)
class FrameSource:
    """Frames in order.

    Attributes
    ----------
    pages
        Where each frame lies, shape (n,).
    time_s
        Time of each frame on the camera's clock, s, shape (n,).
    notices
        Doubts about the frames.
    epoch
        Date and time of the camera's time zero, on the clock that wrote the files' stamps, without a
        time zone; None where only differences of time are known.
    exposure_s
        Exposure time of a frame, s; None where unknown.
    """

    pages: tuple[Page, ...]
    time_s: NDArray[np.float64]
    notices: tuple[Notice, ...] = ()
    epoch: datetime | None = None
    exposure_s: float | None = None

    def __len__(self) -> int:
        return len(self.pages)

    def __getitem__(self, index: int) -> Grey:
        """Read one frame, grey values as stored, shape (rows, columns)."""
        return read_page(self.pages[index])

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of every frame."""
        rows, columns = self.pages[0].shape
        return rows, columns

    @property
    def names(self) -> tuple[str, ...]:
        """A name for each frame: its file, and its page where the file holds several."""
        several = len({page.path for page in self.pages}) < len(self.pages)
        return tuple(f"{p.path.name}#{p.index + 1}" if several else p.path.name for p in self.pages)

    def full_scale(self) -> float:
        """Return the largest grey value the camera gives: the depth in use in the first frame."""
        if self.pages[0].dtype == np.uint8:
            return 255.0
        brightest = int(self[0].max())
        return float(next(top for top in (1023, 4095, 16383, 65535) if brightest <= top))

    def listing(self) -> str:
        """Return a digest of names, sizes and dates: whether these are still the same files."""
        digest = hashlib.sha256()
        for path in dict.fromkeys(page.path for page in self.pages):
            state = path.stat()
            digest.update(f"{path.resolve()}|{state.st_size}|{state.st_mtime_ns}\n".encode())
        return digest.hexdigest()

    def sha256(self) -> str:
        """Return the SHA-256 over the contents of all files in order."""
        digest = hashlib.sha256()
        for path in dict.fromkeys(page.path for page in self.pages):
            with path.open("rb") as file:
                digest.update(hashlib.file_digest(file, "sha256").digest())
        return digest.hexdigest()


def open_frames(section: Frames, folder: Path) -> FrameSource:
    """Find the frames that a test file names and put them in order.

    Parameters
    ----------
    section
        ``[frames]`` of the test file.
    folder
        What relative paths start from.

    Returns
    -------
    FrameSource
        Natural order of names (``cam_9`` before ``cam_10``), pages in the file's order.

    Raises
    ------
    FrameError
        If there are none or fewer than three, if one is unreadable or of another size, or if the
        times do not fit.
    """
    paths = _find(folder / section.source)
    pages = tuple(page for path in paths for page in list_pages(path))
    if len(pages) < LEAST_FRAMES:
        raise FrameError(
            f"holds {len(pages)} frame{'s' * (len(pages) != 1)}, and a test needs at least {LEAST_FRAMES}",
            where=section.source,
        )
    for page in pages:
        if page.shape != pages[0].shape or page.dtype != pages[0].dtype:
            raise FrameError(
                f"is {_size(page)} where {pages[0].path.name} is {_size(pages[0])}",
                where=str(page.path),
                remedy="all frames of a test have one size and depth; take out what does not belong",
            )
    clock = frame_clock(section, folder, pages)
    pages = tuple(pages[k] for k in clock.order)
    return FrameSource(pages, clock.time_s, clock.notices, clock.epoch, exposure_of(section, pages))


def _size(page: Page) -> str:
    return f"{page.shape[1]} × {page.shape[0]} px {page.dtype}"


def _find(source: Path) -> list[Path]:
    """List the picture files behind a folder, a file or a glob, in natural order."""
    if source.is_file():
        found = [source]
    elif source.is_dir():
        found = list(source.iterdir())
    elif source.parent.is_dir():
        found = list(source.parent.glob(source.name))
    else:
        found = []
    pictures = [p for p in found if p.suffix.lower() in READERS and not p.name.startswith(".")]
    if not pictures:
        there = source.exists() or (source.parent.is_dir() and "*" in source.name)
        raise FrameError(
            "no frames found" if there else "no frames found, because it does not exist",
            where=str(source),
            remedy=f"name a folder, a file or a pattern of {', '.join(READERS)} files",
        )
    return natsorted(pictures, key=lambda path: path.name, alg=ns.PATH)
