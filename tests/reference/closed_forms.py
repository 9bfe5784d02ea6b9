"""Harmonics in closed form of the three `exact_*.toml` stages: no circuit is solved here.

Abramowitz and Stegun ch. 9 and DLMF ch. 10 for the modified Bessel functions, DLMF section 4.13 for the Lambert W
function. Each function returns the complex rms of H1, H2, ... at the output, the angle being that of the sine.
"""

import math

import numpy as np
from scipy.special import iv, lambertw

from transistor import THERMAL_VOLTAGE

COUNT = 20
SAMPLES = 4096  # of one period; the spectra below have died away by harmonic 200


def exponential(peak):
    """`exact_exponential`: 10 fA law at 0.45 V, 1 ohm from the rail to the collector, so the output is -i * 1 ohm.

    exp(x sin) = I0 + 2 sum (-1)^k I_{2k+1} sin((2k+1)wt) + 2 sum (-1)^k I_{2k} cos(2kwt), DLMF 10.35.
    """
    scale = 1e-14 * math.exp(0.45 / THERMAL_VOLTAGE)
    orders = np.arange(1, COUNT + 1)
    sign = (-1.0) ** (orders // 2)
    turn = np.where(orders % 2 == 0, 1j, 1.0)  # cosine for the even ones
    return -math.sqrt(2.0) * scale * iv(orders, peak / THERMAL_VOLTAGE) * sign * turn


def pair(peak):
    """`exact_pair`: i = (1 mA / 2) tanh(v / (2 VT)) through 1 ohm; the second collector rises with the input."""
    return _harmonics(lambda v: 0.5e-3 * np.tanh(v / (2.0 * THERMAL_VOLTAGE)), peak)


def degenerated(peak):
    """`exact_degenerated`: the law behind 35 + 25 + 40 = 100 ohm, 0.7 V standing, output across 40 ohm."""
    return _harmonics(lambda v: 40.0 * degenerated_current(0.7 + v), peak)


def degenerated_current(volts, saturation=1e-14, ohms=100.0):
    """i = Is (exp((v - iR)/VT) - 1), solved as (i + Is) R / VT = W((Is R / VT) exp((v + Is R)/VT))."""
    factor = saturation * ohms / THERMAL_VOLTAGE
    return lambertw(factor * np.exp((volts + saturation * ohms) / THERMAL_VOLTAGE)).real / factor * saturation - saturation


def _harmonics(law, peak):
    """Fourier coefficients of a memoryless law; a uniform sum over one period is exact but for alias beyond SAMPLES."""
    angle = 2.0 * math.pi * np.arange(SAMPLES) / SAMPLES
    bins = np.fft.rfft(law(peak * np.sin(angle))) / SAMPLES
    return 1j * math.sqrt(2.0) * bins[1:COUNT + 1]
