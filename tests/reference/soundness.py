#!/usr/bin/env python3
"""squeg's count of growing modes against an exact count, on random active circuits and on edge cases.

    soundness.py SQUEG [--count 2000] [--seed N|fresh] [--keep FOLDER] [--hard]

Random circuits (`active_circuits.py`): 5 to 41 unknowns, R C L K G E F H and sensing V cards, resonators of Q up to 1e5;
60 % of them have one gain moved to within 1e-4 .. 1e-1 of a threshold found by bisection on the exact count. Edge cases:
`edge_circuits.py`; with --hard also those beyond what double precision gives without special care. squeg sees only the
netlist files, many a call.

Reference: the netlist is read by `reader.py`, values are the doubles that its decimals mean, and the determinant is an
exact polynomial whose roots are counted with certainty (`exact_modes.py`, `exact_count.py`). Two counts of it that share
nothing but the polynomial must agree: the Sturm chain in rational arithmetic, and the enclosures of all roots, which also
apply squeg's border |Re s| <= 1e-9 |s| of the axis. Where a root off the axis lies inside that border they differ by
definition and the enclosures decide. (Coupled coils: L is the square of the double nearest to its root, so that M keeps
the rank at coupling 1: see `system.py`.) Not covered: an error in the reading or assembling of `reader.py`, `system.py`.

For every circuit `unstable_modes`, `axis_modes` and the verdict must be right and the two counts of squeg must add up; an
`undetermined` verdict is a failure unless the determinant is zero for all s, where it is required. Exit code 1 on any
failure; the last line is `N passed, M failed`.
"""

import argparse
import collections
import json
import pathlib
import random
import subprocess
import sys
import tempfile
import time

from active_circuits import generated, system_of
from edge_circuits import edge_texts
from exact_count import count
from exact_modes import SHIFT, determinant, enclosures, with_tolerance

FILES_A_CALL = 200
Wanted = collections.namedtuple("Wanted", "unstable axis near singular note")


class ReferenceFault(Exception):
    """The two exact counts contradict each other."""


def wanted(p, near):
    """What squeg must find for the determinant p."""
    if p.degree() < 0:
        return Wanted(0, 0, near, True, "")
    right, axis, _ = count(p)
    unstable, within = with_tolerance(p)
    if not (unstable <= right and axis <= within and (within > axis or unstable == right)):
        raise ReferenceFault(f"chain {right}, {axis}; enclosures {unstable}, {within}")
    return Wanted(unstable, within, near, False, "inside the border" if within > axis else "")


def random_texts(rng, number, progress):
    """name -> (text, Wanted), and how many circuits were thrown away."""
    texts, thrown = {}, 0
    for k in range(number):
        name, near = f"buoy{k:05}", rng.random() < 0.6
        text, p, more = generated(rng, name, near)
        texts[name] = text, wanted(p, near)
        thrown += more
        if progress and k % 200 == 199:
            print(f"{k + 1} circuits counted", file=sys.stderr, flush=True)
    return texts, thrown


def screened(squeg, texts):
    """name -> reported block."""
    blocks, names = {}, sorted(texts)
    for start in range(0, len(names), FILES_A_CALL):
        with tempfile.TemporaryDirectory() as folder:
            for name in names[start:start + FILES_A_CALL]:
                pathlib.Path(folder, f"{name}.cir").write_text(texts[name])
            command = [squeg, "lint", "--format", "json", folder]
            run = subprocess.run(command, capture_output=True, text=True, timeout=1200, check=False)
        if run.returncode not in (0, 1):
            raise SystemExit(f"exit code {run.returncode}: {run.stderr.strip()[:500]}")
        blocks.update((block["name"], block) for block in json.loads(run.stdout)["blocks"])
    return blocks


def faults(block, want):
    """What is wrong with a reported block, as a list of sentences."""
    if block is None:
        return ["not reported"]
    verdict = block["verdict"]
    if want.singular:
        right = verdict == "undetermined" and block["why"]
        return [] if right else [f"determinant zero for all s, verdict {verdict}, why {block['why']}"]
    wrong = []
    if verdict == "undetermined":
        wrong.append(f"undetermined: {block['why']}")
    expected = ["unstable"] if want.unstable else ["marginal"] if want.axis else ["stable", "unconditionally-stable"]
    if verdict not in expected:
        wrong.append(f"verdict {verdict}, must be {expected[0]}")
    for key, value in (("unstable_modes", want.unstable), ("axis_modes", want.axis)):
        if block[key] != value:
            wrong.append(f"{key} {block[key]}, exact {value}")
    turns = [block["determinant"][key] for key in ("encirclements", "off_network_unstable")]
    if None not in turns and sum(turns) != want.unstable:
        wrong.append(f"encirclements {turns[0]} + off-network {turns[1]}, exact {want.unstable}")
    return wrong


def roots_near_axis(text):
    """The roots with the smallest |Re s| / |s|, in rad/s, for the report of a failure."""
    p = determinant(system_of(text))
    if p.degree() < 0:
        return ""
    points = [complex(float(d.real.mid()), float(d.imag.mid())) * SHIFT for d, _ in enclosures(p)]
    upper = sorted((s for s in points if s.imag >= 0), key=lambda s: abs(s.real) / abs(s))
    return "roots nearest to the axis, rad/s: " + ", ".join(f"{s:.6g}" for s in upper[:4])


def compare(texts, wants, blocks, keep):
    """Number of circuits with a fault; prints and keeps each."""
    failed = 0
    for name, text in texts.items():
        wrong = faults(blocks.get(name), wants[name])
        if not wrong:
            continue
        failed += 1
        print(f"{name}: {'; '.join(wrong)}; {roots_near_axis(text)}", flush=True)
        if keep:
            pathlib.Path(keep).mkdir(parents=True, exist_ok=True)
            pathlib.Path(keep, f"{name}.cir").write_text(text)
    return failed


def summary(wants, blocks, edges, thrown):
    certified = collections.Counter(str(blocks[n]["determinant"]["certified"]).lower() for n in wants if n in blocks)
    undetermined = sum(blocks[n]["verdict"] == "undetermined" and not w.singular for n, w in wants.items() if n in blocks)
    values = wants.values()
    return (f"{len(wants)} circuits ({edges} edge cases), {sum(w.unstable > 0 for w in values)} unstable, "
            f"{sum(w.axis > 0 for w in values)} with modes on the axis, {sum(w.near for w in values)} beside a threshold, "
            f"{sum(w.singular for w in values)} singular, {sum(bool(w.note) for w in values)} inside the border of the "
            f"axis, {thrown} thrown away\n"
            f"certified {certified['true']}, not certified {certified['false']}, no certificate {certified['none']}; "
            f"undetermined {undetermined}")


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("squeg", help="the program")
    parser.add_argument("--count", type=int, default=2000, help="random circuits")
    parser.add_argument("--seed", default="20261", help="an integer, or `fresh` for that of the clock")
    parser.add_argument("--keep", help="folder for netlists that fail")
    parser.add_argument("--hard", action="store_true", help="also edge cases beyond plain double precision")
    parser.add_argument("--progress", action="store_true")
    options = parser.parse_args()
    seed = time.time_ns() if options.seed == "fresh" else int(options.seed)
    begin = time.monotonic()
    texts = edge_texts(options.hard)
    wants = {name: wanted(determinant(system_of(text)), False) for name, text in texts.items()}
    edges = len(texts)
    made, thrown = random_texts(random.Random(seed), options.count, options.progress)
    texts.update((name, text) for name, (text, _) in made.items())
    wants.update((name, want) for name, (_, want) in made.items())
    counted = time.monotonic()
    blocks = screened(options.squeg, texts)
    screen_s = time.monotonic() - counted
    failed = compare(texts, wants, blocks, options.keep)
    print(summary(wants, blocks, edges, thrown))
    print(f"seed {seed}; exact counts {counted - begin:.0f} s, squeg {screen_s:.1f} s")
    print(f"{len(texts) - failed} passed, {failed} failed")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
