"""Sequences: seeding, prediction, a lost frame in between."""

import numpy as np

from dic.correlation import track
from synthetic_images import homogeneous, rigid


def test_a_large_first_motion_is_seeded(photograph, prepared):
    reference = prepared(photograph())
    (found,) = track([photograph(rigid(-37.4, 21.7))], reference)
    seen = found.converged
    assert seen.mean() > 0.5  # the others moved out of the picture
    np.testing.assert_allclose(found.u[seen], -37.4, atol=2e-3)
    np.testing.assert_allclose(found.v[seen], 21.7, atol=2e-3)


def test_a_steady_pull_is_predicted(photograph, prepared):
    reference = prepared(photograph())
    strains = np.linspace(0, 0.05, 9)
    motions = [homogeneous(e, -0.3 * e, centre=(130, 95), shift=(0, -40 * e)) for e in strains]
    for motion, found in zip(motions, track(map(photograph, motions), reference), strict=True):
        assert found.converged.all()
        _, y = motion(reference.x.astype(float), reference.y.astype(float))
        np.testing.assert_allclose(found.v, y - reference.y, atol=3e-3)


def test_a_covered_lens_loses_its_frame_and_no_other(photograph, prepared):
    reference = prepared(photograph())
    hand = np.full(reference.shape, 20000, np.uint16)
    frames = [photograph(rigid(0, -0.5 * k)) for k in range(6)]
    frames[3] = hand
    found = list(track(frames, reference))
    assert [match.converged.any() for match in found] == [True, True, True, False, True, True]
    np.testing.assert_allclose(found[5].v, -2.5, atol=2e-3)


def test_a_patch_that_was_hidden_is_found_again(photograph, prepared):
    reference = prepared(photograph())
    frames = [photograph(rigid(0.2 * k, 0.0)).copy() for k in range(4)]
    frames[2][60:120, 90:160] = 30000
    found = list(track(frames, reference))
    assert not found[2].converged.all()
    assert found[3].converged.all()
    np.testing.assert_allclose(found[3].u, 0.6, atol=2e-3)
