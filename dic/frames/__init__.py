"""Frames: still images and multi-page files, their grey values and their clock."""

from dic.frames.source import FrameSource, open_frames
from dic.frames.survey import FramesSurvey, look_at_frames

__all__ = ["FrameSource", "FramesSurvey", "look_at_frames", "open_frames"]
