"""Clip-ons that come off, stand still or slip."""

import numpy as np
import pytest

from dic.comparison.attached import attached

N, NOISE = 80, 5e-6
CAMERA = np.concatenate([np.zeros(15), np.linspace(0, 0.02, N - 15)])


def noisy(strain, seed=0):
    return strain + np.random.default_rng(seed).normal(0, NOISE, len(strain))


@pytest.mark.parametrize("gain", [1.0, 0.8, 100.0])
def test_one_that_stays_on_is_used_whole(gain):
    found = attached(CAMERA, noisy(gain * CAMERA), NOISE)
    assert (found.frames, found.end, found.slips) == (N, "", ())


@pytest.mark.parametrize("left_at", [0.0, 0.005, -0.1, 0.3])
def test_one_taken_off_counts_up_to_the_jump(left_at):
    contact = noisy(np.where(np.arange(N) < 50, CAMERA, left_at))
    found = attached(CAMERA, contact, NOISE)
    assert found.frames == 50
    assert "jumps" in found.end


def test_one_in_somebodys_hand_counts_up_to_the_jump():
    wandering = np.cumsum(np.random.default_rng(3).normal(0, 0.002, N))
    assert attached(CAMERA, noisy(np.where(np.arange(N) < 50, CAMERA, 0.05 + wandering)), NOISE).frames == 50


@pytest.mark.parametrize("noise", [0.0, NOISE])
def test_one_that_stands_still_counts_up_to_there(noise):
    contact = np.minimum(CAMERA, CAMERA[50]) + noise / NOISE * (noisy(CAMERA) - CAMERA)
    found = attached(CAMERA, contact, NOISE)
    # Within its noise a reading stands still a little earlier than it does in truth.
    assert 50 <= found.frames <= 51
    assert "stands still" in found.end


def test_a_slip_is_no_end():
    found = attached(CAMERA, noisy(CAMERA - 0.003 * (np.arange(N) >= 50)), NOISE)
    assert found.frames == N
    assert found.slips == (49,)


def test_a_hold_is_no_end():
    held = np.where(np.arange(N) < 60, CAMERA, CAMERA[60])
    assert attached(held, noisy(held), NOISE).frames == N
