"""The load record as read, and the clock that joins it to the frames."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice
from dic.sync.noise import noise_of, spikes_of

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class LoadRecord:
    """The testing machine's record in internal units, shape (n,) each, rows in order of time.

    Attributes
    ----------
    path
        The file.
    time_s
        The machine's clock, s.
    force_N
        Force, N, tension positive.
    displacement_mm
        Crosshead travel, mm, where a column was named; NaN where it says none.
    extensometer
        Strain of a contact extensometer, dimensionless, where a column was named; NaN where it says none.
    trigger
        Frame counter or trigger signal as written, where a column was named; NaN where it says none.
    epoch
        Date and wall-clock time at ``time_s`` = 0, without a time zone, where the record holds dates.
    columns
        What was understood: for each quantity, header and unit.
    notices
        What was left out, assumed or changed, and what to do if that is wrong.
    """

    path: Path
    time_s: Floats
    force_N: Floats
    displacement_mm: Floats | None = None
    extensometer: Floats | None = None
    trigger: Floats | None = None
    epoch: datetime | None = None
    columns: dict[str, str] = field(default_factory=dict)
    notices: tuple[Notice, ...] = ()

    @cached_property
    def noise_N(self) -> Floats:  # noqa: N802  (the unit's symbol)
        """Standard deviation of the force's noise around every sample, N (see `noise_of`)."""
        return noise_of(self.time_s, self.force_N)

    @cached_property
    def spikes(self) -> NDArray[np.bool_]:
        """True where a sample is part of a spike (see `spikes_of`)."""
        return spikes_of(self.force_N, self.noise_N)

    @cached_property
    def sound_N(self) -> Floats:  # noqa: N802  (the unit's symbol)
        """The force with straight lines across its spikes, N."""
        sound = ~self.spikes
        return np.interp(self.time_s, self.time_s[sound], self.force_N[sound])


@dataclass(frozen=True)
class Clock:
    """Machine time = offset + (1 + drift) × camera time.

    Attributes
    ----------
    offset_s, offset_standard_uncertainty_s
        Offset and its standard uncertainty, s: that of the machine's time where loading starts.
    drift
        Relative difference of the clocks' rates.
    method
        How it was found, in words.
    notes
        What was assumed, a sentence each.
    drift_standard_uncertainty
        Standard uncertainty of the drift; 0 where it is given or assumed.
    notices
        Doubts, with remedies.
    tried_s, misfit
        Offsets, and how much larger than the least the difference of frames and record is with them; empty
        where the offset was not estimated, or where the data give a range only.
    """

    offset_s: float
    offset_standard_uncertainty_s: float
    drift: float
    method: str
    notes: tuple[str, ...] = ()
    drift_standard_uncertainty: float = 0.0
    notices: tuple[Notice, ...] = ()
    tried_s: Floats = field(default_factory=lambda: np.empty(0), compare=False)
    misfit: Floats = field(default_factory=lambda: np.empty(0), compare=False)

    def machine_time(self, camera_time_s: Floats) -> Floats:
        """Return the machine's time of each camera time, s."""
        return self.offset_s + (1.0 + self.drift) * camera_time_s
