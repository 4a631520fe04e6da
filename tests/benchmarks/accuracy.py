"""Bias and scatter of single subsets, against shift, noise, texture and subset, and the Cramér–Rao bound."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scenes import SIGMA, Settings, clean, grid_on, matched, moved, noisy, reference_of, rigid, start_at
from table import Bench

from dic.correlation import Prefilter
from dic.correlation.tracking import seed, settle
from dic.strain.periodic import HARMONICS, SmoothField, determine, periodic_error, periodic_sums
from synthetic_images import Affine, homogeneous

SHAPE = (420, 620)
SHIFTS = np.arange(16) / 16
BEST = Settings()


def bound(image: NDArray[np.float64], reference: Any, sigma: float = SIGMA) -> float:
    """Cramér–Rao bound of u, rms over the subsets: σ·√2/√Σfₓ², fₓ of the noise-free picture."""
    # by Fourier, as differences underrate it
    slope = np.real(
        np.fft.ifft(2j * np.pi * np.fft.fftfreq(image.shape[1]) * np.fft.fft(image, axis=1), axis=1)
    )
    half = reference.half
    energy = [
        (slope[y - half : y + half + 1, x - half : x + half + 1] ** 2).sum()
        for x, y in zip(reference.x, reference.y, strict=True)
    ]
    return float(sigma * np.sqrt(2 * np.mean(1 / np.array(energy))))


def scatter(
    kind: str, settings: Settings, subset: int = 31, noise: float = 0.01
) -> tuple[float, float, float]:
    """Return rms error of u, bound, and stated uncertainty, px, over sub-pixel shifts and noise draws."""
    still = clean(kind, rigid(0, 0), SHAPE)
    grid = grid_on(SHAPE, subset)
    errors, stated = [], []
    for k, shift in enumerate((0.06, 0.27, 0.44, 0.61, 0.83)):
        motion = rigid(shift, 0.3 + shift)
        reference = reference_of(noisy(still, 100 + k, noise), grid, settings)
        frame = noisy(clean(kind, motion, SHAPE), 200 + k, noise)
        found = matched(reference, frame, start_at(reference, motion))
        errors.append(found.u - moved(reference, motion)[0])
        stated.append(found.sigma_u)
    sigma = float(np.hypot(255 * noise, 1 / np.sqrt(12)))
    rms = float(np.sqrt(np.nanmean(np.square(errors))))
    return rms, bound(still, reference, sigma), float(np.sqrt(np.nanmean(np.square(stated))))


def bias_curve(kind: str, settings: Settings) -> NDArray[np.float64]:
    """Return the mean error of u and v at each shift without noise, px."""
    shape = area(kind)
    reference = reference_of(clean(kind, rigid(0, 0), shape), grid_on(shape, step=16), settings)
    found = []
    for shift in SHIFTS:
        motion = rigid(shift, shift)
        match = matched(reference, clean(kind, motion, shape), start_at(reference, motion))
        found.append(float(np.nanmean([match.u - shift, match.v - shift])))
    return np.array(found)


def area(kind: str) -> tuple[int, int]:
    """Return how large a picture has to be for the mean: aliased edges scatter by 0.8 mpx per subset."""
    return SHAPE if kind == "smooth" else (1000, 1400)


def noise_bias(kind: str, noise: float = 0.02) -> float:
    """Return the amplitude by which noise changes the bias over the shift, peak to peak, px.

    Every frame is matched twice, with its noise and with the same noise negated: what is linear in
    the noise, the scatter, cancels, and what is left is bias.
    """
    still, grid, product, square = clean(kind, rigid(0, 0), SHAPE), grid_on(SHAPE), 0.0, 0.0
    plain = reference_of(still, grid, BEST)
    for k, shift in enumerate((0.125, 0.25, 0.375, 0.625, 0.75, 0.875)):
        motion = rigid(shift, shift)
        image = clean(kind, motion, SHAPE)
        start = start_at(plain, motion)
        without = matched(plain, image, start)
        change = 0.0
        for mirrored in (False, True):
            reference = reference_of(noisy(still, 50 + k, noise, mirrored=mirrored), grid, BEST)
            found = matched(reference, noisy(image, 90 + k, noise, mirrored=mirrored), start)
            change += float(np.nanmean([found.u - without.u, found.v - without.v])) / 2
        sine = np.sin(2 * np.pi * shift)
        product, square = product + change * sine, square + sine**2
    return 2 * abs(product / square)


def correction(kind: str, settings: Settings) -> NDArray[np.float64]:
    """Return what a noisy test of 0.3 to 2 % strain takes off at each of `SHIFTS`, px."""
    shape = area(kind)
    still = clean(kind, rigid(0, 0), shape)
    reference = reference_of(noisy(still, 1), grid_on(shape, step=16), settings)
    field = SmoothField(reference.x.astype(float), reference.y.astype(float))
    middle = (shape[1] / 2, shape[0] / 2)
    sums = []
    for k, strain in enumerate(np.linspace(0.003, 0.02, 24)):
        motion = homogeneous(strain, -0.3 * strain, centre=middle, shift=(0.13 * k, 0.37 * k))
        found = matched(reference, noisy(clean(kind, motion, shape), 500 + k), start_at(reference, motion))
        sums.append(
            periodic_sums(field, found.affine, periodic_error(found.affine, 31), found.sigma_u, found.sigma_v)
        )
    sines = np.stack([np.sin(2 * np.pi * waves * SHIFTS) for waves in HARMONICS], axis=1)
    return determine(sums).correction(sines)[0]


def captured() -> float:
    """Return the share of subsets that converge when started 4 px off, in percent."""
    motion = rigid(0.37, -0.21)
    one, other = noisy(clean("sharp", rigid(0, 0), SHAPE), 1), noisy(clean("sharp", motion, SHAPE), 2)
    reference = reference_of(one, grid_on(SHAPE), BEST)
    angle = np.random.default_rng(3).uniform(0, 2 * np.pi, len(reference.x))
    start = start_at(reference, motion)
    start[:, 0] += 4 * np.cos(angle)
    start[:, 3] += 4 * np.sin(angle)
    found = matched(reference, other, settle(reference, one, other, start))
    return float(100 * np.mean(np.abs(found.u - 0.37) < 0.05))


def first_pairs(count: int = 50) -> int:
    """Return how many of so many first pairs are matched: every subset in view found, none wrongly."""
    shape = (400, 520)
    rng = np.random.default_rng(5)
    still = noisy(clean("sharp", rigid(0, 0), shape), 0)
    grid = grid_on(shape, step=15)
    reference = reference_of(still, grid, BEST)
    prefilter, neighbours, good = Prefilter(shape, BEST.kind, BEST.smoothing), grid.neighbours(), 0
    x, y = reference.x.astype(float), reference.y.astype(float)
    for k in range(count):
        turn, scale = np.radians(rng.uniform(-10, 10)), rng.uniform(0.9, 1.1)
        c, s = scale * np.cos(turn), scale * np.sin(turn)
        shift = rng.uniform(-0.5, 0.5, 2) * (shape[1], shape[0])
        motion = Affine(((c, -s), (s, c)), (shape[1] / 2, shape[0] / 2), tuple(shift))
        frame = noisy(clean("sharp", motion, shape), k + 1)
        found = seed(reference, frame, prefilter(frame), neighbours)
        corners = [motion(x + a, y + b) for a in (-15.0, 15.0) for b in (-15.0, 15.0)]
        seen = np.all(
            [(a > 0) & (a < shape[1] - 1) & (b > 0) & (b < shape[0] - 1) for a, b in corners], axis=0
        )
        u, v = moved(reference, motion)
        right = np.hypot(found.u - u, found.v - v) < 0.1
        good += bool(right[seen].mean() > 0.99 and right[found.converged].all()) if seen.any() else 1
    return good


def run() -> Bench:
    bench = Bench()
    for kind, most in (("smooth", 1.05), ("sharp", 1.08), ("sharp 5 px", 1.08), ("small", None)):
        rms, least, stated = scatter(kind, BEST)
        bench.add(f"{kind}: random error of u / Cramér–Rao bound, 31 px", rms / least, high=most)
        bench.add(
            f"{kind}: stated standard uncertainty of u / true scatter", stated / rms, low=0.95, high=1.05
        )
    curves = {}
    for kind, most in (("smooth", 0.3), ("sharp", 0.5), ("sharp 5 px", 0.5)):
        curve = 1e3 * bias_curve(kind, BEST)
        curves[kind] = (SHIFTS, curve)
        bench.add(f"{kind}: bias over the sub-pixel shift, peak to peak", np.ptp(curve), "mpx", high=most)
        left = np.ptp(curve - 1e3 * correction(kind, BEST))
        bench.add(f"{kind}: the same after the correction", left, "mpx", high=None if most is None else 0.15)
    bench.curves.append(("Bias of one displacement component", "shift, px", "bias, mpx", curves))
    for kind in ("smooth", "sharp"):
        bench.add(f"{kind}: change of that bias from 0 to 2 % noise", 1e3 * noise_bias(kind), "mpx", high=0.1)
    alternatives = {}
    for name, settings in {
        "cubic": Settings("cubic", 0.0), "cubic, 0.5 px": Settings("cubic", 0.5),
        "quintic, 0.65 px": Settings("quintic", 0.65), "septic, 0.5 px": Settings("septic", 0.5),
        "twofold, 0.4 px": Settings("twofold", 0.4), "twofold, 0.5 px": BEST,
        "twofold, 0.6 px": Settings("twofold", 0.6),
    }.items():  # fmt: skip
        rms, least, _ = scatter("sharp", settings)
        curve = 1e3 * bias_curve("sharp", settings)
        alternatives[name] = (SHIFTS, curve)
        bench.add(f"sharp, {name}: random error / bound", rms / least)
        bench.add(f"sharp, {name}: bias, peak to peak", np.ptp(curve), "mpx")
    bench.curves.append(("Bias on sharp dots by interpolation", "shift, px", "bias, mpx", alternatives))
    ratios = {subset: scatter("sharp", BEST, subset) for subset in (15, 21, 41)}
    for subset, (rms, least, _) in ratios.items():
        bench.add(f"sharp, {subset} px subset: random error of u / bound", rms / least)
    bench.add("start 4 px off: subsets that converge", captured(), "%", low=99.5)
    bench.add("first pairs matched, of 50", first_pairs(), low=50)
    return bench
