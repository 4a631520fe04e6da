"""The frames of one test in order, each with its time; only one is in memory at a time."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from datetime import datetime
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError, Notice, TestFileError
from dic.frames.clock import exposure_of, frame_clock
from dic.frames.depth import Depth, depth_in_use
from dic.frames.doubts import RepeatWatch
from dic.frames.folder import find_frames
from dic.frames.readers import Grey, Page, list_pages, read_page, read_stored, reader_of
from dic.testfile import Frames

LEAST_FRAMES = 3
#: Share of frames that may be unreadable; with more, something else than single frames is wrong.
MOST_DAMAGED = 0.5
#: Share of clipped colour values in the first frame that is worth a word.
MANY_CLIPPED = 0.01


@dataclass(frozen=True)
class FrameSource:
    """Frames in order.

    Attributes
    ----------
    pages
        Where each frame lies, shape (n,); the first one is sound.
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

    @property
    def timed(self) -> bool:
        """Whether the frames' times are known."""
        return bool(np.isfinite(self.time_s).all())

    def __len__(self) -> int:
        return len(self.pages)

    def __getitem__(self, index: int) -> Grey:
        """Read one frame's grey values, shape (rows, columns); `FrameError` if it is damaged."""
        return read_page(self.pages[index])

    @property
    def damage(self) -> dict[int, str]:
        """Why frames cannot be used, as far as their headers tell, by frame number."""
        return {index: page.damage for index, page in enumerate(self.pages) if page.damage}

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

    @cached_property
    def depth(self) -> Depth:
        """Depth in use, from a few frames."""
        return depth_in_use(self.pages[0], self._samples())

    @property
    def lossy(self) -> bool:
        """Whether compression may have changed grey values."""
        return any(page.lossy for page in self.pages)

    def watch(self) -> RepeatWatch:
        """Return a watch for a camera that froze."""
        return RepeatWatch(alike_at_rest=self.lossy)

    def full_scale(self) -> float:
        """Return the grey value of a saturated pixel."""
        return self.depth.full_scale

    def _samples(self) -> Iterator[NDArray[np.integer]]:
        """Read first, middle and last frame, of a video, which is read forward only, the first."""
        video = self.pages[0].film is not None
        for index in (0,) if video else (0, len(self) // 2, len(self) - 1):
            try:
                yield read_stored(self.pages[index])
            except FrameError:
                if index == 0:
                    raise

    def reference(self, said: int | tuple[int, int] | None) -> tuple[int, int]:
        """Return the first and last frame that strain counts from, as the test file says it.

        Raises
        ------
        TestFileError
            If there are no such frames.
        """
        first, last = said if isinstance(said, tuple) else (said or 0, said or 0)
        if not 0 <= first <= last < len(self):
            raise TestFileError(
                f"there are no frames {first} to {last}",
                where="frames.reference",
                remedy=f"frames are counted from 0 to {len(self) - 1}",
            )
        return first, last

    def listing(self) -> str:
        """Return a digest of names, sizes and dates: whether these are still the same files."""
        digest = hashlib.sha256()
        for path in dict.fromkeys(page.path for page in self.pages):
            state = path.stat()
            # A name need not be text.
            digest.update(os.fsencode(path.resolve()))
            digest.update(f"|{state.st_size}|{state.st_mtime_ns}\n".encode())
        return digest.hexdigest()

    def sha256(self) -> str:
        """Return the SHA-256 over the contents of all files in order."""
        digest = hashlib.sha256()
        for path in dict.fromkeys(page.path for page in self.pages):
            try:
                with path.open("rb") as file:
                    digest.update(hashlib.file_digest(file, "sha256").digest())
            except OSError as error:
                digest.update(f"unreadable: {error.strerror}".encode())
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
        If there are none or fewer than three, if the first one or more than half of them cannot be
        read or are of another size, or if the times do not fit.
    """
    paths, notices = find_frames(
        folder / section.source, folder / section.times if section.times is not None else None
    )
    listed = [page for path in paths for page in _listed(path, alone=len(paths) == 1)]
    if len(listed) < LEAST_FRAMES:
        raise FrameError(
            f"holds {len(listed)} frame{'s' * (len(listed) != 1)}, and a test needs at least {LEAST_FRAMES}",
            where=section.source,
            remedy="check frames.source",
        )
    clock = frame_clock(section, folder, listed)
    pages = _fitting([listed[k] for k in clock.order], section.mosaic)
    notices += [*_kind_doubts(pages), *clock.notices]
    return FrameSource(pages, clock.time_s, tuple(notices), clock.epoch, exposure_of(section, pages))


def unreadable_frames(names: tuple[str, ...], damage: Mapping[int, str]) -> Iterator[Notice]:
    """Say which frames are missing from a test, and why.

    Parameters
    ----------
    names
        All frames' names.
    damage
        Reasons by frame number.
    """
    if damage:
        said = "; ".join(f"{names[index]} {why}" for index, why in sorted(damage.items())[:3])
        more = f"; and {len(damage) - 3} more" if len(damage) > 3 else ""
        yield Notice(
            "frames_unreadable",
            f"{len(damage)} of {len(names)} frames could not be used and have no readings: {said}{more}.",
        )


def check_damage(damage: Mapping[int, str], frames: int, where: str) -> None:
    """Refuse a test of which most frames cannot be used."""
    if len(damage) > MOST_DAMAGED * frames:
        index, why = min(damage.items())
        raise FrameError(
            f"{len(damage)} of {frames} frames cannot be used; the first of them, frame {index}, {why}",
            where=where,
            remedy="export the frames anew, and take out what does not belong",
        )


def _listed(path: Path, *, alone: bool) -> list[Page]:
    """List the pictures of a file; one of many that cannot be listed is one damaged picture."""
    try:
        return list_pages(path)
    except FrameError as error:
        if alone:
            raise
        return [Page(path, damage=error.what, remedy=error.remedy)]


def _fitting(pages: list[Page], mosaic: str | None) -> tuple[Page, ...]:
    """Mark the pictures that are not of the first one's size and depth; that one must be sound."""
    first, fitting = pages[0], []
    if first.damage:
        raise FrameError(first.damage, where=str(first.path), remedy=first.remedy)
    if mosaic is not None and first.channels > 1:
        raise FrameError(
            "is in colour, not a mosaic", where=str(first.path), remedy="leave out frames.mosaic"
        )
    for page in pages:
        same = (page.shape, page.top, page.kind) == (first.shape, first.top, first.kind)
        if not (same or page.damage):
            page = replace(page, damage=f"is {page.size()} where {first.path.name} is {first.size()}")
        fitting.append(replace(page, kind=mosaic) if mosaic is not None else page)
    damage = {index: page.damage for index, page in enumerate(fitting) if page.damage}
    check_damage(damage, len(fitting), str(fitting[min(damage, default=0)].path))
    return tuple(fitting)


def _kind_doubts(pages: tuple[Page, ...]) -> Iterator[Notice]:
    """Say what compression lost, what was made of colours, and whether some are clipped where grey is not."""
    if any(page.alpha for page in pages):
        yield Notice("alpha_ignored", "The frames have a transparency channel, which was ignored.")
    if any(page.lossy for page in pages):
        yield Notice(
            "frames_compressed",
            "The frames were compressed with loss, which changes their finest structure and harms strains "
            "below a tenth of a pixel; film the next test to TIFF or PNG.",
        )
    if pages[0].kind != "colour":
        return
    yield Notice(
        "frames_in_colour",
        "The frames are in colour; grey was taken as (red + 2 green + blue)/4. A monochrome camera resolves "
        "finer speckles.",
    )
    stored = read_stored(pages[0])
    top = depth_in_use(pages[0], [stored]).full_scale
    clipped = float((stored >= top).any(axis=2).mean() - (stored >= top).all(axis=2).mean())
    if clipped > MANY_CLIPPED and not reader_of(pages[0].path).video:
        yield Notice(
            "colour_clipped",
            f"In {100 * clipped:.0f} % of the first frame's pixels one colour is clipped where grey as a "
            "whole is not; expose less, or balance the light.",
        )
