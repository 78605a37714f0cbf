"""Modified nodal analysis of a flat list of parts, with the terminations of a block: det(G + s C) = 0 at its modes.

Unknowns: the node voltages, then the currents of L, V, E and H. Entries are exact rationals. Ports: a node gets its
ohms to ground; a named voltage source gets them in series; a named resistor to ground stays as it is.
A coupled inductor is represented as L = w*w with w the double nearest to sqrt(L) (relative change below 3e-16), so that
M = k w1 w2 keeps the exact rank of the coupling matrix, also at k = 1.
"""

import math
from fractions import Fraction

from reader import NetlistError


class System:
    """Sparse exact G and C as dictionaries (row, column) -> Fraction, and the factors of C = E F^T in doubles."""

    def __init__(self, parts, block=None):
        self.g, self.c, self.rank_ones = {}, {}, []
        self.series_ohm, extra = {}, []
        self.by_name = {p.name: p for p in parts}
        for port, ohms in block.ports if block else []:
            extra.append(self.port(port, ohms, block.z0_ohm))
        self.names = []
        self.index = {}
        for part in parts:
            for node in part.nodes if part.kind != "k" else ():
                self.unknown(node)
        for node, _ in filter(None, extra):
            self.unknown(node)
        self.node_count = len(self.names)
        for part in parts:
            if part.kind in "lveh":
                self.unknown("i:" + part.name)
        self.size = len(self.names)
        for part in parts:
            if part.kind in "rcgvef" or part.kind == "h":
                getattr(self, "stamp_" + part.kind)(part)
        self.stamp_inductors(parts)
        for node, ohms in filter(None, extra):
            self.conductance(node, "0", 1 / ohms)
        self.g = {k: v for k, v in self.g.items() if v}
        self.c = {k: v for k, v in self.c.items() if v}

    def port(self, name, ohms, z0_ohm):
        part = self.by_name.get(name)
        if part is not None and part.kind == "v":
            self.series_ohm[part.name] = ohms if ohms is not None else z0_ohm
            return None
        if part is not None and part.kind == "r" and "0" in part.nodes:
            return None
        if part is not None and part.kind == "i":
            return (next(n for n in part.nodes if n != "0"), ohms if ohms is not None else z0_ohm)
        return (name, ohms if ohms is not None else z0_ohm)

    def unknown(self, name):
        if name != "0" and name not in self.index:
            self.index[name] = len(self.names)
            self.names.append(name)

    def add(self, matrix, row, column, value):
        if row != "0" and column != "0":
            key = (self.index[row], self.index[column])
            matrix[key] = matrix.get(key, 0) + value

    def conductance(self, a, b, siemens):
        for row, column, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
            self.add(self.g, row, column, sign * siemens)

    def branch(self, part):
        """Kirchhoff rows of a branch current and the two voltages of its own row; returns the row's name."""
        row, (plus, minus) = "i:" + part.name, part.nodes
        for node, sign in ((plus, 1), (minus, -1)):
            self.add(self.g, node, row, sign)
            self.add(self.g, row, node, sign)
        return row

    def current_of(self, part):
        name = "i:" + part.control[0]
        if name not in self.index:
            raise NetlistError(f"{part.name} is controlled by {part.control[0]}, which carries no branch current")
        return name

    def stamp_r(self, part):
        if not part.value:
            raise NetlistError(f"{part.name} is zero ohm")
        self.conductance(*part.nodes, 1 / part.value)

    def stamp_c(self, part):
        a, b = part.nodes
        for row, column, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
            self.add(self.c, row, column, sign * part.value)
        root = math.sqrt(abs(part.value))
        column = [(self.index[n], sign * root) for n, sign in ((a, 1), (b, -1)) if n != "0"] if a != b else []
        if column and part.value:
            flip = 1 if part.value > 0 else -1
            self.rank_ones.append((column, [(i, flip * v) for i, v in column]))

    def stamp_g(self, part):
        for node, sign in zip(part.nodes, (1, -1)):
            for control, other in zip(part.control, (1, -1)):
                self.add(self.g, node, control, sign * other * part.value)

    def stamp_e(self, part):
        row = self.branch(part)
        for control, sign in zip(part.control, (-1, 1)):
            self.add(self.g, row, control, sign * part.value)

    def stamp_f(self, part):
        for node, sign in zip(part.nodes, (1, -1)):
            self.add(self.g, node, self.current_of(part), sign * part.value)

    def stamp_h(self, part):
        row = self.branch(part)
        self.add(self.g, row, self.current_of(part), -part.value)

    def stamp_v(self, part):
        row = self.branch(part)
        if part.name in self.series_ohm:
            self.add(self.g, row, row, -self.series_ohm[part.name])

    def stamp_inductors(self, parts):
        """v - s (L i + sum of M i) = 0 in the row of each inductor."""
        coils = {p.name: p for p in parts if p.kind == "l"}
        couplings = [p for p in parts if p.kind == "k"]
        root = {}
        for coupling in couplings:
            for name in coupling.nodes:
                if name not in coils:
                    raise NetlistError(f"{coupling.name} couples {name}, which is no inductor here")
                if coils[name].value <= 0:
                    raise NetlistError(f"{name} is coupled and not positive")
                root[name] = Fraction(math.sqrt(coils[name].value))
        for coil in coils.values():
            row = self.branch(coil)
            henry = root[coil.name] ** 2 if coil.name in root else coil.value
            self.add(self.c, row, row, -henry)
            if coil.name not in root and henry:
                flip, size = (1 if henry > 0 else -1), math.sqrt(abs(henry))
                self.rank_ones.append(([(self.index[row], -size)], [(self.index[row], flip * size)]))
        for coupling in couplings:
            one, two = coupling.nodes
            mutual = coupling.value * root[one] * root[two]
            self.add(self.c, "i:" + one, "i:" + two, -mutual)
            self.add(self.c, "i:" + two, "i:" + one, -mutual)
        self.coupled_factors(root, couplings)

    def coupled_factors(self, root, couplings):
        """Rank-one terms of the coupled coils: row scaling by w, one column of the coupling matrix a coil."""
        columns = {name: {name: 1.0} for name in root}
        for coupling in couplings:
            one, two = coupling.nodes
            columns[one][two] = columns[one].get(two, 0.0) + float(coupling.value)
            columns[two][one] = columns[two].get(one, 0.0) + float(coupling.value)
        for name, column in columns.items():
            left = [(self.index["i:" + other], -float(root[other]) * k) for other, k in column.items()]
            self.rank_ones.append((left, [(self.index["i:" + name], float(root[name]))]))
