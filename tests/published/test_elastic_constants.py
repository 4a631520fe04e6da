"""Elastic constants against the Eurocodes' tables."""

import pytest

from dic.properties.hooke import shear_modulus


@pytest.mark.parametrize(
    ("code", "youngs_modulus", "poissons_ratio", "tabulated"),
    [
        ("EN 1993-1-1, structural steel", 210_000, 0.3, 81_000),  # [from memory]
        ("EN 1999-1-1, aluminium alloys", 70_000, 0.3, 27_000),  # [from memory]
    ],
)
def test_shear_modulus_of_the_eurocodes(code, youngs_modulus, poissons_ratio, tabulated):
    # Both tables round to whole thousands of N/mm².
    assert shear_modulus(youngs_modulus, poissons_ratio) == pytest.approx(tabulated, abs=500), code
