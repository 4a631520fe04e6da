"""The one registry of what can become of a subset: constants, decoder and explanation."""

from __future__ import annotations

from enum import IntEnum


class Flag(IntEnum):
    """State of one subset in one frame; everything but `CONVERGED` leaves NaN."""

    CONVERGED = 0
    MASKED = 1
    LOW_TEXTURE = 2
    OUT_OF_VIEW = 3
    NOT_CONVERGED = 4
    DECORRELATED = 5
    SATURATED = 6
    NO_PICTURE = 7
    REPEATED_PICTURE = 8


#: What each flag means, for people.
MEANING = {
    Flag.CONVERGED: "measured",
    Flag.MASKED: "not on the coupon's textured area",
    Flag.LOW_TEXTURE: "too little texture in the subset to locate it",
    Flag.OUT_OF_VIEW: "moved out of the picture",
    Flag.NOT_CONVERGED: "the matching did not settle",
    Flag.DECORRELATED: "the pattern no longer resembles its reference",
    Flag.SATURATED: "too many clipped pixels",
    Flag.NO_PICTURE: "the frame could not be read",
    Flag.REPEATED_PICTURE: "repeated picture",
}
