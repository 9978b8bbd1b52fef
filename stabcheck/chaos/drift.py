"""Drift of the mean motions between the first and the second half of a span.

The mean motion of each half is the frequency at which the Hann-windowed Fourier integral of exp(iλ) is largest (Laskar
1990, 1993); their relative difference measures how far the motion is from quasi-periodic. The limit that separates
regular from chaotic belongs to the interval and the masses; none is universal.

The samples may be further apart than an orbit. exp(iλ) is first turned back by the mean motion of the start, and only
the difference of the two halves is used, so that what is folded by the sampling cancels as long as the mean motion
changes by less than half a turn a sample.

References
----------
Laskar, J. (1990), Icarus 88, 266; Laskar, J. (1993), Physica D 67, 257; Robutel, P. & Laskar, J. (2001), Icarus 152, 4.
"""

import numpy as np

from stabcheck.arrays import Array

FEWEST_SAMPLES = 64
"""Fewer samples a half than 32 leave the window's main lobe unresolved; the drift is then NaN."""


def frequency_rad(turns: Array) -> float:
    """Find the frequency of the strongest term of a complex series, in radians a sample.

    Parameters
    ----------
    turns : (sample,) complex array
        Evenly spaced values.

    Returns
    -------
    float
        Between −π and π; the maximum of the Hann-windowed Fourier integral, to rounding.
    """
    count = turns.size
    window = 1.0 - np.cos(2.0 * np.pi * (np.arange(count) + 0.5) / count)
    windowed = turns * window
    spectrum = np.abs(np.fft.fft(windowed, 4 * count))
    coarse = 2.0 * np.pi * np.fft.fftfreq(4 * count)[int(np.argmax(spectrum))]
    return _peak(windowed, coarse, 2.0 * np.pi / (4 * count))


def _peak(windowed: Array, start: float, width: float) -> float:
    """Newton's method on the logarithmic derivative of the power, kept within one coarse bin of the start."""
    index = np.arange(windowed.size) - 0.5 * (windowed.size - 1)
    once, twice = -1j * index, -(index**2)  # what a derivative brings down
    frequency = start
    for _ in range(8):
        turned = windowed * np.exp(-1j * frequency * index)
        f, f1, f2 = np.sum(turned), np.sum(once * turned), np.sum(twice * turned)
        slope = 2.0 * np.real(np.conj(f) * f1)
        bend = 2.0 * (np.abs(f1) ** 2 + np.real(np.conj(f) * f2))
        if not bend < 0.0:
            break
        before, frequency = frequency, float(np.clip(frequency - slope / bend, start - width, start + width))
        if frequency == before:
            break
    return frequency


def drift(longitudes_rad: Array, mean_motion_rad: Array) -> Array:
    """Measure the relative change of each mean motion from the first half of the span to the second.

    Parameters
    ----------
    longitudes_rad : (sample, planet) array
        Mean longitudes at evenly spaced times, the first at the start; an odd last sample is left out.
    mean_motion_rad : (planet,) array
        Mean motion at the start, in radians a sample.

    Returns
    -------
    (planet,) array
        |1 − n₂/n₁|; NaN with fewer than ``FEWEST_SAMPLES`` samples or where a longitude is not finite.
    """
    count = 2 * (longitudes_rad.shape[0] // 2)
    out = np.full(longitudes_rad.shape[1], np.nan)
    if count < FEWEST_SAMPLES:
        return out
    index = np.arange(count)
    for planet in range(out.size):
        turns = np.exp(1j * (longitudes_rad[:count, planet] - mean_motion_rad[planet] * index))
        if not np.all(np.isfinite(turns)):
            continue
        first = frequency_rad(turns[: count // 2])
        second = frequency_rad(turns[count // 2 :])
        out[planet] = abs((second - first) / (mean_motion_rad[planet] + first))
    return out
