"""Exact determinant polynomial of a system, and counts of its roots that are certain.

The entries of G and C are rational numbers (every double is one), so det(G + s C) is a polynomial with rational
coefficients; `determinant` finds it by exact determinants at rank(C) + 1 integers (its degree is at most the rank) and
exact interpolation. Three counts of its right-half-plane roots:

1. `exact_count.count`: Cauchy index by a Sturm chain in rational arithmetic; sharp at the axis; the reference.
2. `with_tolerance`: all roots enclosed in discs of ball arithmetic with proof (FLINT's isolation of the roots of an
   integer polynomial, which refines until the enclosures are disjoint: F. Johansson, Arb, IEEE Trans. Computers 66,
   2017, from memory). Each root is sorted by |Re s| against 1e-9 |s|, the border between growing and on the axis,
   and the comparison itself is one of balls: true only if true for every point of the disc.
3. `growing`: Routh's array in balls of 2000 bits (E. J. Routh, A Treatise on the Stability of a Given State of Motion,
   1877, from memory); every sign is certain, else the first count decides. Fast enough for bisection.
"""

from flint import arb, ctx, fmpq, fmpq_poly, fmpz, fmpz_mat

from exact_count import count, interpolate, primitive

AXIS = fmpq(1, 10**9)  # a mode with |Re s| <= AXIS |s| lies on the axis
SHIFT = 2**30  # s is counted in units of SHIFT rad/s: a positive scale changes no count
ROUTH_BITS, ROOT_BITS = 2000, 128


class Unclear(Exception):
    """A root cannot be put on one side of the border for certain."""


def integer_rows(system):
    """G and C times SHIFT as integer matrices, each row times a positive integer, and the product of those."""
    size, product = system.size, fmpz(1)
    g, c = [[fmpq(0)] * size for _ in range(size)], [[fmpq(0)] * size for _ in range(size)]
    for matrix, entries, factor in ((g, system.g, 1), (c, system.c, SHIFT)):
        for (row, column), value in entries.items():
            matrix[row][column] = fmpq(value.numerator * factor, value.denominator)
    for row in range(size):
        common = fmpz(1)
        for value in g[row] + c[row]:
            common = common * value.q / common.gcd(value.q)
        g[row] = [(v * common).p for v in g[row]]
        c[row] = [(v * common).p for v in c[row]]
        product *= common
    return fmpz_mat(g), fmpz_mat(c), product


def determinant(system):
    """det(G + s C) as fmpq_poly in s / SHIFT, exact; the zero polynomial if the system is singular for all s."""
    g, c, multiple = integer_rows(system)
    degree = c.rank()
    points = [k - degree // 2 for k in range(degree + 1)]
    values = [fmpq((g + k * c).det()) for k in points]
    return interpolate([fmpq(k) for k in points], values) / fmpq(multiple)


def integer(p):
    """A positive multiple of an fmpq_poly with small integers as coefficients."""
    return primitive(p).numer()


def enclosures(p):
    """(disc, multiplicity) of every root of p off the origin; p is not zero."""
    ctx.prec = ROOT_BITS
    zeros = next(k for k, value in enumerate(p.coeffs()) if value != 0)
    q = integer(fmpq_poly(p.coeffs()[zeros:]))
    return q.complex_roots() if q.degree() > 0 else []


def with_tolerance(p):
    """(growing modes, modes on the axis off the origin) with AXIS as the border."""
    growing_modes = on_axis = 0
    for disc, times in enclosures(p):
        size = abs(disc) * arb(AXIS)
        if abs(disc.real) < size:
            on_axis += times
        elif disc.real > size:
            growing_modes += times
        elif not disc.real < -size:
            raise Unclear(f"root at {disc}")
    return growing_modes, on_axis


def near_border(p, factor=2):
    """Whether some root has |Re s| / |s| within a factor of AXIS."""
    ratios = [abs(disc.real) / abs(disc) / arb(AXIS) for disc, _ in enclosures(p)]
    return any(not (r < 1 / arb(factor) or r > factor) for r in ratios)


def routh(p):
    """Right-half-plane roots of p by Routh's array in ball arithmetic, or None where a sign is not certain."""
    ctx.prec = ROUTH_BITS
    found = p.coeffs()
    zeros = next(k for k, value in enumerate(found) if value != 0)
    coefficients = [arb(value) for value in reversed(found[zeros:])]
    upper, lower = coefficients[0::2], coefficients[1::2]
    changes = 0
    while lower:
        if not (lower[0] > 0 or lower[0] < 0):
            return None
        changes += (lower[0] > 0) != (upper[0] > 0)
        factor = upper[0] / lower[0]
        following = [u - factor * (lower[k + 1] if k + 1 < len(lower) else 0) for k, u in enumerate(upper[1:])]
        upper, lower = lower, following
    return changes


def growing(p):
    """Exact number of right-half-plane roots; None for the zero polynomial."""
    if p.degree() < 0:
        return None
    found = routh(integer(p))
    return count(p)[0] if found is None else found
