#!/usr/bin/env python3
"""Checks the digits of `squeg trace` on the two-stage amplifier of `../race/amp2.json` against 50-digit arithmetic.

    accuracy.py --squeg PATH [--circuit ../race/amp2.json] [--keep FILE]

The circuit is written as a netlist without the delays of its sources, numbers in their shortest round-trip form, so both
sides start from the same doubles. Compared at 23 frequencies from 1 Hz to 100 GHz: the normalized determinant (phase),
the driving-point admittance of every node (real part, and its sign), and all natural modes. Exit code 1 when an aim is
missed.
"""

import argparse
import copy
import csv
import io
import json
import math
import pathlib
import subprocess
import sys
import tempfile
from fractions import Fraction

import numpy as np

from determinant import Determinant
from natural_modes import natural_modes
from reader import Netlist
from system import System

ROOT = pathlib.Path(__file__).resolve().parents[2]
FREQUENCIES_HZ = [float(f) for f in np.logspace(0, 11, 23)]
BAND_HZ = (1e3, 1e11)
AIMS = {
    "phase of the determinant, rad": 1e-12,
    "Re Y relative from 1 kHz": 1e-9,
    "wrong signs of Re Y": 0,
    "modes in band, relative": 1e-12,
}


def netlist(data):
    """Cards of a circuit of `../race`; its ports are the resistors that already load them."""
    lines, ports = [], []
    for k, (kind, *fields) in enumerate(data["stamps"], 1):
        if kind == "VCCS":
            p, q, cp, cn, siemens, _ = fields
            lines.append(f"G{k} {node(p)} {node(q)} {node(cp)} {node(cn)} {siemens!r}")
        elif kind in ("R", "L", "C"):
            a, b, value = fields
            lines.append(f"{kind}{k} {node(a)} {node(b)} {value!r}")
            if kind == "R" and 0 in (a, b) and [a + b, value] in data["ports"]:
                ports.append((data["ports"].index([a + b, value]), f"R{k}"))
        else:
            raise ValueError(f"no card for {kind}")
    (_, into), (_, out) = sorted(ports)
    return "\n".join([f"{data['name']} without delays", f"*~ block amp in={into} out={out}", *lines, ".end", ""])


def node(number):
    return f"n{number}" if number else "0"


def systems(text):
    """The exact system with sources and without, from the doubles that the text stands for."""
    read = Netlist(text)
    for part in read.parts:
        if part.value is not None:
            part.value = Fraction(float(part.value))
    passive = [part for part in read.parts if part.kind != "g"]
    block = read.blocks[0]
    return System(read.parts, block), System(passive, block)


def with_siemens(system, name):
    """The system with one more siemens from a node to ground."""
    loaded = copy.copy(system)
    loaded.g = dict(system.g)
    key = (system.index[name], system.index[name])
    loaded.g[key] = loaded.g.get(key, 0) + 1
    return loaded


def exact(on, off, names):
    """[(normalized determinant, [admittance of each node])] by frequency, in extended precision.

    det(A + e e^T) = det A (1 + Z), so the admittance is det A / (det(A + e e^T) - det A)."""
    det, det_off = Determinant(on), Determinant(off)
    # A plan each: the further entry need not be in the pattern.
    loaded = [Determinant(with_siemens(on, name)) for name in names]
    result = []
    for hz in FREQUENCIES_HZ:
        whole = at(det, hz, det.context)
        admittances = [whole / (at(d, hz, det.context) - whole) for d in loaded]
        result.append((whole / at(det_off, hz, det.context), admittances))
    return result


def at(determinant, hz, context):
    """The determinant on the axis as a number of `context`: numbers of two contexts mix in low precision only."""
    own = determinant.context
    return context.convert(determinant(own.mpc(0, 2 * own.pi * own.mpf(hz))))


def trace(squeg, path, quantities, at_hz=None):
    """Rows of `squeg trace` as lists of floats, without the header."""
    command = [squeg, "trace", path]
    for quantity in quantities:
        command += ["--of", quantity]
    if at_hz:
        command += ["--at", ",".join(repr(f) for f in at_hz)]
    done = subprocess.run([str(c) for c in command], capture_output=True, text=True)
    if done.returncode:
        sys.exit(f"squeg trace failed: {done.stderr.strip()}")
    return [[float(cell) for cell in row] for row in list(csv.reader(io.StringIO(done.stdout)))[1:]]


def compare_trace(squeg, path, truth, names):
    """Worst errors over all frequencies, with the place of the worst Re Y."""
    rows = trace(squeg, path, ["ndf"] + [f"y:{n}" for n in names], FREQUENCIES_HZ)
    if len(rows) != len(truth):
        sys.exit(f"{len(rows)} rows of trace for {len(truth)} frequencies")
    phase, modulus, y_worst, all_worst, wrong, where = 0.0, 0.0, 0.0, 0.0, 0, ""
    for (hz, re, im, *cells), (ratio, admittances) in zip(rows, truth):
        quotient = complex(complex(re, im) / ratio)
        phase = worst(phase, abs(math.atan2(quotient.imag, quotient.real)))
        modulus = worst(modulus, abs(abs(quotient) - 1))
        for name, g, true in zip(names, cells[::2], admittances):
            error = abs(float((g - true.real) / true.real))
            all_worst = worst(all_worst, error)
            if hz >= BAND_HZ[0] and not error <= y_worst:
                y_worst, where = error, f"{name} at {hz:g} Hz"
            wrong += not (g > 0) == (true.real > 0)
    return phase, modulus, y_worst, all_worst, wrong, where


def worst(so_far, error):
    """The larger; not-a-number counts as infinite."""
    return math.inf if math.isnan(error) else max(so_far, error)


def compare_modes(squeg, path, system):
    """(worst relative error in band, number in band, worst of all, number of all) of the modes with Im s >= 0."""
    found = [complex(row[1], 2 * math.pi * row[0]) for row in trace(squeg, path, ["modes"])]
    proven = natural_modes(system)
    true = [complex(s) for s in proven.modes if s.imag >= 0]
    if proven.at_zero:
        true += [0j] * proven.at_zero
    in_band, everywhere = [], []
    left = list(found)
    for s in true:
        if not left:
            break
        nearest = min(left, key=lambda z: abs(z - s))
        left.remove(nearest)
        error = abs(nearest - s) / abs(s) if s else abs(nearest)
        everywhere.append(error)
        if BAND_HZ[0] <= abs(s) / (2 * math.pi) <= BAND_HZ[1]:
            in_band.append(error)
    if len(found) != len(true):
        print(f"    {len(found)} modes traced, {len(true)} proven")
        in_band.append(math.inf)
    return max(in_band), len(in_band), max(everywhere), len(everywhere)


def main():
    ap = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    ap.add_argument("--squeg", required=True)
    ap.add_argument("--circuit", type=pathlib.Path, default=ROOT / "tests/race/amp2.json")
    ap.add_argument("--keep", type=pathlib.Path, help="where to leave the netlist")
    o = ap.parse_args()
    text = netlist(json.loads(o.circuit.read_text()))
    names = sorted({w for line in text.splitlines() for w in line.split()[1:] if w[0] == "n" and w[1:].isdigit()},
                   key=lambda w: int(w[1:]))
    on, off = systems(text)
    with tempfile.TemporaryDirectory() as folder:
        path = o.keep or pathlib.Path(folder) / "amp.cir"
        path.write_text(text)
        truth = exact(on, off, names)
        phase, modulus, y_worst, y_all, wrong, where = compare_trace(o.squeg, path, truth, names)
        mode_worst, in_band, mode_all, modes = compare_modes(o.squeg, path, on)
    found = dict(zip(AIMS, (phase, y_worst, wrong, mode_worst)))
    for what, aim in AIMS.items():
        print(f"{'reached' if found[what] <= aim else 'MISSED '}  {what}: {found[what]:.3g} (aim {aim:g})")
    print(f"also: modulus of the determinant {modulus:.2g}; worst Re Y at {where}, {y_all:.2g} from 1 Hz on; "
          f"{in_band} modes in band, {modes} in all within {mode_all:.2g}; {len(names)} nodes, {len(truth)} frequencies")
    missed = [what for what, aim in AIMS.items() if not found[what] <= aim]
    print(f"{len(AIMS) - len(missed)} passed, {len(missed)} failed")
    sys.exit(1 if missed else 0)


if __name__ == "__main__":
    main()
