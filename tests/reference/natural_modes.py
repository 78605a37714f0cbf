"""All finite natural modes of a lumped system, with a proof of their number and of the half-plane each lies in.

1. degree.py gives n, the exact number of finite modes, and n0, the exact number of modes at s = 0.
2. Starting values: C = E F^T term by term (one column an element, scaled by the root of its value), and
   K = F^T (G + s0 C)^-1 E, whose nonzero eigenvalues are 1/(s - s0) up to sign. Only the n largest are kept: that is
   the deflation of the infinite structure. A plain generalised eigenvalue solver returns the others as finite numbers
   beyond 1e15 rad/s on either side of the axis.
3. Weierstrass' simultaneous correction W_k = p(z_k)/(a prod_{j != k}(z_k - z_j)), p = det(G + s C), a its leading
   coefficient, in 50 digits until it is negligible.
4. Proof: B. T. Smith, "Error bounds for zeros of a polynomial based upon Gerschgorin's theorems", J. ACM 17 (1970)
   661-674 (from memory): the discs |z - z_k| <= n |W_k| together hold all n zeros, and every group of m discs that hangs together
   and is apart from the rest holds exactly m. A mode therefore counts as unstable only if its whole group of discs is to
   the right of the threshold, and the run fails if any group straddles it. What is assumed: the rounding of 50-digit
   arithmetic is small against W (the modes nearest to the axis are evaluated again with 80 digits), and the primes of
   step 1.
5. Independent route: dense LU in doubles along the imaginary axis must give det/prod(jw - z_k) = constant at samples
   that are less than a radian apart in phase, so the argument count of the dense determinant equals that of the modes.
"""

import math
from dataclasses import dataclass

import numpy as np
import scipy.linalg

from degree import mode_counts
from determinant import DIGITS, Determinant

OHM, RAD_PER_S = 50.0, 2 * math.pi * 1e9
THRESHOLD = 1e-9  # |Re s| <= 1e-9 |s|: on the axis
NEGLIGIBLE = 1e-17  # relative correction at which a mode is taken as settled
NEGLIGIBLE_LATE = 1e-13  # the same after PATIENT_ROUNDS: repeated modes approach only linearly
PATIENT_ROUNDS, MAX_ROUNDS = 6, 60
APART = 1e-11  # relative distance to which coinciding starting values are spread
CONFIRMING_DIGITS, CONFIRMED_MODES, CONFIRMED_RELATIVE = 80, 3, 1e-16
COUNT_TOLERANCE_RAD = 0.5  # a phase error below this leaves an argument count unchanged
UNRESOLVED = 1e-6  # distance to the axis, relative, below which the dense determinant is not asked


class NotCertified(Exception):
    """The discs do not decide the half-plane, or the two routes to the determinant disagree."""


@dataclass
class Modes:
    """`finite` and `at_zero` are exact counts; `modes` complex rad/s, those at zero left out; `radii` the disc radii."""

    finite: int
    at_zero: int
    modes: np.ndarray
    radii: np.ndarray

    def unstable(self):
        return self.modes[self.modes.real > THRESHOLD * np.abs(self.modes)]

    def on_axis(self):
        return self.modes[np.abs(self.modes.real) <= THRESHOLD * np.abs(self.modes)]


def scaled(system):
    """Dense doubles G, C in volts, 50 ohm x amperes and units of 2 pi GHz, with the scales of rows and columns."""
    row = np.array([OHM if k < system.node_count else 1.0 for k in range(system.size)])
    column = np.array([1.0 if k < system.node_count else 1 / OHM for k in range(system.size)])
    g, c = np.zeros((2, system.size, system.size))
    for matrix, entries, unit in ((g, system.g, 1.0), (c, system.c, RAD_PER_S)):
        for (i, j), value in entries.items():
            matrix[i, j] = float(value) * unit * row[i] * column[j]
    return g, c, row, column


def starting_values(system, count, shift):
    """The `count` finite modes in rad/s, good to a few digits or better, by shifted inversion on the reactive parts."""
    g, c, row, column = scaled(system)
    terms = len(system.rank_ones)
    left, right = np.zeros((2, system.size, terms))
    root = math.sqrt(RAD_PER_S)
    for k, (one, two) in enumerate(system.rank_ones):
        for i, value in one:
            left[i, k] = value * row[i] * root
        for i, value in two:
            right[i, k] = value * column[i] * root
    kernel = right.T @ scipy.linalg.solve(g + shift * c, left)
    values = scipy.linalg.eigvals(kernel)
    values = values[np.argsort(-np.abs(values))][:count]
    return (shift - 1 / values) * RAD_PER_S


class Polisher:
    """Weierstrass iteration in extended precision. High and low parts keep differences exact to 32 digits."""

    def __init__(self, system, finite, at_zero, start):
        self.det = Determinant(system)
        self.at_zero, self.degree = at_zero, finite
        self.z = [self.det.context.mpc(complex(s)) for s in symmetric(start)]
        self.log_det = [None] * len(self.z)
        self.leading = 0j

    def parts(self):
        high = np.array([complex(z) for z in self.z])
        low = np.array([complex(z - self.det.context.mpc(h)) for z, h in zip(self.z, high)])
        return high, low

    def log_product(self, s, high, low, skip=None):
        """ln of the product of (s - z_j) and of s^n0."""
        s_high = complex(s)
        difference = (s_high - high) + (complex(s - self.det.context.mpc(s_high)) - low)
        if skip is not None:
            difference[skip] = 1.0
        difference[difference == 0] = 1e-28 * abs(s_high)
        return np.sum(np.log(difference)) + (self.at_zero * np.log(s_high) if self.at_zero else 0.0)

    def measure_leading(self, high, low):
        """ln of the leading coefficient, from a point far outside all modes."""
        far = self.det.context.mpc(1e3 * np.max(np.abs(high), initial=1.0), 0)
        far = far * self.det.context.mpc(0.6, 0.8)
        self.leading = self.det.log(far) - self.log_product(far, high, low)

    def run(self):
        """Modes and the radii n |W_k| of their discs."""
        high, low = self.parts()
        settled = np.zeros(len(self.z), dtype=bool)
        for round_number in range(MAX_ROUNDS):
            self.measure_leading(high, low)
            tolerance = NEGLIGIBLE if round_number < PATIENT_ROUNDS else NEGLIGIBLE_LATE
            for k in np.flatnonzero(~settled):
                if high[k].imag < 0:  # the mirror image of its partner, which was just moved
                    self.place(k, self.det.context.conj(self.z[k - 1]), high, low)
                    settled[k] = settled[k - 1]
                else:
                    settled[k] = self.move(k, high, low, tolerance)
            if settled.all():
                break
        self.measure_leading(high, low)
        radii = np.zeros(len(self.z))
        for k in range(len(self.z)):
            radii[k] = radii[k - 1] if high[k].imag < 0 else self.degree * abs(self.correction(k, high, low))
        self.confirm(high, low)
        return high, radii

    def confirm(self, high, low):
        """Evaluates the corrections of the modes nearest to the axis once more with more digits."""
        finer = self.det.with_digits(CONFIRMING_DIGITS)
        nearness = np.where(high.imag < 0, np.inf, np.abs(high.real) / np.abs(high))
        for k in np.argsort(nearness)[:CONFIRMED_MODES]:
            if high[k].imag < 0:
                continue
            before = self.correction(k, high, low)
            self.log_det[k] = finer.log(finer.context.mpc(self.z[k]))
            after = self.correction(k, high, low)
            if self.degree * abs(after - before) > CONFIRMED_RELATIVE * abs(high[k]):
                raise NotCertified(f"{DIGITS} digits do not carry the determinant near {high[k]:.6g} rad/s")

    def correction(self, k, high, low):
        """W_k at the present values; the determinant is evaluated again only where the mode has moved since."""
        if self.log_det[k] is None:
            self.log_det[k] = self.det.log(self.z[k])
        return np.exp(self.log_det[k] - self.leading - self.log_product(self.z[k], high, low, k))

    def move(self, k, high, low, tolerance):
        """One step of one mode; true where it was negligible and the mode stays where it is."""
        step = self.correction(k, high, low)
        if high[k].imag == 0:
            step = complex(step.real, 0)
        if abs(step) < tolerance * abs(high[k]):
            return True
        if not np.isfinite(step):
            raise NotCertified("a correction is not finite")
        step *= min(1.0, 0.5 * abs(high[k]) / abs(step))
        self.place(k, self.z[k] - self.det.context.mpc(step), high, low)
        return False

    def place(self, k, z, high, low):
        self.z[k], high[k], self.log_det[k] = z, complex(z), None
        low[k] = complex(z - self.det.context.mpc(high[k]))


def symmetric(values):
    """Sorted so that a mode of the upper half-plane is followed by its exact conjugate; real ones made real, and those
    that coincide moved apart a little."""
    upper = spread(sorted((v for v in values if v.imag > APART * abs(v)), key=abs))
    real = spread(sorted((v.real for v in values if abs(v.imag) <= APART * abs(v)), key=abs))
    result = [complex(v) for v in real]
    for v in upper:
        result += [v, v.conjugate()]
    if len(result) != len(values):
        raise NotCertified("starting values are not symmetric about the real axis")
    return result


def spread(values):
    """The values, each of those that (nearly) repeat an earlier one scaled by a little more than 1."""
    result = []
    for v in values:
        repeats = sum(abs(v - other) < APART * abs(v) for other in values[: len(result)])
        result.append(v * (1 + 3 * APART * repeats))
    return result


def groups(modes, radii):
    """Groups of discs that hang together, as lists of indices."""
    order, found = list(range(len(modes))), []
    while order:
        group, frontier = [], [order.pop()]
        while frontier:
            k = frontier.pop()
            group.append(k)
            touching = [j for j in order if abs(modes[j] - modes[k]) <= radii[j] + radii[k]]
            order = [j for j in order if j not in touching]
            frontier += touching
        found.append(group)
    return found


def certify(modes, radii):
    """Fails unless every group of discs lies entirely to the right, to the left, or on the axis as defined."""
    if not np.all(np.isfinite(radii)):
        raise NotCertified("a disc has no radius")
    for group in groups(modes, radii):
        sides = set()
        for k in group:
            size = abs(modes[k])
            for edge in (modes[k].real - radii[k], modes[k].real + radii[k]):
                sides.add(0 if abs(edge) <= THRESHOLD * size else math.copysign(1, edge))
        if len(sides) > 1:
            raise NotCertified(f"discs of {len(group)} modes near {modes[group[0]]:.6g} rad/s reach over the threshold")


def axis_samples(modes):
    """Frequencies in rad/s between which no factor (jw - z) turns by more than about half a radian; the sum of all
    turns is followed by the prediction itself, so only aliasing within one factor matters. Modes nearer to the axis than
    1e-6 of their modulus are not resolved by doubles: for their side the discs alone decide."""
    size = np.abs(modes)
    points = [np.geomspace(size.min() / 30, size.max() * 30, 120)]
    for z in modes[modes.imag > 0]:
        width = max(abs(z.real), UNRESOLVED * abs(z))
        near = z.imag + width * np.array([-8.0, -2.0, -0.7, 0.0, 0.7, 2.0, 8.0])
        points.append(near[near > 0])
    omega = np.unique(np.concatenate(points))
    distance = np.min(np.abs(1j * omega[:, None] - modes[None, :]) / np.abs(modes)[None, :], axis=1)
    return omega[distance > 0.5 * UNRESOLVED]


def dense_log_determinants(g, c, points):
    """ln det(G + s C) of a batch by dense LU in doubles, rows and columns equilibrated at every point."""
    matrices = g[None] + points[:, None, None] * c[None]
    logarithm = np.zeros(len(points))
    for axis in (2, 1):
        scale = np.max(np.abs(matrices), axis=axis, keepdims=True)
        matrices /= scale
        logarithm += np.sum(np.log(scale), axis=(1, 2))
    sign, rest = np.linalg.slogdet(matrices)
    return logarithm + rest + 1j * np.angle(sign)


def check_argument(system, found):
    """Dense determinants along the axis against the product over the modes; returns the worst phase deviation in rad.
    Doubles lose digits toward low frequencies, so the deviation is judged by what a count needs (COUNT_TOLERANCE_RAD)."""
    modes = found.modes
    if len(modes) == 0:
        return 0.0
    g, c, _, _ = scaled(system)
    ratio = []
    s = 1j * axis_samples(modes)
    for chunk in np.array_split(s, max(1, len(s) * system.size**2 // 2_000_000)):
        predicted = np.sum(np.log(chunk[:, None] - modes[None, :]), axis=1) + found.at_zero * np.log(chunk)
        ratio.append(dense_log_determinants(g, c, chunk / RAD_PER_S) - predicted)
    turn = np.exp(1j * np.concatenate(ratio).imag)
    return float(np.max(np.abs(np.angle(turn * np.conj(np.sum(turn))))))


def natural_modes(system):
    """The certified modes of a System."""
    finite, at_zero = mode_counts(system)
    problem = None
    for shift in (0.7345, 0.01378, 21.7):
        try:
            return attempt(system, finite, at_zero, shift)
        except NotCertified as error:
            problem = error
    raise problem


def attempt(system, finite, at_zero, shift):
    if finite == at_zero:
        return Modes(finite, at_zero, np.zeros(0, dtype=complex), np.zeros(0))
    start = starting_values(system, finite, shift)
    start = start[np.argsort(-np.abs(start))][: finite - at_zero]
    modes, radii = Polisher(system, finite, at_zero, start).run()
    certify(modes, radii)
    return Modes(finite, at_zero, modes, radii)
