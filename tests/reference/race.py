#!/usr/bin/env python3
"""Times the numerical core against `engineer.py` on the circuits of `../race`, by turns within one run.

    cargo build --release -p squeg-analyzer --example race
    race.py [--binary PATH] [--rounds 9] [--only NAME,..] [--skip NAME,..] [--json FILE]

Both sides do the whole job a to e of `engineer.py` on one thread. A round runs the binary, then the opponent's best mode
(dense or sparse, found beforehand) on the same circuit; the figure is the median of the ratios of the rounds, with least
and largest. First both sides' results are compared. A conductance or impedance where the opponent itself is not sound
(its residual says so) is not held against either side, but counted. Exit code 1 when results differ or a floor is missed.
"""

import argparse
import json
import os
import pathlib
import subprocess
import sys
import time

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ[name] = "1"

import numpy as np
from threadpoolctl import threadpool_limits

import engineer

ROOT = pathlib.Path(__file__).resolve().parents[2]
# Circuit: (floor of the ratio or None, points of the binary, points of the opponent, points compared).
TABLE = {
    "ladder30": (150, 512, 500, 23),
    "ladderRC60": (None, 512, 500, 23),
    "amp2": (220, 512, 500, 23),
    "amp2tl": (220, 512, 500, 23),
    "ladder200": (320, 512, 100, 23),
    "amp20": (900, 512, 12, 9),
    "mesh1000": (None, 64, 3, 3),
    "mesh5000": (800, 16, 2, 2),
}
LOW_HZ, HIGH_HZ = 1e3, 1e11
RATIO_RTOL, Z_RTOL, Z_FROM_HZ = 1e-6, 1e-6, 1e3
# The opponent's inverse counts as sound where solving anew with its own factors changes it less than this.
SOUND_RTOL = 1e-7


def ours(binary, name, points, repeats, check_hz=()):
    """The JSON line of the example program."""
    command = [binary, ROOT / "tests/race" / f"{name}.json", "--points", str(points), "--repeats", str(repeats)]
    if len(check_hz):
        command += ["--check", ",".join(repr(float(f)) for f in check_hz)]
    done = subprocess.run([str(c) for c in command], capture_output=True, text=True, check=True)
    return json.loads(done.stdout)


def best_kind(ck, ck0, points):
    """The opponent's faster mode, and the cost of each where there is a choice."""
    w = engineer.grid_rad(LOW_HZ, HIGH_HZ, min(points, 100 if ck.N < 500 else 3))
    kinds, cost = engineer.kinds(ck.N), {}
    if len(kinds) == 1:
        return kinds[0], cost
    for kind in kinds:
        engineer.run(kind, ck, ck0, w[:2])
        cost[kind] = engineer.job_us(engineer.measure(kind, ck, ck0, w, 3))
    return min(cost, key=cost.get), cost


def relative(a, b):
    return np.abs(a - b) / np.abs(b)


def polished_z(ck, w):
    """Driving points with one step of iterative refinement of the inverse, in extended precision where it matters."""
    A = ck.dense(np.array([1j * w / engineer.W0_RAD]))[0]
    inv = np.linalg.inv(A)
    wide = np.clongdouble
    residual = np.eye(ck.N, dtype=wide) - A.astype(wide) @ inv.astype(wide)
    fine = inv + inv @ residual.astype(complex)
    return engineer.R0_OHM * np.diagonal(fine)[: ck.n]


def compare(name, ck, ck0, kind, mine):
    """(worst ratio error, worst sound Z error, Z values left out, Z values) over the check points."""
    w = np.array([2 * np.pi * c["hz"] for c in mine["check"]])
    _, out = engineer.run(kind, ck, ck0, w)
    ndf = np.exp(out["ndf"] if "ndf" in out else out["ndf_lemma"])
    worst_ratio = max(relative(complex(*c["ndf"]), v) for c, v in zip(mine["check"], ndf))
    worst_z, left_out, total, worst_left = 0.0, 0, 0, 0.0
    for c, z, f in zip(mine["check"], out["z"], w):
        own = np.array([complex(*v) for v in c["z_ohm"]])
        # A second opinion on the opponent's own inverse, where it fits into memory.
        sound = relative(z, polished_z(ck, f)) < SOUND_RTOL if ck.N <= 250 else np.ones(len(z), bool)
        error = relative(own, z)
        if c["hz"] >= Z_FROM_HZ:
            worst_z = max(worst_z, error[sound].max(initial=0.0))
        worst_left = max(worst_left, error[~sound].max(initial=0.0))
        left_out, total = left_out + int((~sound).sum()), total + len(z)
    return worst_ratio, worst_z, left_out, total, worst_left


def race(name, binary, rounds):
    """One circuit: comparison, then rounds by turns."""
    floor, points, opponent_points, checks = TABLE[name]
    data = json.loads((ROOT / "tests/race" / f"{name}.json").read_text())
    ck, ck0 = engineer.Circuit(data), engineer.Circuit(data, active=False)
    kind, cost = best_kind(ck, ck0, opponent_points)
    check_hz = np.logspace(np.log10(LOW_HZ), np.log10(HIGH_HZ), checks)
    first = ours(binary, name, min(points, 16), 1, check_hz)
    found = compare(name, ck, ck0, kind, first)
    w = engineer.grid_rad(LOW_HZ, HIGH_HZ, opponent_points)
    mine, theirs = [], []
    for _ in range(rounds):
        mine.append(ours(binary, name, points, 5 if ck.N < 700 else 1))
        theirs.append(engineer.measure(kind, ck, ck0, w))
    return report(name, floor, kind, cost, found, mine, theirs)


def report(name, floor, kind, cost, found, mine, theirs):
    """Prints a circuit's lines; its figures."""
    us = np.array([m["us_per_point"] for m in mine])
    det = np.array([m["det_us"] for m in mine])
    job = np.array([engineer.job_us(t) for t in theirs])
    theirs_det = np.array([t["a det"] + t["assemble"] for t in theirs])
    ratio = job / us
    line = dict(
        name=name, unknowns=mine[0]["unknowns"], kind=kind, rounds=len(mine), floor=floor,
        engineer_us=float(np.median(job)), us=float(np.median(us)), ratio=float(np.median(ratio)),
        ratio_min=float(ratio.min()), ratio_max=float(ratio.max()), det_ratio=float(np.median(theirs_det / det)),
        det_us=float(np.median(det)), both_dets_us=float(np.median([m["both_dets_us"] for m in mine])),
        inverse_us=float(np.median([m["inverse_us"] for m in mine])),
        plan_ms=float(np.median([m["plan_ms"] for m in mine])),
        lanes=mine[0]["lanes"], instructions=mine[0]["instructions"], repaired=mine[0]["repaired_lanes"],
        ratio_error=float(found[0]), z_error=float(found[1]), z_left_out=found[2], z_total=found[3],
        agrees=bool(found[0] <= RATIO_RTOL and found[1] <= Z_RTOL),
    )
    line["reached"] = floor is None or line["ratio"] >= floor
    modes = ", ".join(f"{k} {v:.0f}" for k, v in cost.items())
    print(f"{name} ({line['unknowns']}): {line['ratio']:.0f}x ({line['ratio_min']:.0f}..{line['ratio_max']:.0f}), "
          f"floor {floor or '-'}: {'reached' if line['reached'] else 'NOT reached'}; "
          f"{line['engineer_us']:.1f} us {kind} [{modes}] against {line['us']:.3f} us; det {line['det_ratio']:.0f}x")
    print(f"    det {line['det_us']:.3f}, both {line['both_dets_us']:.3f}, inverse {line['inverse_us']:.3f} us, "
          f"plan {line['plan_ms']:.2f} ms, {line['lanes']} lanes, {line['instructions']}, {line['repaired']} lanes repaired; "
          f"worst relative difference: ratio {found[0]:.1e}, Z {found[1]:.1e}"
          f" ({found[2]} of {found[3]} Z left out, off by up to {found[4]:.1e}); "
          f"{'agrees' if line['agrees'] else 'DIFFERS'}", flush=True)
    return line


def main():
    ap = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    ap.add_argument("--binary", default=ROOT / "target/release/examples/race", type=pathlib.Path)
    ap.add_argument("--rounds", type=int, default=9)
    ap.add_argument("--only", default=",".join(TABLE))
    ap.add_argument("--skip", default="")
    ap.add_argument("--json", type=pathlib.Path)
    o = ap.parse_args()
    names = [n for n in o.only.split(",") if n not in o.skip.split(",")]
    start, lines = time.perf_counter(), []
    with threadpool_limits(1):
        for name in names:
            lines.append(race(name, o.binary, o.rounds))
    if o.json:
        o.json.write_text(json.dumps(lines, indent=1) + "\n")
    failed = [x["name"] for x in lines if not (x["agrees"] and x["reached"])]
    print(f"{len(lines) - len(failed)} passed, {len(failed)} failed in {time.perf_counter() - start:.0f} s")
    sys.exit(1 if failed or not lines else 0)


if __name__ == "__main__":
    main()
