"""Stress, modulus, Poisson's ratio, proof stress, strength, and Hooke's law."""

from dic.properties.curve import make_curve
from dic.properties.doubts import doubts
from dic.properties.evaluation import evaluate
from dic.properties.peak import peak_force
from dic.properties.result import Curve, Evaluation, ModulusLine, Property
from dic.properties.sheet import Sheet
from dic.properties.stress_map import elastic_stress

__all__ = [
    "Curve",
    "Evaluation",
    "ModulusLine",
    "Property",
    "Sheet",
    "doubts",
    "elastic_stress",
    "evaluate",
    "make_curve",
    "peak_force",
]
