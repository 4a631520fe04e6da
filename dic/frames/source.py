"""The frames of one test in order, each with its time; only one is in memory at a time."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
from natsort import natsorted, ns
from numpy.typing import NDArray

from dic.errors import FrameError, Notice
from dic.frames.clock import frame_times
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
    """

    pages: tuple[Page, ...]
    time_s: NDArray[np.float64]
    notices: tuple[Notice, ...] = ()

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
    names = [page.path.name for page in pages]
    return FrameSource(pages, frame_times(section, folder, names), tuple(_missing_numbers(names, section)))


def _missing_numbers(names: list[str], section: Frames) -> Iterator[Notice]:
    """Warn of gaps in the numbering, which a fixed rate would turn into wrong times."""
    numbers = [
        int(found[-1]) if (found := re.findall(r"\d{1,12}", Path(name).stem)) else None for name in names
    ]
    gaps = [
        (one, other)
        for (one, a), (other, b) in pairwise(zip(names, numbers, strict=True))
        if a is not None and b is not None and b - a > 1
    ]
    steps = {b - a for a, b in pairwise(n for n in numbers if n is not None)}
    # Every second number, say, is a way of numbering; a jump among ones is a gap.
    if section.rate is not None and gaps and 1 in steps:
        yield Notice(
            "frame_numbers_missing",
            f"Frame numbers jump from {gaps[0][0]} to {gaps[0][1]}"
            + (f" and in {len(gaps) - 1} more places" if len(gaps) > 1 else "")
            + "; if frames are missing, all later times are too early: give frames.times instead of a rate.",
        )


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
