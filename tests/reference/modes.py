#!/usr/bin/env python3
"""Compares the natural modes that `squeg lint` reports with an independent computation; see README.md beside this file.

    modes.py --squeg PATH FOLDER_OR_FILES...   compare; the last line is `N passed, M failed`, exit code 1 on a failure
    modes.py --dump FILE...                    the reference's own modes as JSON, without a binary
    modes.py --cases FOLDER                    check the reference itself against cases with a known answer
"""

import argparse
import json
import math
import pathlib
import subprocess
import sys
import time
import tomllib

import numpy as np

from natural_modes import COUNT_TOLERANCE_RAD, NotCertified, check_argument, natural_modes
from degree import SingularPencil
from reader import Netlist, NetlistError
from system import System

SUFFIXES = {".cir", ".ckt", ".net", ".iss"}
FREQUENCY_RTOL, GROWTH_RTOL = 1e-6, 1e-4
TROUBLE = (NetlistError, NotCertified, SingularPencil, ArithmeticError, ValueError, np.linalg.LinAlgError)


def reference(text):
    """[(block name, System, Modes, deviation of the dense route in rad)] for every block of a text; a text without a
    block mark counts as one nameless block without terminations."""
    netlist = Netlist(text)
    result = []
    for block in netlist.blocks or [None]:
        system = System(netlist.parts, block)
        found = natural_modes(system)
        deviation = check_argument(system, found)
        if deviation > COUNT_TOLERANCE_RAD:
            raise NotCertified(f"dense determinant deviates by {deviation:.2g} from the product over the modes")
        result.append((block.name if block else "", system, found, deviation))
    return result


def entries(modes):
    """One (hz, growth_per_s) per real mode or conjugate pair, growth falling."""
    upper = modes[modes.imag >= 0]
    return sorted(((z.imag / (2 * math.pi), z.real) for z in upper), key=lambda e: -e[1])


def dump(paths):
    """JSON of all blocks of the given files."""
    blocks = []
    for path in paths:
        for name, system, found, deviation in reference(path.read_text(errors="replace")):
            unstable = found.unstable()
            blocks.append({
                "file": str(path), "name": name, "unknowns": system.size, "finite_modes": found.finite,
                "zero_modes": found.at_zero, "unstable_modes": len(unstable), "axis_modes": len(found.on_axis()),
                "worst_radius_relative": float(np.max(found.radii / np.abs(found.modes), initial=0.0)),
                "dense_route_rad": deviation,
                "modes": [{"hz": f, "growth_per_s": g, "damping": -g / math.hypot(g, 2 * math.pi * f)}
                          for f, g in entries(found.modes)],
            })
    return blocks


def report_of(squeg, path):
    """The parsed JSON that the program prints for one file."""
    run = subprocess.run([squeg, "lint", "--format", "json", str(path)], capture_output=True, text=True, timeout=120)
    if run.returncode not in (0, 1):
        raise ValueError(f"exit code {run.returncode}: {run.stderr.strip()[:200]}")
    return json.loads(run.stdout)


def differences(found, block):
    """What is wrong with one reported block, as a list of sentences."""
    wrong = []
    expected = len(found.unstable())
    if block["unstable_modes"] != expected:
        wrong.append(f"unstable_modes {block['unstable_modes']}, reference {expected}")
    turns = block["determinant"]
    if turns["encirclements"] is None or turns["off_network_unstable"] is None:
        wrong.append("determinant counts are null")
    elif turns["encirclements"] + turns["off_network_unstable"] != expected:
        wrong.append(f"encirclements {turns['encirclements']} + off-network {turns['off_network_unstable']}, not {expected}")
    left = [(m["hz"], m["growth_per_s"]) for m in block["modes"]]
    for hz, growth in entries(found.unstable()):
        size_hz = math.hypot(hz, growth / (2 * math.pi))
        near = [m for m in left
                if abs(m[0] - hz) <= FREQUENCY_RTOL * (hz if hz else size_hz) and abs(m[1] - growth) <= GROWTH_RTOL * growth]
        if near:
            left.remove(min(near, key=lambda m: abs(m[0] - hz)))
        else:
            wrong.append(f"no mode at {hz:.9g} Hz growing at {growth:.6g} 1/s")
    wrong += [f"extra unstable mode at {hz:.9g} Hz growing at {growth:.6g} 1/s"
              for hz, growth in left if growth > 1e-9 * math.hypot(growth, 2 * math.pi * hz)]
    return wrong


def compare(squeg, path):
    """(unknowns, unstable modes, list of differences) for one file."""
    try:
        blocks = reference(path.read_text(errors="replace"))
    except TROUBLE as error:
        return 0, 0, [f"reference: {error}"]
    unknowns = max(system.size for _, system, _, _ in blocks)
    unstable = sum(len(found.unstable()) for _, _, found, _ in blocks)
    try:
        reported = {block["name"].lower(): block for block in report_of(squeg, path)["blocks"]}
        wrong = []
        for name, _, found, _ in blocks:
            wrong += differences(found, reported[name]) if name in reported else [f"block {name!r} is not reported"]
    except (OSError, KeyError, TypeError, ValueError, subprocess.TimeoutExpired) as error:
        wrong = [f"program: {type(error).__name__} {error}"]
    return unknowns, unstable, wrong


def files_of(arguments):
    """The files named, and those in the folders named, sorted."""
    found = []
    for argument in arguments:
        if argument.is_dir():
            found += sorted(p for p in argument.rglob("*") if p.suffix in SUFFIXES)
        else:
            found.append(argument)
    return found


def run_comparison(squeg, paths):
    failed, files = 0, files_of(paths)
    print(f"{'file':40} {'unknowns':>8} {'unstable':>8} {'ms':>7}  result")
    for path in files:
        start = time.monotonic()
        unknowns, unstable, wrong = compare(squeg, path)
        elapsed = 1e3 * (time.monotonic() - start)
        print(f"{path.name:40} {unknowns:8} {unstable:8} {elapsed:7.0f}  {'; '.join(wrong) or 'same'}", flush=True)
        failed += bool(wrong)
    print(f"{len(files) - failed} passed, {failed} failed")
    return 1 if failed or not files else 0


def edited(text, edit):
    """The cards of a case after its `edit`."""
    lines = []
    for line in text.strip().splitlines():
        words = line.split()
        if words[0] in edit.get("del", []):
            continue
        if words[0] in edit.get("set", {}):
            words[-1] = edit["set"][words[0]]
        lines.append(" ".join(words))
    return "\n".join(lines + edit.get("add", [])) + "\n"


def check_expectation(text, expect):
    """None if the reference meets one expectation (or it is not about modes), else a sentence."""
    value, quantity = expect.get("value"), expect["quantity"]
    _, _, found, _ = reference(edited(text, expect.get("edit", {})))[0]
    if quantity in ("mode", "growth_mode"):
        want = complex(*value)
        near = [z for z in found.modes if z.imag >= 0]
        got = max(near, key=lambda z: z.real) if quantity == "growth_mode" else min(near, key=lambda z: abs(z - want))
        good = abs(got - want) <= 1e-11 * abs(want)
    else:
        unstable, axis = len(found.unstable()), len(found.on_axis())
        got = {"rhp_modes": unstable, "axis_modes": axis, "zero_modes": found.at_zero, "finite_modes": found.finite,
               "verdict": "unstable" if unstable else "marginal" if axis else "stable"}[quantity]
        good = got == value
    return None if good else f"{quantity} {expect.get('edit', '')}: {got}, expected {value}"


def run_cases(folder):
    """Expectations about modes of every lumped case in a folder."""
    about = {"mode", "growth_mode", "rhp_modes", "axis_modes", "zero_modes", "finite_modes", "verdict"}
    passed = failed = 0
    for path in sorted(folder.glob("*.toml")):
        case = tomllib.loads(path.read_text())
        if any(line[:1] in "Tt" for line in case.get("netlist", "T").splitlines()):
            continue
        for expect in case["expect"]:
            if expect["quantity"] not in about:
                continue
            try:
                wrong = check_expectation(case["netlist"], expect)
            except TROUBLE as error:
                wrong = f"{expect['quantity']}: {error}"
            passed, failed = passed + (not wrong), failed + bool(wrong)
            if wrong:
                print(f"{case['id']}: {wrong}")
    print(f"{passed} passed, {failed} failed")
    return 1 if failed or not passed else 0


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--squeg", metavar="PATH", help="the program to compare with")
    parser.add_argument("--dump", action="store_true", help="print the reference's own modes as JSON")
    parser.add_argument("--cases", action="store_true", help="the paths are folders of cases with known answers")
    parser.add_argument("paths", nargs="+", type=pathlib.Path)
    options = parser.parse_args()
    if options.dump:
        print(json.dumps(dump(files_of(options.paths)), indent=1))
        return 0
    if options.cases:
        return max(run_cases(folder) for folder in options.paths)
    if not options.squeg:
        parser.error("one of --squeg, --dump, --cases is needed")
    return run_comparison(options.squeg, options.paths)


if __name__ == "__main__":
    sys.exit(main())
