"""The camera's strain against that of a clip-on extensometer in the load record."""

from dic.comparison.clip_on import Agreement, ClipOn, compare, doubts
from dic.comparison.limits import Verdict

__all__ = ["Agreement", "ClipOn", "Verdict", "compare", "doubts"]
