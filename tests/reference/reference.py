#!/usr/bin/env python3
"""Hold cleanswing to equations written by hand and to closed forms.

    reference.py [BINARY]            the program's bias, gain, harmonics and THD (default target/release/cleanswing)
    reference.py --against-expected  the files of tests/expected/open instead: a third method against those tables

Two stages are written out as differential equations (stages.py) and brought to their periodic steady state by scipy
(steady_state.py); three circuits have closed forms (closed_forms.py). A tolerance is what the figures under test claim
for themselves (figures.py) plus the reference's own error, which it measures by loosening its tolerances tenfold and
doubling its steps; a reference that is not good to 1e-7 of H1 by that measure fails too.
Exit code 0: all agree; 1: something does not, and every disagreement is printed with place, value, expected, margin.
"""

import argparse
import concurrent.futures
import math
import pathlib
import sys

import numpy as np

import closed_forms
from figures import Disagreement, Expected, Program
from stages import CollectorFeedback, SplitEmitter
from steady_state import bias, harmonics, small_signal_gain
from transistor import THERMAL_VOLTAGE

FREQUENCIES = [20, 100, 1000, 10000, 20000]
DRIVE_FREQUENCY = 1000
PAIR_ALLOWANCE = 3e-7  # its tail is 1 Gohm from 1 MV: 1 mA within 1e-6 and not perfectly constant
REFERENCE_NEEDED = 1e-7  # of H1


class Comparison:
    """Counts what was compared and keeps what did not agree."""

    def __init__(self):
        self.count, self.failures, self.worst = 0, [], (0.0, "nothing")

    def check(self, place, value, expected, allowed):
        margin = abs(value - expected) if value is not None else math.inf
        share = margin / allowed
        self.count += 1
        self.worst = max(self.worst, (share, place))
        if not share <= 1.0:
            self.failures.append(f"{place}: {value}, expected {expected}, off by {margin:.3e}, allowed {allowed:.3e}")

    def same(self, place, value, expected):
        self.count += 1
        if value != expected:
            self.failures.append(f"{place}: {value!r}, expected {expected!r}")

    def merge(self, other):
        self.count += other.count
        self.failures += other.failures
        self.worst = max(self.worst, other.worst)


def solve(arguments):
    """The slow part, one level of one stage, in a process of its own."""
    stage, level = arguments
    stage = stage()
    return harmonics(stage, bias(stage), DRIVE_FREQUENCY, level)


def compare_stage(figures, stage_class, solutions):
    comparison, stage = Comparison(), stage_class()
    rest = bias(stage)
    compare_bias(comparison, figures, stage, rest)
    compare_gain(comparison, figures, stage, rest)
    compare_harmonics(comparison, figures, stage, solutions)
    return comparison


def compare_bias(comparison, figures, stage, rest):
    nodes, transistors = stage.at_bias(rest)
    found_nodes, found_transistors = figures.bias(stage.name)
    allowed = figures.volt_accuracy * stage.supply
    for node, volts in nodes.items():
        comparison.check(f"{stage.name}: bias of node {node}, V", found_nodes.get(node), volts, allowed)
    for name, wanted in transistors.items():
        found = found_transistors[name]
        for key in ("IC", "IB"):
            limit = figures.current_accuracy * abs(wanted[key]) + 1e-15
            comparison.check(f"{stage.name}: {name} {key}, A", found[key], wanted[key], limit)
        for key in ("VBE", "VCE"):
            comparison.check(f"{stage.name}: {name} {key}, V", found[key], wanted[key], allowed)
        comparison.same(f"{stage.name}: {name} region", found["region"], wanted["region"])


def compare_gain(comparison, figures, stage, rest):
    wanted = small_signal_gain(stage, rest, FREQUENCIES)
    for frequency, value, expected in zip(FREQUENCIES, figures.gain(stage.name, FREQUENCIES), wanted):
        comparison.check(f"{stage.name}: gain at {frequency} Hz", value, expected,
                         figures.gain_accuracy * abs(expected))


def compare_harmonics(comparison, figures, stage, solutions):
    found = figures.harmonics(stage.name, DRIVE_FREQUENCY, list(stage.levels))
    for level, point, solution in zip(stage.levels, found, solutions):
        place = f"{stage.name} at {level} V"
        print(f"{place}: THD {solution.thd_percent:.6f} %, own error {solution.error:.1e} of H1")
        comparison.check(f"{place}: error of the reference itself", solution.error, 0.0, REFERENCE_NEEDED)
        fundamental = abs(solution.values[0])
        allowed = (figures.accuracy + solution.error) * fundamental
        for n, (value, expected) in enumerate(zip(point["harmonics"], solution.values), 1):
            comparison.check(f"{place}: H{n}, V rms", value, expected, allowed)
        comparison.check(f"{place}: mean shift, V", point["dc_shift"], solution.dc_shift, allowed)
        # An error in each harmonic is at worst an error of its size, over H1, in THD.
        slack = figures.thd_accuracy * solution.thd_percent + 100.0 * solution.error
        comparison.check(f"{place}: THD, %", point["thd_percent"], solution.thd_percent, slack)


CLOSED_FORMS = [  # stage, its harmonics as a function of the peak, peaks, allowance of the circuit over the formula
    ("exact_exponential", closed_forms.exponential, [x * THERMAL_VOLTAGE for x in (0.1, 0.5, 1, 2, 5, 10)], 0.0),
    ("exact_pair", closed_forms.pair, [x * THERMAL_VOLTAGE for x in (0.1, 0.5, 1, 2, 5, 10)], PAIR_ALLOWANCE),
    ("exact_degenerated", closed_forms.degenerated, [0.001, 0.01, 0.05, 0.2, 0.6], 0.0),
]


def compare_program_with_closed_forms(program):
    comparison = Comparison()
    for stage, formula, peaks, allowance in CLOSED_FORMS:
        levels = [peak / math.sqrt(2.0) for peak in peaks]
        for peak, point in zip(peaks, program.harmonics(stage, DRIVE_FREQUENCY, levels)):
            wanted = formula(peak)
            limit = program.accuracy * abs(wanted[0])
            # The allowance is for ratios; the size of H1 itself moves with the tail, which is 1 mA within 1e-6.
            first = limit + (1e-6 * abs(wanted[0]) if allowance else 0.0)
            for n, (value, expected) in enumerate(zip(point["harmonics"], wanted), 1):
                allowed = first if n == 1 else limit + allowance * abs(wanted[0])
                comparison.check(f"{stage}, {peak:.4g} V peak: H{n}, V rms", value, expected, allowed)
    return comparison


def compare_tables_with_closed_forms(expected):
    """The printed tables have twelve digits."""
    comparison, tables = Comparison(), expected.closed_forms()
    for row in tables["bessel_ratios"]:
        wanted = closed_forms.exponential(row["x"] * THERMAL_VOLTAGE)
        for n, ratio in row["Hn_over_H1"].items():
            expected_ratio = abs(wanted[int(n) - 1] / wanted[0])
            comparison.check(f"bessel_ratios x = {row['x']}: H{n}/H1", ratio, expected_ratio, 1e-11 * ratio)
    for row in tables["tanh_pair"]:
        wanted = closed_forms.pair(row["x"] * THERMAL_VOLTAGE)
        for n, ratio in row["signed_Hn_over_H1"].items():
            comparison.check(f"tanh_pair x = {row['x']}: H{n}/H1", abs(ratio), abs(wanted[int(n) - 1] / wanted[0]),
                             1e-11 * abs(ratio) + 1e-14)  # 1e-14: rounding of the transform, relative to H1
    for row in tables["lambert_w"]["static"]:
        current = float(closed_forms.degenerated_current(row["V"]))
        comparison.check(f"lambert_w at {row['V']} V, A", row["I"], current, 1e-11 * abs(row["I"]) + 1e-26)
    for row in tables["lambert_w"]["drives"]:
        wanted = closed_forms.degenerated(row["amplitude_V"]) / 40.0
        for n, rms in enumerate(row["Hn_rms_A"], 1):
            comparison.check(f"lambert_w, {row['amplitude_V']} V peak: H{n}, A rms", rms, abs(wanted[n - 1]),
                             1e-11 * rms + 1e-12 * abs(wanted[0]))
    return comparison


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    root = pathlib.Path(__file__).resolve().parents[2]
    parser.add_argument("binary", nargs="?", default=root / "target" / "release" / "cleanswing")
    parser.add_argument("--against-expected", action="store_true", help="compare tests/expected/open instead")
    options = parser.parse_args()
    figures = Expected() if options.against_expected else Program(options.binary)
    total = Comparison()
    try:
        total.merge(compare_tables_with_closed_forms(figures) if options.against_expected
                    else compare_program_with_closed_forms(figures))
        cases = [(stage, level) for stage in (CollectorFeedback, SplitEmitter) for level in reversed(stage.levels)]
        with concurrent.futures.ProcessPoolExecutor() as pool:
            solutions = dict(zip(cases, pool.map(solve, cases)))
        for stage in (SplitEmitter, CollectorFeedback):
            total.merge(compare_stage(figures, stage, [solutions[stage, level] for level in stage.levels]))
    except Disagreement as error:
        total.failures.append(str(error))
    for failure in total.failures:
        print(failure)
    print(f"reference against {figures.name}: {total.count} compared, {len(total.failures)} differ; "
          f"nearest to its limit ({100.0 * total.worst[0]:.2g} %): {total.worst[1]}")
    return 1 if total.failures or not np.isfinite(total.worst[0]) else 0


if __name__ == "__main__":
    sys.exit(main())
