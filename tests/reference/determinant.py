"""det(G + s C) at one complex s in extended precision, by sparse elimination in a fixed order.

The order is chosen once, from values at a few frequencies spread over the band (least fill among pivots that are not
small in their column at any of them); the elimination then runs over a recorded list of operations in mpmath numbers.
With 50 digits, a loss of 20 digits by growth would still leave far more than doubles hold; natural_modes.py evaluates
the decisive values again with 80.
"""

import mpmath
import numpy as np

DIGITS = 50
REFERENCE_RAD_PER_S = (3.1e2 + 7.7e3j, 2.3e5 + 6.1e6j, 1.7e7 + 2.9e9j, 3.1e9 + 1.3e11j)
SMALL_PIVOT = 1e-3


class Plan:
    """Pivot order and operation list for one sparsity pattern."""

    def __init__(self, system):
        self.size = system.size
        rows = [dict() for _ in range(self.size)]
        for key in set(system.g) | set(system.c):
            g, c = float(system.g.get(key, 0)), float(system.c.get(key, 0))
            rows[key[0]][key[1]] = np.array([g + s * c for s in REFERENCE_RAD_PER_S])
        self.pivots, self.steps, self.sign = [], [], 1
        self.choose(rows)

    def choose(self, rows):
        columns = [set() for _ in range(self.size)]
        for r, row in enumerate(rows):
            for c in row:
                columns[c].add(r)
        left = set(range(self.size))
        order_r, order_c = [], []
        while left:
            r, c = self.best_pivot(rows, columns)
            targets = []
            pivot_row = rows[r]
            for t in sorted(columns[c] - {r}):
                factor = rows[t].pop(c) / pivot_row[c]
                for k, value in pivot_row.items():
                    if k != c:
                        rows[t][k] = rows[t].get(k, 0) - factor * value
                        columns[k].add(t)
                targets.append(t)
            for k in pivot_row:
                columns[k].discard(r)
            columns[c] = set()
            self.steps.append((r, c, targets, [k for k in pivot_row if k != c]))
            order_r.append(r)
            order_c.append(c)
            rows[r] = {}
            left.discard(r)
        self.sign = parity(order_r) * parity(order_c)

    def best_pivot(self, rows, columns):
        best, best_key = None, None
        candidates = sorted((len(s), c) for c, s in enumerate(columns) if s)[:8]
        for relaxed in (SMALL_PIVOT, 0.0):
            for count, c in candidates:
                largest = np.max([np.abs(rows[r][c]) for r in columns[c]], axis=0)
                for r in columns[c]:
                    with np.errstate(divide="ignore", invalid="ignore"):
                        ratio = float(np.min(np.nan_to_num(np.abs(rows[r][c]) / largest)))
                    if ratio <= relaxed:
                        continue
                    key = ((len(rows[r]) - 1) * (count - 1), -ratio, r)
                    if best_key is None or key < best_key:
                        best, best_key = (r, c), key
            if best is not None:
                return best
        raise ArithmeticError("no pivot is left although the pencil is regular")


def parity(order):
    """+1 or -1 for a permutation."""
    sign, seen = 1, [False] * len(order)
    for start in range(len(order)):
        length, at = 0, start
        while not seen[at]:
            seen[at], at, length = True, order[at], length + 1
        if length and length % 2 == 0:
            sign = -sign
    return sign


class Determinant:
    """Evaluates det(G + s C) for one system."""

    def __init__(self, system, digits=DIGITS, plan=None):
        self.system, self.plan, self.context = system, plan or Plan(system), mpmath.mp.clone()
        self.context.dps = digits
        mpf = self.context.mpf

        def exact(value):
            return mpf(value.numerator) / mpf(value.denominator)

        self.entries = []
        for key in sorted(set(system.g) | set(system.c)):
            g, c = system.g.get(key), system.c.get(key)
            self.entries.append((*key, exact(g) if g else None, exact(c) if c else None))

    def with_digits(self, digits):
        """The same determinant in another precision."""
        return Determinant(self.system, digits, self.plan)

    def rows(self, s):
        rows = [dict() for _ in range(self.plan.size)]
        for r, column, g, c in self.entries:
            rows[r][column] = g if c is None else (s * c if g is None else g + s * c)
        return rows

    def __call__(self, s):
        """The determinant as an mpmath number; `s` must belong to `self.context`."""
        rows, result = self.rows(s), self.context.mpf(self.plan.sign)
        for r, c, targets, others in self.plan.steps:
            row = rows[r]
            pivot = row.get(c, 0)
            if not pivot:
                return self.context.mpf(0)
            result *= pivot
            if not targets:
                continue
            inverse = 1 / pivot
            for t in targets:
                target = rows[t]
                factor = target.get(c)
                if not factor:
                    continue
                factor = factor * inverse
                for k in others:
                    value = row.get(k)
                    if value:
                        target[k] = target.get(k, 0) - factor * value
        return result

    def log(self, s):
        """ln det as a complex double (imaginary part modulo 2 pi); minus infinity at an exact zero."""
        value = self(s)
        if not value:
            return complex(-np.inf, 0.0)
        return complex(self.context.log(value))
