"""Frames: still images and multi-page files, their grey values and their clock."""

from dic.frames.doubts import RepeatWatch
from dic.frames.source import FrameSource, check_damage, open_frames, unreadable_frames
from dic.frames.survey import FramesSurvey, look_at_frames

__all__ = [
    "FrameSource",
    "FramesSurvey",
    "RepeatWatch",
    "check_damage",
    "look_at_frames",
    "open_frames",
    "unreadable_frames",
]
