#!/usr/bin/env python3
"""squeg's count of growing modes against an exact count, on fresh random active circuits.

    soundness.py SQUEG [--count 2000] [--seed N] [--keep FOLDER]

Circuits of 5 to 41 unknowns with resonators of Q up to 1e5 and two to six controlled sources; 60 % are
scaled to within 1e-4 .. 1e-1 of a stability threshold. The exact count is that of `exact_count`; it is
taken of the very doubles that stand in the netlist. squeg takes a mode with |Re s| <= 1e-9 |s| as lying
on the axis, so where the two differ the roots are computed with 80 digits (mpmath) and sorted by that
tolerance. The seed is that of the clock unless given, so that every run sees circuits that nobody has
seen before; it is printed. Exit code 1 on any mismatch or undetermined verdict.
"""

import argparse
import json
import math
import pathlib
import random
import subprocess
import sys
import tempfile
import time

import mpmath
import numpy
import scipy.linalg
from flint import fmpq

from exact_count import count, determinant


class Circuit:
    """Cards as (letter, nodes, value, control nodes); node 0 is ground."""

    def __init__(self, name):
        self.name, self.cards, self.nodes = name, [], 0
        self.polynomial = None

    def node(self):
        self.nodes += 1
        return self.nodes

    def add(self, letter, nodes, value, control=()):
        self.cards.append((letter, tuple(nodes), float(value), tuple(control)))

    def unknowns(self):
        return self.nodes + sum(letter == "L" for letter, *_ in self.cards)

    def text(self):
        name = lambda node: f"n{node}" if node else "0"
        lines = [f"* {self.name}", f"*~ block {self.name}"]
        for k, (letter, nodes, value, control) in enumerate(self.cards):
            words = [f"{letter}{k}", *map(name, nodes), *map(name, control), repr(value)]
            lines.append(" ".join(words))
        return "\n".join(lines) + "\n"

    def matrices(self, number):
        """G and C as lists of lists; `number` makes an entry of a double."""
        n = self.unknowns()
        g = [[number(0.0)] * n for _ in range(n)]
        c = [[number(0.0)] * n for _ in range(n)]
        branch = self.nodes

        def put(matrix, row, column, value):
            if row and column:
                matrix[row - 1][column - 1] += value

        for letter, nodes, value, control in self.cards:
            a, b = nodes
            if letter in "RC":
                y = number(1.0) / number(value) if letter == "R" else number(value)
                matrix = g if letter == "R" else c
                for row, column, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
                    put(matrix, row, column, y * sign)
            elif letter == "L":
                branch += 1
                for node, sign in ((a, 1), (b, -1)):
                    put(g, node, branch, number(1.0) * sign)
                    put(g, branch, node, number(1.0) * sign)
                put(c, branch, branch, -number(value))
            else:
                p, q = control
                for row, column, sign in ((a, p, 1), (a, q, -1), (b, p, -1), (b, q, 1)):
                    put(g, row, column, number(value) * sign)
        return g, c

    def growing_by_doubles(self):
        """Right-half-plane count in double precision: only to find thresholds."""
        g, c = self.matrices(float)
        g, c = numpy.array(g), numpy.array(c)
        scale = 1e9
        alpha, beta = scipy.linalg.eigvals(g, -c * scale, homogeneous_eigvals=True)
        keep = numpy.abs(beta) > 1e-13 * numpy.abs(alpha)
        s = alpha[keep] / beta[keep]
        return int(numpy.sum((s.real > 0) & (numpy.abs(s) < 1e6)))


def log_uniform(rng, low, high):
    return math.exp(rng.uniform(math.log(low), math.log(high)))


def base(rng, name):
    """A random active network without parallel wires to nowhere: every node has a loss."""
    circuit = Circuit(name)
    nodes = [0] + [circuit.node() for _ in range(rng.randint(3, 20))]
    pick = lambda: rng.choice(nodes)
    for node in nodes[1:]:
        circuit.add("R", (node, 0 if rng.random() < 0.5 else pick()), log_uniform(rng, 5, 1e5))
        if rng.random() < 0.8:
            circuit.add("C", (node, 0 if rng.random() < 0.7 else pick()), log_uniform(rng, 1e-14, 1e-8))
        if rng.random() < 0.1:
            circuit.add("R", (node, 0), log_uniform(rng, 1e5, 1e7))
    for _ in range(rng.randint(1, 4)):
        resonator(rng, circuit, pick(), pick())
    for _ in range(rng.randint(2, 6)):
        control = (pick(), 0 if rng.random() < 0.8 else pick())
        circuit.add("G", (pick(), 0 if rng.random() < 0.8 else pick()), source(rng), control)
    circuit.cards = [card for card in circuit.cards if card[1][0] != card[1][1]]
    return circuit


def source(rng):
    return rng.choice([-1, 1]) * log_uniform(rng, 1e-4, 0.1)


def resonator(rng, circuit, a, b):
    """Series or parallel resonance between two nodes, Q from 2 to 1e5."""
    if a == b:
        b = 0 if a else 1
    hz, farad = log_uniform(rng, 1e5, 2e10), log_uniform(rng, 1e-13, 1e-9)
    henry = 1 / ((2 * math.pi * hz) ** 2 * farad)
    reactance, q = 2 * math.pi * hz * henry, log_uniform(rng, 2, 1e5)
    if rng.random() < 0.5:
        circuit.add("L", (a, b), henry)
        circuit.add("C", (a, b), farad)
        circuit.add("R", (a, b), reactance * q)
    else:
        m, k = circuit.node(), circuit.node()
        circuit.add("L", (a, m), henry)
        circuit.add("C", (m, k), farad)
        circuit.add("R", (k, b), reactance / q)


def near_threshold(rng, circuit):
    """Scales one source to just beside a change of the count; False when none is found."""
    places = [k for k, card in enumerate(circuit.cards) if card[0] == "G"]
    rng.shuffle(places)

    def with_factor(place, factor):
        letter, nodes, value, control = original
        circuit.cards[place] = (letter, nodes, value * factor, control)

    for place in places:
        original = circuit.cards[place]
        factors = [0.0] + [10 ** (k / 2) for k in range(-6, 9)]
        counts = []
        for factor in factors:
            with_factor(place, factor)
            counts.append(circuit.growing_by_doubles())
        steps = [k for k in range(1, len(counts)) if counts[k] != counts[k - 1]]
        if not steps:
            circuit.cards[place] = original
            continue
        k = rng.choice(steps)
        low, high, below = factors[k - 1], factors[k], counts[k - 1]
        for _ in range(60):
            middle = 0.5 * (low + high)
            with_factor(place, middle)
            if circuit.growing_by_doubles() == below:
                low = middle
            else:
                high = middle
        if high < 1e-6:
            # The threshold is the source itself: without it the network has a mode at s = 0.
            circuit.cards[place] = original
            continue
        beside = log_uniform(rng, 1e-4, 1e-1) * rng.choice([-1, 1])
        with_factor(place, high * (1 + beside))
        return True
    return False


def generate(rng, number):
    while True:
        circuit = base(rng, f"random{number:04}")
        if not 5 <= circuit.unknowns() <= 41:
            continue
        near = rng.random() < 0.6 and near_threshold(rng, circuit)
        circuit.polynomial = determinant(*circuit.matrices(rational))
        if circuit.polynomial.degree() > 0:
            return circuit, near


def edge_cases():
    """Networks in which modes lie at infinity, at the origin or on the axis."""
    cards = {
        "inductor_loop": "L 1 0 1e-6|L 1 2 2e-6|L 2 0 3e-6|R 1 0 50|C 2 0 1e-9",
        "inductor_cutset": "L 1 2 1e-6|L 2 3 2e-6|L 2 0 1e-6|R 1 0 50|R 3 0 70|C 1 0 1e-9",
        "inductor_cutset_active": "L 1 2 1e-6|L 2 3 2e-6|L 2 0 1e-6|R 1 0 500|R 3 0 700|C 1 0 1e-9|C 3 0 1e-9|G 1 0 -0.01 3 0",
        "capacitor_loop": "C 1 0 1e-9|C 1 2 2e-9|C 2 0 1e-9|R 1 2 100|L 1 0 1e-6",
        "capacitor_cutset": "C 1 2 1e-9|C 2 3 1e-9|C 2 0 1e-9|R 1 0 100|R 3 0 10|L 1 3 1e-6",
        "isolated_tank": "L 1 0 1e-6|C 1 0 1e-9|R 2 0 50|C 2 0 1e-9|G 2 0 -0.05 2 0",
        "lossless_and_gain": "L 1 0 1e-6|C 1 0 1e-9|L 2 0 2e-6|C 2 0 1e-9|C 1 2 1e-11|G 1 0 0.001 2 0",
        "gyrated_tank": "C 1 0 1e-9|C 2 0 1e-9|G 1 0 0.01 2 0|G 2 0 -0.01 1 0",
        "integrator": "C 1 0 1e-9|G 1 0 0.001 2 0|R 2 0 100|C 2 0 1e-12",
        "two_integrators": "C 1 0 1e-9|G 2 0 0.001 1 0|C 2 0 1e-9|R 3 0 10|C 3 0 1e-9|G 3 0 0.001 2 0",
        "double_tank": "L 1 0 1e-6|C 1 0 1e-9|R 1 0 1e3|L 2 0 1e-6|C 2 0 1e-9|R 2 0 1e3",
        "real_pole": "C 1 0 1e-9|R 1 0 100|G 1 0 -0.02 1 0",
        "quadruplet": "C 1 0 1e-9|L 1 2 1e-6|C 2 0 1e-9|G 1 0 0.02 2 0|R 1 2 1e4|G 2 0 -0.001 1 0",
        "high_gain": "R 1 0 1e3|C 1 0 1e-12|G 2 0 1e6 1 0|R 2 0 1e6|C 2 0 1e-9|R 1 2 1e4",
    }
    for name, text in cards.items():
        circuit = Circuit(name)
        for card in text.split("|"):
            letter, a, b, value, *control = card.split()
            circuit.add(letter, (int(a), int(b)), float(value), tuple(map(int, control)))
            circuit.nodes = max(circuit.nodes, int(a), int(b), *map(int, control))
        yield circuit


def rational(x):
    return fmpq(*x.as_integer_ratio())


def by_roots(polynomial):
    """Counts with squeg's tolerance of the axis, from roots with 80 digits."""
    with mpmath.workdps(80):
        coefficients = [mpmath.mpf(int(c.p)) / int(c.q) for c in reversed(polynomial.coeffs())]
        while coefficients[-1] == 0:
            coefficients.pop()
        scale = mpmath.mpf(10) ** 9
        degree = len(coefficients) - 1
        scaled = [c * scale ** (degree - k) for k, c in enumerate(coefficients)]
        roots = mpmath.polyroots(scaled, maxsteps=2000, extraprec=4000)
        right = sum(1 for s in roots if s.real > 1e-9 * abs(s))
        axis = sum(1 for s in roots if abs(s.real) <= 1e-9 * abs(s))
    return right, axis


def main():
    parser = argparse.ArgumentParser()
    parser.add_argument("squeg")
    parser.add_argument("--count", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=int(time.time()))
    parser.add_argument("--keep", help="folder for netlists that fail")
    options = parser.parse_args()
    rng = random.Random(options.seed)
    begin = time.time()
    circuits = {circuit.name: (circuit, False) for circuit in edge_cases()}
    for number in range(options.count):
        circuit, near = generate(rng, number)
        circuits[circuit.name] = (circuit, near)
    with tempfile.TemporaryDirectory() as folder:
        for name, (circuit, _) in circuits.items():
            pathlib.Path(folder, f"{name}.cir").write_text(circuit.text())
        command = [options.squeg, "lint", "--format", "json", folder]
        run = subprocess.run(command, capture_output=True, text=True, check=False)
        blocks = {block["name"]: block for block in json.loads(run.stdout)["blocks"]}
    failures, unstable, certified, by_tolerance = [], 0, 0, 0
    for name, (circuit, _) in circuits.items():
        block = blocks[name]
        polynomial = circuit.polynomial or determinant(*circuit.matrices(rational))
        found = (block["unstable_modes"], block["axis_modes"])
        wanted = count(polynomial)[:2]
        if found != wanted:
            by_tolerance += 1
            wanted = by_roots(polynomial)
        verdict = "unstable" if wanted[0] else "marginal" if wanted[1] else "stable"
        if found != wanted or block["verdict"] != verdict:
            failures.append(f"{name}: {block['verdict']} {found}, exact {verdict} {wanted}; {block['why']}")
            if options.keep:
                pathlib.Path(options.keep).mkdir(parents=True, exist_ok=True)
                pathlib.Path(options.keep, f"{name}.cir").write_text(circuit.text())
        unstable += wanted[0] > 0
        certified += bool(block["determinant"]["certified"])
    print("\n".join(failures))
    near = sum(near for _, near in circuits.values())
    print(
        f"seed {options.seed}: {len(circuits)} circuits, {unstable} unstable, {near} beside a threshold, "
        f"{certified} certified to the end, {by_tolerance} decided by 80-digit roots, {time.time() - begin:.0f} s"
    )
    print(f"{len(circuits) - len(failures)} passed, {len(failures)} failed")
    sys.exit(1 if failures else 0)


if __name__ == "__main__":
    main()
