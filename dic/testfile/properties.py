"""The section on properties, and what each preset stands for."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import model_validator

from dic.quantities import parse
from dic.testfile.values import Section, Strain, Stress


class ModulusWindow(Section):
    """Window of the modulus, in strain or in stress, and how it is read from there."""

    kind: Literal["regression", "chord", "tangent", "secant"] = "regression"
    strain: tuple[Strain, Strain] | None = None
    stress: tuple[Stress, Stress] | None = None

    @model_validator(mode="after")
    def _one_window(self) -> ModulusWindow:
        given = list(self.given.values())
        if len(given) != 1 or not given[0][0] < given[0][1]:
            raise ValueError("give one of strain = [low, high] or stress = [low, high], low before high")
        if self.kind == "secant" and 0 not in given[0]:
            raise ValueError("a secant starts from zero; write for example strain = [0, 0.0025]")
        return self

    @property
    def given(self) -> dict[str, tuple[float, float]]:
        """The window under the name of what it bounds, ``strain`` or ``stress``."""
        both = {"strain": self.strain, "stress": self.stress}
        return {name: window for name, window in both.items() if window is not None}


#: What each preset sets where the test file says nothing else, and the standard that it follows.
PRESETS: dict[str, tuple[str, dict[str, Any]]] = {
    "metals": ("ISO 6892-1", {"modulus": "auto", "proof": [0.002]}),
    "plastics": ("ISO 527-1", {"modulus": {"strain": [0.0005, 0.0025]}, "proof": []}),
    "fibre composites": (
        "ASTM D3039",
        {"modulus": {"kind": "chord", "strain": [0.001, 0.003]}, "proof": []},
    ),
}


class Properties(Section):
    """What is evaluated, and in which windows."""

    preset: Literal["metals", "plastics", "fibre composites"] | None = None
    modulus: Literal["auto"] | ModulusWindow = "auto"
    proof: tuple[Strain, ...] = (0.002,)
    toe: Literal["auto"] | bool = "auto"
    preload: str | None = None
    hardening: Literal["auto"] | tuple[Strain, Strain] = "auto"
    true_stress: Literal["constant volume", "transverse strain"] = "constant volume"

    @model_validator(mode="before")
    @classmethod
    def _preset_first(cls, given: Any) -> Any:
        chosen = given.get("preset") if isinstance(given, dict) else None
        return PRESETS[chosen][1] | given if isinstance(chosen, str) and chosen in PRESETS else given

    @model_validator(mode="after")
    def _windows_and_preload_can_be_meant(self) -> Properties:
        self.preload_stress(1.0)
        if self.hardening != "auto" and not 0 < self.hardening[0] < self.hardening[1]:
            raise ValueError("hardening needs two strains above zero, low before high")
        return self

    def preload_stress(self, area_mm2: float) -> float | None:
        """Return the preload as stress over a section, MPa; None where none is given."""
        if self.preload is None:
            return None
        try:
            force = parse(self.preload, "force")
        except ValueError:
            return parse(self.preload, "stress")
        return force / area_mm2

    @property
    def modulus_source(self) -> str:
        """Who asked for the modulus' window."""
        if self.preset is None or self.modulus == "auto":
            return "as given"
        standard, keys = PRESETS[self.preset]
        own = keys["modulus"] != "auto" and ModulusWindow(**keys["modulus"]) == self.modulus
        return f"{standard}, preset {self.preset}" if own else "as given"
