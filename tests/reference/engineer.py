#!/usr/bin/env python3
"""Side-by-side opponent: small-signal stability screening the way a careful engineer scripts it with numpy and scipy.

    engineer.py FILE.. [--points 500] [--fmin 1e3] [--fmax 1e11] [--threads 1] [--repeat 3] [--kind dense|sparse|both]
                       [--modes 1|0] [--json]

Input: {"name":..,"nodes":n,"stamps":[..],"ports":[[node,ohm],..]}, node 0 is ground, SI units:
["R",a,b,ohm] ["C",a,b,farad] ["L",a,b,henry] ["VCCS",p,n,cp,cn,siemens,tau] ["TL",a,b,ohm,tau,neper].
Per frequency, vectorised over frequencies as far as memory allows:
a  ln det A;  b  the same with all VCCS off, and the ratio of both;  c  all driving-point impedances (node part of the
diagonal of the inverse);  d  d/dw ln det = tr(A^-1 dA/dw);  e  S-parameters at the ports;  f  natural modes (QZ).
Prints median microseconds a frequency of each and of the whole job a to e. `race.py` beside this file uses it.
"""

import argparse
import json
import time

import numpy as np
import scipy.linalg as sla
import scipy.sparse as sp
import scipy.sparse.linalg as spla
from threadpoolctl import threadpool_limits

# Impedance and frequency units: unknowns are V and R0 I, s counts in W0.
R0_OHM, W0_RAD = 50.0, 2 * np.pi * 1e9
# Above this order a dense batch takes more memory and time than anybody would give it.
DENSE_LIMIT = 2200
MODES_LIMIT = 700
CHUNK_BYTES = 64e6
SPLU = dict(permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.01, options=dict(SymmetricMode=True))


class Circuit:
    """A(s) = G + s C + sum_k coef_k exp(-s tau_k - alpha_k) at (row_k, column_k), in normalised units."""

    def __init__(self, data, active=True):
        self.n = self.N = data["nodes"]
        self.ports, self.control = data["ports"], []
        g, c, d = [], [], []
        for kind, *fields in data["stamps"]:
            self._stamp(kind, fields, active, g, c, d)
        coo = lambda x: sp.coo_matrix(
            ([e[2] for e in x], ([e[0] for e in x], [e[1] for e in x])), shape=(self.N, self.N)
        ).tocsc()
        self.G, self.C = coo(g), coo(c)
        self.dr, self.dc = (np.array([e[i] for e in d], int) for i in (0, 1))
        self.dv, self.dt, self.da = (np.array([e[i] for e in d], float) for i in (2, 3, 4))
        self._union()

    def _stamp(self, kind, fields, active, g, c, d):
        def put(to, i, j, v, *more):
            if i and j:
                to.append((i - 1, j - 1, v) + more)

        if kind in ("R", "C"):
            a, b, v = fields
            y, to = (R0_OHM / v, g) if kind == "R" else (R0_OHM * v * W0_RAD, c)
            put(to, a, a, y), put(to, b, b, y), put(to, a, b, -y), put(to, b, a, -y)
        elif kind == "L":
            a, b, v = fields
            self.N += 1
            i = self.N
            put(g, a, i, 1), put(g, i, a, 1), put(g, b, i, -1), put(g, i, b, -1), put(c, i, i, -v * W0_RAD / R0_OHM)
        elif kind == "VCCS":
            p, q, cp, cn, gm, tau = fields
            self.control.append((p - 1, q - 1, cp - 1, cn - 1, gm * R0_OHM, tau * W0_RAD))
            for i, j, sign in ((p, cp, 1), (p, cn, -1), (q, cp, -1), (q, cn, 1)) if active else ():
                if tau:
                    put(d, i, j, sign * gm * R0_OHM, tau * W0_RAD, 0.0)
                else:
                    put(g, i, j, sign * gm * R0_OHM)
        elif kind == "TL":
            # Wave form v1 - z i1 = e^-(s tau + alpha) (v2 + z i2) and its mirror image: entire in s, never singular.
            a, b, z, tau, alpha = fields
            z /= R0_OHM
            i1, i2 = self.N + 1, self.N + 2
            self.N += 2
            put(g, a, i1, 1), put(g, b, i2, 1)
            for i, node, far_i, far in ((i1, a, i2, b), (i2, b, i1, a)):
                put(g, i, node, 1), put(g, i, i, -z)
                put(d, i, far, -1, tau * W0_RAD, alpha), put(d, i, far_i, -z, tau * W0_RAD, alpha)
        else:
            raise ValueError(kind)

    def _union(self):
        """One pattern for all frequencies: then only the values are made anew."""
        n = self.N
        g, c = self.G.tocoo(), self.C.tocoo()
        rows, columns = np.r_[g.row, c.row, self.dr], np.r_[g.col, c.col, self.dc]
        self.P = sp.csc_matrix((np.ones(len(rows)), (rows, columns)), shape=(n, n))
        self.P.sort_indices()
        key = np.repeat(np.arange(n), np.diff(self.P.indptr)) * n + self.P.indices
        place = lambda r, col: np.searchsorted(key, np.asarray(col, int) * n + r)
        self.gd, self.cd, self.dpos = np.zeros(self.P.nnz), np.zeros(self.P.nnz), place(self.dr, self.dc)
        self.gd[place(g.row, g.col)] = g.data
        self.cd[place(c.row, c.col)] = c.data

    def dense(self, s):
        A = s[:, None, None] * self.C.toarray() + self.G.toarray()
        if len(self.dr):
            e = self.dv * np.exp(-s[:, None] * self.dt - self.da)
            np.add.at(A, (slice(None), self.dr, self.dc), e)
        return A

    def sparse(self, s):
        v = self.gd + s * self.cd
        if len(self.dr):
            np.add.at(v, self.dpos, self.dv * np.exp(-s * self.dt - self.da))
        return sp.csc_matrix((v, self.P.indices, self.P.indptr), shape=self.P.shape)

    def trace(self, s, inv):
        """tr(A^-1 dA/ds) times j, as s = j w."""
        c = self.C.tocoo()
        t = inv[:, c.col, c.row] @ c.data.astype(complex)
        if len(self.dr):
            slope = -self.dv * self.dt * np.exp(-s[:, None] * self.dt - self.da)
            t = t + np.einsum("fk,fk->f", inv[:, self.dc, self.dr], slope)
        return 1j * t

    def ratio_det(self, s, inv):
        """det A0 / det A by the determinant lemma, one row and column a source."""
        p, q, cp, cn = (np.array([x[i] for x in self.control]) for i in range(4))
        pick = lambda r, c: np.where((r[:, None] >= 0) & (c[None, :] >= 0), inv[:, r[:, None], c[None, :]], 0)
        # Controlling voltage i for a unit current of source j.
        Z = pick(cp, p) - pick(cn, p) - pick(cp, q) + pick(cn, q)
        gm, tau = (np.array([x[i] for x in self.control]) for i in (4, 5))
        gm = gm * np.exp(-s[:, None] * tau)
        return np.linalg.slogdet(np.eye(len(self.control)) - Z * gm[:, None, :])


def s_parameters(z, z0):
    """From port voltages with the port resistors in the circuit: S_ij = 2 Z_ij / sqrt(z0i z0j) - delta."""
    y = 1 / np.sqrt(z0)
    return 2 * z * y[:, None] * y[None, :] - np.eye(len(z0))


def tick(T, key, t0):
    T[key] = T.get(key, 0.0) + time.perf_counter() - t0


def dense_run(ck, ck0, w, chunk):
    """Batches of dense matrices; (seconds by part, results)."""
    T, out = {}, {k: [] for k in ("lndet", "ndf", "ndf_lemma", "z", "dlndet", "S")}
    pn = np.array([p[0] - 1 for p in ck.ports])
    z0 = np.array([p[1] for p in ck.ports]) / R0_OHM
    for i in range(0, len(w), chunk):
        s = 1j * w[i : i + chunk] / W0_RAD
        t = time.perf_counter(); A = ck.dense(s); tick(T, "assemble", t)
        t = time.perf_counter(); sg, la = np.linalg.slogdet(A); tick(T, "a det", t)
        t = time.perf_counter(); A0 = ck0.dense(s); sg0, la0 = np.linalg.slogdet(A0); tick(T, "b second det", t)
        del A0
        t = time.perf_counter(); inv = np.linalg.inv(A)
        z = R0_OHM * np.diagonal(inv, axis1=1, axis2=2)[:, : ck.n].copy(); tick(T, "c inverse diagonal", t)
        t = time.perf_counter(); r = ck.ratio_det(s, inv); tick(T, "b' lemma from inverse", t)
        t = time.perf_counter(); d = ck.trace(s, inv); tick(T, "d derivative", t)
        t = time.perf_counter(); S = s_parameters(inv[:, pn[:, None], pn[None, :]], z0); tick(T, "e ports", t)
        ndf, lemma = np.log(sg / sg0) + (la - la0), -(np.log(r[0]) + r[1])
        for k, v in zip(out, (np.log(sg) + la, ndf, lemma, z, d / W0_RAD, S)):
            out[k].append(v)
    return T, {k: np.concatenate(v) for k, v in out.items()}


def sparse_run(ck, ck0, w):
    """splu at each frequency; the inverse by one solve an unknown then serves b to e as in the dense case."""
    T, out = {}, {k: [] for k in ("lndet", "ndf_lemma", "z", "dlndet", "S")}
    pn = np.array([p[0] - 1 for p in ck.ports])
    z0 = np.array([p[1] for p in ck.ports]) / R0_OHM
    eye = np.eye(ck.N, dtype=complex)
    for f in w:
        s = 1j * f / W0_RAD
        s1 = np.array([s])
        t = time.perf_counter(); A = ck.sparse(s); tick(T, "assemble", t)
        t = time.perf_counter(); lu = spla.splu(A, **SPLU)
        out["lndet"].append(np.log(lu.U.diagonal()).sum()); tick(T, "a det", t)
        t = time.perf_counter(); lu0 = spla.splu(ck0.sparse(s), **SPLU)
        np.log(lu0.U.diagonal()).sum(); tick(T, "b second det", t)
        t = time.perf_counter(); inv = lu.solve(eye)[None]
        out["z"].append(R0_OHM * np.diagonal(inv[0])[: ck.n].copy()); tick(T, "c inverse diagonal", t)
        t = time.perf_counter(); r = ck.ratio_det(s1, inv)
        out["ndf_lemma"].append(-(np.log(r[0]) + r[1])[0]); tick(T, "b' lemma from inverse", t)
        t = time.perf_counter(); out["dlndet"].append(ck.trace(s1, inv)[0] / W0_RAD); tick(T, "d derivative", t)
        t = time.perf_counter()
        out["S"].append(s_parameters(inv[0][pn[:, None], pn[None, :]], z0)); tick(T, "e ports", t)
    return T, {k: np.array(v) for k, v in out.items()}


def run(kind, ck, ck0, w):
    """One pass over the angular frequencies `w` in the given way."""
    if kind == "sparse":
        return sparse_run(ck, ck0, w)
    chunk = max(1, min(len(w), int(CHUNK_BYTES // (16 * ck.N * ck.N)) or 1))
    return dense_run(ck, ck0, w, chunk)


def job_us(us):
    """The whole job, charged with the cheaper of the two ways to b only."""
    parts = ("assemble", "a det", "c inverse diagonal", "d derivative", "e ports")
    return sum(us[k] for k in parts) + min(us["b second det"], us["b' lemma from inverse"])


def grid_rad(fmin_hz, fmax_hz, points):
    return 2 * np.pi * np.logspace(np.log10(fmin_hz), np.log10(fmax_hz), points)


def kinds(N):
    """The ways that are open to a circuit of this size."""
    return ("dense", "sparse") if N <= DENSE_LIMIT else ("sparse",)


def measure(kind, ck, ck0, w, repeat=1):
    """Median microseconds a frequency by part, over `repeat` passes."""
    passes = [run(kind, ck, ck0, w)[0] for _ in range(repeat)]
    return {k: float(np.median([T[k] for T in passes]) * 1e6 / len(w)) for k in passes[0]}


def modes(ck):
    """Natural modes in rad/s; delays frozen at s = 0, so only starting values when there are delays."""
    G = ck.G.toarray()
    np.add.at(G, (ck.dr, ck.dc), ck.dv * np.exp(-ck.da))
    w = sla.eigvals(G, -ck.C.toarray(), check_finite=False)
    w = w[np.isfinite(w)]
    return w[np.abs(w) < 1e7] * W0_RAD


def options(argv):
    ap = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    ap.add_argument("files", nargs="+")
    ap.add_argument("--points", type=int, default=500)
    ap.add_argument("--fmin", type=float, default=1e3)
    ap.add_argument("--fmax", type=float, default=1e11)
    ap.add_argument("--threads", type=int, default=1)
    ap.add_argument("--repeat", type=int, default=3)
    ap.add_argument("--kind", choices=("dense", "sparse", "both"), default="both")
    ap.add_argument("--modes", type=int, default=1)
    ap.add_argument("--json", action="store_true")
    ap.add_argument("--budget", type=float, default=20.0, help="seconds a repeat at most; points are cut to fit")
    return ap.parse_args(argv)


def main(argv=None):
    o, res = options(argv), []
    for path in o.files:
        data = json.load(open(path))
        ck, ck0 = Circuit(data), Circuit(data, active=False)
        with threadpool_limits(o.threads):
            for kind in (k for k in kinds(ck.N) if o.kind in (k, "both")):
                t = time.perf_counter()
                run(kind, ck, ck0, grid_rad(o.fmin, o.fmax, 2))
                cost = (time.perf_counter() - t) / 2
                points = int(max(2, min(o.points, o.budget / max(cost, 1e-9))))
                us = measure(kind, ck, ck0, grid_rad(o.fmin, o.fmax, points), o.repeat)
                parts = "; ".join(f"{k} {v:.1f}" for k, v in us.items())
                print(f"{data['name']} N={ck.N} {kind} threads={o.threads} points={points}: {parts}; "
                      f"whole job {job_us(us):.1f} us/point", flush=True)
                res.append(dict(name=data["name"], N=ck.N, kind=kind, points=points, us=us, job_us=job_us(us)))
            if ck.N <= MODES_LIMIT and o.modes:
                t = time.perf_counter()
                m = modes(ck)
                print(f"{data['name']} f natural modes (QZ): {(time.perf_counter() - t) * 1e3:.1f} ms, {len(m)} finite, "
                      f"{int((m.real > 0).sum())} in the right half-plane", flush=True)
    if o.json:
        print(json.dumps(res))


if __name__ == "__main__":
    main()
