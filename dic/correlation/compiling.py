"""How the kernels are compiled."""

from __future__ import annotations

import os

from numba import njit

# OpenMP's threads else spin between kernels, on the cores that all other work needs.  It is read when the
# first kernel runs.
os.environ.setdefault("OMP_WAIT_POLICY", "passive")

#: Reassociation and contraction let sums vectorise; NaN and infinity keep their meaning.
_FAST = {"reassoc", "contract", "nsz", "arcp"}

# NumPy's rules for division: by zero it gives infinity or NaN, which the kernels' checks refuse, where
# Python's would stop the whole frame.
inlined = njit(fastmath=_FAST, forceinline=True, error_model="numpy")
exactly_inlined = njit(forceinline=True, error_model="numpy")
fast = njit(fastmath=_FAST, error_model="numpy")
exact = njit(error_model="numpy")
serial = njit(cache=True, error_model="numpy")
# Every subset or tile owns its part of the result, so that results are the same for any number of threads.
parallel = njit(parallel=True, cache=True, error_model="numpy")
