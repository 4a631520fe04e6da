"""Which files of a folder are the frames, and in which order."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from natsort import natsorted, ns

from dic.errors import FrameError, Notice, listed
from dic.frames.readers import READERS, reader_of

#: What operating systems leave in folders.
_HIDDEN = {"thumbs.db", "desktop.ini"}


def find_frames(source: Path, beside: Path | None = None) -> tuple[list[Path], list[Notice]]:
    """List the picture files behind a folder, a file or a pattern, in natural order.

    Parameters
    ----------
    source
        A folder, a file, or a pattern for the file's name.
    beside
        A file that may lie among the frames and is expected there.

    Returns
    -------
    tuple
        Files in natural order of names (``cam_9`` before ``cam_10``), and what was left out.

    Raises
    ------
    FrameError
        If there is no picture, or more than one video.
    """
    try:
        found = _behind(source)
    except OSError as error:
        raise FrameError(
            f"cannot be read ({error.strerror})", where=str(source), remedy="check frames.source"
        ) from error
    known = [path for path in found if path.suffix.lower() in READERS]
    stills = [path for path in known if not reader_of(path).video]
    videos = [path for path in known if reader_of(path).video]
    taken = stills or videos
    if not taken:
        there = source.exists() or (source.parent.is_dir() and "*" in source.name)
        raise FrameError(
            "no frames found" if there else "no frames found, because it does not exist",
            where=str(source),
            remedy=f"name a folder, a file or a pattern of {', '.join(READERS)} files",
        )
    if not stills and len(videos) > 1:
        raise FrameError(
            f"holds {len(videos)} videos", where=str(source), remedy=f"name one, for example {videos[0].name}"
        )
    kept = _one_of_each(taken)
    foreign = [path for path in found if path not in set(taken) and path != beside]
    notices = [*_foreign(foreign), *_twins(taken, kept), *_kinds(kept)]
    return natsorted(kept, key=lambda path: path.name, alg=ns.PATH), notices


def _behind(source: Path) -> list[Path]:
    if source.is_file():
        return [source]
    if source.is_dir():
        found = source.iterdir()
    elif source.parent.is_dir():
        found = source.parent.glob(source.name)
    else:
        return []
    # No pipes or devices, which would be waited for without end.
    return [
        path
        for path in found
        if path.is_file() and not path.name.startswith(".") and path.name.lower() not in _HIDDEN
    ]


def _one_of_each(paths: list[Path]) -> list[Path]:
    """Of pictures that differ only in their ending, keep the one that lost least."""
    rank = {ending: (reader.lossy, k) for k, (ending, reader) in enumerate(READERS.items())}
    best: dict[str, Path] = {}
    for path in sorted(paths, key=lambda path: (*rank[path.suffix.lower()], path.name)):
        best.setdefault(path.stem, path)
    return list(best.values())


def _names(paths: list[Path]) -> list[str]:
    return natsorted(path.name for path in paths)


def _foreign(paths: list[Path]) -> Iterator[Notice]:
    if paths:
        yield Notice(
            "files_ignored",
            f"Among the frames lie files that are none and were ignored: {listed(_names(paths))}.",
        )


def _twins(paths: list[Path], kept: list[Path]) -> Iterator[Notice]:
    left = _names([path for path in paths if path not in set(kept)])
    if left:
        yield Notice(
            "frames_twice",
            f"Some frames are there in two formats; the one without loss was taken, and left out were: "
            f"{listed(left)}.",
        )


def _kinds(paths: list[Path]) -> Iterator[Notice]:
    endings = {path.suffix.lower() for path in paths}
    if len({id(READERS[ending]) for ending in endings}) > 1:
        yield Notice(
            "frames_mixed",
            f"The frames are of several formats ({', '.join(sorted(endings))}) and are in order of "
            "their names; check that all belong to this test.",
        )
