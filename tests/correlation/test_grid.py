import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from dic.correlation import lay_grid
from dic.correlation.grid import LEAST_COVERED


@given(
    left=st.integers(0, 40), top=st.integers(0, 40), width=st.integers(1, 60), height=st.integers(1, 60),
    subset=st.sampled_from([9, 15, 21]), step=st.integers(1, 20),
)  # fmt: skip
@example(left=0, top=6, width=21, height=21, subset=21, step=13)
def test_every_inside_subset_has_its_centre_and_most_of_itself_on_the_mask(
    left, top, width, height, subset, step
):
    mask = np.zeros((101, 103), bool)
    mask[top : top + height, left : left + width] = True
    grid = lay_grid(mask, subset, step)
    half = grid.half
    for x, y in zip(grid.x, grid.y, strict=True):
        assert mask[y, x]
        patch = mask[max(y - half, 0) : y + half + 1, max(x - half, 0) : x + half + 1]
        assert patch.shape == (subset, subset)
        assert patch.mean() >= LEAST_COVERED - 1e-6
    if width >= subset and height >= subset:
        assert grid.inside.any()


def test_a_hole_takes_out_the_subsets_that_lie_mostly_in_it():
    mask = np.ones((80, 120), bool)
    mask[30:50, 50:70] = False
    grid = lay_grid(mask, 15, 5)
    assert not grid.inside[np.ix_(abs(grid.rows - 40) <= 9, abs(grid.columns - 60) <= 9)].any()
    assert grid.inside[abs(grid.rows - 40) > 18].all()


def test_even_subsets_get_a_centre():
    assert lay_grid(np.ones((60, 60), bool), 20, 10).subset == 21


@pytest.mark.parametrize("shape", [(21, 90), (90, 21)])
def test_a_strip_one_subset_wide_holds_one_row(shape):
    grid = lay_grid(np.ones(shape, bool), 21, 10)
    assert min(grid.shape) == 1
    assert grid.inside.all()


def test_neighbours_know_each_other():
    mask = np.ones((80, 120), bool)
    mask[:30, :50] = False
    grid = lay_grid(mask, 11, 9)
    around = grid.neighbours()
    for number, others in enumerate(around):
        for other in others[others >= 0]:
            assert number in around[other]
            assert abs(grid.x[number] - grid.x[other]) in (0, 9)
            assert abs(grid.y[number] - grid.y[other]) in (0, 9)
