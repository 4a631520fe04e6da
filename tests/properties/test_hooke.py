"""Hooke's law: the constants' mutual relations and the laws every isotropic solid obeys."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dic.properties.hooke import (
    bulk_modulus,
    lame_constant,
    plane_stress,
    principal_strains,
    shear_modulus,
    thickness_strain,
)

MODULI = st.floats(1e-2, 1e6)
RATIOS = st.floats(-0.9, 0.49)
STRESSES = st.floats(-1e3, 1e3)


@given(MODULI, RATIOS)
def test_relations_between_the_constants(e, nu):
    # Textbook identities (isotropic elasticity): E = 9KG/(3K + G), λ = K - 2G/3.
    g, k = shear_modulus(e, nu), bulk_modulus(e, nu)
    assert 9 * k * g / (3 * k + g) == pytest.approx(e, rel=1e-12)
    # λ is a difference near ν = 0, so rounding counts relative to K.
    assert lame_constant(e, nu) == pytest.approx(k - 2 * g / 3, abs=1e-12 * (k + g))


@given(MODULI, RATIOS, STRESSES, STRESSES, STRESSES)
def test_strain_is_linear_and_volume_follows_the_bulk_modulus(e, nu, s1, s2, s3):
    strain = principal_strains(e, nu, [s1, s2, s3])
    size = (abs(s1) + abs(s2) + abs(s3)) / e
    # Rounding, relative to the largest of the terms.
    assert strain.sum() == pytest.approx(
        (s1 + s2 + s3) / (3 * bulk_modulus(e, nu)), abs=1e-12 * size + 1e-300
    )
    assert principal_strains(e, nu, [[s3, s1, s2]])[0] == pytest.approx(
        strain[[2, 0, 1]], abs=1e-12 * size + 1e-300
    )


@given(MODULI, RATIOS, STRESSES, STRESSES, STRESSES)
def test_plane_stress_undoes_hookes_law(e, nu, sx, sy, shear):
    ex, ey, ez = principal_strains(e, nu, [sx, sy, 0.0])
    back = plane_stress(e, nu, ex, ey, shear / shear_modulus(e, nu))
    # 1 - ν² at ν = -0.9 magnifies rounding five-fold.
    assert np.array(back) == pytest.approx(
        [sx, sy, shear], abs=1e-11 * (abs(sx) + abs(sy) + abs(shear)) + 1e-200
    )
    assert thickness_strain(e, nu, sx, sy) == pytest.approx(ez, abs=1e-12 * (abs(sx) + abs(sy)) / e + 1e-300)


@pytest.mark.parametrize(
    "call",
    [
        lambda: shear_modulus(1.0, -1.0),
        lambda: bulk_modulus(1.0, 0.5),
        lambda: lame_constant(1.0, 0.5),
        lambda: principal_strains(1.0, -1.2, [1.0, 0.0, 0.0]),
        lambda: plane_stress(1.0, 0.5, 0.0, 0.0, 0.0),
        lambda: thickness_strain(1.0, float("nan"), 0.0, 0.0),
    ],
)
def test_impossible_ratios_are_refused(call):
    with pytest.raises(ValueError, match="no isotropic solid"):
        call()
