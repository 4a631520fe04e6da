"""Camera and lens in words: what is known of them, and what was taken off the strains."""

from __future__ import annotations

from collections.abc import Mapping
from math import isfinite
from typing import Any

Row = tuple[str, str, str]


def camera_rows(optics: Mapping[str, Any]) -> list[Row]:
    """Return label, value and meaning of what ``results.json`` says under ``optics``."""
    if not optics:
        return []
    return [_scale(optics), *_lens(optics), _towards(optics), _thinning(optics)]


def _scale(optics: Mapping[str, Any]) -> Row:
    scale, u = optics["scale_mm_per_px"], optics["u_scale_relative"]
    if not isfinite(scale):
        return "Scale", "not known", "Strains do not depend on it."
    return (
        "Scale",
        f"{scale:.5g} mm/px ± {100 * u:.2g} %",
        f"Standard uncertainty; from {optics['scale_source']}. Strains do not depend on it.",
    )


def _lens(optics: Mapping[str, Any]) -> list[Row]:
    if "distortion" not in optics:
        return [("Lens distortion", "not taken off", "Give pictures of a board as camera.board.")]
    coefficients = ", ".join(f"{name} {value:.4g}" for name, value in optics["distortion"].items())
    rows = [
        ("Lens distortion", "taken off", f"{coefficients}, for a focal length of {optics['focal_px']:.5g} px")
    ]
    if "boards" in optics:
        rms, count = optics["reprojection_rms_px"], optics["boards"]
        rows.append(
            (
                "Board pictures",
                f"{count}, misfit {rms:.2g} px",
                "Root mean square of corners against the lens.",
            )
        )
        tilt = optics["tilt_deg"]
        known = isfinite(tilt)
        what = (
            "Taken off the strains."
            if known
            else "Name a picture as camera.board.plane to have it taken off."
        )
        rows.append(("Camera's tilt", f"{tilt:.2f}°" if known else "not known", what))
    return rows


def _towards(optics: Mapping[str, Any]) -> Row:
    label = "Motion towards the camera"
    if optics["still_patch_px"] is not None:
        return label, "taken off", "By the apparent strain of the still patch, frame by frame."
    u = optics["u_strain_towards_camera"]
    if u is None:
        return (
            label,
            "not known",
            "Give camera.stand_off and camera.out_of_plane, or a camera.still_patch; its false strain is not "
            "in the uncertainties.",
        )
    return (
        label,
        f"± {1e6 * u:.3g} µm/m",
        "Standard uncertainty of both strains at the end; in the properties, not in history.csv.",
    )


def _thinning(optics: Mapping[str, Any]) -> Row:
    if optics["thinning_corrected"]:
        return (
            "Receding of the thinning face",
            "taken off",
            "With the transverse strain as thickness strain, as in an isotropic material.",
        )
    return "Receding of the thinning face", "not taken off", "Small; needs thickness and camera.stand_off."
