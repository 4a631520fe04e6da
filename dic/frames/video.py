"""Video through PyAV: frames one after the other, each with the stream's own time."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError
from dic.frames.page import MOST_PAGES, Page, checked, not_grey, too_many, wrong_depth

#: The container's name for each ending.  Named, because some formats that would otherwise be guessed
#: from the content are lists of other files and addresses.
CONTAINERS = {".avi": "avi", ".mp4": "mov", ".mov": "mov", ".mkv": "matroska"}
#: Decoders hold a dozen frames, so that less is read here than of stills.
MOST_VIDEO_PIXELS = 36_000_000
#: Codecs that keep every value, by FFmpeg's names; of others that is not known.
LOSSLESS = frozenset({"ffv1", "ffvhuff", "huffyuv", "magicyuv", "png", "rawvideo", "tiff", "utvideo", "v210"})
#: Packed formats and the planar ones that hold the same values.
_UNPACKED = {"yuyv422": "yuv422p", "uyvy422": "yuv422p", "yvyu422": "yuv422p"}


class Film:
    """A video file that is read forward; going back starts it anew.

    Parameters
    ----------
    path
        The file.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._lock = Lock()
        self._stamps: list[int] | None = None
        self._frames: Iterator[Any] = iter(())
        self._next, self._held = 0, None

    def pages(self) -> list[Page]:
        """List the frames from the packets, without decoding more than the first.

        Raises
        ------
        FrameError
            If PyAV is missing, or the file holds no video that can be read.
        """
        with _open(self._path) as container:
            stream = _stream(container)
            stamps = [packet.pts for packet in _packets(container, stream)]
            if len(stamps) > MOST_PAGES:
                raise too_many(self._path)
            lossy = stream.codec_context.codec.canonical_name not in LOSSLESS
            step, rate = stream.time_base, stream.average_rate or stream.base_rate
        if not stamps:
            raise ValueError("it holds no frame")
        if None not in stamps and len(set(stamps)) == len(stamps) and step:
            self._stamps = sorted(stamps)
            times: list[float | None] = [float((one - self._stamps[0]) * step) for one in self._stamps]
        else:
            times = [float(k / rate) if rate else None for k in range(len(stamps))]
        self._restart()
        first = next(self._frames, None)
        if first is None:
            raise ValueError("none of its frames can be decoded")
        top, kind = _values(first, self._path)
        shape = first.height, first.width
        self._restart()
        return [
            checked(Page(self._path, k, shape, top, kind, time_s=time, film=self, lossy=lossy))
            for k, time in enumerate(times)
        ]

    def read(self, index: int) -> NDArray[Any]:
        """Return a frame's stored values.

        Raises
        ------
        FrameError
            If this frame cannot be decoded.
        """
        with self._lock:
            if index < self._next or self._next == 0:
                self._restart()
            while (frame := self._upcoming()) is not None:
                place = self._place(frame)
                if place > index:
                    self._held, self._next = frame, index + 1
                    break
                self._next = place + 1
                if place == index and not frame.is_corrupt:
                    return _stored(frame, self._path)
        raise FrameError(
            f"frame {index + 1} cannot be decoded", where=str(self._path), remedy="export the video anew"
        )

    def _upcoming(self) -> Any:
        """Return the frame that was read too early, or the next one; None behind the last."""
        held, self._held = self._held, None
        return held if held is not None else next(self._frames, None)

    def _place(self, frame: Any) -> int:
        """Return a decoded frame's number: frames that failed are left out, so that times must tell."""
        if self._stamps is None or frame.pts is None:
            return self._next
        return int(np.searchsorted(self._stamps, frame.pts))

    def _restart(self) -> None:
        self._frames, self._next, self._held = _decoded(self._path), 0, None


def _open(path: Path) -> Any:
    try:
        import av
    except ImportError as error:
        raise FrameError(
            "video is read through PyAV, which is not installed",
            where=str(path),
            remedy="install it with: pip install 'tauten[video]'",
        ) from error
    # With the protocol named, a path is never taken for an address.
    return av.open(f"file:{path.resolve()}", format=CONTAINERS[path.suffix.lower()])


def _decoded(path: Path) -> Iterator[Any]:
    """Yield the frames that can be decoded, in order of their times."""
    import av

    with _open(path) as container:
        for packet in container.demux(_stream(container)):
            try:
                yield from packet.decode()
            except av.FFmpegError:
                continue  # found missing by its time


def _stream(container: Any) -> Any:
    if not container.streams.video:
        raise ValueError("it holds no video")
    stream = container.streams.video[0]
    if stream.codec_context is None:
        raise ValueError("its compression is unknown")
    if not 0 < stream.width * stream.height <= MOST_VIDEO_PIXELS:
        raise ValueError(
            f"it claims {stream.width} × {stream.height} px, and {MOST_VIDEO_PIXELS // 1_000_000} million px "
            "are the most that is read of a video"
        )
    # A stream may change its size on the way.
    stream.codec_context.options = {"max_pixels": str(MOST_VIDEO_PIXELS)}
    return stream


def _packets(container: Any, stream: Any) -> Iterator[Any]:
    for count, packet in enumerate(container.demux(stream)):
        if count > MOST_PAGES:
            return
        if packet.size and not packet.is_discard:
            yield packet


def _values(frame: Any, path: Path) -> tuple[int, str]:
    """Return the value of white, and what the values are."""
    form = frame.format
    bits = form.components[0].bits
    if form.has_palette:
        raise not_grey(path, "its colours are a palette")
    if not 8 <= bits <= 16:
        raise wrong_depth(path, f"{bits}-bit")
    if form.is_rgb:
        return 2 ** (8 if bits == 8 else 16) - 1, "colour"
    if form.name.startswith("gray") or form.name.startswith("yuvj") or frame.color_range == 2:
        return 2**bits - 1, "grey"
    # Broadcast range: white is 235 of 255 (ITU-R BT.601-7, 2.5.3).
    return 235 << (bits - 8), "grey"


def _stored(frame: Any, path: Path) -> NDArray[Any]:
    """Return luma, or red, green and blue, as stored."""
    form = frame.format
    if form.is_rgb:
        name = "rgb24" if form.components[0].bits == 8 else "rgb48le"
        return np.asarray(frame.to_ndarray(format=name))
    if form.name in _UNPACKED:
        frame = frame.reformat(format=_UNPACKED[form.name])
    elif not (form.is_planar or len(form.components) == 1):
        raise not_grey(path, form.name)
    wide = form.components[0].bits > 8
    kind = np.dtype((">u2" if form.is_big_endian else "<u2") if wide else np.uint8)
    plane = frame.planes[0]
    rows = np.frombuffer(plane, np.uint8).reshape(-1, plane.line_size)
    row_bytes = frame.width * kind.itemsize
    return np.ascontiguousarray(rows[: frame.height, :row_bytes]).view(kind).astype(kind.newbyteorder("="))
