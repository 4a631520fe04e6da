import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from dic.correlation import lay_grid


@given(
    left=st.integers(0, 40), top=st.integers(0, 40), width=st.integers(1, 60), height=st.integers(1, 60),
    subset=st.sampled_from([9, 15, 21]), step=st.integers(1, 20),
)  # fmt: skip
def test_every_inside_subset_lies_wholly_on_the_mask(left, top, width, height, subset, step):
    mask = np.zeros((101, 103), bool)
    mask[top : top + height, left : left + width] = True
    grid = lay_grid(mask, subset, step)
    fits = width >= subset and height >= subset
    assert grid.inside.any() == fits
    half = grid.half
    for y, row in zip(grid.y, grid.inside, strict=True):
        for x in grid.x[row]:
            assert mask[y - half : y + half + 1, x - half : x + half + 1].all()


def test_a_hole_takes_out_the_subsets_that_touch_it():
    mask = np.ones((80, 120), bool)
    mask[40, 60] = False
    grid = lay_grid(mask, 15, 5)
    near = (abs(grid.y[:, None] - 40) <= 7) & (abs(grid.x[None, :] - 60) <= 7)
    assert near.any()
    assert np.array_equal(grid.inside, ~near)
