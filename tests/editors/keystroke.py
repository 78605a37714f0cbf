#!/usr/bin/env python3
"""Time from a keystroke to its diagnostics, through the real server on a block of 63 unknowns.

    keystroke.py SQUEG.. serve

Types 100 value edits, 100 edits of a comment, and bursts of 30 of either that wait for nothing, and
shows the milliseconds from sending a change to the first publication of its version (findings of the
text) and to the last (those of the screen). Times are shown, never judged. Judged is that the block
is the one described, that every version waited for gets exactly two publications, that versions never
go backwards, and that the last findings are those of `lint` for the same text. The last line is
`N passed, N failed`; the exit code is 1 when something failed. Standard library only.
"""

import json
import re
import subprocess
import sys
import time

from client import LONG, LspClient, check, is_publication, replacing, run_all

URI = "file:///scenario/telemetry_driver.cir"
UNKNOWNS = 63
EDITS = 100
BURSTS = 20
BURST_EDITS = 30
COMMENT = "* note:"
# The parts whose value is typed over, in turn: match, stopper, device, feedback, feed, bypass.
PARTS = ["Lm2", "Rst2", "Cgs2", "Rf1", "Lf3", "Cda1", "Gm2"]


# --------------------------------------------------------------------------- the netlist


def device(k, gate, drain, gm, cgs, cgd, rds):
    """A transistor with its access resistances and lead inductances; source lead to ground."""
    return [
        f"* device of stage {k}",
        f"Lg{k} {gate} ga{k} 0.35n",
        f"Rg{k} ga{k} gi{k} 1.2",
        f"Cgs{k} gi{k} x{k} {cgs}",
        f"Ri{k} x{k} si{k} 1.6",
        f"Cgd{k} gi{k} di{k} {cgd}",
        f"Gm{k} di{k} si{k} gi{k} x{k} {gm}",
        f"Rds{k} di{k} si{k} {rds}",
        f"Cds{k} di{k} si{k} 0.3p",
        f"Rd{k} di{k} da{k} 0.8",
        f"Ld{k} da{k} {drain} 0.3n",
        f"Rs{k} si{k} sa{k} 0.3",
        f"Ls{k} sa{k} 0 0.05n",
    ]


def rung(name, node, farads, esr_ohm, esl_h):
    """A bypass capacitor with its series resistance and inductance."""
    return [
        f"C{name} {node} {name}r {farads}",
        f"R{name} {name}r {name}l {esr_ohm}",
        f"L{name} {name}l 0 {esl_h}",
    ]


def feed(k, node, rail, henries, damping_ohm):
    """A bias choke and the resistor that damps it."""
    return [f"Lf{k} {node} {rail} {henries}", f"Rf{k}p {node} {rail} {damping_ohm}"]


def two_stage():
    """The netlist: input match, two devices with feeds and bypass ladders, output match, supply."""
    parts = [
        ["Telemetry driver of the ocean-buoy radio, 402 MHz (invented)"],
        ["*~ block telemetry_driver in=in out=out band=400meg..406meg"],
        [COMMENT],
        ["* input match and gate feed", "Cin in m1 120p", "Lm1 m1 b1 6.8n", "Rst1 b1 g1 8.2"],
        feed(1, "b1", "vg1", "100n", "470"),
        rung("gb1", "vg1", "180p", "0.12", "0.4n"),
        ["Rvg1 vg1 0 1.8k"],
        device(1, "g1", "d1", "90m", "1.4p", "0.12p", "220"),
        ["* drain feed and bypass ladder, feedback round the first device"],
        feed(2, "d1", "vd1", "68n", "330"),
        rung("da1", "vd1", "150p", "0.1", "0.35n"),
        ["Rq1 vd1 vq1 4.7"],
        rung("db1", "vq1", "100n", "0.03", "0.7n"),
        ["Rr1 vq1 rail 10", "Rf1 d1 f1 560", "Cf1 f1 b1 100p"],
        ["* interstage match, stopper and the second gate feed", "Cis d1 m2 22p", "Lm2 m2 b2 4.7n", "Rst2 b2 g2 5.6"],
        feed(3, "b2", "vg2", "82n", "220"),
        rung("gb2", "vg2", "220p", "0.1", "0.4n"),
        ["Rvg2 vg2 0 1.5k"],
        device(2, "g2", "d2", "180m", "2.8p", "0.22p", "120"),
        ["* output feed, bypass, match"],
        feed(4, "d2", "rail", "47n", "270"),
        rung("da2", "rail", "150p", "0.1", "0.35n"),
        ["Cout d2 out 47p", "Cpo out 0 2.2p", "Rbl out 0 10k"],
        ["* reservoir, then the bead to the supply"],
        rung("res", "rail", "10u", "0.35", "1.5n"),
        ["Lsup rail sup 60n", "Rsup rail sup 33", "Vdd sup 0 5", ".end"],
    ]
    return "\n".join(line for lines in parts for line in lines) + "\n"


# --------------------------------------------------------------------------- the session


class Arrivals(list):
    """Messages with the time at which each was read, taken before any waiting thread wakes."""

    def __init__(self):
        super().__init__()
        self.seconds = []

    def append(self, message):
        self.seconds.append(time.perf_counter())
        super().append(message)


class Typist:
    """Types edits and keeps the text as the server must have it."""

    def __init__(self, command):
        # Nothing is read until the list that keeps the times is in place.
        self.client = LspClient(command, reading=False)
        self.client.received = Arrivals()
        self.client.start_reading()
        self.lines, self.version, self.turn, self.awaited = two_stage().split("\n"), 1, 0, [1]
        self.nominal = {part: self.card(part).split()[-1] for part in PARTS}

    def __enter__(self):
        self.client.initialize()
        self.client.open(URI, self.text())
        self.client.wait_version(URI, 1, 2)
        return self

    def __exit__(self, *error):
        self.client.__exit__(*error)

    def text(self):
        return "\n".join(self.lines)

    def place(self, start):
        return next(k for k, line in enumerate(self.lines) if line.startswith(start))

    def card(self, part):
        return self.lines[self.place(part + " ")]

    def type_value(self):
        """Replaces the number of a part; no text is ever typed twice, so that no result is at hand."""
        self.turn += 1
        part = PARTS[self.turn % len(PARTS)]
        line, old = self.place(part + " "), self.card(part).split()[-1]
        digits, unit = re.fullmatch(r"([0-9.]+)([a-z]*)", self.nominal[part]).groups()
        number = re.match("[0-9.]+", old).group()
        start = len(self.lines[line]) - len(old)
        # Between 0.97 and 1.03 of the nominal value: 1009 is prime, so the steps do not repeat.
        share = 0.97 + 0.06 * (self.turn * 397 % 1009) / 1009
        return self.replace(line, start, start + len(number), f"{float(digits) * share:.7f}")

    def type_comment(self):
        self.turn += 1
        line = self.place(COMMENT)
        return self.replace(line, len(COMMENT), len(self.lines[line]), f" bench log entry {self.turn}")

    def replace(self, line, start, end, text):
        """Sends the change; returns the time just before."""
        self.version += 1
        before = self.lines[line]
        self.lines[line] = before[:start] + text + before[end:]
        begin = time.perf_counter()
        self.client.change(URI, self.version, replacing(line, start, end, text))
        return begin

    def result(self, begin, since):
        """Milliseconds from `begin` to both publications of the present version."""
        of_version = lambda m: is_publication(m, URI) and m["params"].get("version") == self.version
        first = self.client.wait_for(of_version, LONG, since)
        last = self.client.wait_for(lambda m: m is not first and of_version(m), LONG, since)
        self.awaited.append(self.version)
        with self.client.news:
            seconds = self.client.received.seconds
            at = [k for k in range(since, len(seconds)) if any(self.client.received[k] is m for m in (first, last))]
        return tuple(1e3 * (seconds[k] - begin) for k in at)


# --------------------------------------------------------------------------- measuring


def one_by_one(typist, edit):
    times = []
    for _ in range(EDITS):
        since = typist.client.mark()
        times.append(typist.result(edit(), since))
    return times


def in_bursts(typist, edit):
    """Times from the last edit of each burst."""
    times = []
    for _ in range(BURSTS):
        since = typist.client.mark()
        for _ in range(BURST_EDITS):
            begin = edit()
        times.append(typist.result(begin, since))
    return times


def figures(times):
    """p50, p95 and maximum; a percentile is the least time that covers its share (nearest rank)."""
    times = sorted(times)
    rank = lambda percent: times[-(-percent * len(times) // 100) - 1]
    return rank(50), rank(95), times[-1]


def show(name, value_times, comment_times):
    for step, title in enumerate(("first publication", "last publication")):
        row = [figures([t[step] for t in times]) for times in (value_times, comment_times)]
        print(f"{name + ', ' + title:<38}" + "".join(f"{ms:>9.2f}" for three in row for ms in three), flush=True)


def head():
    print(f"{'milliseconds':<38}{'value edit':>27}{'comment edit':>27}")
    print(" " * 38 + "".join(f"{word:>9}" for word in ("p50", "p95", "max") * 2))


# --------------------------------------------------------------------------- judging


def lint(command, text):
    """What a fresh run of the command line says of a text."""
    run = [*command[:-1], "lint", "--format", "json", "--as", URI.rsplit("/", 1)[1], "-"]
    done = subprocess.run(run, input=text.encode(), stdout=subprocess.PIPE, timeout=LONG)
    check(done.returncode in (0, 1), f"lint ended with {done.returncode}")
    return json.loads(done.stdout)


def linted(command, text):
    """Rule, message and line (from 0) of every finding."""
    found = lint(command, text)["findings"]
    return sorted((f["rule"], f["message"], f["range"]["start"]["line"] - 1) for f in found)


def published(publication):
    found = publication["diagnostics"]
    return sorted((d["code"], d["message"], d["range"]["start"]["line"]) for d in found)


def judge(command, typist):
    # The reply to a later request: whatever the server still had to say of the text has been said.
    time.sleep(0.2)
    check("error" not in typist.client.reply(typist.client.hover(URI)), "hover fails")
    publications = typist.client.publications(URI)
    versions = [p.get("version") for p in publications]
    check(versions == sorted(versions), "versions went backwards")
    odd = [version for version in typist.awaited if versions.count(version) != 2]
    check(not odd, f"not two publications of the versions {odd[:10]}")
    check(versions[-1] == typist.version, f"the last is {versions[-1]}, not {typist.version}")
    fresh, shown = linted(command, typist.text()), published(publications[-1])
    check(shown == fresh, f"shown {shown}, but lint says {fresh}")


def block_as_described(command):
    """The block has its size, is stable, and has findings that move with its values."""
    result = lint(command, two_stage())
    found = [(b["unknowns"], b["verdict"]) for b in result["blocks"]]
    check(found == [(UNKNOWNS, "stable")], f"unknowns and verdict: {found}")
    check([f for f in result["findings"] if f["block"]], "no finding of the screen to compare")


def session(command, measure, edit, kept, name):
    with Typist(command) as typist:
        before = published(typist.client.wait_version(URI, 1, 2))
        kept[edit] = measure(typist, lambda: edit(typist))
        if len(kept) == 2:
            show(name, kept[Typist.type_value], kept[Typist.type_comment])
        judge(command, typist)
        after = published(typist.client.publications(URI)[-1])
        # A server that repeats its first answer would otherwise pass as a fast one.
        changed = before != after
        check(changed == (edit is Typist.type_value), f"the findings changed: {changed}")


def main():
    command = sys.argv[1:]
    if len(command) < 2 or command[-1] != "serve":
        sys.exit(__doc__)
    jobs = [("the block", lambda: block_as_described(command))]
    for name, measure in (("each edit", one_by_one), (f"last of {BURST_EDITS}", in_bursts)):
        kept = {}
        for kind, edit in (("value", Typist.type_value), ("comment", Typist.type_comment)):
            job = lambda m=measure, e=edit, k=kept, n=name: session(command, m, e, k, n)
            jobs.append((f"{name}, {kind}", job))
    head()
    return run_all(jobs)


if __name__ == "__main__":
    sys.exit(main())
