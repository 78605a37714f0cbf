"""Reads a small subset of netlist text into a flat list of linear parts.

Subset: title line, `*` comments, `+` continuation, trailing `$` and `;` comments, `.param`, `.subckt`/`.ends` with
parameters, `.global`, `.end`, cards R L C K G E F H V I X, expressions in '..' or {..}. Of the marks only
`*~ block` is read, for its ports. Values are exact rational numbers (`fractions.Fraction`): a decimal literal is taken
as written, and a function that leaves the rationals is rounded to a double once.
Nothing here knows about matrices or modes.
"""

import math
import re
from dataclasses import dataclass, field
from fractions import Fraction

GROUND_NAMES = {"0", "gnd", "gnd!", "ground"}
SCALE = {"t": 12, "g": 9, "meg": 6, "x": 6, "k": 3, "m": -3, "u": -6, "n": -9, "p": -12, "f": -15}
MIL = Fraction(254, 10**7)
NUMBER = re.compile(r"((?:\d+\.?\d*|\.\d+)(?:e[+-]?\d+)?)([a-z]*)")
TOKEN = re.compile(r"(?:'[^']*'|\{[^}]*\}|[^\s'{]+)+")
KEYWORDS = {"vccs", "vcvs", "cccs", "ccvs"}


class NetlistError(Exception):
    """The text is outside the subset, or wrong."""


@dataclass
class Part:
    """One flat linear part. `kind` is the card letter; `control` holds two nodes (G, E) or one part name (F, H);
    for K `nodes` holds the two inductor names."""

    kind: str
    name: str
    nodes: tuple
    value: Fraction | None = None
    control: tuple = ()


@dataclass
class Subcircuit:
    """A definition: pins, default parameters and body cards."""

    pins: list
    defaults: dict
    cards: list = field(default_factory=list)


@dataclass
class Block:
    """A block mark: its name and its ports as (node or part name, ohms or None)."""

    name: str
    ports: list
    z0_ohm: Fraction


def literal(text):
    """A number with an optional scale factor and unit letters, as a Fraction; None if it is not one."""
    match = NUMBER.fullmatch(text.lower().lstrip("+-"))
    if not match:
        return None
    digits, tail = match.groups()
    sign = -1 if text.startswith("-") else 1
    value = Fraction(digits)
    if tail.startswith("meg"):
        value *= 10**6
    elif tail.startswith("mil"):
        value *= MIL
    elif tail[:1] in SCALE:
        value *= Fraction(10) ** SCALE[tail[0]]
    return sign * value


class Expression:
    """Recursive descent over + - * / ** unary signs, brackets, names, functions; evaluates while it reads."""

    FUNCTIONS = {
        "sqrt": math.sqrt, "exp": math.exp, "ln": math.log, "log": math.log, "log10": math.log10,
        "sin": math.sin, "cos": math.cos, "tan": math.tan, "atan": math.atan,
    }
    PIECE = re.compile(r"\s*(\*\*|[-+*/^(),]|(?:\d+\.?\d*|\.\d+)(?:e[+-]?\d+)?[a-z]*|[a-z_][\w.]*)")

    def __init__(self, text, lookup):
        self.pieces, at = [], 0
        text = text.lower().rstrip()
        while at < len(text):
            match = self.PIECE.match(text, at)
            if not match:
                raise NetlistError(f"cannot read the expression {text!r}")
            self.pieces.append(match.group(1))
            at = match.end()
        self.at, self.lookup = 0, lookup

    def value(self):
        result = self.sum()
        if self.at != len(self.pieces):
            raise NetlistError(f"left over in an expression: {self.pieces[self.at:]}")
        return result

    def peek(self):
        return self.pieces[self.at] if self.at < len(self.pieces) else None

    def take(self):
        piece = self.peek()
        if piece is None:
            raise NetlistError("an expression ends too early")
        self.at += 1
        return piece

    def sum(self):
        value = self.product()
        while self.peek() in ("+", "-"):
            value = value + self.product() if self.take() == "+" else value - self.product()
        return value

    def product(self):
        value = self.signed()
        while self.peek() in ("*", "/"):
            value = value * self.signed() if self.take() == "*" else value / self.signed()
        return value

    def signed(self):
        if self.peek() in ("+", "-"):
            return self.signed() if self.take() == "+" else -self.signed()
        base = self.atom()
        if self.peek() in ("**", "^"):
            self.take()
            power = self.signed()
            if power.denominator == 1:
                return base ** int(power)
            return Fraction(float(base) ** float(power))
        return base

    def atom(self):
        piece = self.take()
        if piece == "(":
            value = self.sum()
            self.expect(")")
            return value
        number = literal(piece)
        if number is not None:
            return number
        if self.peek() == "(":
            return self.call(piece)
        return self.lookup(piece)

    def call(self, name):
        self.take()
        arguments = [self.sum()]
        while self.peek() == ",":
            self.take()
            arguments.append(self.sum())
        self.expect(")")
        if name in ("min", "max"):
            return min(arguments) if name == "min" else max(arguments)
        if name == "abs":
            return abs(arguments[0])
        if name in ("pow", "pwr"):
            return Fraction(float(arguments[0]) ** float(arguments[1]))
        if name not in self.FUNCTIONS:
            raise NetlistError(f"unknown function {name}")
        return Fraction(self.FUNCTIONS[name](float(arguments[0])))

    def expect(self, piece):
        if self.take() != piece:
            raise NetlistError(f"an expression lacks {piece!r}")


class Scope:
    """Parameter names of one level: unevaluated texts, evaluated on demand, then the level outside."""

    def __init__(self, texts, outer=None, known=None):
        self.texts, self.outer, self.known, self.busy = dict(texts), outer, dict(known or {}), set()

    def lookup(self, name):
        if name in self.known:
            return self.known[name]
        if name in self.busy:
            raise NetlistError(f"parameter {name} depends on itself")
        if name not in self.texts:
            if self.outer is None:
                raise NetlistError(f"unknown parameter {name}")
            return self.outer.lookup(name)
        self.busy.add(name)
        self.known[name] = self.evaluate(self.texts[name])
        self.busy.discard(name)
        return self.known[name]

    def evaluate(self, text):
        if text[:1] in "'{" and text[-1:] in "'}":
            text = text[1:-1]
        number = literal(text)
        return number if number is not None else Expression(text, self.lookup).value()


def logical_lines(text, top_level=True):
    """Cards with continuations joined and comments gone, and the block marks, in lower case."""
    cards, marks = [], []
    for number, line in enumerate(text.lstrip("\ufeff").splitlines()):
        line = line.strip()
        if number == 0 and top_level and not line.startswith(("*", ".")):
            continue
        if line.startswith("*~+"):
            if marks:
                marks[-1] += " " + line[3:]
        elif line.startswith("*~"):
            marks.append(line[2:].strip())
        elif line.startswith("+"):
            if cards:
                cards[-1] += " " + strip_comment(line[1:])
        elif line and not line.startswith("*"):
            card = strip_comment(line).lower()
            if card == ".end":
                break
            cards.append(card)
    return [c.lower() for c in cards if c], [m.lower() for m in marks]


def strip_comment(line):
    return re.split(r"(?:^|\s)[$;]", line, maxsplit=1)[0].strip()


def split_card(card):
    """Positional fields and `name=value` fields of a card."""
    pieces = re.split(r"('[^']*'|\{[^}]*\})", card)
    pieces[::2] = [re.sub(r"\s*=\s*", "=", piece) for piece in pieces[::2]]
    positional, named = [], {}
    for token in TOKEN.findall("".join(pieces)):
        name, equals, value = token.partition("=")
        if equals and re.fullmatch(r"[a-z_][\w.]*", name):
            named[name] = value
        else:
            positional.append(token)
    return positional, named


def read_block(mark, scope):
    """A `block` mark as a Block."""
    words = mark.split()
    keys = dict(word.split("=", 1) for word in words[2:] if "=" in word)
    z0_ohm = scope.evaluate(keys["z0"]) if "z0" in keys else Fraction(50)
    names = [keys[k] for k in ("in", "out") if k in keys] + [p for p in keys.get("ports", "").split(",") if p]
    ports = []
    for name in names:
        node, colon, ohms = name.partition(":")
        ports.append((node, scope.evaluate(ohms) if colon else None))
    return Block(words[1], ports, z0_ohm)


class Netlist:
    """A parsed text: subcircuits, global parameters, the flat parts and the blocks of the top level."""

    def __init__(self, text):
        cards, marks = logical_lines(text)
        self.subcircuits, self.globals, self.parts = {}, set(GROUND_NAMES), []
        top, texts, stack = [], {}, []
        for card in cards:
            positional, named = split_card(card)
            head = positional[0]
            if head in (".subckt", ".macro"):
                stack.append(Subcircuit(positional[2:], named))
                self.subcircuits[positional[1]] = stack[-1]
            elif head in (".ends", ".eom"):
                stack.pop()
            elif head == ".param":
                (stack[-1].defaults if stack else texts).update(named)
            elif head == ".global":
                self.globals.update(positional[1:])
            elif not head.startswith("."):
                (stack[-1].cards if stack else top).append((positional, named))
        self.scope = Scope(texts)
        self.expand(top, self.scope, "", {}, 0)
        self.blocks = [read_block(m, self.scope) for m in marks if m.startswith("block ")]

    def expand(self, cards, scope, prefix, pins, depth):
        """Appends the flat parts of `cards`; `pins` maps pin names to outer nets."""
        if depth > 64:
            raise NetlistError("subcircuits nest too deep")

        def net(node):
            if node in GROUND_NAMES:
                return "0"
            if node in self.globals:
                return node
            return pins.get(node, prefix + node)

        for positional, named in cards:
            if positional[0][0] == "x":
                self.instance(positional, named, scope, prefix, net, depth)
            else:
                self.parts.append(flat_part(positional, named, scope, prefix, net))

    def instance(self, positional, named, scope, prefix, net, depth):
        name, sub = prefix + positional[0], self.subcircuits.get(positional[-1])
        if sub is None:
            raise NetlistError(f"unknown subcircuit {positional[-1]} at {name}")
        outer = [net(n) for n in positional[1:-1]]
        if len(outer) != len(sub.pins):
            raise NetlistError(f"{name} has {len(outer)} nodes for {len(sub.pins)} pins")
        known = {key: scope.evaluate(value) for key, value in named.items()}
        inner = Scope(sub.defaults, self.scope, known)
        self.expand(sub.cards, inner, name + ".", dict(zip(sub.pins, outer)), depth + 1)


def flat_part(positional, named, scope, prefix, net):
    """One card as a Part with flat names."""
    fields = [p for p in positional if p not in KEYWORDS]
    name, kind = prefix + fields[0], fields[0][0]

    def value(index, *keys):
        text = next((named[k] for k in keys if k in named), None)
        if text is None and index < len(fields):
            text = fields[index]
        if text is None:
            raise NetlistError(f"{name} has no value")
        return scope.evaluate(text)

    if kind in "rlc":
        return Part(kind, name, (net(fields[1]), net(fields[2])), value(3, kind, "value"))
    if kind in "vi":
        return Part(kind, name, (net(fields[1]), net(fields[2])))
    if kind in "ge":
        control = (net(fields[3]), net(fields[4]))
        return Part(kind, name, (net(fields[1]), net(fields[2])), value(5), control)
    if kind in "fh":
        return Part(kind, name, (net(fields[1]), net(fields[2])), value(4), (prefix + fields[3],))
    if kind == "k":
        return Part(kind, name, (prefix + fields[1], prefix + fields[2]), value(3, "k"))
    raise NetlistError(f"{name}: cards of kind {kind.upper()} are outside the subset")
