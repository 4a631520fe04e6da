"""The whole test file."""

from __future__ import annotations

from pathlib import Path

from pydantic import Field

from dic.testfile.gauges import GaugeName, NamedGauge
from dic.testfile.properties import Properties
from dic.testfile.sections import (
    Alignment,
    Correlation,
    Frames,
    Gauge,
    LoadRecord,
    Maps,
    Specimen,
    Sync,
)
from dic.testfile.values import Section
from dic.testfile.views import Camera, CouponSection


class TestFile(Section):
    """A whole test as described by the user."""

    __test__ = False

    specimen: Specimen
    frames: Frames
    load_record: LoadRecord
    camera: Camera = Camera()
    coupon: CouponSection = CouponSection()
    gauge: Gauge = Gauge()
    gauges: dict[GaugeName, NamedGauge] = Field(default_factory=dict, max_length=100)
    correlation: Correlation = Correlation()
    maps: Maps = Maps()
    alignment: Alignment = Alignment()
    sync: Sync = Sync()
    properties: Properties = Properties()
    path: Path = Field(default=Path("test.toml"), exclude=True)

    @property
    def follows_edges(self) -> bool:
        """Whether the width between the coupon's edges is wanted in every frame."""
        named = any(gauge.kind == "edge_width" for gauge in self.gauges.values())
        return named or self.specimen.shape == "round"

    def beside(self, name: str) -> Path:
        """Return the path of a file that the test file names relative to itself."""
        return self.path.parent / name

    def inputs(self) -> list[Path]:
        """List the files and folders that the test is read from, whether they exist or not."""
        frames = self.beside(self.frames.source)
        named = [self.path, self.beside(self.load_record.source), frames, frames.parent]
        board = self.camera.board
        pictures = () if board is None else (board.source, board.plane)
        others = (self.frames.times, self.coupon.mask, *pictures)
        return named + [self.beside(name) for name in others if name]
