"""What a test's inputs hold and what will be assumed, before anything is computed."""

from dic.inspection.front import inspect
from dic.inspection.seen import Inspection

__all__ = ["Inspection", "inspect"]
