"""Random active lumped circuits as netlist text: lossy resonators, transistor stages, controlled sources of all kinds.

Every circuit is grown motif by motif until it has the number of unknowns drawn for it. `tuned` moves one gain to beside
a change of the number of growing modes: the determinant is affine in a gain, det = p0 + g p1, both exact, so bisection
costs one count of a polynomial a step.
"""

import math
from fractions import Fraction

from flint import fmpq

from exact_modes import determinant, growing, near_border
from reader import Netlist, Part, literal
from system import System

SUFFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "meg"}
SMALLEST, LARGEST = 5, 41


def log_uniform(rng, low, high):
    return math.exp(rng.uniform(math.log(low), math.log(high)))


class Circuit:
    """Cards with the values as text, so that every reader sees the same characters."""

    def __init__(self, name, rng):
        self.name, self.rng, self.cards, self.nodes, self.branches = name, rng, [], [], 0
        self.mark = f"*~ block {name}"
        self.gains = []  # indices of cards whose last word is a gain

    def node(self):
        self.nodes.append(f"n{len(self.nodes) + 1}")
        return self.nodes[-1]

    def any(self, ground=0.0):
        return "0" if self.rng.random() < ground else self.rng.choice(self.nodes)

    def pair(self, ground=0.5):
        """Two different nodes; the second may be ground."""
        first = self.any()
        second = self.any(ground)
        return (first, second) if first != second else (first, "0")

    def number(self, value):
        digits = f"{value:.{self.rng.randint(2, 4)}e}"
        if self.rng.random() < 0.7:
            return digits
        exponent = 3 * math.floor(math.log10(abs(value)) / 3)
        if exponent not in SUFFIXES:
            return digits
        return f"{float(digits) / 10.0**exponent:.6g}{SUFFIXES[exponent]}"

    def add(self, letter, *words):
        name = f"{letter}{len(self.cards) + 1}"
        self.cards.append(" ".join([name, *(w if isinstance(w, str) else self.number(w) for w in words)]))
        self.branches += letter in "LVEH"
        if letter in "GEFH":
            self.gains.append(len(self.cards) - 1)
        return name

    def unknowns(self):
        return len(self.nodes) + self.branches

    def text(self):
        return "\n".join([f"* buoy board {self.name}", self.mark, *self.cards, ".end"]) + "\n"

    def with_gain(self, index, value):
        """Replaces the value of one gain card by seven digits of `value`."""
        self.cards[index] = " ".join([*self.cards[index].split()[:-1], f"{value:.6e}"])


def loaded_node(c):
    """A node with a resistor and mostly a capacitor."""
    rng, old = c.rng, list(c.nodes)
    node = c.node()
    other = rng.choice(old) if old and rng.random() < 0.5 else "0"
    c.add("R", node, other, log_uniform(rng, 5, 1e5))
    if rng.random() < 0.8:
        c.add("C", node, rng.choice(old) if old and rng.random() < 0.3 else "0", log_uniform(rng, 1e-14, 1e-8))


def bridge(c):
    a, b = c.pair(0.2)
    if c.rng.random() < 0.5:
        c.add("R", a, b, log_uniform(c.rng, 20, 1e6))
    else:
        c.add("C", a, b, log_uniform(c.rng, 1e-15, 1e-9))


def tank_values(rng):
    """(henry, farad, ohm of the reactance, quality factor)."""
    hz, ohm = log_uniform(rng, 1e5, 2e10), log_uniform(rng, 3, 1e3)
    omega = 2 * math.pi * hz
    return ohm / omega, 1 / (omega * ohm), ohm, log_uniform(rng, 2, 1e5)


def parallel_tank(c):
    a, b = c.pair(0.7)
    henry, farad, ohm, q = tank_values(c.rng)
    c.add("L", a, b, henry)
    c.add("C", a, b, farad)
    c.add("R", a, b, ohm * q)


def series_tank(c):
    a, b = c.pair(0.7)
    henry, farad, ohm, q = tank_values(c.rng)
    one, two = c.node(), c.node()
    c.add("L", a, one, henry)
    c.add("C", one, two, farad)
    c.add("R", two, b, ohm / q)


def coupled_tanks(c):
    henry, farad, ohm, q = tank_values(c.rng)
    coils, old = [], list(c.nodes)
    for _ in range(2):
        node, detune = c.node(), c.rng.uniform(0.8, 1.25)
        coils.append(c.add("L", node, "0", henry * detune))
        c.add("C", node, "0", farad / detune)
        c.add("R", node, "0", ohm * q)
        c.add("C", node, c.rng.choice(old), farad * log_uniform(c.rng, 1e-3, 0.3))
    c.add("K", *coils, log_uniform(c.rng, 0.003, 0.98))


def transformer(c):
    """Two coils with losses; the coupling may be exactly one."""
    rng, (a, b) = c.rng, c.pair(0.2)
    henry, one, two = log_uniform(rng, 1e-9, 1e-5), c.node(), c.node()
    first = c.add("L", one, "0", henry)
    second = c.add("L", two, "0", henry * log_uniform(rng, 0.1, 10))
    c.add("R", a, one, log_uniform(rng, 0.1, 20))
    c.add("R", b, two, log_uniform(rng, 0.1, 20))
    c.add("K", first, second, "1" if rng.random() < 0.3 else rng.uniform(0.2, 0.999))


def transistor(c):
    """Gate, drain and source of a small-signal stage with feedback capacitance and source inductance."""
    rng, (gate, drain) = c.rng, c.pair(0.0)
    if drain == "0":
        drain = c.node()
    source, inner, siemens = c.node(), c.node(), log_uniform(rng, 2e-3, 0.2)
    farad = siemens / (2 * math.pi * log_uniform(rng, 2e9, 1e11))
    c.add("R", gate, inner, log_uniform(rng, 0.5, 20))
    c.add("C", inner, source, farad)
    c.add("C", inner, drain, farad * rng.uniform(0.02, 0.4))
    c.add("C", drain, source, farad * rng.uniform(0.1, 0.6))
    c.add("R", drain, source, rng.uniform(5, 100) / siemens)
    c.add("G", drain, source, inner, source, siemens)
    if rng.random() < 0.5:
        c.add("L", source, "0", log_uniform(rng, 1e-11, 1e-8))
    else:
        c.add("R", source, "0", log_uniform(rng, 0.5, 200))


def transconductance(c):
    out, control = c.pair(0.8), c.pair(0.8)
    c.add("G", *out, *control, c.rng.choice([-1, 1]) * log_uniform(c.rng, 1e-4, 0.1))


def voltage_amplifier(c):
    rng, target, control, output = c.rng, c.any(), c.pair(0.8), c.node()
    c.add("E", output, "0", *control, rng.choice([-1, 1]) * log_uniform(rng, 0.3, 300))
    c.add("R", output, target, log_uniform(rng, 5, 1e5))


def sensed_branch(c):
    """A resistor from a node to ground or to another node with a current sense in series; the sense source's name."""
    a, b = c.pair(0.6)
    middle = c.node()
    c.add("R", a, middle, log_uniform(c.rng, 5, 1e4))
    return c.add("V", middle, b, *(["0"] if c.rng.random() < 0.7 else []))


def current_amplifier(c):
    sense, out = sensed_branch(c), c.pair(0.7)
    c.add("F", *out, sense, c.rng.choice([-1, 1]) * log_uniform(c.rng, 0.3, 100))


def transresistance(c):
    sense, target, output = sensed_branch(c), c.any(), c.node()
    c.add("H", output, "0", sense, c.rng.choice([-1, 1]) * log_uniform(c.rng, 5, 5e3))
    c.add("R", output, target, log_uniform(c.rng, 5, 1e4))


MOTIFS = [(loaded_node, 8), (bridge, 3), (parallel_tank, 3), (series_tank, 3), (coupled_tanks, 1), (transformer, 1),
          (transistor, 4), (transconductance, 4), (voltage_amplifier, 1.5), (current_amplifier, 1.5), (transresistance, 1.5)]
ACTIVE = [transistor, transconductance, voltage_amplifier, current_amplifier, transresistance]


def grown(rng, name):
    """A random circuit of SMALLEST to LARGEST unknowns with at least one tank and one active source."""
    goal = rng.randint(SMALLEST, LARGEST)
    while True:
        c = Circuit(name, rng)
        for _ in range(rng.randint(2, 3)):
            loaded_node(c)
        rng.choice(ACTIVE)(c)
        rng.choice([parallel_tank, series_tank, coupled_tanks])(c)
        for _ in range(200):
            if c.unknowns() >= goal:
                break
            rng.choices([m for m, _ in MOTIFS], [w for _, w in MOTIFS])[0](c)
        if SMALLEST <= c.unknowns() <= min(LARGEST, goal + 3):
            break
    c.mark = " ".join([c.mark, *port_words(rng, c.nodes)])
    return c


def port_words(rng, nodes):
    """None, one or two ports of a block mark, some with their own ohms."""
    into, out = rng.sample(nodes, 2)
    words = [f"in={into}"] if rng.random() < 0.6 else []
    ohms = f":{rng.randint(5, 500)}" if rng.random() < 0.3 else ""
    return words + ([f"out={out}{ohms}"] if rng.random() < 0.6 else [])


def system_of(text):
    """The exact matrices of a text's first block, its values as the doubles that a reader makes of the decimals."""
    netlist = Netlist(text)
    for part in netlist.parts:
        if part.value is not None:
            part.value = Fraction(float(part.value))
    # A node that only controls something is an unknown too, with an empty row.
    controls = {node for part in netlist.parts if part.kind in "ge" for node in part.control if node != "0"}
    netlist.parts += [Part("c", f"c:{node}", (node, "0"), Fraction(0)) for node in sorted(controls)]
    return System(netlist.parts, netlist.blocks[0])


def affine_in(c, index, p):
    """(p0, p1) with det = p0 + g p1 for the gain g of one card, which stands in one rank-one term of G; p is the
    determinant at the present gain."""
    original = c.cards[index]
    words = original.split()
    c.cards[index] = " ".join([*words[:-1], "0"])
    p0 = determinant(system_of(c.text()))
    c.cards[index] = original
    return p0, (p - p0) / exact(literal(words[-1]))


def exact(x):
    return fmpq(*float(x).as_integer_ratio())


def crossing(rng, p0, p1, start):
    """A gain of the sign of `start`, within 1e-3 .. 1e3 of it, at which the count changes; None if there is none."""
    gains = [start * 10 ** (k / 2) for k in range(-6, 7)]
    counts = [growing(p0 + exact(g) * p1) for g in gains]
    steps = [k for k in range(1, len(gains)) if counts[k] != counts[k - 1] and None not in counts[k - 1:k + 1]]
    if not steps:
        return None
    k = rng.choice(steps)
    low, high = gains[k - 1], gains[k]
    while abs(high / low - 1) > 1e-6:
        middle = math.copysign(math.sqrt(low * high), low)
        if growing(p0 + exact(middle) * p1) == counts[k - 1]:
            low = middle
        else:
            high = middle
    return high


def tuned(rng, c):
    """Moves one gain to 1e-4 .. 1e-1 beside a threshold; False if no gain of the circuit has one."""
    order, p = list(c.gains), determinant(system_of(c.text()))
    rng.shuffle(order)
    for index in order:
        start = float(literal(c.cards[index].split()[-1]))
        threshold = crossing(rng, *affine_in(c, index, p), start)
        if threshold is not None:
            c.with_gain(index, threshold * (1 + rng.choice([-1, 1]) * log_uniform(rng, 1e-4, 1e-1)))
            return True
    return False


def generated(rng, name, near):
    """(text, exact determinant, circuits thrown away). Thrown away are networks without a
    determinant or a mode, and those with a mode so near the border of the axis tolerance that it could be counted
    on either side (|Re s| / |s| within a factor of two of 1e-9)."""
    thrown = 0
    while True:
        c = grown(rng, name)
        done = near and tuned(rng, c)
        p = determinant(system_of(c.text()))
        if done == near and p.degree() > 0:
            if not near_border(p):
                return c.text(), p, thrown
        thrown += 1
