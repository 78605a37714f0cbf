"""Exact count of the right-half-plane roots of det(G + s C) for matrices of rational numbers.

Every double is a rational number, so the determinant is a polynomial with rational coefficients. It is
found by exact determinants at n + 1 integer points and exact interpolation (no rounding anywhere;
fractions by FLINT, through python-flint). Its right-half-plane roots are counted by a Cauchy index:

    p(j w) = a(w) + j b(w);  for p of degree n without roots on the axis the argument of p(j w) grows by
    pi (n - 2 N) over the whole axis, and the index of the ratio of the two parts, counted by the signs of
    a Sturm chain at both ends, is that growth over pi (E. J. Routh, 1877; F. R. Gantmacher, The Theory of
    Matrices, vol. 2, ch. XV, 1959; both from memory).

Common roots of a and b lie on the axis or symmetric to it; they are divided out first. Of a symmetric
factor every root that is not on the axis has its mirror image, so half of those grow.
"""

from flint import fmpq, fmpq_mat, fmpq_poly


def determinant(g, c):
    """det(G + s C) as a polynomial in s; G and C are square lists of lists of fmpq."""
    n = len(g)
    points, values = [], []
    for k in range(n + 1):
        s = fmpq(k - n // 2)
        rows = [[g[i][j] + s * c[i][j] for j in range(n)] for i in range(n)]
        points.append(s)
        values.append(fmpq_mat(rows).det())
    return interpolate(points, values)


def interpolate(points, values):
    """Newton's divided differences."""
    table = list(values)
    for level in range(1, len(points)):
        for k in range(len(points) - 1, level - 1, -1):
            table[k] = (table[k] - table[k - 1]) / (points[k] - points[k - level])
    result = fmpq_poly([0])
    for point, value in zip(reversed(points), reversed(table)):
        result = result * fmpq_poly([-point, 1]) + fmpq_poly([value])
    return result


def primitive(p):
    """p times a positive number, with small integers as coefficients."""
    numerator = p.numer()
    content = numerator.content()
    return fmpq_poly(numerator) / content if content != 0 else p


def sign_at_infinity(p, negative):
    top = p.coeffs()[-1]
    sign = 1 if top > 0 else -1
    return -sign if negative and p.degree() % 2 else sign


def chain_index(f, g):
    """Sign variations at minus infinity less those at plus infinity of the Sturm chain of f and g: the
    Cauchy index of g / f over the real axis."""
    chain = [primitive(f), primitive(g)]
    while chain[-1].degree() > 0:
        rest = -(chain[-2] % chain[-1])
        if rest.degree() < 0:
            break
        chain.append(primitive(rest))
    chain = [p for p in chain if p.degree() >= 0]

    def variations(negative):
        signs = [sign_at_infinity(p, negative) for p in chain]
        return sum(a != b for a, b in zip(signs, signs[1:]))

    return variations(True) - variations(False)


def parts(p):
    """Real and imaginary part of p(j w) as polynomials in w."""
    real, imaginary = [], []
    for k, coefficient in enumerate(p.coeffs()):
        turned = [coefficient, coefficient, -coefficient, -coefficient][k % 4]
        real.append(turned if k % 2 == 0 else fmpq(0))
        imaginary.append(turned if k % 2 == 1 else fmpq(0))
    return fmpq_poly(real), fmpq_poly(imaginary)


def real_roots(p):
    """Real roots with multiplicity."""
    count = 0
    while p.degree() > 0:
        derivative = p.derivative()
        count += chain_index(p, derivative)
        p = p.gcd(derivative)
    return count


def count(p):
    """(right-half-plane roots, nonzero roots on the axis, roots at zero) of p, multiplicities counted."""
    coefficients = p.coeffs()
    at_zero = next(k for k, c in enumerate(coefficients) if c != 0)
    p = fmpq_poly(coefficients[at_zero:])
    if p.degree() == 0:
        return 0, 0, at_zero
    a, b = parts(p)
    common = a.gcd(b)
    on_axis = real_roots(common)
    right = (common.degree() - on_axis) // 2
    a, b = a // common, b // common
    # The argument of a + j b grows by pi times the index of a/b, which is that of -b/a.
    if a.degree() >= b.degree():
        turns = -chain_index(a, b) if a.degree() > 0 else 0
    else:
        turns = chain_index(b, a)
    degree = max(a.degree(), b.degree())
    right += (degree - turns) // 2
    return right, on_axis, at_zero
