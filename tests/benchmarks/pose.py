"""The coupon's pose, found without help in twenty varied scenes, against the formulas they came from."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from table import Bench

from dic.pattern import find_coupon
from synthetic_images import Camera, Cosines, Coupon, Dots, Photograph, Waist, rigid


@dataclass(frozen=True)
class Pose:
    """One scene: how the coupon stands, before what, and how it is photographed."""

    name: str
    tilt: float = 0.0
    width: float = 170.0
    shape: tuple[int, int] = (520, 330)
    background: Any = 0.1
    texture: Any = 4.5
    waist: Waist | None = None
    holes: tuple[tuple[float, float, float], ...] = ()
    camera: Camera = field(default_factory=lambda: Camera(noise=0.01))
    #: The middle of the coupon beside the picture's, px.
    aside: float = 0.0

    def picture(self, seed: int) -> np.ndarray:
        rows, columns = self.shape
        side = float(2 * np.hypot(rows, columns))
        texture = (
            Dots(self.texture, area=(side, side), seed=seed)
            if isinstance(self.texture, float)
            else self.texture
        )
        middle = (columns / 2 - 0.5 + self.aside, rows / 2 - 0.5)
        holes = tuple((middle[0] + x, middle[1] + y, radius) for x, y, radius in self.holes)
        scene = Coupon(
            texture,
            rigid(0, 0),
            middle,
            self.width,
            self.tilt,
            self.background,
            waist=self.waist,
            holes=holes,
        )
        return self.camera.photograph(scene, self.shape, seed=seed)

    @property
    def both_edges(self) -> bool:
        return self.aside == 0


def poses() -> list[Pose]:
    brick, grass, gravel = (Photograph.named(name, 3.0) for name in ("brick", "grass", "gravel"))
    sharp = {"noise": 0.01}
    return [
        Pose("dark background", 2.3),
        Pose("bright background", -4.1, background=0.95),
        Pose("middle grey background", 1.2, background=0.5),
        Pose("bricks behind", 3.4, background=brick),
        Pose("grass behind", -2.2, background=grass),
        Pose("gravel behind", 6.7, background=gravel),
        Pose("grass behind, fine", 0.6, background=Photograph.named("grass", 2.0)),
        Pose("tilted by 10°", 10.0),
        Pose("tilted by 10°, bricks", -10.0, background=brick),
        Pose("waisted", 1.5, waist=Waist(300, 260, 280)),
        Pose("waisted, gravel", -3.0, waist=Waist(280, 200, 260), background=gravel),
        Pose("waisted, bright", 4.4, waist=Waist(320, 300, 300), background=0.9),
        Pose("holed", 2.0, holes=((0.0, -20.0, 28.0),)),
        Pose("two holes, grass", -1.7, holes=((-30.0, -90.0, 20.0), (25.0, 70.0, 26.0)), background=grass),
        Pose("half out of view", 3.1, aside=150.0),
        Pose("half out of view, bricks", -2.6, aside=-140.0, background=brick),
        Pose("uneven light", 2.8, background=0.2, camera=Camera(vignette=0.5, gradient=0.5, **sharp)),
        Pose("blur 1 px", 1.9, camera=Camera(blur=1.0, **sharp)),
        Pose("blur 2 px, coarse dots", -2.9, texture=8.0, camera=Camera(blur=2.0, **sharp)),
        Pose("blur 1 px, gravel, smooth pattern", 2.5, texture=Cosines(4.0, seed=3), background=gravel,
             camera=Camera(blur=1.0, **sharp)),
    ]  # fmt: skip


def run() -> Bench:
    bench = Bench()
    worst_axis = worst_width = 0.0
    for number, pose in enumerate(poses()):
        coupon = find_coupon(pose.picture(seed=100 + number))
        axis = abs((coupon.axis_angle_deg - pose.tilt + 90) % 180 - 90)
        bench.add(f"{pose.name}: axis", axis, "°", high=0.1)
        worst_axis = max(worst_axis, axis)
        if pose.both_edges:
            width = 100 * abs(coupon.width_px / pose.width - 1)
            bench.add(f"{pose.name}: width", width, "%", high=0.2)
            worst_width = max(worst_width, width)
    bench.add("worst axis", worst_axis, "°", high=0.1)
    bench.add("worst width", worst_width, "%", high=0.2)
    return bench
