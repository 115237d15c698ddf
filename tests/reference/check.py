#!/usr/bin/env python3
"""Checks roundwell against programs from outside: numpy and scipy.signal for responses, ngspice for every circuit.

    python3 tests/reference/check.py path/to/roundwell

For every output of every circuit a section is searched, and the first row's parts are put to the test:

- at 20 frequencies their complex response from ngspice (op-amps are voltage-controlled sources), from a nodal
  solve in numpy (ideal op-amps) and from scipy.signal.freqs of the figures that roundwell says the row achieves;
- their error, recomputed from the nodal solve and scipy's ideal response on the frequencies that README.md states;
- their counts.

Poles, zeros and least orders of `roundwell sections` are compared with scipy.signal, and where scipy has no such filter
with the definition of its magnitude. All rows of the example jobs are recomputed the same way, and the best row of three
part numbers is compared with all sets of so many. What `vet` says of a row is compared with boards drawn in numpy, its
worst case, real response, headroom and noise with ngspice, and so is what rows searched for with real op-amps give as
built. The last line counts the checks; the exit code is 1 if one
failed.
"""

import itertools
import json
import math
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
from scipy import linalg, optimize, signal, stats

TAU = 2 * np.pi
ROOT = Path(__file__).parents[2]

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
# Up to this Q the measure has no further frequencies about the poles.
PLAIN_Q = 5.4


class Checks:
    """Counts what passed and says what failed."""

    def __init__(self):
        self.passed, self.failed = 0, 0

    def holds(self, label, condition, explanation):
        if condition:
            self.passed += 1
        else:
            self.failed += 1
            print(f"FAILED {label}: {explanation}")

    def close(self, label, found, expected, tolerance):
        off = np.abs(np.asarray(found) - np.asarray(expected))
        excess = np.max(off / tolerance)
        # Not "excess > 1": that would let NaN pass.
        self.holds(label, excess <= 1, f"off by {np.max(off):.3e}, {excess:.3g} times what is allowed")


def run(program, *arguments):
    done = subprocess.run([program, *arguments], capture_output=True, text=True)
    if done.returncode not in (0, 3):
        sys.exit(f"{' '.join(arguments)}: exit {done.returncode}\n{done.stderr}")
    return json.loads(done.stdout)


def coefficients(shape, f0, q, gain, fz=None, gain_at_dc=True):
    """Numerator and denominator, highest power first, of a section as README.md defines its figures.

    The gain of a notch holds at DC or far above f0, as the target's zero lies.
    """
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


def figures(target, values):
    """The arguments of `coefficients` for a target's own figures, or for those that a row achieves."""
    at_dc = target["fz_hz"] is None or target["fz_hz"] >= target["f0_hz"]
    names = dict(f0=values["f0_hz"], q=values["q"], gain=values["gain"], fz=values["fz_hz"])
    return dict(shape=target["shape"], gain_at_dc=at_dc, **names)


def freqs(section, frequencies):
    numerator, denominator = coefficients(**section)
    return signal.freqs(numerator, denominator, worN=TAU * np.asarray(frequencies))[1]


def nodal(circuit, node, values, frequencies):
    """The complex response with ideal op-amps: the current law at each node, and equal inputs at each op-amp."""
    nodes = [n for n in circuit["nodes"] if n not in ("0", "in")]
    size = len(nodes) + len(circuit["op_amps"])
    s = 1j * TAU * np.asarray(frequencies)
    matrix, right = np.zeros((len(s), size, size), complex), np.zeros((len(s), size, 1), complex)
    for element in circuit["elements"]:
        if element["name"] not in values:
            continue
        value = values[element["name"]]
        admittance = s * value if element["kind"] == "C" else np.full(len(s), 1 / value)
        for here, there in (element["nodes"], element["nodes"][::-1]):
            if here in nodes:
                row = nodes.index(here)
                matrix[:, row, row] += admittance
                if there in nodes:
                    matrix[:, row, nodes.index(there)] -= admittance
                elif there == "in":
                    right[:, row, 0] += admittance
    for k, op_amp in enumerate(circuit["op_amps"]):
        matrix[:, nodes.index(op_amp["out"]), len(nodes) + k] = 1
        for end, sign in ((op_amp["plus"], 1), (op_amp["minus"], -1)):
            if end in nodes:
                matrix[:, len(nodes) + k, nodes.index(end)] += sign
            elif end == "in":
                right[:, len(nodes) + k, 0] -= sign
    # Balanced rows: conductances and the plain ones of the op-amps differ by many decades.
    scale = np.abs(matrix).max(axis=2, keepdims=True)
    return np.linalg.solve(matrix / scale, right / scale)[:, nodes.index(node), 0]


def spice(circuit, node, values, frequencies):
    """The complex response from ngspice at the given frequencies, for op-amps of unlimited gain.

    The error of a finite gain falls as its reciprocal, so the responses for a gain and for twice that give the limit; a
    single very large gain would cost ngspice more digits by cancellation than it saves.
    """
    once, twice = (spice_at(gain, circuit, node, values, frequencies) for gain in (2e5, 4e5))
    return 2 * twice - once


def spice_at(gain, circuit, node, values, frequencies):
    """The same for op-amps as voltage-controlled sources of that gain; node 0 is ground, the source has 1 V."""
    # Names of nodes are prefixed, because some of them mean something to ngspice.
    name = lambda n: "0" if n == "0" else f"n_{n}"
    lines = ["* one section", "Vsource n_in 0 dc 0 ac 1"]
    for element in circuit["elements"]:
        if element["name"] in values:
            a, b = map(name, element["nodes"])
            # Plain exponents: to ngspice 4k7 is 4.0 kilohm and 1M a milliohm.
            lines.append(f"{element['name']} {a} {b} {values[element['name']]:.17e}")
    for op_amp in circuit["op_amps"]:
        ends = [name(op_amp["out"]), "0", name(op_amp["plus"]), name(op_amp["minus"])]
        lines.append(f"E{op_amp['name']} {' '.join(ends)} {gain:e}")
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


def steps(measure):
    """The equal logarithmic steps of the measure, Hz."""
    low, high = measure["band_hz"]
    decades = np.log10(high / low)
    count = int(np.ceil(200 * decades - 1e-6))
    return low * 10 ** (decades * np.arange(count + 1) / count)


def grid(measure, ideal):
    """The frequencies of the measure, Hz: equal steps, and where |H*| crosses the floor."""
    frequencies = steps(measure)
    floor = np.abs(ideal(frequencies)).max() * 10 ** (-measure["floor_db"] / 20)
    above = lambda log: np.log(np.abs(ideal(np.exp([log])))[0] / floor)
    logs = np.log(frequencies)
    signs = np.abs(ideal(frequencies)) > floor
    between = np.flatnonzero(np.diff(signs))
    crossings = [np.exp(optimize.brentq(above, logs[i], logs[i + 1], xtol=1e-15)) for i in between]
    return np.sort(np.concatenate([frequencies, crossings]))


def errors(measure, frequencies, h, ideal):
    """The response error in dB, and the vector error; their floor is set by the largest ideal response."""
    floor = np.abs(ideal).max() * 10 ** (-measure["floor_db"] / 20)
    decibels = 20 * np.log10(np.maximum(np.abs(h), floor) / np.maximum(np.abs(ideal), floor))
    return np.max(np.abs(decibels)), np.max(np.abs(h - ideal) / np.maximum(np.abs(ideal), floor))


def check_row(checks, label, record, circuits, row):
    """A row's errors and counts, from its parts."""
    targets = [section["target"] for section in record["sections"]]
    ideal = lambda f: np.prod([freqs(figures(t, t), f) for t in targets], axis=0)
    frequencies = grid(record["measure"], ideal)
    h, bought, placed = np.ones(len(frequencies), complex), set(), 0
    for section in row["sections"]:
        circuit = circuits[section["circuit"]]
        output = next(o for o in circuit["outputs"] if o["name"] == section["output"])
        values = {part["slot"]: part["value"] for part in section["parts"]}
        kinds = {element["name"]: element["kind"] for element in circuit["elements"]}
        checks.holds(
            f"{label}, slots",
            set(values) == set(kinds) - set(output["without"])
            and all(part["kind"] == kinds[part["slot"]] for part in section["parts"]),
            f"{sorted(values)} are filled",
        )
        # A pair is two bodies; parts of a stock list are told apart by their lines too.
        pieces = [(part["kind"], piece) for part in section["parts"] for piece in part["made_of"]]
        bought |= {(kind, piece["notation"], *piece["lines"]) for kind, piece in pieces}
        placed += len(pieces) or len(section["parts"])
        h *= nodal(circuit, output["node"], values, frequencies)
    said, there = (row["part_numbers"], row["placed_parts"]), (len(bought), placed)
    checks.holds(f"{label}, counts", said == there, f"{said} are said, {there} are there")
    if record["measure"]["ignore_gain"]:
        h *= row["gain_offset"]
    decibels, vector = errors(record["measure"], frequencies, h, ideal(frequencies))
    plain = all(t["shape"] != "notch" and (t["q"] or 0) <= PLAIN_Q for t in targets)
    compared = [("response error", row["response_error_db"], decibels)]
    if record["measure"]["name"] == "vector":
        compared.append(("vector error", row["ranking_error"], vector))
    for name, said, recomputed in compared:
        if plain:
            checks.close(f"{label}, {name}", said, recomputed, 1e-9)
        else:
            # About zeros and sharp poles the measure takes further frequencies: there the error can only be larger.
            text = f"{said} is said, {recomputed} is there"
            checks.holds(f"{label}, {name}", said >= recomputed * (1 - 1e-9) - 1e-9, text)
    if record["measure"]["name"] == "weighted":
        misses = [weighted_miss(record["measure"], t, s["achieved"]) for t, s in zip(targets, row["sections"])]
        checks.close(f"{label}, weighted error", row["ranking_error"], max(misses), 1e-9)


def weighted_miss(measure, target, achieved):
    """The weighted sum of a section's relative misses in f0, Q, gain and fz."""
    total = 0.0
    for name, weight in zip(("f0_hz", "q", "gain", "fz_hz"), measure["weights"]):
        if target[name] is not None and not (measure["ignore_gain"] and name == "gain"):
            total += weight * abs(achieved[name] / target[name] - 1)
    return total


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
        return checks.holds(label, False, "nothing was found")
    row, target = record["shortlist"][0], record["sections"][0]["target"]
    section = row["sections"][0]
    values = {part["slot"]: part["value"] for part in section["parts"]}
    check_row(checks, label, record, {circuit["id"]: circuit}, row)

    frequencies = np.geomspace(asked["f0"] / 20, asked["f0"] * 20, 20)
    found = spice(circuit, output["node"], values, frequencies)
    solved = nodal(circuit, output["node"], values, frequencies)
    checks.close(f"{label}, ngspice and the nodal solve", found, solved, 1e-6 * np.abs(solved))
    achieved = freqs(figures(target, section["achieved"]), frequencies)
    if shape == "all-pass":
        # The achieved figures are those of the poles; zeros that do not mirror them are no part of them. H times the
        # denominator is then some quadratic in s: three points give it, and all others must lie on it.
        s = 1j * TAU * frequencies
        product = found * np.polyval(coefficients(**figures(target, section["achieved"]))[1], s)
        quadratic = np.polyval(np.polyfit(s[[4, 10, 15]], product[[4, 10, 15]], 2), s)
        checks.close(f"{label}, ngspice and the achieved poles", quadratic, product, 1e-6 * np.abs(product))
    else:
        checks.close(f"{label}, ngspice and the achieved figures", found, achieved, 1e-6 * np.abs(achieved))
    check_real(program, checks, label, circuit, output, record)
    check_levels(program, checks, label, circuit, output, record)


def check_examples(program, checks, circuits):
    """Every row of every example job that lists values."""
    for job in sorted((ROOT / "data" / "examples").glob("*.ron")):
        record = run(program, "shortlist", str(job), "--format", "json")
        for row in record["shortlist"]:
            check_row(checks, f"{job.stem} row {row['rank']}", record, circuits, row)
        order = [(row["ranking_error"], row["part_numbers"]) for row in record["shortlist"]]
        checks.holds(f"{job.stem}, order", order == sorted(order), str(order))


def check_all_sets(program, checks):
    """The best of all sets of three part numbers: Tow-Thomas low-pass, 1 kHz, Q 1/sqrt 2, gain 1, E96 and E12 over three
    decades, by the published design equations (J. Tow, 1968; from memory)."""
    flags = "--shape low-pass --f0 1000 --q 0.70710678118654752 --circuit tow-thomas --output low-pass --format json"
    record = run(program, "shortlist", *flags.split(), "--resistors", "E96:1k..1M", "--capacitors", "E12:1n..1u")
    listed = {row["part_numbers"]: row["response_error_db"] for row in record["shortlist"]}
    # IEC 60063: E96 is 100 * 10^(k/96) rounded to three digits; E12 is a list.
    resistors = np.array([round(100 * 10 ** (k / 96)) * 10 ** d for d in (1, 2, 3) for k in range(96)] + [10**6], float)
    e12 = (1.0, 1.2, 1.5, 1.8, 2.2, 2.7, 3.3, 3.9, 4.7, 5.6, 6.8, 8.2)
    farads = np.array([m * 10.0**d for d in (-9, -8, -7) for m in e12] + [1e-6])
    # The four resistors that matter (RG, RQ, RF, R2) from two values, one capacitor value; or one and two.
    a, b, c = (axis.ravel() for axis in np.meshgrid(resistors, resistors, farads, indexing="ij"))
    sets = [[(a, b)[k] for k in pick] + [c, c] for pick in itertools.product((0, 1), repeat=4) if pick[0] == 0]
    r, c, d = (axis.ravel() for axis in np.meshgrid(resistors, farads, farads, indexing="ij"))
    sets.append([r, r, r, r, c, d])
    ideal = dict(shape="low-pass", f0=1000.0, q=np.sqrt(0.5), gain=1.0)
    best = np.inf
    for rg, rq, rf, r2, c1, c2 in sets:
        w0 = 1 / np.sqrt(rf * r2 * c1 * c2)
        near = (np.abs(w0 / (TAU * 1000) - 1) < 0.02) & (np.abs(rf / rg - 1) < 0.02)
        near &= np.abs(w0 * rq * c1 / np.sqrt(0.5) - 1) < 0.02
        for i in np.flatnonzero(near):
            there = dict(shape="low-pass", f0=w0[i] / TAU, q=w0[i] * rq[i] * c1[i], gain=rf[i] / rg[i])
            frequencies = steps(record["measure"])
            error, _ = errors(record["measure"], frequencies, freqs(there, frequencies), freqs(ideal, frequencies))
            best = min(best, error)
    checks.close("three part numbers, all sets", listed.get(3, np.nan), best, 1e-9)


# The filters that scipy has: its call for an order and edges, and the flags for the same. Levels in dB.
FILTERS = {
    "butterworth": (lambda n, w, kind: signal.butter(n, w, kind, analog=True, output="zpk"), ""),
    "chebyshev": (lambda n, w, kind: signal.cheby1(n, 0.5, w, kind, analog=True, output="zpk"), "--ripple 0.5"),
    "inverse-chebyshev": (
        lambda n, w, kind: signal.cheby2(n, 60, w, kind, analog=True, output="zpk"),
        "--attenuation 60 --edge-at attenuation",
    ),
    "elliptic": (
        lambda n, w, kind: signal.ellip(n, 0.5, 60, w, kind, analog=True, output="zpk"),
        "--ripple 0.5 --attenuation 60",
    ),
    "bessel": (lambda n, w, kind: signal.bessel(n, w, kind, analog=True, output="zpk", norm="mag"), ""),
}
RESPONSES = {"low-pass": "low", "high-pass": "high", "band-pass": "bandpass", "band-stop": "bandstop"}
# No time is spent on the choice of pairing and order where only poles and zeros are wanted.
PLAIN = "--pairing nearest --sequence rising-q --gains equal --format json"


def sections(program, flags):
    return run(program, "sections", *flags.split(), *PLAIN.split())


def roots(record):
    """All poles, and the zeros that lie neither at the origin nor at infinity, rad/s."""
    poles = []
    for pole in record["poles"]:
        poles += [re + 1j * im for re in pole["real"] for im in {pole["imaginary"], -pole["imaginary"]}]
    zeros = [sign * 1j * TAU * zero["fz_hz"] for zero in record["zeros"] for sign in (1, -1)]
    return np.array(poles), np.array(zeros)


def miss(found, expected):
    """The largest relative distance between two sets of roots; infinite where they differ in number."""
    found, expected = list(found), list(expected)
    if len(found) != len(expected):
        return np.inf
    worst = 0.0
    for root in expected:
        nearest = min(range(len(found)), key=lambda k: abs(found[k] - root))
        worst = max(worst, abs(found.pop(nearest) - root) / abs(root))
    return worst


def check_poles(program, checks):
    """Poles and zeros to 1e-10 up to order 12, in every response."""
    for name, (expected, extra) in FILTERS.items():
        for response, kind in RESPONSES.items():
            for order in range(1, 13) if response == "low-pass" else (2, 3, 6):
                two = response.startswith("band")
                edges = np.array([900.0, 1200.0]) if two else 1000.0
                flags = "--edges 900..1200" if two else "--edge 1000"
                flags += f" --approximation {name} --response {response} --order {order} {extra}"
                zeros, poles, _ = expected(order, TAU * edges, kind)
                found = roots(sections(program, flags))
                off = max(miss(found[0], poles), miss(found[1], [z for z in zeros if abs(z) > 1]))
                checks.holds(f"{name} {response} {order}", off < 1e-10, f"off by {off:.2e}")
    for order in range(1, 13):
        record = sections(program, f"--approximation bessel --response low-pass --delay 1ms --order {order}")
        off = miss(roots(record)[0], signal.bessel(order, 1000, analog=True, output="zpk", norm="delay")[1])
        checks.holds(f"bessel by delay {order}", off < 1e-10, f"off by {off:.2e}")


def check_magnitudes(program, checks):
    """Filters that scipy does not have: their magnitude from its definition, up to order 12."""
    legendre, polynomial = np.polynomial.legendre, np.polynomial.polynomial
    frequencies = np.array([0.2, 0.5, 0.9, 1.0, 1.1, 1.5, 3.0])
    for order in range(1, 13):
        # A. Papoulis, 1958 and 1959: the integral of the square of a sum of Legendre polynomials, to 2 w^2 - 1.
        k = (order - 1) // 2
        terms = [(2 * i + 1) * (order % 2 == 1 or i % 2 == k % 2) for i in range(k + 1)]
        square = polynomial.polymul(legendre.leg2poly(terms), legendre.leg2poly(terms))
        integral = polynomial.polyint(square if order % 2 else polynomial.polymul(square, [1, 1]), lbnd=-1)
        power = polynomial.polyval(2 * frequencies**2 - 1, integral) / polynomial.polyval(1.0, integral)
        taylor = lambda w: sum(w ** (2 * k) / math.factorial(k) for k in range(order + 1))
        half = optimize.brentq(lambda w: taylor(w) - 2, 0.1, 2, xtol=1e-15)
        expected = {"legendre": 1 + power, "gaussian": taylor(half * frequencies)}
        if order % 2 == 0:
            expected["linkwitz-riley"] = (1 + frequencies**order) ** 2
        for name, wanted in expected.items():
            record = sections(program, f"--approximation {name} --response low-pass --edge 1000 --order {order}")
            poles = roots(record)[0] / (TAU * 1000)
            gain = np.prod(np.abs(poles))
            found = np.prod(np.abs(1j * frequencies[:, None] - poles), axis=1) ** 2 / gain**2
            checks.close(f"{name} {order}, magnitude", found, wanted, 1e-9 * wanted)


def check_orders(program, checks):
    """Least orders against scipy's, for low-pass, high-pass and band-pass."""
    orders = {
        "butterworth": signal.buttord,
        "chebyshev": signal.cheb1ord,
        "inverse-chebyshev": signal.cheb2ord,
        "elliptic": signal.ellipord,
    }
    asked = [
        ("low-pass", "--edge 1000 --stop-edge 2000", 1000, 2000),
        ("low-pass", "--edge 1000 --stop-edge 1500", 1000, 1500),
        ("high-pass", "--edge 1000 --stop-edge 400", 1000, 400),
        ("band-pass", "--edges 900..1200 --stop-edges 600..1700", [900, 1200], [600, 1700]),
        ("band-pass", "--edges 900..1200 --stop-edges 700..2500", [900, 1200], [700, 2500]),
    ]
    for name, expected in orders.items():
        for response, flags, edges, stops in asked:
            for ripple, attenuation in ((0.1, 25), (1, 40), (3, 60)):
                order, _ = expected(np.multiply(edges, TAU), np.multiply(stops, TAU), ripple, attenuation, analog=True)
                if order > (12 if response == "band-pass" else 24):
                    continue
                levels = f"--ripple {ripple} --attenuation {attenuation}"
                record = sections(program, f"--approximation {name} --response {response} {flags} {levels}")
                found = record["filter"]["order"]
                label = f"{name} {response} {flags} {levels}, order"
                checks.holds(label, found == order, f"{found} is said, {order} is there")
def tow_thomas(v):
    """f0 in rad/s, Q and gain of the low-pass output, by its published design equations (J. Tow, 1968; from memory)."""
    w0 = np.sqrt(v["RB"] / (v["RA"] * v["RF"] * v["R2"] * v["C1"] * v["C2"]))
    return w0, w0 * v["RQ"] * v["C1"], v["RA"] * v["RF"] / (v["RB"] * v["RG"])


def drawn(rng, count, parts, tolerances):
    """The values of `count` boards: a list of arrays by slot for each section."""
    def unit():
        if tolerances["distribution"] == "uniform":
            return rng.uniform(-1, 1, count)
        return stats.truncnorm.rvs(-3, 3, size=count, random_state=rng) / 3

    common, own = tolerances["reel_share"], 1 - tolerances["reel_share"]
    reels = {}
    boards = []
    for section in parts:
        boards.append({})
        for part in section:
            reel = reels.setdefault((part["kind"], part["value"]), unit())
            tolerance = tolerances["resistors" if part["kind"] == "R" else "capacitors"]
            boards[-1][part["slot"]] = part["value"] * (1 + tolerance * (common * reel + own * unit()))
    return boards


def keeps(mask, values):
    """Which boards keep a mask relative to DC: from the figures of Tow-Thomas low-pass sections."""
    figures = [tow_thomas(v) for v in values]
    good = True
    for limit in mask["limits"]:
        steps = int(np.ceil(200 * np.log10(limit["to_hz"] / limit["from_hz"]))) + 1
        for w in TAU * np.geomspace(limit["from_hz"], limit["to_hz"], max(steps, 1)):
            power = 1.0
            for w0, q, _ in figures:
                x = (w / w0) ** 2
                power = power / ((1 - x) ** 2 + x / q**2)
            decibels = 10 * np.log10(power)
            good &= (decibels >= (-np.inf if limit["lower"] is None else limit["lower"]))
            good &= (decibels <= (np.inf if limit["upper"] is None else limit["upper"]))
    return good


def real_network(circuit, node, values, around):
    """A and B of (A + s B) x = e for a section with one-pole op-amps and its surroundings, and where its output stands."""
    nodes = [n for n in circuit["nodes"] if n != "0"]
    size = len(nodes) + len(circuit["op_amps"])
    a, b = np.zeros((size, size)), np.zeros((size, size))

    def join(matrix, here, there, admittance):
        for one, other in ((here, there), (there, here)):
            if one != "0":
                matrix[nodes.index(one), nodes.index(one)] += admittance
                if other != "0":
                    matrix[nodes.index(one), nodes.index(other)] -= admittance

    for element in circuit["elements"]:
        if element["name"] in values:
            value = values[element["name"]]
            join(*((b, *element["nodes"], value) if element["kind"] == "C" else (a, *element["nodes"], 1 / value)))
    join(a, "in", "0", 1 / around["source"])
    join(a, node, "0", 1 / around["load"])
    for inner in nodes:
        if inner != "in":
            join(b, inner, "0", around["stray"])
    for k, op_amp in enumerate(circuit["op_amps"]):
        line, out = len(nodes) + k, nodes.index(op_amp["out"])
        a[out, line] -= 1
        b[line, out] += 1 / (TAU * around["gbw"])
        b[line, line] += around["output"] / (TAU * around["gbw"])
        for end, sign in ((op_amp["plus"], -1), (op_amp["minus"], 1)):
            if end != "0":
                a[line, nodes.index(end)] += sign
    return a, b, nodes.index(node)


def spice_real(circuit, node, values, around, frequency):
    """The response at one frequency from ngspice: op-amps as a transconductance into a capacitor, with what surrounds them."""
    name = lambda n: "0" if n == "0" else f"n_{n}"
    lines = ["* one section", "Vsource src 0 dc 0 ac 1", f"Rsource src {name('in')} {around['source']:e}"]
    lines.append(f"Rload {name(node)} 0 {around['load']:e}")
    for element in circuit["elements"]:
        if element["name"] in values:
            lines.append(f"{element['name']} {' '.join(map(name, element['nodes']))} {values[element['name']]:.17e}")
    for k, inner in enumerate(n for n in circuit["nodes"] if n not in ("0", "in")):
        lines.append(f"Cstray{k} {name(inner)} 0 {around['stray']:e}")
    for op_amp in circuit["op_amps"]:
        x = op_amp["name"]
        lines.append(f"G{x} 0 inside_{x} {name(op_amp['plus'])} {name(op_amp['minus'])} 1")
        lines.append(f"C{x} inside_{x} 0 {1 / (TAU * around['gbw']):.17e}")
        # For the operating point alone.
        lines.append(f"R{x} inside_{x} 0 1e12")
        lines.append(f"E{x} behind_{x} 0 inside_{x} 0 1")
        lines.append(f"Rout{x} behind_{x} {name(op_amp['out'])} {around['output']:e}")
    with tempfile.TemporaryDirectory() as folder:
        out, deck = Path(folder) / "out.txt", Path(folder) / "deck.cir"
        lines += [".control", "set numdgt=16", "set wr_singlescale", f"ac lin 1 {frequency:.17e} {frequency:.17e}"]
        lines += [f"wrdata {out} v({name(node)})", "quit 0", ".endc", ".end"]
        deck.write_text("\n".join(lines) + "\n")
        done = subprocess.run(["ngspice", "-b", str(deck)], capture_output=True, text=True)
        if done.returncode != 0 or "singular" in done.stderr.lower():
            sys.exit(f"ngspice failed on {circuit['id']}:\n{done.stderr}\n{deck.read_text()}")
        row = np.loadtxt(out, ndmin=2)[0]
    return complex(row[1], row[2])


def check_real(program, checks, label, circuit, output, record):
    """f0 and Q with real op-amps against generalized eigenvalues (scipy), the response error against ngspice."""
    around = dict(gbw=1e6, output=75.0, source=100.0, load=2000.0, stray=10e-12)
    with tempfile.NamedTemporaryFile("w", suffix=".json") as listed:
        json.dump(record, listed)
        listed.flush()
        flags = "--gbw 1MHz --output-resistance 75 --source-resistance 100 --load-resistance 2k --stray 10p --format json"
        found = run(program, "vet", listed.name, *flags.split())["real"]
    section, target = record["shortlist"][0]["sections"][0], record["sections"][0]["target"]
    values = {part["slot"]: part["value"] for part in section["parts"]}
    real = found["sections"][0]
    poles = real_poles(circuit, output["node"], values, around, target)
    if np.any(poles.real >= 0):
        return checks.holds(f"{label}, stability", real["state"] == "unstable", str(real))
    if not checks_stable(checks, label, real):
        return
    poles_are(checks, f"{label}, real poles", real, poles)
    h = spice_real(circuit, output["node"], values, around, found["error_at_hz"])
    error_is(checks, f"{label}, real error", record, found["error"], found["error_at_hz"], h)


def real_poles(circuit, node, values, around, target):
    """All poles of a section with real op-amps in its surroundings: generalized eigenvalues (scipy)."""
    a, b, _ = real_network(circuit, node, values, around)
    rows = np.abs(a).max(axis=1, keepdims=True)
    # Frequencies in units of the section's own, so that both matrices are of one size.
    w0 = TAU * target["f0_hz"]
    poles = linalg.eig(a / rows, -b / rows * w0, right=False)
    return w0 * poles[np.isfinite(poles) & (np.abs(poles) < 1e9)]


def poles_are(checks, label, real, poles):
    """The f0 and Q that are said belong to poles that are there."""
    w = TAU * real["f0_hz"]
    expected = [-w] if real["q"] is None else np.roots([1, w / real["q"], w * w])
    for pole in expected:
        nearest = poles[np.argmin(np.abs(poles - pole))]
        checks.close(label, pole, nearest, 1e-6 * abs(pole))


def error_is(checks, label, record, said, at, h):
    """The error that is said is that of the response `h` of a single section at a frequency."""
    target = record["sections"][0]["target"]
    ideal = lambda f: freqs(figures(target, target), f)
    floor = np.abs(ideal(steps(record["measure"]))).max() * 10 ** (-record["measure"]["floor_db"] / 20)
    wanted = ideal([at])[0]
    if record["measure"]["unit"] == "dB":
        error = abs(20 * np.log10(max(abs(h), floor) / max(abs(wanted), floor)))
    else:
        error = abs(h - wanted) / max(abs(wanted), floor)
    checks.close(label, said, error, 1e-5 * (1 + error))


def check_compensated(program, checks, circuits):
    """Rows searched for with real op-amps: their poles against eigenvalues (scipy), their errors against ngspice, and that
    the best of them is nearer than any row of a search that knows nothing of op-amps."""
    flags = "--output-resistance 75 --source-resistance 50 --load-resistance 10k --stray 1p --gbw-spread 30% --format json"
    for section in (
        "--shape low-pass --f0 40k --q 5 --circuit sallen-key-low-pass --capacitors E12:47p..22n --gbw 10M",
        "--shape band-pass --f0 20k --q 4 --gain -1 --circuit multiple-feedback-band-pass --resistors E96:100..1M --gbw 5M",
        "--shape low-pass --f0 20k --q 8 --circuit tow-thomas --gbw 5M",
        "--shape high-pass --f0 20k --q 2 --circuit sallen-key-high-pass --capacitors E12:100p..22n --gbw 5M",
    ):
        record = run(program, "shortlist", *f"{section} {flags}".split())
        plain = run(program, "shortlist", *section.split(" --gbw")[0].split(), "--format", "json")
        found, target = record["compensation"], record["sections"][0]["target"]
        circuit = circuits[record["sections"][0]["circuit"]]
        output = next(o for o in circuit["outputs"] if o["name"] == record["sections"][0]["output"])
        around = dict(output=75.0, source=50.0, load=10e3, stray=1e-12)
        label = f"compensated {circuit['id']}"
        checks.holds(f"{label}, corrected", found["sections"][0]["state"] == "corrected", str(found["sections"]))
        for row, built in zip(record["shortlist"], found["rows"]):
            values = {part["slot"]: part["value"] for part in row["sections"][0]["parts"]}
            for end in [built["nominal"], *built["ends"]]:
                there = dict(around, gbw=end["bandwidth_hz"])
                name = f"{label}, row {row['rank']} with {end['bandwidth_hz']:g} Hz"
                poles_are(checks, name, end["sections"][0], real_poles(circuit, output["node"], values, there, target))
                h = spice_real(circuit, output["node"], values, there, end["error_at_hz"])
                error_is(checks, name, record, end["error"], end["error_at_hz"], h)
        best = min(built["nominal"]["error"] for built in found["rows"])
        there = dict(around, gbw=found["bandwidth_hz"])
        f = np.geomspace(*record["measure"]["band_hz"], 400)
        wanted = np.abs(freqs(figures(target, target), f))
        floor = wanted.max() * 10 ** (-record["measure"]["floor_db"] / 20)
        for row in plain["shortlist"]:
            values = {part["slot"]: part["value"] for part in row["sections"][0]["parts"]}
            a, b, out = real_network(circuit, output["node"], values, there)
            drive = np.zeros(len(a))
            drive[[n for n in circuit["nodes"] if n != "0"].index("in")] = 1 / there["source"]
            h = np.array([np.linalg.solve(a + 1j * TAU * x * b, drive)[out] for x in f])
            error = np.abs(20 * np.log10(np.maximum(np.abs(h), floor) / np.maximum(wanted, floor))).max()
            checks.holds(f"{label}, better than row {row['rank']} uncorrected", best < error, f"{best} against {error}")


def spice_noise(circuit, node, values, band, en, current):
    """The noise at the output over a band from ngspice, V rms: at 25 degrees, op-amps of very large gain.

    The op-amps' own noise is that of resistors, brought to their inputs by controlled sources.
    """
    name = lambda n: "0" if n == "0" else f"n_{n}"
    lines = ["* one section", ".options temp=25", "Vsource n_in 0 dc 0 ac 1"]
    for element in circuit["elements"]:
        if element["name"] in values:
            lines.append(f"{element['name']} {' '.join(map(name, element['nodes']))} {values[element['name']]:.17e}")
    # A resistor of 1 kilohm has this noise, V per root hertz.
    unit = np.sqrt(4 * 1.380649e-23 * 298.15 * 1e3)
    for op_amp in circuit["op_amps"]:
        x, plus, minus = op_amp["name"], name(op_amp["plus"]), name(op_amp["minus"])
        lines += [f"Rv{x} nv{x} 0 1e3", f"Ev{x} in{x} {plus} nv{x} 0 {en / unit:e}"]
        for side, terminal in (("p", plus), ("m", minus)):
            lines += [f"Ri{side}{x} ni{side}{x} 0 1e3", f"Gi{side}{x} 0 {terminal} ni{side}{x} 0 {current / unit:e}"]
        lines.append(f"E{x} {name(op_amp['out'])} 0 in{x} {minus} 1e7")
    with tempfile.TemporaryDirectory() as folder:
        deck = Path(folder) / "deck.cir"
        lines += [".control", f"noise v({name(node)}) Vsource dec 400 {band[0]:.12e} {band[1]:.12e}"]
        lines += ["setplot noise2", "set numdgt=12", "print onoise_total", "quit 0", ".endc", ".end"]
        deck.write_text("\n".join(lines) + "\n")
        done = subprocess.run(["ngspice", "-b", str(deck)], capture_output=True, text=True)
        found = [line for line in done.stdout.splitlines() if line.startswith("onoise_total")]
        if done.returncode != 0 or not found:
            sys.exit(f"ngspice failed on {circuit['id']}:\n{done.stderr}\n{deck.read_text()}")
    return float(found[0].split("=")[1])


def check_levels(program, checks, label, circuit, output, record):
    """Peak gains and noise against ngspice."""
    with tempfile.NamedTemporaryFile("w", suffix=".json") as listed:
        json.dump(record, listed)
        listed.flush()
        flags = "--swing 10 --voltage-noise 5 --current-noise 1 --format json"
        found = run(program, "vet", listed.name, *flags.split())["levels"]
    section = record["shortlist"][0]["sections"][0]
    values = {part["slot"]: part["value"] for part in section["parts"]}
    for op_amp, peak in zip(circuit["op_amps"], found["op_amps"]):
        checks.holds(f"{label}, op-amps", op_amp["name"] == peak["op_amp"], str(peak))
        low, high = record["measure"]["band_hz"]
        at = np.clip(peak["at_hz"] * np.array([0.99, 1.0, 1.01]), low, high)
        gains = np.abs(spice(circuit, op_amp["out"], values, at))
        checks.close(f"{label}, peak at {peak['op_amp']}", peak["gain"], gains[1], 1e-5 * gains[1])
        checks.holds(f"{label}, it is a peak", gains.max() <= peak["gain"] * (1 + 1e-4), str(gains))
    for en, current, said in ((5e-9, 1e-12, found["noise"]), (1e-15, 1e-18, found["thermal"])):
        expected = spice_noise(circuit, output["node"], values, record["measure"]["band_hz"], en, current)
        checks.close(f"{label}, noise", said, expected, 2e-3 * expected)


def checks_stable(checks, label, real):
    checks.holds(f"{label}, stability", real["state"] == "stable", str(real))
    return real["state"] == "stable"


def check_vet(program, checks, circuits):
    """Yield and spread against boards drawn in numpy, the worst case against ngspice."""
    count, rng = 200_000, np.random.default_rng(20)
    listed, mask = ROOT / "data/examples/vibration-logger.json", ROOT / "data/masks/vibration-logger.ron"
    for flags in ("", "--distribution normal --capacitor-tolerance 10%", "--reel-share 70% --capacitor-tolerance 10%"):
        options = f"--row 4 --mask {mask} --boards {count} --interval 0 --seed 7 --format json {flags}"
        record = run(program, "vet", str(listed), *options.split())
        label = f"vet {flags or 'by default'}"
        values = drawn(rng, count, [section["parts"] for section in record["sections"]], record["tolerances"])
        found, share = record["mask"]["yield"], np.mean(keeps(record["mask"], values))
        checks.holds(f"{label}, boards", found["boards"] == count, str(found))
        # Both are drawn: four standard errors of their difference.
        allowed = 4 * np.sqrt(2 * share * (1 - share) / count)
        checks.close(f"{label}, yield", found["share"], share, allowed)
        exact = stats.binomtest(found["passed"], count).proportion_ci(0.95, "exact")
        checks.close(f"{label}, interval", found["interval"], [exact.low, exact.high], 1e-9)
        for section, board in zip(record["sections"], values):
            for name, column in zip(("f0", "q", "gain"), tow_thomas(board)):
                column = column / TAU if name == "f0" else column
                said = next(f for f in record["spread"]["figures"]
                            if f["section"] == section["name"] and f["figure"] == name)
                deviation = np.std(column)
                quantiles = np.quantile(column, [0.025, 0.5, 0.975])
                # 20,000 boards: the standard error of a 2.5 % quantile is below 0.03 standard deviations here.
                ends = [said["drawn"]["low"], said["drawn"]["median"], said["drawn"]["high"]]
                checks.close(f"{label}, {name} of {section['name']}", ends, quantiles, 0.12 * deviation)
                checks.close(f"{label}, deviation", said["drawn"]["deviation"], deviation, 0.03 * deviation)
                # The sensitivities are of first order; the tolerances are up to ten percent.
                relative = deviation / abs(said["nominal"])
                checks.close(f"{label}, sensitivities", said["sensitivity_deviation"], relative, 0.03 * relative)
        for name, worst in (("error", record["worst_case"]), ("mask", record["mask"]["worst_case"])):
            errors = {(part["section"], part["slot"]): part["error"] for part in worst["parts"]}
            at = [worst["at_hz"], 1e-3]
            h, ideal = np.ones(2, complex), np.ones(2, complex)
            for section in record["sections"]:
                circuit = circuits[section["circuit"]]
                output = next(o for o in circuit["outputs"] if o["name"] == section["output"])
                off = lambda part: 1 + errors.get((section["name"], part["slot"]), 0)
                parts = {part["slot"]: part["value"] * off(part) for part in section["parts"]}
                h *= spice(circuit, output["node"], parts, at)
                ideal *= freqs(figures(section["target"], section["target"]), at)
            decibels = 20 * np.log10(np.abs(h))
            if name == "error":
                checks.close(f"{label}, worst error", worst["value"], abs(decibels[0] - 20 * np.log10(abs(ideal[0]))), 1e-4)
            else:
                relative = decibels[0] - decibels[1]
                inside = [limit for limit in record["mask"]["limits"]
                          if limit["from_hz"] * (1 - 1e-9) <= at[0] <= limit["to_hz"] * (1 + 1e-9)]
                beyond = [max(relative - (limit["upper"] if limit["upper"] is not None else np.inf),
                              (limit["lower"] if limit["lower"] is not None else -np.inf) - relative)
                          for limit in inside]
                checks.close(f"{label}, worst of the mask", worst["value"], max(beyond), 1e-4)


def main():
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    program = sys.argv[1]
    checks = Checks()
    names = sorted(path.stem for path in (ROOT / "data" / "circuits").glob("*.ron"))
    circuits = {name: run(program, "circuits", name, "--format", "json") for name in names}
    for name, circuit in circuits.items():
        for output in circuit["outputs"]:
            zeros = ZEROS.get(name, [None]) if output["shape"] == "notch" else [None]
            for zero in zeros:
                check_output(program, checks, circuit, output, zero)
    check_examples(program, checks, circuits)
    check_all_sets(program, checks)
    check_poles(program, checks)
    check_magnitudes(program, checks)
    check_orders(program, checks)
    check_vet(program, checks, circuits)
    check_compensated(program, checks, circuits)
    print(f"{checks.passed} passed, {checks.failed} failed")
    sys.exit(checks.failed > 0)


if __name__ == "__main__":
    main()
