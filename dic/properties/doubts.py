"""What the reader of the sheet should be told beside the numbers."""

from __future__ import annotations

from dic.errors import Notice
from dic.properties.result import Property
from dic.testfile import Specimen

#: ISO 6892-1's annex on the modulus asks for a relative standard error of the slope below this [from memory].
GOOD_SLOPE = 0.01


def doubts(
    properties: dict[str, Property], specimen: Specimen, force_uncertainty: float | None
) -> list[Notice]:
    """Return a warning, with its remedy, for what the uncertainties leave out and for a poor modulus."""
    found = []
    left_out = ["the force calibration (load_record.force_uncertainty)"] if force_uncertainty is None else []
    if keys := specimen.unstated:
        left_out.append(f"the section ({' and '.join(keys)})")
    if left_out:
        found.append(
            Notice(
                "uncertainty_incomplete",
                f"The uncertainties leave out {' and '.join(left_out)}; state them, they are often the "
                "largest part.",
            )
        )
    modulus = properties["youngs_modulus"]
    if modulus.contributions.get("scatter", 0.0) > GOOD_SLOPE * abs(modulus.value):
        found.append(
            Notice(
                "poor_modulus",
                "The modulus' slope scatters by more than 1 % (a quality sign of ISO 6892-1); look at the "
                "residuals, check the frame times, or widen properties.modulus.",
            )
        )
    return found
