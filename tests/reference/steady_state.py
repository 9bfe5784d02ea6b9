"""Bias, small-signal gain and periodic steady state of a hand-written stage, by scipy.

The states are integrated as deviations from the bias, so that the relative tolerance of `solve_ivp` is relative to the
signal and not to the volts of bias under it. The period is integrated from one point of a uniform grid to the next.
Where the transistor stores charge, every sample is such a point, so that it has the method's full order: the dense
output of Radau is only a cubic. Where it does not, the states are smooth, the seventh-order dense output of DOP853 gives
them between the points, and the corners of a clipped output come from the network solved there. The state at the start of a period that repeats itself is found by Newton's method on the slow states
(shooting; Aprille and Trick, Proc. IEEE 60, 1972), so nothing has to settle.
"""

import dataclasses
import math

import numpy as np
from scipy.integrate import solve_ivp

from transistor import COMPLEX_STEP


COARSER = {"loosen": 10.0, "coarsen": 2}


def bias(stage):
    """States at rest: left alone for 30 s, hundreds of the longest time constant, then polished by Newton's method."""
    settled = solve_ivp(lambda t, x: stage.derivative(x.tolist(), 0.0), (0.0, 30.0), stage.bias_guess, method="Radau",
                        jac=lambda t, x: jacobians(stage, x.tolist())[0], rtol=1e-8, atol=1e-10)
    states, last = settled.y[:, -1].tolist(), math.inf
    for _ in range(20):
        by_state, _ = jacobians(stage, states)
        update = np.linalg.solve(by_state, stage.derivative(states, 0.0))
        size = max(abs(update))
        states = [x - float(u) for x, u in zip(states, update)]
        if size < 1e-11 and size >= last:  # no longer falling: what is left is rounding
            return states
        last = size
    raise ArithmeticError(f"{stage.name}: no bias, last update {size:.1e} V")


def jacobians(stage, states, emf=0.0):
    """Derivative of the rates by the states (matrix) and by the EMF (column), by the complex step."""
    columns = []
    for index in range(len(states)):
        stepped = [complex(x, COMPLEX_STEP if i == index else 0.0) for i, x in enumerate(states)]
        columns.append([complex(v).imag / COMPLEX_STEP for v in stage.derivative(stepped, emf)])
    by_emf = [complex(v).imag / COMPLEX_STEP for v in stage.derivative(list(states), complex(emf, COMPLEX_STEP))]
    return np.array(columns).T, np.array(by_emf)


def small_signal_gain(stage, states, frequencies):
    """Complex gain from EMF to output, linearised at the bias, by solving (jw - A) x = b."""
    by_state, by_emf = jacobians(stage, states)
    row = []
    for index in range(len(states)):
        stepped = [complex(x, COMPLEX_STEP if i == index else 0.0) for i, x in enumerate(states)]
        row.append(complex(stage.output(stepped, 0.0)).imag / COMPLEX_STEP)
    direct = complex(stage.output(list(states), complex(0.0, COMPLEX_STEP))).imag / COMPLEX_STEP
    identity = np.eye(len(states))
    return np.array([row @ np.linalg.solve(2j * math.pi * f * identity - by_state, by_emf) + direct
                     for f in frequencies])


@dataclasses.dataclass
class Harmonics:
    """Complex rms of H1, H2, ... (angle: phase of the sine), THD and the shift of the mean."""

    values: np.ndarray
    thd_percent: float
    dc_shift: float
    error: float  # bound on the error of H1...H20, relative to H1


class Shooting:
    """One stage at one frequency and level."""

    def __init__(self, stage, rest, frequency, level):
        self.stage, self.rest, self.rtol = stage, np.array(rest), stage.rtol
        self.frequency, self.peak = frequency, math.sqrt(2.0) * level

    def tolerances(self, loosen):
        """`rtol` and `atol` of solve_ivp; a deviation below `atol` is as good as zero."""
        rtol = self.rtol * loosen
        # Radau iterates each step to sqrt(rtol) of its tolerance, which must stay above the rounding of a volt of bias.
        rounding = 1e-14 / math.sqrt(rtol) if self.stage.method == "Radau" else 0.0
        return {"rtol": rtol, "atol": max(0.1 * rtol * self.peak, rounding)}

    def emf(self, t):
        return self.peak * math.sin(2.0 * math.pi * self.frequency * t)

    def rates(self, t, deviation):
        return self.stage.derivative((self.rest + deviation).tolist(), self.emf(t))

    def jacobian(self, t, deviation):
        return jacobians(self.stage, (self.rest + deviation).tolist(), self.emf(t))[0]

    def period(self, deviation, loosen=1.0, coarsen=1):
        """Output samples over one period and the deviation at its end.

        `loosen` multiplies the tolerances, `coarsen` divides the number of intervals.
        """
        intervals, within = self.stage.intervals // coarsen, self.stage.samples_in_interval
        grid = np.arange(intervals * within + 1) / (intervals * within * self.frequency)
        options = {"method": self.stage.method, **self.tolerances(loosen)}
        if self.stage.method == "Radau":
            options["jac"] = self.jacobian
        outputs = []
        for index in range(intervals):
            times = grid[index * within:(index + 1) * within + 1]
            step = solve_ivp(self.rates, (times[0], times[-1]), deviation, t_eval=times,
                             first_step=times[-1] - times[0], **options)
            if not step.success:
                raise ArithmeticError(f"{self.stage.name} at {self.peak} V peak: {step.message}")
            outputs += [self.stage.output((self.rest + y).tolist(), self.emf(t))
                        for t, y in zip(times[:-1], step.y.T)]
            deviation = step.y[:, -1]
        return np.array(outputs), deviation

    def steady_state(self):
        """Deviation at the start of a period that repeats itself, at the tolerances as they are and at looser ones."""
        deviation, closing = self._roughly()
        for _ in range(20):
            following = self._closer(deviation, closing)
            change = max(abs(following - deviation))
            deviation = following
            # What is left is a small part of the last step, the chord having been drawn close by.
            if change < self.rtol * max(self.peak, max(abs(deviation))):
                return deviation, self._closer(deviation, closing, **COARSER)
        raise ArithmeticError(f"{self.stage.name} at {self.peak} V peak: period not closed, moving {change:.1e} V")

    def _closer(self, deviation, closing, **tolerances):
        """One step of Newton's method with a fixed slope, the chord."""
        slow = list(self.stage.slow)
        _, end = self.period(deviation, **tolerances)
        following = end.copy()  # what is forgotten within the period is taken from its end
        following[slow] = deviation[slow] + closing @ (end - deviation)[slow]
        return following

    def _roughly(self):
        """Newton's method at a loose tolerance, and the inverse of 1 - (end by start) it ends with."""
        deviation, slow = np.zeros(len(self.rest)), list(self.stage.slow)
        for _ in range(12):
            _, end = self.period(deviation, loosen=10.0, coarsen=4)
            closing = np.linalg.inv(np.eye(len(slow)) - self._end_by_start(deviation, end))
            update = closing @ (end - deviation)[slow]
            end[slow] = deviation[slow] + update
            deviation = end
            if max(abs(update)) < 1e-4 * self.peak:
                break
        return deviation, closing

    def _end_by_start(self, deviation, end):
        step = 0.02 * self.peak
        columns = []
        for index in self.stage.slow:
            moved = deviation.copy()
            moved[index] += step
            columns.append((self.period(moved, loosen=10.0, coarsen=4)[1] - end)[list(self.stage.slow)] / step)
        return np.array(columns).T


def harmonics(stage, rest, frequency, level, bandwidth=80e3):
    """Harmonics of the steady state, with an error estimate from ten times the tolerance and half the grid."""
    shooting = Shooting(stage, rest, frequency, level)
    deviation, roughly = shooting.steady_state()
    output_at_rest = float(stage.output(list(rest), 0.0))
    fine, _ = shooting.period(deviation)
    coarse, _ = shooting.period(roughly, **COARSER)
    mean, values = spectrum(fine - output_at_rest)
    _, rough = spectrum(coarse - output_at_rest)
    count = int(bandwidth / frequency * (1.0 + 1e-9))
    thd = 100.0 * math.sqrt(float(np.sum(abs(values[1:count]) ** 2))) / abs(values[0])
    # Ten times the tolerance or twice the interval cost at least six times the error, so a fifth of the change bounds
    # what is left in the finer values.
    error = float(max(abs(values[:20] - rough[:20])) / abs(values[0])) / 5.0
    return Harmonics(values[:20], thd, mean, error)


def spectrum(samples):
    """Mean, and complex rms of each harmonic with the angle of its sine, of one period of samples."""
    bins = np.fft.rfft(samples) / len(samples)
    return float(bins[0].real), 1j * math.sqrt(2.0) * bins[1:]
