#!/usr/bin/env python3
"""Time from a keystroke to its diagnostics through the real server, on an amplifier block of 63 unknowns.

    keystroke.py COMMAND [ARG..]

COMMAND is the language server. 100 value edits, 100 edits of a comment, and a burst of 30 value edits.
For each, the milliseconds to the findings of the text (first publication of a version) and to those of
the screen (second). Times are shown, not judged; judged is that every version that is waited for gets
both publications, that versions never go backwards, and that the last findings are those of a fresh
document with the same text. The last line is `N passed, N failed`. Standard library only.
"""

import pathlib
import sys
import time

from client import LspClient, check, replacing, run_all

URI = "file:///scenario/two_stage.cir"
TEXT = pathlib.Path(__file__).with_name("two_stage.cir").read_text(encoding="utf-8")
COMMENT = "* input: shunt coil"
# Cards whose last word is the value that is typed over.
CARDS = ["Cin ", "Rst ", "Rfb ", "Lis ", "Cgb ", "Rlgb "]


def place(card):
    """Line of a card, and where its value begins and ends."""
    for number, line in enumerate(TEXT.splitlines()):
        if line.startswith(card):
            begin = line.rstrip().rfind(" ") + 1
            return number, begin, len(line.rstrip()), line.rstrip()[begin:]
    raise AssertionError(f"no card {card}")


class Typist:
    """Types edits and keeps the text as the server must have it."""

    def __init__(self, client):
        self.client, self.version, self.lines = client, 1, TEXT.splitlines()
        client.open(URI, TEXT)
        client.wait_version(URI, 1, 2)

    def type_value(self, turn):
        line, begin, _, value = place(CARDS[turn % len(CARDS)])
        now = self.lines[line]
        digits = value.rstrip("abcdefghijklmnopqrstuvwxyz")
        factor = 1 + 0.003 * (turn % 17 + 1)
        new = f"{float(digits) * factor:.6g}{value[len(digits):]}"
        self.replace(line, begin, len(now), new)

    def type_comment(self, turn):
        line = next(k for k, text in enumerate(self.lines) if text.startswith(COMMENT))
        self.replace(line, len(self.lines[line]), len(self.lines[line]), "abc "[turn % 4])

    def replace(self, line, begin, end, text):
        self.version += 1
        self.client.change(URI, self.version, replacing(line, begin, end, text))
        now = self.lines[line]
        self.lines[line] = now[:begin] + text + now[end:]

    def text(self):
        return "\n".join(self.lines) + "\n"


def timed(typist, edit, turns):
    """Milliseconds to the first and to the second publication of each edit."""
    first, second = [], []
    for turn in range(turns):
        begin = time.perf_counter()
        edit(turn)
        typist.client.wait_version(URI, typist.version, 1)
        first.append(1e3 * (time.perf_counter() - begin))
        typist.client.wait_version(URI, typist.version, 2)
        second.append(1e3 * (time.perf_counter() - begin))
    return first, second


def row(name, times):
    times = sorted(times)
    at = lambda share: times[min(len(times) - 1, int(share * len(times)))]
    print(f"{name:<44}{at(0.5):>8.2f}{at(0.95):>8.2f}{times[-1]:>8.2f}")


def findings(publication):
    keys = lambda d: (d["range"]["start"]["line"], d["range"]["start"]["character"], d["code"], d["message"])
    return sorted(map(keys, publication["diagnostics"]))


def check_order_and_result(command, typist):
    versions = [p["version"] for p in typist.client.publications(URI)]
    check(versions == sorted(versions), "versions went backwards")
    last = [p for p in typist.client.publications(URI) if p["version"] == typist.version][-1]
    with LspClient(command) as fresh:
        fresh.initialize()
        fresh.open(URI, typist.text())
        check(findings(fresh.wait_version(URI, 1, 2)) == findings(last), "a fresh document differs")


def edits(command, name, edit_of, turns=100):
    def job():
        with LspClient(command) as client:
            client.initialize()
            typist = Typist(client)
            first, second = timed(typist, edit_of(typist), turns)
            row(f"{name}: findings of the text", first)
            row(f"{name}: findings of the screen", second)
            check_order_and_result(command, typist)

    return name, job


def burst(command):
    def job():
        with LspClient(command) as client:
            client.initialize()
            typist = Typist(client)
            times = []
            for _ in range(10):
                for turn in range(30):
                    begin = time.perf_counter()
                    typist.type_value(turn)
                client.wait_version(URI, typist.version, 2)
                times.append(1e3 * (time.perf_counter() - begin))
            row("after a burst of 30: findings of the screen", times)
            check_order_and_result(command, typist)

    return "burst", job


def main():
    command = sys.argv[1:]
    if not command:
        sys.exit(__doc__)
    print(f"{'milliseconds':<44}{'p50':>8}{'p95':>8}{'max':>8}")
    jobs = [
        edits(command, "value edit", lambda typist: typist.type_value),
        edits(command, "comment edit", lambda typist: typist.type_comment),
        burst(command),
    ]
    sys.exit(run_all(jobs))


if __name__ == "__main__":
    main()
