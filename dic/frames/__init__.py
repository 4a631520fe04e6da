"""Frames: still images and multi-page files, their grey values and their clock."""

from dic.frames.source import FrameSource, open_frames

__all__ = ["FrameSource", "open_frames"]
