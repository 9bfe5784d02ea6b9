"""Where the figures under test come from: the program's own --json, or the files of tests/expected/open.

Both answer the same questions, and both by the unit conventions of this folder: complex rms, volts, amperes.
"""

import cmath
import json
import math
import pathlib
import subprocess

EXPECTED = pathlib.Path(__file__).resolve().parent.parent / "expected" / "open"


class Disagreement(Exception):
    """The figures could not be had at all: the program failed, or printed what its schema does not allow."""


class Program:
    """The program's answers. `accuracy` is what it claims for a harmonic, relative to H1."""

    name = "the program"
    accuracy = 1e-7
    current_accuracy = 1e-8
    volt_accuracy = 1e-9
    gain_accuracy = 1e-8
    thd_accuracy = 1e-5

    def __init__(self, binary):
        self.binary = pathlib.Path(binary).resolve()

    def run(self, *arguments):
        command = [str(self.binary), *map(str, arguments)]
        done = subprocess.run(command, capture_output=True, text=True, timeout=120, stdin=subprocess.DEVNULL)
        if done.returncode != 0:
            raise Disagreement(f"{' '.join(command)} ended with {done.returncode}: {done.stderr.strip()}")
        return done.stdout

    def document(self, command, *arguments):
        text = self.run(command, *arguments, "--json")
        document = json.loads(text, parse_constant=_refuse_constant)
        if not str(document.get("schema", "")).startswith(f"cleanswing.{command}/"):
            raise Disagreement(f"{command} --json: schema is {document.get('schema')!r}")
        return document

    def bias(self, stage):
        document = self.document("bias", EXPECTED / f"{stage}.toml")
        transistors = {name: {"IC": t["collector_current_a"], "IB": t["base_current_a"], "VBE": t["base_emitter_v"],
                              "VCE": t["collector_emitter_v"], "region": t["region"]}
                       for name, t in document["transistors"].items()}
        return document["nodes"], transistors

    def gain(self, stage, frequencies):
        """Small-signal gain, as H1 over a level so low (1 uV) that the next term, level squared, is below 1e-9."""
        return [point["harmonics"][0] / 1e-6 for point in self._points(stage, frequencies, [1e-6])]

    def harmonics(self, stage, frequency, levels):
        return self._points(stage, [frequency], levels)

    def _points(self, stage, frequencies, levels):
        listed = ",".join(f"{level!r}V" for level in levels)
        document = self.document("distortion", EXPECTED / f"{stage}.toml", "--level", listed,
                                 "--frequency", ",".join(f"{f!r}Hz" for f in frequencies), "--bandwidth", "80kHz")
        wanted = [(f, level) for f in frequencies for level in levels]
        points = document["points"]
        found = [(p["frequency_hz"], p["level_v_rms"]) for p in points]
        if found != wanted:
            raise Disagreement(f"{stage}: points are {found}, asked for {wanted}")
        return [_point(p) for p in points]


def _refuse_constant(word):
    raise Disagreement(f"{word} in --json")


def _point(point):
    harmonics = sorted(point["harmonics"], key=lambda h: h["n"])
    if [h["n"] for h in harmonics] != list(range(1, 21)):
        raise Disagreement(f"harmonics are {[h['n'] for h in harmonics]}, should be 1 to 20")
    return {"harmonics": [_phasor(h["v_rms"], h["phase_deg"]) for h in harmonics],
            "thd_percent": point["thd_percent"], "dc_shift": point["dc_shift_v"]}


def _phasor(rms, degrees):
    """Without a phase the harmonic is below the floor: any angle will do, so long as its size is within tolerance."""
    return cmath.rect(rms, math.radians(degrees)) if degrees is not None else complex(rms)


class Expected:
    """The files' answers, held to what they print: ten digits, phases to 1e-7 degree."""

    name = "tests/expected/open"
    accuracy = 2e-9
    current_accuracy = 1e-9
    volt_accuracy = 1e-10
    gain_accuracy = 1e-9
    thd_accuracy = 2e-8

    def _stage(self, stage):
        return json.loads((EXPECTED / f"{stage}.json").read_text())

    def bias(self, stage):
        bias = self._stage(stage)["bias"]
        return bias["nodes"], bias["transistors"]

    def gain(self, stage, frequencies):
        table = self._stage(stage)["small_signal"]
        by_frequency = {f: complex(re, im) for f, re, im in
                        zip(table["frequency_Hz"], table["gain_re"], table["gain_im"])}
        return [by_frequency[f] for f in frequencies]

    def harmonics(self, stage, frequency, levels):
        sets = {h["emf_rms_V"]: h for h in self._stage(stage)["harmonics"] if h["frequency_Hz"] == frequency}
        return [{"harmonics": [_phasor(*pair) for pair in zip(sets[v]["H_rms_V"], sets[v]["phase_deg"])],
                 "thd_percent": sets[v]["THD_80kHz_percent"], "dc_shift": sets[v]["dc_shift_V"]} for v in levels]

    def closed_forms(self):
        return json.loads((EXPECTED / "closed_forms.json").read_text())
