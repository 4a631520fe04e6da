"""How long a clip-on extensometer was on the coupon: it is often taken off before fracture."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.sync.noise import NORMAL_MEDIAN

Floats = NDArray[np.float64]

#: A jump is this many times the usual change of the difference from frame to frame ...
JUMP_NOISE = 10.0
#: ... and at least this share of the whole strain.
JUMP_SHARE = 0.05
#: After a mere slip of its edges a clip-on goes on following; its slope then stays within this factor.
FOLLOWS = 2.0
#: It stands still where it moves by less than this share of what the camera sees.
STILL = 0.1
#: Standard deviations within which a reading that stands still stays.
STILL_NOISE = 5.0


@dataclass(frozen=True)
class Attached:
    """The frames in which the clip-on was on the coupon.

    Attributes
    ----------
    frames
        How many frames from the first one on.
    end
        What ended it, in words; empty where it lasts.
    slips
        Frames after which the reading jumped and went on following.
    """

    frames: int
    end: str = ""
    slips: tuple[int, ...] = ()


def attached(camera: Floats, contact: Floats, noise: float) -> Attached:
    """Find the frames in which a clip-on follows the coupon.

    Parameters
    ----------
    camera, contact
        Both strains at the same frames, in order of time, shape (n,), without NaN.
    noise
        Standard deviation of their difference.

    Returns
    -------
    Attached
        Up to the first jump after which the clip-on does not follow the camera any more, or up to where
        it stands still for the rest while the camera sees strain.
    """
    change = np.abs(np.diff(contact - camera))
    usual = max(float(np.median(change)) / NORMAL_MEDIAN, noise)
    jumps = np.flatnonzero(change > max(JUMP_NOISE * usual, JUMP_SHARE * float(np.ptp(camera))))
    slips: list[int] = []
    for last in jumps.tolist():
        if not _follows(camera, contact, last, noise):
            return Attached(last + 1, "its reading jumps and no longer follows the coupon", tuple(slips))
        slips.append(last)
    frozen = _stands_still(camera, contact, noise)
    end = "its reading stands still while the coupon goes on stretching" if frozen < len(camera) else ""
    return Attached(frozen, end, tuple(slips))


def _follows(camera: Floats, contact: Floats, last: int, noise: float) -> bool:
    """Tell whether the contact reading goes on as before after frame `last`."""
    before, after = slice(0, last + 1), slice(last + 2, None)
    if len(camera[after]) < 3 or np.ptp(camera[after]) < JUMP_NOISE * noise:
        return False
    slope = np.polyfit(camera[after], contact[after], 1)[0]
    usual = 1.0
    if last >= 3 and np.ptp(camera[before]) > JUMP_NOISE * noise:
        usual = np.polyfit(camera[before], contact[before], 1)[0]
    return bool(1 / FOLLOWS < slope / usual < FOLLOWS) if usual else False


def _stands_still(camera: Floats, contact: Floats, noise: float) -> int:
    """Return the number of frames before the contact reading stands still for good (all, if never)."""
    ahead = _range_ahead(camera)
    worth = ahead > max(JUMP_NOISE * noise, JUMP_SHARE * float(np.ptp(camera)))
    still = np.flatnonzero(worth & (_range_ahead(contact) < STILL * ahead))
    if not still.size:
        return len(camera)
    final = float(np.median(contact[still[0] :]))
    moving = np.flatnonzero(np.abs(contact - final) > STILL_NOISE * noise)
    return int(moving[-1]) + 1 if moving.size else 0


def _range_ahead(values: Floats) -> Floats:
    """Return, for every frame, the range of the values from there to the end."""
    back = values[::-1]
    return (np.maximum.accumulate(back) - np.minimum.accumulate(back))[::-1]
