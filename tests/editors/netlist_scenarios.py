#!/usr/bin/env python3
"""What an editor shows of a netlist: findings that stay and move until the new screen is done, their
related places, hover on a node and on a block mark, the outline, included files, open buffers.

    netlist_scenarios.py [--only WORD] COMMAND [ARG..]

COMMAND is the language server. The last line is `N passed, N failed`. Standard library only.
"""

import os
import pathlib
import sys
import tempfile

from client import LspClient, check, is_publication, replacing, run_all

URI = "file:///scenario/osc.cir"
# Colpitts oscillator (textbook: it oscillates above gm R = Cg/Cd, here 2 mS).
OSCILLATOR = """Buoy beacon, oscillator
*~ block osc in=RL
Cg g 0 200p
L1 g d 1u
Cd d 0 100p
RL d 0 1k
G1 d 0 g 0 2.5m
"""
RELATED = {"textDocument": {"publishDiagnostics": {"relatedInformation": True}}}
SCENARIOS = []


def scenario(capabilities=None):
    def register(action):
        SCENARIOS.append((action.__name__, capabilities, True, action))
        return action

    return register


def lines(publication, code):
    return [d["range"]["start"]["line"] for d in publication["diagnostics"] if d.get("code") == code]


def screened(c, uri=URI, version=1):
    """The second publication of a version."""
    c.wait_version(uri, version, 2)
    return [p for p in c.publications(uri) if p.get("version") == version][-1]


@scenario(RELATED)
def unstable_mode_on_its_line_with_related_places(c):
    c.open(URI, OSCILLATOR)
    found = [d for d in screened(c)["diagnostics"] if d["code"] == "unstable-mode"]
    check(len(found) == 1 and found[0]["range"]["start"] == {"line": 6, "character": 0}, f"{found}")
    check(found[0]["severity"] == 1 and found[0]["source"] == "squeg", f"{found}")
    check(found[0]["relatedInformation"], "no related places")
    check("19.5 MHz" in found[0]["message"], found[0]["message"])


@scenario()
def no_related_places_for_a_client_without_them(c):
    c.open(URI, OSCILLATOR)
    for diagnostic in screened(c)["diagnostics"]:
        check("relatedInformation" not in diagnostic, f"{diagnostic}")


@scenario()
def findings_move_with_the_text_and_go_when_cured(c):
    c.open(URI, OSCILLATOR)
    screened(c)
    c.change(URI, 2, replacing(1, 0, 0, "* a note\n"))
    c.wait_version(URI, 2, 1)
    first = [p for p in c.publications(URI) if p.get("version") == 2][0]
    check(lines(first, "unstable-mode") == [7], "the finding does not move with the text")
    check(lines(screened(c, version=2), "unstable-mode") == [7], "the screen disagrees")
    c.change(URI, 3, replacing(7, 11, 15, "1.5m"))
    check(lines(screened(c, version=3), "unstable-mode") == [], "the cure is not seen")


@scenario()
def hover_on_a_node_and_on_a_block(c):
    c.open(URI, OSCILLATOR)
    screened(c)
    text = c.reply(c.hover(URI, 2, 3))["result"]["contents"]["value"]
    check("node g" in text and "driving-point conductance" in text, text)
    check(any(sign in text for sign in "▁▂▃▄▅▆▇█"), "no curve is drawn")
    text = c.reply(c.hover(URI, 1, 12))["result"]["contents"]["value"]
    check("block osc: unstable" in text and "does not replace" in text, text)
    check(c.reply(c.hover(URI, 0, 0))["result"] is None, "the title has a hover")


@scenario()
def outline(c):
    c.open(URI, OSCILLATOR + ".subckt s a b\nR1 a b 1\n.ends\nX1 d 0 s\n")
    found = c.request("textDocument/documentSymbol", {"textDocument": {"uri": URI}})["result"]
    names = [symbol["name"] for symbol in found]
    check(names == ["osc", "Cg", "L1", "Cd", "RL", "G1", "s", "X1"], f"{names}")
    check([s["name"] for s in found[6]["children"]] == ["R1"], "nothing inside the subcircuit")


@scenario()
def included_files_and_open_buffers(c):
    with tempfile.TemporaryDirectory() as folder:
        part = pathlib.Path(folder, "part.inc")
        part.write_text(".subckt s a\nR1 a 0 10M\n.ends\n")
        main = pathlib.Path(folder, "main.cir")
        text = "t\n.include 'part.inc'\nX1 a s\nR2 a 0 1\n"
        main.write_text(text)
        uri, inner = main.as_uri(), part.as_uri()
        c.open(uri, text)
        c.wait_for(lambda m: is_publication(m, inner) and lines(m["params"], "milli-or-mega") == [1])
        # The open buffer overrides the disk.
        c.open(inner, ".subckt s a\nR1 a 0 10\n.ends\n")
        c.wait_for(lambda m: is_publication(m, inner) and m["params"]["diagnostics"] == [])
        check(os.path.exists(part), "the file is gone")


@scenario()
def stale_work_is_dropped(c):
    stages = "".join(f"G{k} n{k} 0 n{k - 1} 0 1m\nR{k} n{k} 0 1k\nC{k} n{k} 0 1p\n" for k in range(1, 200))
    text = "t\n*~ block chain in=n0 out=n199\n" + stages
    c.open(URI, text)
    for version in range(2, 40):
        c.change(URI, version, replacing(2, 0, 0, " "))
    screened(c, version=39)
    versions = [p.get("version") for p in c.publications(URI)]
    check(versions == sorted(versions), f"versions went backwards: {versions}")


def run_scenario(command, capabilities, action):
    with LspClient(command) as client:
        client.initialize(capabilities)
        action(client)


def main():
    arguments = sys.argv[1:]
    only = ""
    if arguments[:1] == ["--only"] and len(arguments) > 1:
        only, arguments = arguments[1], arguments[2:]
    if not arguments:
        sys.exit(__doc__)
    jobs = [
        (name, lambda c=capabilities, a=action: run_scenario(arguments, c, a))
        for name, capabilities, _, action in SCENARIOS
        if only in name
    ]
    return run_all(jobs)


if __name__ == "__main__":
    sys.exit(main())
