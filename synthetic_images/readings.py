"""What a gauge reads of strains that are known, without pictures."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.strain.history import GaugeHistory
from dic.strain.periodic import Periodic

Floats = NDArray[np.float64]


def gauge_history(
    time_s: Floats, axial: Floats, transverse: Floats, u: float | Floats, **others: Any
) -> GaugeHistory:
    """Return the history of a gauge that is measured in every frame and neither shears nor moves.

    Parameters
    ----------
    time_s, axial, transverse
        Camera time, s, and strains as read, shape (n,).
    u
        Standard uncertainty of every strain.
    **others
        Attributes of `GaugeHistory` that are otherwise.

    Returns
    -------
    GaugeHistory
        One entry per frame.
    """
    n = len(time_s)
    u, nothing = np.full(n, u), np.zeros(n)
    usual: dict[str, Any] = {
        "frame": np.arange(n), "name": ("",) * n, "time_s": time_s,
        "axial": axial, "transverse": transverse, "shear": nothing, "extensometer": axial, "bending": nothing,
        "u_axial": u, "u_transverse": u, "u_shear": u, "u_extensometer": u,
        "shift_px": np.zeros((n, 2)), "valid_fraction": np.ones(n), "status": ("ok",) * n,
        "periodic": Periodic(),
    }  # fmt: skip
    return GaugeHistory(**(usual | others))
