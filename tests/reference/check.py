#!/usr/bin/env python3
"""Checks roundwell against programs from outside: scipy.signal for ideal responses, ngspice for every circuit.

    python3 tests/reference/check.py path/to/roundwell

For every output of every circuit a section is searched. Then, at 20 frequencies, the complex response of the first row's
parts is taken from ngspice (op-amps are voltage-controlled sources of gain 1e8) and compared with scipy.signal.freqs of the
figures that roundwell says the row achieves; and the row's response error is recomputed from the achieved figures and the
target, both by scipy, on the frequencies that README.md states. The last line counts.
"""

import json
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
from scipy import signal

TAU = 2 * np.pi

# What is asked of each shape: flags of the command line, and the numbers behind them.
ASKED = {
    "low-pass": dict(f0=1000.0, q=0.9, gain=1.0),
    "high-pass": dict(f0=1000.0, q=0.9, gain=1.0),
    "band-pass": dict(f0=1800.0, q=3.0, gain=1.0),
    "notch": dict(f0=700.0, q=1.5, gain=1.0),
    "all-pass": dict(f0=1200.0, q=0.8, gain=1.0),
    "first-order low-pass": dict(f0=330.0, gain=1.0),
    "first-order high-pass": dict(f0=330.0, gain=1.0),
    "first-order all-pass": dict(f0=330.0, gain=1.0),
}
# Outputs whose circuit cannot give the gain above, whatever its parts.
GAIN = {"sallen-key-low-pass-gain": 2.0, "state-variable": 1.5}
# Notches away from f0 for the circuit that can place its zero.
ZEROS = {"feed-forward-biquad": [700.0, 1000.0, 500.0]}


class Checks:
    """Counts what passed and says what failed."""

    def __init__(self):
        self.passed, self.failed = 0, 0

    def close(self, label, found, expected, tolerance):
        if np.all(np.abs(np.asarray(found) - np.asarray(expected)) <= tolerance):
            self.passed += 1
        else:
            self.failed += 1
            worst = np.max(np.abs(np.asarray(found) - np.asarray(expected)))
            print(f"FAILED {label}: off by {worst:.3e}, allowed {np.min(tolerance):.3e}")


def run(program, *arguments):
    done = subprocess.run([program, *arguments], capture_output=True, text=True)
    if done.returncode not in (0, 3):
        sys.exit(f"{' '.join(arguments)}: exit {done.returncode}\n{done.stderr}")
    return json.loads(done.stdout)


def coefficients(shape, f0, q, gain, fz=None, gain_at_dc=True):
    """Numerator and denominator, highest power first, of a section as README.md defines its figures; the gain of a notch
    holds at DC or far above f0, as the target's zero lies."""
    w0, wz = TAU * f0, TAU * (fz or f0)
    first = [1.0, w0]
    second = [1.0, w0 / q, w0 * w0] if q else None
    if shape == "low-pass":
        return [gain * w0 * w0], second
    if shape == "high-pass":
        return [gain, 0.0, 0.0], second
    if shape == "band-pass":
        return [gain * w0 / q, 0.0], second
    if shape == "notch":
        scale = gain * (w0 / wz) ** 2 if gain_at_dc else gain
        return [scale, 0.0, scale * wz * wz], second
    if shape == "all-pass":
        return [gain, -gain * w0 / q, gain * w0 * w0], second
    if shape == "first-order low-pass":
        return [gain * w0], first
    if shape == "first-order high-pass":
        return [gain, 0.0], first
    if shape == "first-order all-pass":
        return [-gain, gain * w0], first
    raise ValueError(shape)


def freqs(section, frequencies):
    numerator, denominator = coefficients(**section)
    return signal.freqs(numerator, denominator, worN=TAU * frequencies)[1]


def spice(circuit, node, values, frequencies):
    """The complex response from ngspice at the given frequencies; node 0 is ground, the source has 1 V."""
    # Names of nodes are prefixed, because some of them mean something to ngspice.
    name = lambda n: "0" if n == "0" else f"n_{n}"
    lines = ["* one section", "Vsource n_in 0 dc 0 ac 1"]
    for element in circuit["elements"]:
        if element["name"] in values:
            a, b = map(name, element["nodes"])
            lines.append(f"{element['name']} {a} {b} {values[element['name']]:.17e}")
    for op_amp in circuit["op_amps"]:
        lines.append(f"E{op_amp['name']} {name(op_amp['out'])} 0 {name(op_amp['plus'])} {name(op_amp['minus'])} 1e8")
    with tempfile.TemporaryDirectory() as folder:
        out = Path(folder) / "out.txt"
        # One .ac analysis a frequency keeps the very frequencies of the comparison.
        control = [".control", "set numdgt=16", "set wr_singlescale"]
        for k, f in enumerate(frequencies):
            control += [f"ac lin 1 {f:.17e} {f:.17e}", f"wrdata {out}.{k} v({name(node)})"]
        lines += [*control, "quit 0", ".endc", ".end"]
        deck = Path(folder) / "deck.cir"
        deck.write_text("\n".join(lines) + "\n")
        done = subprocess.run(["ngspice", "-b", str(deck)], capture_output=True, text=True)
        if done.returncode != 0 or "singular" in done.stderr.lower():
            sys.exit(f"ngspice failed on {circuit['id']}:\n{done.stderr}\n{deck.read_text()}")
        rows = [np.loadtxt(f"{out}.{k}", ndmin=2)[0] for k in range(len(frequencies))]
    return np.array([complex(row[1], row[2]) for row in rows])


def response_error(target, achieved, measure):
    """The response error of README.md in dB, on the plain grid of 200 steps to the decade."""
    low, high = measure["band_hz"]
    decades = np.log10(high / low)
    count = int(np.ceil(200 * decades - 1e-6))
    grid = low * 10 ** (decades * np.arange(count + 1) / count)
    h, ideal = np.abs(freqs(achieved, grid)), np.abs(freqs(target, grid))
    floor = ideal.max() * 10 ** (-measure["floor_db"] / 20)
    return np.max(np.abs(20 * np.log10(np.maximum(h, floor) / np.maximum(ideal, floor))))


def check_output(program, checks, circuit, output, zero=None):
    shape = output["shape"]
    asked = dict(ASKED[shape])
    asked["gain"] = GAIN.get(circuit["id"], asked["gain"])
    flags = ["--shape", shape.replace(" ", "-"), "--f0", f"{asked['f0']:g}", "--sign", "either"]
    flags += ["--gain", f"{asked['gain']:g}", "--circuit", circuit["id"], "--output", output["name"]]
    flags += ["--q", f"{asked['q']:g}"] if "q" in asked else []
    flags += ["--fz", f"{zero:g}"] if zero else []
    flags += ["--resistors", "E24:1k..100k", "--capacitors", "E6:1n..100n", "--max-part-numbers", "5"]
    record = run(program, "shortlist", *flags, "--format", "json")
    label = f"{circuit['id']} {output['name']}" + (f" fz {zero:g}" if zero else "")
    if not record["shortlist"]:
        checks.failed += 1
        return print(f"FAILED {label}: nothing was found")
    row, target = record["shortlist"][0], record["sections"][0]["target"]
    section = row["sections"][0]
    achieved = section["achieved"]
    at_dc = (zero or asked["f0"]) >= asked["f0"]
    figures = lambda f: dict(shape=shape, f0=f["f0_hz"], q=f["q"], gain=f["gain"], fz=f["fz_hz"], gain_at_dc=at_dc)
    values = {part["slot"]: part["value"] for part in section["parts"]}

    frequencies = np.geomspace(asked["f0"] / 20, asked["f0"] * 20, 20)
    found = spice(circuit, output["node"], values, frequencies)
    expected = freqs(figures(achieved), frequencies)
    peak = np.abs(expected).max()
    if shape == "all-pass":
        # The achieved figures are those of the poles; zeros that do not mirror them are no part of them.
        checks.close(f"{label}, ngspice", found, expected, 2 * row["ranking_error"] * peak + 1e-6)
    else:
        checks.close(f"{label}, ngspice", found, expected, 1e-6 * np.abs(expected) + 1e-7 * peak)
    if record["measure"]["name"] == "decibel" and shape != "notch":
        error = response_error(figures(target), figures(achieved), record["measure"])
        checks.close(f"{label}, scipy", row["response_error_db"], error, 1e-7)


def main():
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    program = sys.argv[1]
    checks = Checks()
    names = sorted(path.stem for path in (Path(__file__).parents[2] / "data" / "circuits").glob("*.ron"))
    for name in names:
        circuit = run(program, "circuits", name, "--format", "json")
        for output in circuit["outputs"]:
            zeros = ZEROS.get(name, [None]) if output["shape"] == "notch" else [None]
            for zero in zeros:
                check_output(program, checks, circuit, output, zero)
    print(f"{checks.passed} passed, {checks.failed} failed")
    sys.exit(checks.failed > 0)


if __name__ == "__main__":
    main()
