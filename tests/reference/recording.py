#!/usr/bin/env python3
"""Render a real recording through both starters and check level, spectrum and form of what comes out.

    recording.py [BINARY] --recording VOICE.wav [--second OTHER.wav]

Quietly (a thousandth of the 1 % level at full scale) the stage is linear, so its output must be the recording filtered
by the gain that `distortion --json` reports, to the sample; loudly (thirty times the 1 % level) it must be compressed
and have grown harmonics. Nothing in this check knows the circuit: it holds `listen` to `distortion`, which
reference.py holds to equations.
Exit code 0: all as it should be; 1: not, each fault printed with place, value, expected, margin.
"""

import argparse
import json
import math
import pathlib
import subprocess
import sys
import tempfile

import numpy as np
from scipy.interpolate import CubicSpline
from scipy.io import wavfile

# Tolerances, each with its reason.
BAND_DB = 0.05      # third octaves: the gain is interpolated to about 1e-5; 0.05 dB is far below what could be heard
ERROR_DB = -70.0    # rms error over rms output: the renderer claims -80 dB at 8x; 10 dB for gain interpolation
PEAK_ERROR_DB = -60.0   # largest single error over largest output: a click one sample long stands out of the rms
SAME_DB = -120.0    # one channel of a stereo file against the same channel alone: f32 rounding, -144 dB, and a margin
THIRD_OCTAVES = [200.0 * 2.0 ** (n / 3.0) for n in range(17)]  # 200 Hz to 8 kHz
QUIET, LOUD = 1e-3, 30.0  # full-scale level over the level that gives 1 % THD at 1 kHz


class Checks:
    def __init__(self):
        self.count, self.failures = 0, []

    def at_most(self, place, value, limit):
        self.count += 1
        if not value <= limit:
            self.failures.append(f"{place}: {value:.6g}, must be at most {limit:.6g}, off by {value - limit:.3g}")

    def at_least(self, place, value, limit):
        self.count += 1
        if not value >= limit:
            self.failures.append(f"{place}: {value:.6g}, must be at least {limit:.6g}, short by {limit - value:.3g}")

    def same(self, place, value, expected):
        self.count += 1
        if value != expected:
            self.failures.append(f"{place}: {value!r}, expected {expected!r}")


class Program:
    def __init__(self, binary, folder):
        self.binary, self.folder = pathlib.Path(binary).resolve(), pathlib.Path(folder)

    def run(self, *arguments):
        done = subprocess.run([str(self.binary), *map(str, arguments)], cwd=self.folder, capture_output=True, text=True,
                              timeout=300, stdin=subprocess.DEVNULL)
        if done.returncode != 0:
            raise SystemExit(f"cleanswing {' '.join(map(str, arguments))}: exit {done.returncode}: {done.stderr}")
        return done.stdout

    def starters(self):
        return [line.split()[0] for line in self.run("start").splitlines()]

    def distortion(self, stage, *options):
        return json.loads(self.run("distortion", stage, *options, "--json"))["points"]

    def listen(self, stage, recording, full_scale, output_full_scale, sample_format="f32"):
        self.run("listen", stage, recording, "-o", "out.wav", "--full-scale", f"{float(full_scale)!r}Vpk",
                 "--output-full-scale", f"{float(output_full_scale)!r}Vpk", "--format", sample_format, "--overwrite")
        return read(self.folder / "out.wav")


def read(path):
    """Rate and samples as fractions of full scale, one column a channel."""
    rate, samples = wavfile.read(path)
    if samples.dtype.kind == "i":
        samples = samples.astype(float) / 2.0 ** (8 * samples.dtype.itemsize - 1)
    return rate, samples.astype(float).reshape(len(samples), -1)


def one_percent_level(program, stage):
    """EMF rms at 1 kHz where THD first passes 1 %, from the default sweep, by interpolating its logarithm."""
    points = [p for p in program.distortion(stage) if p["thd_percent"] is not None]
    for below, above in zip(points, points[1:]):
        if below["thd_percent"] <= 1.0 < above["thd_percent"]:
            share = math.log(1.0 / below["thd_percent"]) / math.log(above["thd_percent"] / below["thd_percent"])
            return below["level_v_rms"] * (above["level_v_rms"] / below["level_v_rms"]) ** share
    raise SystemExit(f"{stage}: the default sweep never passes 1 % THD")


def linear_gain(program, stage, level, rate):
    """Complex gain over frequency as a function, 0.2 Hz to half the rate, from H1 at a very low level."""
    grid = np.geomspace(0.2, rate / 2.0, 200)
    grid[-1] = rate / 2.0
    points = program.distortion(stage, "--level", f"{float(level)!r}V", "--bandwidth", "80kHz",
                                "--frequency", ",".join(f"{float(f)!r}" for f in grid))
    first = [p["harmonics"][0] for p in points]
    size = CubicSpline(np.log(grid), np.log([h["v_rms"] / level for h in first]))
    angle = CubicSpline(np.log(grid), np.unwrap(np.radians([h["phase_deg"] for h in first])))

    def gain(frequencies):
        inside = np.clip(frequencies, grid[0], grid[-1])
        values = np.exp(size(np.log(inside)) + 1j * angle(np.log(inside)))
        return np.where(frequencies < grid[0], 0.0, values)  # nothing there gets through a coupling capacitor

    return gain


def filtered(samples, rate, gain):
    """The samples through the linear response, with four seconds of room for the coupling capacitors to settle."""
    length = 1 << int(math.ceil(math.log2(len(samples) + 4 * rate)))
    spectrum = np.fft.rfft(samples, length)
    return np.fft.irfft(spectrum * gain(np.fft.rfftfreq(length, 1.0 / rate)), length)[:len(samples)]


def band_levels_db(samples, rate):
    power = abs(np.fft.rfft(samples)) ** 2
    frequencies = np.fft.rfftfreq(len(samples), 1.0 / rate)
    edge = 2.0 ** (1.0 / 6.0)
    return np.array([10.0 * math.log10(power[(frequencies >= f / edge) & (frequencies < f * edge)].sum())
                     for f in THIRD_OCTAVES])


def decibels(ratio):
    return 20.0 * math.log10(max(ratio, 1e-300))


def rms(samples):
    return float(np.sqrt(np.mean(samples**2)))


def check_form(checks, place, rate, samples, rendered_rate, rendered):
    """What any rendering must be: as many samples, at the same rate, on as many channels, and all of them numbers."""
    checks.same(f"{place}: sample rate", rendered_rate, rate)
    checks.same(f"{place}: samples and channels", rendered.shape, samples.shape)
    checks.same(f"{place}: samples that are no number", int(np.sum(~np.isfinite(rendered))), 0)


def check_quiet(checks, program, stage, recording, level):
    rate, samples = read(recording)
    full_scale = math.sqrt(2.0) * QUIET * level
    gain = linear_gain(program, stage, 1e-2 * QUIET * level, rate)
    at_1khz = gain(np.array([1000.0]))[0]
    output_full_scale = 4.0 * abs(at_1khz) * full_scale
    rendered_rate, rendered = program.listen(stage, recording, full_scale, output_full_scale)
    check_form(checks, f"{stage}, quiet", rate, samples, rendered_rate, rendered)
    for channel, (heard, given) in enumerate(zip(rendered.T * output_full_scale, samples.T * full_scale)):
        place = f"{stage}, quiet, channel {channel}"
        wanted = filtered(given, rate, gain)
        error = heard - wanted
        checks.at_most(f"{place}: rms error over rms output, dB", decibels(rms(error) / rms(wanted)), ERROR_DB)
        peak = decibels(float(max(abs(error)) / max(abs(wanted))))
        checks.at_most(f"{place}: largest error (a click) over largest output, dB", peak, PEAK_ERROR_DB)
        correlation = float(heard @ given) * math.copysign(1.0, math.cos(float(np.angle(at_1khz))))
        checks.at_least(f"{place}: output by input, sign as at 1 kHz", correlation, 0.0)
        difference = band_levels_db(heard, rate) - band_levels_db(wanted, rate)
        for frequency, off in zip(THIRD_OCTAVES, difference):
            checks.at_most(f"{place}: third octave at {frequency:.0f} Hz, |dB| off", abs(float(off)), BAND_DB)
        print(f"{place}: {decibels(abs(at_1khz)):.2f} dB at 1 kHz, error {decibels(rms(error) / rms(wanted)):.1f} dB, "
              f"bands within {max(abs(difference)):.4f} dB")


def check_loud(checks, program, stage, recording, level):
    rate, samples = read(recording)
    given = samples[:, 0]
    full_scale = math.sqrt(2.0) * LOUD * level / max(abs(given))  # so the recording's own peak reaches that level
    gain = linear_gain(program, stage, 1e-5 * level, rate)
    wanted = filtered(given * full_scale, rate, gain)
    output_full_scale = 2.0 * float(max(abs(wanted)))  # the linear answer would fit, so the clipped one does
    rendered_rate, rendered = program.listen(stage, recording, full_scale, output_full_scale)
    place = f"{stage}, loud"
    check_form(checks, place, rate, samples, rendered_rate, rendered)
    heard = rendered[:, 0] * output_full_scale
    compression = decibels(rms(heard) / rms(wanted))
    distortion = decibels(rms(heard - wanted) / rms(wanted))
    checks.at_most(f"{place}: output over linear output, dB (compressed)", compression, -1.0)
    checks.at_least(f"{place}: difference from linear over linear, dB", distortion, -20.0)
    growth = harmonic_growth_db(heard, wanted, rate)
    checks.at_least(f"{place}: share of energy above 5 kHz, growth over linear, dB", growth, 3.0)
    _, coarse = program.listen(stage, recording, full_scale, output_full_scale, "s16")
    # Rounding is half a step and triangular dither one step either way; s16 full scale may be 32767 or 32768 steps.
    step = 1.5 / 32768.0 + float(np.max(np.abs(rendered))) / 32768.0 + 1e-6
    checks.at_most(f"{place}: s16 against f32, of full scale", float(np.max(np.abs(coarse - rendered))), step)
    print(f"{place}: compressed by {-compression:.1f} dB, distortion {distortion:.1f} dB, treble share {growth:+.1f} dB")


def harmonic_growth_db(heard, wanted, rate):
    frequencies = np.fft.rfftfreq(len(heard), 1.0 / rate)
    shares = []
    for samples in (heard, wanted):
        power = abs(np.fft.rfft(samples)) ** 2
        shares.append(power[frequencies > 5000.0].sum() / power.sum())
    return 10.0 * math.log10(shares[0] / shares[1])


def check_stereo(checks, program, stage, recording, second, level):
    """Each channel of a stereo file comes out as it does alone: it has a state of its own."""
    rate, left = read(recording)
    other_rate, right = read(second)
    checks.same("sample rate of the second recording", other_rate, rate)
    length = min(len(left), len(right))
    pair = np.hstack([left[:length, :1], right[:length, :1]]).astype(np.float32)
    full_scale, output_full_scale = 5.0 * level, 100.0
    wavfile.write(program.folder / "pair.wav", rate, pair)
    _, together = program.listen(stage, "pair.wav", full_scale, output_full_scale)
    for channel in (0, 1):
        wavfile.write(program.folder / "alone.wav", rate, pair[:, channel])
        _, alone = program.listen(stage, "alone.wav", full_scale, output_full_scale)
        off = decibels(float(max(abs(together[:, channel] - alone[:, 0])) / max(abs(alone[:, 0]))))
        checks.at_most(f"{stage}: channel {channel} of a stereo file against itself alone, dB", off, SAME_DB)


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    root = pathlib.Path(__file__).resolve().parents[2]
    parser.add_argument("binary", nargs="?", default=root / "target" / "release" / "cleanswing")
    parser.add_argument("--recording", required=True, help="a WAV that nobody synthesised")
    parser.add_argument("--second", help="another, of the same rate, for the stereo check")
    options = parser.parse_args()
    checks = Checks()
    recording = pathlib.Path(options.recording).resolve()
    with tempfile.TemporaryDirectory() as folder:
        program = Program(options.binary, folder)
        starters = program.starters()
        checks.at_least("starters listed", len(starters), 2)
        for name in starters:
            stage = f"{name}.toml"
            program.run("start", name, "-o", stage)
            level = one_percent_level(program, stage)
            check_quiet(checks, program, stage, recording, level)
            check_loud(checks, program, stage, recording, level)
            if options.second:
                check_stereo(checks, program, stage, recording, pathlib.Path(options.second).resolve(), level)
    for failure in checks.failures:
        print(failure)
    print(f"recording {recording.name}: {checks.count} checked, {len(checks.failures)} wrong")
    return 1 if checks.failures else 0


if __name__ == "__main__":
    sys.exit(main())
