"""The gauges that the test file names."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from dic.errors import nearest
from dic.testfile.values import Section, Size, Stretch, quantity

Pixels = Annotated[float, Field(ge=-1e5, le=1e5, allow_inf_nan=False)]
Share = Annotated[float, Field(ge=0, le=1)]
#: A place: x and y in the reference picture, px; or, as lengths in quotes, across and along the coupon from
#: the middle of the gauge region.
Place = tuple[Pixels, Pixels] | tuple[Stretch, Stretch]

#: Keys of the named gauges by kind: those needed, and further ones.
GAUGE_KEYS: dict[str, tuple[set[str], set[str]]] = {
    "extensometer": (set(), {"length", "centre", "angle", "width", "from", "to"}),
    "area": (set(), {"region", "points", "component"}),
    "transverse": (set(), {"stations", "length", "width"}),
    "points": ({"from", "to"}, set()),
    "line": ({"from", "to"}, {"length", "width"}),
    "edge_width": (set(), {"centre", "length"}),
}


class NamedGauge(Section):
    """One of the named gauges; each kind has its own keys."""

    kind: Literal["extensometer", "area", "transverse", "points", "line", "edge_width"]
    length: Size | None = None
    width: Size | None = None
    centre: Place | None = None
    angle: Annotated[float, quantity("angle"), Field(ge=-360, le=360)] | None = None
    start: Place | None = Field(None, alias="from")
    end: Place | None = Field(None, alias="to")
    region: tuple[Pixels, Pixels, Pixels, Pixels] | None = None
    points: Annotated[tuple[tuple[Pixels, Pixels], ...], Field(min_length=3, max_length=1000)] | None = None
    component: Literal["axial", "transverse", "shear"] | None = None
    stations: Annotated[tuple[Share | Stretch, ...], Field(min_length=1, max_length=100)] | None = None

    @model_validator(mode="after")
    def _keys_of_its_kind(self) -> NamedGauge:
        alias = {"start": "from", "end": "to"}
        given = {alias.get(key, key) for key in self.model_fields_set - {"kind"}}
        needed, further = GAUGE_KEYS[self.kind]
        if missing := sorted(needed - given):
            raise ValueError(f'a gauge of kind "{self.kind}" needs {" and ".join(missing)}; add it')
        if foreign := sorted(given - needed - further):
            raise ValueError(
                f'{foreign[0]} means nothing for kind "{self.kind}"; {nearest(foreign[0], needed | further)}'
            )
        placed_twice = self.kind == "extensometer" and {"centre", "angle", "length"} & given
        if ("from" in given) != ("to" in given) or ("from" in given and placed_twice):
            raise ValueError("give from and to together, without length, centre and angle")
        if self.region is not None and self.points is not None:
            raise ValueError("give region or points, not both")
        return self


GaugeName = Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_]{0,39}$")]
