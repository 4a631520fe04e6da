"""The result folder: what in it may be replaced, and what of an earlier run has to go."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

from dic.errors import StoreError
from dic.store import fields

#: What each result has in it that nothing but this program would write under that name.
_MARKS = {
    "results.json": b'"tauten":',
    "history.csv": b"frame,time_s,force_N,stress_MPa,",
    "lines.csv": b"gauge,frame,time_s,place_px,",
    "report.html": b"tauten",
}
#: Beyond this a file is no result.
_MOST_BYTES = 100_000_000
#: Every figure that a report may have.
FIGURES = (
    "stress-strain",
    "elastic-part",
    "strains-in-time",
    "transverse-axial",
    "modulus-residuals",
    "clocks",
    "clock-offset",
    "gauge-on-coupon",
    *(f"map-{letter}" for letter in "abcdefghijklmnop"),
    "elastic-stress",
    "alignment-stations",
    "alignment-contrast",
    "clip-on-curves",
    "clip-on-difference",
    "named-gauges",
    "named-gauges-in-time",
    *(f"line-{number}" for number in range(1, 101)),
)
_ELSEWHERE = "choose another folder with --out"


def claim_folder(folder: Path, inputs: Iterable[Path]) -> None:
    """Make the folder, and take out of it what an earlier run left.

    Parameters
    ----------
    folder
        The result folder.
    inputs
        Files and folders that the test is read from.

    Raises
    ------
    StoreError
        If a result would take the place of an input or of somebody else's file, or if the folder
        cannot be made or cleared.
    """
    if folder.exists() and not folder.is_dir():
        raise StoreError("is a file, where the result folder should be", where=str(folder), remedy=_ELSEWHERE)
    if (folder / "figures").is_symlink():
        raise StoreError(
            "holds a link in place of its folder 'figures'",
            where=str(folder),
            remedy=f"remove the link, or {_ELSEWHERE}",
        )
    taken = [path for path in _results(folder) if path.exists() or path.is_symlink()]
    for path in [*taken, folder / "figures"]:
        for given in inputs:
            if _same(path, given):
                raise StoreError(
                    f"'{path.name}' is read by the test and has the name of a result",
                    where=str(folder),
                    remedy=_ELSEWHERE,
                )
    for path in taken:
        if path.parent == folder and not _is_ours(path):
            raise StoreError(
                f"holds a file '{path.name}' that no earlier run has written",
                where=str(folder),
                remedy=f"move it away, or {_ELSEWHERE}",
            )
        if path.parent != folder and not _holds_results(folder):
            raise StoreError(
                f"holds a file 'figures/{path.name}', but no earlier results",
                where=str(folder),
                remedy=f"move it away, or {_ELSEWHERE}",
            )
    remove_results(folder)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(
            f"the folder cannot be made ({error.strerror})", where=str(folder), remedy=_ELSEWHERE
        ) from error


def remove_results(folder: Path) -> None:
    """Remove what an earlier run left, so that a run that fails leaves nothing that looks like its result.

    The fields stay: they are taken up again if they fit.

    Raises
    ------
    StoreError
        If a file cannot be removed.
    """
    going = [folder / name for name in _MARKS if _is_ours(folder / name)]
    if going or _holds_results(folder):
        going += _figures(folder)
    for path in going:
        try:
            path.unlink(missing_ok=True)
        except OSError as error:
            raise StoreError(
                f"the earlier result cannot be removed ({error.strerror})",
                where=str(path),
                remedy=f"close the file where it is open, or {_ELSEWHERE}",
            ) from error


def _same(one: Path, other: Path) -> bool:
    try:
        return one.samefile(other)
    except (OSError, ValueError):  # one of them does not exist, or could not
        return False


def _results(folder: Path) -> list[Path]:
    """List every path that a run writes."""
    return [*(folder / name for name in _MARKS), folder / fields.NAME, *_figures(folder)]


def _figures(folder: Path) -> list[Path]:
    return [folder / "figures" / f"{name}.{ending}" for name in FIGURES for ending in ("png", "svg")]


def _holds_results(folder: Path) -> bool:
    return any(_is_ours(folder / name) for name in (fields.NAME, *_MARKS))


def _is_ours(path: Path) -> bool:
    """Tell whether a file at the path of a result carries this program's mark."""
    if not path.is_file():  # a pipe would be waited for
        return False
    if path.name == fields.NAME:
        return "tracking_key" in fields.stored_attributes(path.parent)
    try:
        with path.open("rb") as file:
            return _MARKS[path.name] in file.read(_MOST_BYTES)
    except OSError:
        return False
