"""The transistor written out by hand: Gummel-Poon charge-control model in transport form, NPN, 25 C.

H. K. Gummel and H. C. Poon, "An integral charge control model of bipolar transistors", Bell Syst. Tech. J. 49 (1970).
Voltages are those of the internal junctions; currents are into the device. Every function takes real or complex
numbers, so that derivatives can be had by the complex step (Squire and Trapp, SIAM Review 40, 1998) without writing
them out a second time.
"""

import cmath
import math

BOLTZMANN = 1.380649e-23  # J/K, exact since the SI of 2019
CHARGE = 1.602176634e-19  # C, exact since the SI of 2019
THERMAL_VOLTAGE = BOLTZMANN * 298.15 / CHARGE  # V at 25 C


def exp(x):
    return cmath.exp(x) if isinstance(x, complex) else math.exp(x)


def sqrt(x):
    return cmath.sqrt(x) if isinstance(x, complex) else math.sqrt(x)


def real(x):
    return x.real if isinstance(x, complex) else x


class Transistor:
    """Parameters by the names of a stage file; what is left out is absent from the equations."""

    def __init__(self, saturation_current, forward_gain, reverse_gain, forward_early_voltage=math.inf,
                 reverse_early_voltage=math.inf, forward_knee_current=math.inf, reverse_knee_current=math.inf,
                 emitter_leakage_current=0.0, emitter_leakage_ideality=2.0,
                 collector_leakage_current=0.0, collector_leakage_ideality=2.0,
                 forward_transit_time=0.0, reverse_transit_time=0.0, emitter_depletion=None, collector_depletion=None):
        self.saturation_current = saturation_current
        self.forward_gain = forward_gain
        self.reverse_gain = reverse_gain
        self.forward_early_voltage = forward_early_voltage
        self.reverse_early_voltage = reverse_early_voltage
        self.forward_knee_current = forward_knee_current
        self.reverse_knee_current = reverse_knee_current
        self.emitter_leakage = (emitter_leakage_current, emitter_leakage_ideality)
        self.collector_leakage = (collector_leakage_current, collector_leakage_ideality)
        self.forward_transit_time = forward_transit_time
        self.reverse_transit_time = reverse_transit_time
        self.emitter_depletion = emitter_depletion  # (farads, potential, grading)
        self.collector_depletion = collector_depletion

    def _transport(self, vbe, vbc):
        forward = self.saturation_current * (exp(vbe / THERMAL_VOLTAGE) - 1.0)
        reverse = self.saturation_current * (exp(vbc / THERMAL_VOLTAGE) - 1.0)
        d = 1.0 - vbc / self.forward_early_voltage - vbe / self.reverse_early_voltage
        if real(d) < 0.1:  # the stages here never get there; continuing would need the other branch
            raise ArithmeticError(f"Early denominator {d} at vbe {vbe}, vbc {vbc}")
        injection = forward / self.forward_knee_current + reverse / self.reverse_knee_current
        return forward, reverse, (1.0 + sqrt(1.0 + 4.0 * injection)) / (2.0 * d)

    def currents(self, vbe, vbc):
        """Collector and base current, A, without the charging currents."""
        forward, reverse, base_charge = self._transport(vbe, vbc)
        emitter_side = forward / self.forward_gain + leakage(vbe, *self.emitter_leakage)
        collector_side = reverse / self.reverse_gain + leakage(vbc, *self.collector_leakage)
        return (forward - reverse) / base_charge - collector_side, emitter_side + collector_side

    def charges(self, vbe, vbc):
        """Base-emitter and base-collector charge, C."""
        forward, reverse, base_charge = self._transport(vbe, vbc)
        return (self.forward_transit_time * forward / base_charge + depletion(vbe, *self.emitter_depletion),
                self.reverse_transit_time * reverse + depletion(vbc, *self.collector_depletion))


def leakage(v, current, ideality):
    return current * (exp(v / (ideality * THERMAL_VOLTAGE)) - 1.0) if current else 0.0


def depletion(v, farads, potential, grading):
    """Charge of a graded junction; above half the potential the capacitance goes on as a straight line."""
    half = potential / 2.0
    below = half if real(v) > half else v
    charge = farads * potential / (1.0 - grading) * (1.0 - (1.0 - below / potential) ** (1.0 - grading))
    if real(v) > half:
        x = v - half
        charge += farads * 2.0**grading * (x + grading * x * x / potential)
    return charge


COMPLEX_STEP = 1e-30  # nothing is subtracted, so it can be small enough to leave no truncation error


def derivatives(function, *arguments):
    """Partial derivatives of each value of `function`, by argument: rows[value][argument]."""
    columns = []
    for index in range(len(arguments)):
        stepped = [complex(a, COMPLEX_STEP if i == index else 0.0) for i, a in enumerate(arguments)]
        columns.append([complex(value).imag / COMPLEX_STEP for value in function(*stepped)])
    return [list(row) for row in zip(*columns)]
