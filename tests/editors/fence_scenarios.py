#!/usr/bin/env python3
"""What an editor is promised about documents and publications, as scenarios with plain netlists.

    fence_scenarios.py [--only WORD] COMMAND [ARG..]

COMMAND is the language server. The last line is `N passed, N failed`. Standard library only.
"""

import json
import sys

from client import LONG, TEXT, LspClient, check, check_alive, code_of, is_publication, replacing, run_all, timed

URI = "file:///scenario/stage.cir"
SCENARIOS = []

# A call of a subcircuit that nobody defines, hidden in a comment behind characters that every
# encoding counts differently: 1 + 1 + 2 + 1 UTF-16 units, 1 + 2 + 4 + 3 bytes, 4 scalar values.
HIDDEN_PREFIX = "*é😀€"
HIDDEN_CALL = "* title\nR1 a 0 1k\nR2 a 0 1k\n" + HIDDEN_PREFIX + "X1 a 0 nosuch\n.end\n"
PREFIX_UNITS = {"utf-16": 5, "utf-8": 10, "utf-32": 4}


def scenario(capabilities=None, start=True):
    def register(action):
        SCENARIOS.append((action.__name__, capabilities, start, action))
        return action

    return register


def codes(publication):
    return [diagnostic.get("code") for diagnostic in publication["diagnostics"]]


def finish(client, uri=URI):
    """Ends the session; returns all publications of the document, none can follow."""
    code, seconds = client.shut_down()
    check(code == 0 and seconds < 1, f"exit code {code} after {seconds:.2f} s")
    with client.news:
        client.news.wait_for(lambda: client.ended, LONG)
    return client.publications(uri)


def check_versions(publications, sent):
    """Every publication carries a version that was sent, and they never go backwards."""
    versions = [publication.get("version") for publication in publications]
    check(None not in versions, f"a publication carries no version: {versions}")
    check(set(versions) <= set(sent), f"versions never sent: {sorted(set(versions) - set(sent))}")
    check(versions == sorted(versions), f"versions went backwards: {versions}")
    return versions


def offering(*encodings):
    return {"general": {"positionEncodings": list(encodings)}}


@scenario()
def two_publications_per_version(c):
    c.open(URI)
    c.wait_version(URI, 1, 2)
    c.change(URI, 2, replacing(2, 9, 10, "2"))
    c.wait_version(URI, 2, 2)
    versions = check_versions(finish(c), [1, 2])
    check(versions == [1, 1, 2, 2], f"publications of versions {versions}")


@scenario()
def rapid_edits_100(c):
    c.open(URI)
    sent = list(range(1, 102))
    for version in sent[1:]:
        c.change(URI, version, replacing(2, 9, 10, str(version % 9 + 1)))
    _, seconds = timed(lambda: c.wait_version(URI, 101, 2))
    print(f"      last version published {seconds * 1e3:.0f} ms after the last edit")
    check_alive(c, URI)
    versions = check_versions(finish(c), sent)
    check(versions[-1] == 101, f"the last publication is for version {versions[-1]}")
    check(versions.count(101) == 2, f"{versions.count(101)} publications for the last version")
    print(f"      {len(versions)} publications in all")


@scenario()
def rapid_edits_in_two_documents(c):
    others = [URI, "untitled:second"]
    for uri in others:
        c.open(uri)
    for version in range(2, 52):
        for uri in others:
            c.change(uri, version, replacing(2, 9, 10, str(version % 9 + 1)))
    for uri in others:
        c.wait_version(uri, 51, 2)
    finish(c)
    for uri in others:
        check(check_versions(c.publications(uri), range(1, 52))[-1] == 51, f"{uri}: not the last version")


@scenario()
def versions_may_have_gaps(c):
    c.open(URI, version=7)
    c.change(URI, 1000, replacing(2, 9, 10, "2"))
    c.wait_version(URI, 1000, 2)
    check_versions(finish(c), [7, 1000])


@scenario()
def untitled_document(c):
    uri = "untitled:Untitled-1"
    c.open(uri, HIDDEN_CALL.replace(HIDDEN_PREFIX, ""))
    check("unknown-subcircuit" in codes(c.wait_version(uri, 1, 2)), "the text is analysed")


@scenario()
def language_and_extension_do_not_matter(c):
    uri = "memory:/no-extension"
    item = {"uri": uri, "languageId": "whatever", "version": 3, "text": HIDDEN_CALL.replace(HIDDEN_PREFIX, "")}
    c.notify("textDocument/didOpen", {"textDocument": item})
    check("unknown-subcircuit" in codes(c.wait_version(uri, 3, 2)), "the text is analysed")


@scenario()
def uri_is_echoed_byte_for_byte(c):
    uris = [
        "file:///does/not/exist.cir",
        "file:///c%3A/boards/stage.cir",
        "file:///C:/boards/stage.cir",
        "file:///tmp/with%20space.cir",
        "file:///tmp/with space.cir",
        "file:///tmp/%C3%BC.cir",
        "file:///tmp/ü2.cir",
        "file://localhost/tmp/host.cir",
        "file://server/share/stage.cir",
        "file:///tmp/a/../dots.cir",
        "FILE:///tmp/upper.cir",
        "file:///tmp/%7Etilde.cir",
        "untitled:Untitled-2",
        "untitled:/tmp/new.cir",
        "git:/tmp/stage.cir?%7B%22ref%22%3A%22HEAD%22%7D",
        "vscode-notebook-cell:/tmp/book.ipynb#W0sZmlsZQ%3D%3D",
        "Untitled-3",
    ]
    for uri in uris:
        c.open(uri)
        c.wait_version(uri, 1, 2)
        c.change(uri, 2, replacing(2, 9, 10, "2"))
        c.wait_version(uri, 2, 2)
    seen = {m["params"]["uri"] for m in c.received if m.get("method") == "textDocument/publishDiagnostics"}
    check(seen <= set(uris), f"spellings the client never used: {sorted(seen - set(uris))}")


@scenario()
def close_publishes_an_empty_list(c):
    c.open(URI, HIDDEN_CALL.replace(HIDDEN_PREFIX, ""))
    check(c.wait_version(URI, 1, 2)["diagnostics"], "there is something to clear")
    since = c.mark()
    c.notify("textDocument/didClose", {"textDocument": {"uri": URI}})
    c.wait_for(lambda m: is_publication(m, URI) and m["params"]["diagnostics"] == [], since=since)
    check(finish(c)[-1]["diagnostics"] == [], "findings came back after the document was closed")


@scenario()
def close_right_after_an_edit(c):
    for round_ in range(20):
        c.open(URI, HIDDEN_CALL.replace(HIDDEN_PREFIX, ""), version=10 * round_ + 1)
        c.change(URI, 10 * round_ + 2, replacing(1, 7, 8, "2"))
        c.notify("textDocument/didClose", {"textDocument": {"uri": URI}})
    c.open("untitled:after")
    c.wait_version("untitled:after", 1, 2)
    check(finish(c)[-1]["diagnostics"] == [], "findings of a closed document stay")


@scenario()
def open_again_with_a_lower_version(c):
    c.open(URI, version=9)
    c.wait_version(URI, 9, 2)
    c.notify("textDocument/didClose", {"textDocument": {"uri": URI}})
    c.open(URI, HIDDEN_CALL.replace(HIDDEN_PREFIX, ""), version=1)
    check("unknown-subcircuit" in codes(c.wait_version(URI, 1, 2)), "the new text counts")


@scenario()
def full_text_change(c):
    c.open(URI)
    check("unknown-subcircuit" not in codes(c.wait_version(URI, 1, 2)), "the first text is fine")
    c.change(URI, 2, {"text": HIDDEN_CALL.replace(HIDDEN_PREFIX, "")})
    check("unknown-subcircuit" in codes(c.wait_version(URI, 2, 2)), "the new text counts")
    c.change(URI, 3, {"text": TEXT})
    check("unknown-subcircuit" not in codes(c.wait_version(URI, 3, 2)), "and the next")


@scenario()
def full_text_between_ranges(c):
    c.open(URI)
    whole = {"text": HIDDEN_CALL.replace(HIDDEN_PREFIX, "*")}
    c.change(URI, 2, replacing(0, 0, 1, "zz"), whole, replacing(3, 0, 1, ""))
    check("unknown-subcircuit" in codes(c.wait_version(URI, 2, 2)), "changes apply one after the other")


@scenario()
def positions_beyond_the_text_are_clamped(c):
    c.open(URI)
    c.change(URI, 2, replacing(10**6, 0, 10**9, "* tail\n"))
    c.change(URI, 3, replacing(0, 10**9, 10**9, " more"))
    c.change(URI, 4, {"range": {"start": {"line": 4, "character": 3}, "end": {"line": 1, "character": 0}}, "text": ""})
    c.change(URI, 5, {"text": HIDDEN_CALL.replace(HIDDEN_PREFIX, "")})
    check("unknown-subcircuit" in codes(c.wait_version(URI, 5, 2)), "the server is in step again")


@scenario()
def messages_about_unknown_documents(c):
    c.change("file:///never/opened.cir", 2, replacing(0, 0, 1, "x"))
    c.notify("textDocument/didClose", {"textDocument": {"uri": "file:///never/opened.cir"}})
    c.notify("textDocument/didSave", {"textDocument": {"uri": "file:///never/opened.cir"}})
    check(code_of(c.reply(c.hover("file:///never/opened.cir"))) != -32603, "hover fails inside")
    c.open(URI)
    c.open(URI, version=2)
    c.wait_version(URI, 2, 2)


def negotiation(client, offered, expected):
    chosen = client.initialize(offered)["capabilities"].get("positionEncoding", "utf-16")
    check(chosen == expected, f"the server chose {chosen}")
    # Uncovering the hidden call needs the agreed unit: any other cuts the line elsewhere.
    client.open(URI, HIDDEN_CALL)
    check("unknown-subcircuit" not in codes(client.wait_version(URI, 1, 2)), "the call is a comment")
    client.change(URI, 2, replacing(3, 0, PREFIX_UNITS[chosen], ""))
    publication = client.wait_version(URI, 2, 2)
    check("unknown-subcircuit" in codes(publication), f"codes {codes(publication)}")


@scenario(start=False)
def encoding_utf8_when_offered(c):
    negotiation(c, offering("utf-16", "utf-8", "utf-32"), "utf-8")


@scenario(start=False)
def encoding_utf8_when_offered_alone(c):
    negotiation(c, offering("utf-8"), "utf-8")


@scenario(start=False)
def encoding_utf16_when_offered_alone(c):
    negotiation(c, offering("utf-16"), "utf-16")


@scenario(start=False)
def encoding_utf16_when_nothing_is_offered(c):
    negotiation(c, {}, "utf-16")


@scenario()
def every_diagnostic_is_labelled(c):
    c.open(URI, HIDDEN_CALL.replace(HIDDEN_PREFIX, ""))
    publication = c.wait_version(URI, 1, 2)
    check(publication["diagnostics"], "there is a finding")
    for diagnostic in publication["diagnostics"]:
        label = json.dumps(diagnostic)
        check(diagnostic.get("source") == "squeg", f"source: {label}")
        check(diagnostic.get("severity") in (1, 2, 3), f"severity: {label}")
        code = diagnostic.get("code")
        check(isinstance(code, str) and code == code.lower() and " " not in code, f"code: {label}")
        check("\n" not in diagnostic["message"] and diagnostic["message"], f"message: {label}")


@scenario()
def odd_texts_are_survived(c):
    texts = ["", "\n", "\ufeff* bom\r\nR1 a 0 1k\r", "\x00\x01\x0b\x0c\x85\u2028\u2029", "R" * 300_000, "+\n" * 20_000, "*~ block\n*~+\n", "(" * 50_000, ".param a='" + "(" * 20_000, ".subckt a\n" * 3000]
    for version, text in enumerate(texts, 1):
        uri = f"untitled:odd-{version}"
        c.open(uri, text, version)
        c.wait_version(uri, version, 1, timeout=60)
    check_alive(c, "untitled:odd-1")


def run_scenario(command, capabilities, start, action):
    with LspClient(command) as client:
        if start:
            client.initialize(capabilities)
        action(client)
        check(not client.garbage, f"standard output holds more than the protocol: {client.garbage[:200]!r}")


def main():
    arguments = sys.argv[1:]
    only = ""
    if arguments[:1] == ["--only"] and len(arguments) > 1:
        only, arguments = arguments[1], arguments[2:]
    if not arguments:
        sys.exit(__doc__)
    jobs = [
        (name, lambda c=capabilities, b=start, a=action: run_scenario(arguments, c, b, a))
        for name, capabilities, start, action in SCENARIOS
        if only in name
    ]
    return run_all(jobs)


if __name__ == "__main__":
    sys.exit(main())
