"""The two stages whose equations are written by hand, one node at a time, as ordinary differential equations.

States are absolute (capacitor and junction voltages); `derivative(states, emf)` is their rate of change and
`output(states, emf)` the voltage at the output node. Both take complex numbers. The values repeat the stage files
`b_split_emitter.toml` and `c_collector_feedback.toml` of tests/expected/open; nothing is read from them.
"""

import numpy as np

from transistor import Transistor, derivatives, real


class SplitEmitter:
    """Stage b. The transistor stores no charge, so the three capacitor voltages are all the state there is, and the
    resistive network around the transistor is solved by Newton's method inside every evaluation.

    States: u1 = base - in across C1, us = split across C2, u3 = coll - out across C3.
    """

    name = "b_split_emitter"
    method, rtol = "DOP853", 1e-12  # time constants of milliseconds and up: nothing is stiff
    states = ("u1", "us", "u3")
    slow = (0, 1, 2)
    bias_guess = (2.2, 1.4, 7.9)
    levels = (0.0025, 0.061, 0.51)  # 0.05 %, 1.2 % and, clipped on both sides, 47 % THD
    intervals, samples_in_interval = 128, 64  # corners as sharp as VT over the slope: 8192 samples leave no alias

    supply, source, load = 15.0, 600.0, 47e3
    r1, r2, r3, r4, r5 = 120e3, 22e3, 4.7e3, 120.0, 910.0
    c1, c2, c3 = 2.2e-6, 100e-6, 1e-6
    transistor = Transistor(9.5e-15, 240.0, 4.0, forward_early_voltage=74.0)

    def __init__(self):
        self._nodes = [2.2, 7.9, 1.55]  # base, coll, emit: where the next network solution starts

    def _imbalance(self, vb, vc, ve, states, emf):
        """Currents left over at base, collector and emitter, A."""
        u1, us, u3 = states
        collector, base = self.transistor.currents(vb - ve, vb - vc)
        return ((emf - vb + u1) / self.source + (self.supply - vb) / self.r1 - vb / self.r2 - base,
                (self.supply - vc) / self.r3 - (vc - u3) / self.load - collector,
                collector + base - (ve - us) / self.r4)

    def nodes(self, states, emf):
        """Base, collector and emitter voltage that balance every current."""
        arithmetic = complex if any(isinstance(x, complex) for x in (*states, emf)) else float
        held = [real(x) for x in (*states, emf)]
        self._nodes = self._newton(list(self._nodes), held[:3], held[3])
        if arithmetic is float:
            return self._nodes
        slopes = np.array(derivatives(lambda *v: self._imbalance(*v, held[:3], held[3]), *self._nodes))
        left_over = self._imbalance(*self._nodes, states, emf)  # imaginary part alone is new: one linear step is exact
        return list(np.array(self._nodes) - 1j * np.linalg.solve(slopes, np.imag(left_over)))

    def _newton(self, v, states, emf):
        last = np.inf
        for _ in range(200):
            slopes = self._slopes(*v)
            update = np.linalg.solve(slopes, self._imbalance(*v, states, emf))
            size = max(abs(update))
            if size < 1e-13 or (size < 1e-10 and size >= last):  # volts: no longer falling means rounding is reached
                return [a - float(b) for a, b in zip(v, update)]
            last = size
            scale = self._bridle(v, update)
            v = [a - scale * float(b) for a, b in zip(v, update)]
        raise ArithmeticError(f"{self.name}: network not solved at {states}, EMF {emf} V")

    def _slopes(self, vb, vc, ve):
        (cbe, cbc), (bbe, bbc) = self._conductances(vb - ve, vb - vc)
        g = 1.0 / self.source + 1.0 / self.r1 + 1.0 / self.r2
        return np.array([[-g - bbe - bbc, bbc, bbe],
                         [-cbe - cbc, -1.0 / self.r3 - 1.0 / self.load + cbc, cbe],
                         [cbe + cbc + bbe + bbc, -cbc - bbc, -cbe - bbe - 1.0 / self.r4]])

    def _conductances(self, vbe, vbc):
        return derivatives(self.transistor.currents, vbe, vbc)

    @staticmethod
    def _bridle(v, update):
        """Let no junction climb by more than 50 mV a step once it is past 0.5 V, or the exponential overflows."""
        scale = 1.0
        for other in (2, 1):
            climb = -(update[0] - update[other])
            if climb > 0.05 and v[0] - v[other] + climb > 0.5:
                scale = min(scale, max(0.05, 0.5 - (v[0] - v[other])) / climb)
        return scale

    def derivative(self, states, emf):
        u1, us, u3 = states
        vb, vc, ve = self.nodes(states, emf)
        return [-(emf - vb + u1) / self.source / self.c1,
                ((ve - us) / self.r4 - us / self.r5) / self.c2,
                (vc - u3) / self.load / self.c3]

    def output(self, states, emf):
        return self.nodes(states, emf)[1] - states[2]

    def at_bias(self, states):
        vb, vc, ve = self.nodes(states, 0.0)
        collector, base = self.transistor.currents(vb - ve, vb - vc)
        return ({"in": vb - states[0], "base": vb, "coll": vc, "emit": ve, "split": states[1], "out": vc - states[2]},
                {"Q1": {"IC": collector, "IB": base, "VBE": vb - ve, "VCE": vc - ve, "region": "active"}})


class CollectorFeedback:
    """Stage c. The transistor stores charge: its two junction voltages are states, moved by the currents that are left
    for their charges. Time constants reach from a nanosecond to a tenth of a second, so the method is implicit.

    States: u1 = in - base across C1, u2 = coll - out across C2, vo = out, vbe and vbc of the internal junctions.
    """

    name = "c_collector_feedback"
    method, rtol = "Radau", 1e-8
    states = ("u1", "u2", "vo", "vbe", "vbc")
    slow = (0, 1)  # the others forget a perturbation within microseconds
    bias_guess = (-0.65, 4.0, 0.0, 0.65, -3.0)
    levels = (0.00058, 0.014, 0.12)  # 0.05 %, 1.2 % and, clipped on both sides, 21 % THD
    intervals, samples_in_interval = 512, 1

    supply, source, load, load_farads = 9.0, 10e3, 100e3, 150e-12
    rc, rf, c1, c2 = 4.7e3, 1.2e6, 470e-9, 1e-6
    base_ohms, emitter_ohms, collector_ohms = 180.0, 0.55, 1.8
    transistor = Transistor(
        6.7e-15, 310.0, 5.5, forward_early_voltage=85.0, reverse_early_voltage=18.0,
        forward_knee_current=120e-3, reverse_knee_current=40e-3,
        emitter_leakage_current=34e-15, emitter_leakage_ideality=1.6,
        collector_leakage_current=50e-15, collector_leakage_ideality=1.9,
        forward_transit_time=420e-12, reverse_transit_time=70e-9,
        emitter_depletion=(9e-12, 0.72, 0.35), collector_depletion=(4.2e-12, 0.58, 0.32))

    def _base(self, states, emf):
        """Base node and internal base voltage: two linear equations, the states given.

        At the base: (emf - u1 - vb)/source + (coll - vb)/rf = (vb - x)/base_ohms, and the three terminal currents of
        the transistor sum to zero: (vb - x)/base_ohms + (coll - x + vbc)/collector_ohms + (vbe - x)/emitter_ohms = 0.
        """
        u1, u2, vo, vbe, vbc = states
        coll = vo + u2
        gs, gf, gb = 1.0 / self.source, 1.0 / self.rf, 1.0 / self.base_ohms
        gc, ge = 1.0 / self.collector_ohms, 1.0 / self.emitter_ohms
        a, b, p = gs + gf + gb, -gb, gs * (emf - u1) + gf * coll
        c, d, q = -gb, gb + gc + ge, gc * (coll + vbc) + ge * vbe
        determinant = a * d - b * c
        return (p * d - b * q) / determinant, (a * q - c * p) / determinant

    def derivative(self, states, emf):
        u1, u2, vo, vbe, vbc = states
        vb, inner = self._base(states, emf)
        coll = vo + u2
        collector = (coll - (inner - vbc)) / self.collector_ohms  # terminal currents, charging included
        base = (vb - inner) / self.base_ohms
        static_collector, static_base = self.transistor.currents(vbe, vbc)
        to_collector_charge = static_collector - collector  # dQbc/dt, since the terminal carries IC - dQbc/dt
        to_emitter_charge = base - static_base - to_collector_charge
        (be_be, be_bc), (bc_be, bc_bc) = self._capacitances(vbe, vbc)
        vbc_rate = to_collector_charge / bc_bc
        vbe_rate = (to_emitter_charge - be_bc * vbc_rate) / be_be
        through_c2 = (self.supply - coll) / self.rc - (coll - vb) / self.rf - collector
        return [(emf - u1 - vb) / self.source / self.c1, through_c2 / self.c2,
                (through_c2 - vo / self.load) / self.load_farads, vbe_rate, vbc_rate]

    def _capacitances(self, vbe, vbc):
        """dQ/dv, complex arguments included: their imaginary step rides on a central difference in the real one."""
        if not isinstance(vbe, complex) and not isinstance(vbc, complex):
            return derivatives(self.transistor.charges, vbe, vbc)
        vbe, vbc = complex(vbe), complex(vbc)
        centre = np.array(derivatives(self.transistor.charges, vbe.real, vbc.real))
        step = 1e-5  # volts; enters Jacobians alone, where it is multiplied by a rate that vanishes at rest
        ahead = np.array(derivatives(self.transistor.charges, vbe.real + step, vbc.real))
        behind = np.array(derivatives(self.transistor.charges, vbe.real - step, vbc.real))
        above = np.array(derivatives(self.transistor.charges, vbe.real, vbc.real + step))
        below = np.array(derivatives(self.transistor.charges, vbe.real, vbc.real - step))
        slope = vbe.imag * (ahead - behind) + vbc.imag * (above - below)
        return [[complex(*pair) for pair in zip(*rows)] for rows in zip(centre, slope / (2.0 * step))]

    def output(self, states, emf):
        return states[2]

    def at_bias(self, states):
        u1, u2, vo, vbe, vbc = states
        vb, inner = self._base(states, 0.0)
        collector, base = self.transistor.currents(vbe, vbc)
        coll = vo + u2
        nodes = {"in": vb + u1, "base": vb, "coll": coll, "out": vo,
                 "Q1.base": inner, "Q1.collector": inner - vbc, "Q1.emitter": inner - vbe}
        return nodes, {"Q1": {"IC": collector, "IB": base, "VBE": vb, "VCE": coll, "region": "active"}}
