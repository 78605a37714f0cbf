"""Exact degree of det(G + s C) in s and exact multiplicity of its zero at s = 0, by arithmetic modulo primes.

The entries are rational numbers, so they have images modulo a prime p, and the whole question becomes one of ranks:
with s0 such that G + s0 C is regular, M = (G + s0 C)^-1 C has the eigenvalue 0 once for every mode at infinity and
I - s0 M = (G + s0 C)^-1 G once for every mode at zero. The rank of a power of at least the size of the matrix is the
size minus that algebraic multiplicity, whatever the index of the pencil (capacitor loops, inductor cutsets, k = 1).
Modulo p the rank can only come out too low, and only if p divides one certain integer that has nothing to do with p
(chance about size/p); the maximum over two primes is taken, so an error needs two such accidents (about 1e-9).
No floating-point tolerance takes part: products are formed in doubles that stay below 2^53, hence exactly.
"""

import numpy as np

PRIMES = (4194301, 4194287, 4194277)  # the largest below 2^22: 512 * p * p < 2^53
LARGEST_SIZE = 512


class SingularPencil(Exception):
    """det(G + s C) is zero for all s: no natural modes are defined."""


def residue(value, prime):
    return value.numerator % prime * pow(value.denominator, -1, prime) % prime


def image(entries, size, prime):
    """A dense int64 matrix of residues."""
    matrix = np.zeros((size, size), dtype=np.int64)
    for (row, column), value in entries.items():
        matrix[row, column] = residue(value, prime)
    return matrix


def eliminate(matrix, width, prime):
    """Gauss-Jordan over the first `width` columns in place; the rank of that part."""
    rank = 0
    for column in range(width):
        below = np.flatnonzero(matrix[rank:, column])
        if below.size == 0:
            continue
        pivot = rank + int(below[0])
        if pivot != rank:
            matrix[[rank, pivot]] = matrix[[pivot, rank]]
        matrix[rank] = matrix[rank] * pow(int(matrix[rank, column]), -1, prime) % prime
        rows = np.flatnonzero(matrix[:, column])
        rows = rows[rows != rank]
        live = np.flatnonzero(matrix[rank])
        block = np.ix_(rows, live)
        matrix[block] = (matrix[block] - np.outer(matrix[rows, column], matrix[rank, live])) % prime
        rank += 1
        if rank == matrix.shape[0]:
            break
    return rank


def power_rank(matrix, prime):
    """Rank of a power of the matrix that is at least its size."""
    size, power = matrix.shape[0], 1
    work = matrix.astype(float)
    while power < size:
        work = np.mod(work @ work, float(prime))
        power *= 2
    return eliminate(work.astype(np.int64), size, prime)


def ranks_modulo(system, prime, shift):
    """(finite modes, modes off zero) modulo one prime, or None where the shift or a denominator falls on it."""
    size = system.size
    try:
        g, c = image(system.g, size, prime), image(system.c, size, prime)
    except ValueError:  # a denominator divisible by the prime
        return None
    work = np.concatenate([(g + shift * c) % prime, c], axis=1)
    if eliminate(work, size, prime) < size:
        return None
    shifted = work[:, size:]
    rest = (np.eye(size, dtype=np.int64) - shift * shifted) % prime
    return power_rank(shifted, prime), power_rank(rest, prime)


def mode_counts(system):
    """(number of finite modes, number of modes at s = 0), both exact."""
    if system.size > LARGEST_SIZE:
        raise ValueError(f"{system.size} unknowns; the modular ranks are exact up to {LARGEST_SIZE}")
    found = []
    for prime in PRIMES:
        for shift in (1234577, 987659):
            ranks = ranks_modulo(system, prime, shift)
            if ranks is not None:
                found.append(ranks)
                break
        if len(found) == 2:
            break
    if not found:
        raise SingularPencil("the determinant vanishes for all s")
    return max(f for f, _ in found), system.size - max(z for _, z in found)
