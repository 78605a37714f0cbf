#!/usr/bin/env python3
"""A language client for tests, and the session scenarios every server must survive.

    client.py [--demo] [--bench] [--only WORD] COMMAND [ARG..]

Starts COMMAND anew for each scenario and talks the Language Server Protocol 3.17 to it. Scenarios
marked `demo` need the misbehaving methods of the demonstration server and run with `--demo` only.
The last line is `N passed, N failed`; the exit code is 0 when nothing failed. Standard library only.
"""

import json
import os
import random
import select
import statistics
import subprocess
import sys
import tempfile
import threading
import time

LONG = 30.0  # seconds; a condition that takes longer has failed
TEXT = "* common-source stage\nVdd vdd 0 3.3\nR1 vdd d 1k\nG1 d 0 g 0 20m\nR2 g 0 50\nC1 g d 1p\n.end\n"


class Failure(AssertionError):
    """A promise of the protocol was not kept."""


def check(condition, text):
    if not condition:
        raise Failure(text)


# --------------------------------------------------------------------------- the client


class LspClient:
    """One server process and the messages received from it, in order."""

    def __init__(self, command, env=None, reading=True, stdin=None):
        self.errors = tempfile.TemporaryFile()
        self.process = subprocess.Popen(
            command,
            stdin=subprocess.PIPE if stdin is None else stdin,
            stdout=subprocess.PIPE,
            stderr=self.errors,
            env={**os.environ, **(env or {})},
        )
        if self.process.stdin:
            os.set_blocking(self.process.stdin.fileno(), False)
        self.received = []
        self.garbage = b""
        self.ended = False
        self.answering = True
        self.answers = {"workspace/configuration": lambda p: [None] * len(p["items"])}
        self.news = threading.Condition()
        self.may_read = threading.Event()
        self.next_id = 0
        self.writing = threading.Lock()
        if reading:
            self.may_read.set()
        threading.Thread(target=self._read, daemon=True).start()

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.may_read.set()
        if self.process.poll() is None:
            self.process.kill()
        self.process.wait()
        for stream in (self.process.stdin, self.process.stdout):
            try:
                if stream:
                    stream.close()
            except OSError:
                pass

    # -- receiving

    def _read(self):
        self.may_read.wait()
        out = self.process.stdout
        try:
            while True:
                length = None
                while True:
                    line = out.readline()
                    if not line:
                        return
                    name, _, value = line.partition(b":")
                    if line == b"\r\n" and length is not None:
                        break
                    if name == b"Content-Length" and value.endswith(b"\r\n"):
                        length = int(value)
                    else:
                        self.garbage += line
                message = json.loads(out.read(length))
                with self.news:
                    self.received.append(message)
                    self.news.notify_all()
                if self.answering and "method" in message and "id" in message:
                    self.answer(message)
        except (OSError, ValueError) as error:
            if not out.closed:
                self.garbage += repr(error).encode()
        finally:
            with self.news:
                self.ended = True
                self.news.notify_all()

    def answer(self, message):
        """Answers a request of the server as an ordinary client would."""
        result = self.answers.get(message["method"], lambda _: None)(message.get("params"))
        try:
            self.send({"id": message["id"], "result": result})
        except (OSError, Failure):
            pass

    def start_reading(self):
        self.may_read.set()

    def mark(self):
        """Place in the list of received messages from which a wait may start."""
        with self.news:
            return len(self.received)

    def wait_for(self, predicate, timeout=LONG, since=0):
        """First received message for which `predicate` holds; fails after `timeout` seconds."""
        until = time.monotonic() + timeout
        seen = since
        with self.news:
            while True:
                while seen < len(self.received):
                    if predicate(self.received[seen]):
                        return self.received[seen]
                    seen += 1
                if self.ended:
                    raise Failure("the server closed its output" + self._fate())
                if not self.news.wait(until - time.monotonic()) and time.monotonic() >= until:
                    raise Failure(f"nothing of the kind arrived within {timeout} s")

    def wait_count(self, predicate, count, timeout=LONG):
        """Waits until `count` received messages fulfil `predicate`; returns them."""
        until = time.monotonic() + timeout
        with self.news:
            while True:
                found = [m for m in self.received if predicate(m)]
                if len(found) >= count:
                    return found
                if self.ended:
                    raise Failure(f"the server closed its output after {len(found)} of {count}" + self._fate())
                if not self.news.wait(until - time.monotonic()) and time.monotonic() >= until:
                    raise Failure(f"{len(found)} of {count} arrived within {timeout} s")

    def _fate(self):
        return f", exit code {self.process.poll()}, last words: {self.stderr()[-300:]!r}"

    def wait_exit(self, timeout):
        """Exit code of the process, which must end within `timeout` seconds."""
        try:
            return self.process.wait(timeout)
        except subprocess.TimeoutExpired:
            raise Failure(f"the process did not end within {timeout} s") from None

    def stderr(self):
        self.errors.seek(0)
        return self.errors.read().decode(errors="replace")

    # -- sending

    def raw(self, data, timeout=LONG):
        """Writes bytes as they are; fails if the server does not take them in time."""
        fd = self.process.stdin.fileno()
        until = time.monotonic() + timeout
        with self.writing:
            view = memoryview(data)
            while view:
                left = until - time.monotonic()
                if left <= 0 or not select.select([], [fd], [], left)[1]:
                    raise Failure(f"the server did not take input for {timeout} s")
                try:
                    view = view[os.write(fd, view) :]
                except BlockingIOError:
                    pass
                except BrokenPipeError:
                    raise Failure("the server closed its input" + self._fate()) from None

    def body(self, data, timeout=LONG):
        """Sends a body in a proper frame."""
        data = data if isinstance(data, bytes) else data.encode()
        self.raw(b"Content-Length: %d\r\n\r\n%s" % (len(data), data), timeout)

    def send(self, message, timeout=LONG):
        self.body(json.dumps({"jsonrpc": "2.0", **message}), timeout)

    def post(self, method, params=None, **more):
        """Sends a request; returns its id."""
        self.next_id += 1
        message = {"id": self.next_id, "method": method, **more}
        if params is not None:
            message["params"] = params
        self.send(message)
        return self.next_id

    def reply(self, request_id, timeout=LONG):
        """Waits for the reply to a request."""
        return self.wait_for(lambda m: "method" not in m and m.get("id") == request_id, timeout)

    def request(self, method, params=None, timeout=LONG):
        """Sends a request and returns its reply as a message."""
        return self.reply(self.post(method, params), timeout)

    def notify(self, method, params=None):
        message = {"method": method}
        if params is not None:
            message["params"] = params
        self.send(message)

    def close_input(self):
        with self.writing:
            self.process.stdin.close()

    # -- the protocol's usual steps

    def initialize(self, capabilities=None, process_id=None):
        params = {"processId": process_id, "rootUri": None, "capabilities": capabilities or {}}
        result = self.request("initialize", params)
        check("result" in result, f"initialize failed: {result}")
        self.notify("initialized", {})
        return result["result"]

    def open(self, uri, text=TEXT, version=1):
        item = {"uri": uri, "languageId": "netlist", "version": version, "text": text}
        self.notify("textDocument/didOpen", {"textDocument": item})

    def change(self, uri, version, *changes):
        document = {"uri": uri, "version": version}
        self.notify("textDocument/didChange", {"textDocument": document, "contentChanges": list(changes)})

    def hover(self, uri, line=2, character=1):
        position = {"line": line, "character": character}
        return self.post("textDocument/hover", {"textDocument": {"uri": uri}, "position": position})

    def publications(self, uri):
        with self.news:
            return [m["params"] for m in self.received if is_publication(m, uri)]

    def wait_version(self, uri, version, count=1, timeout=LONG):
        """Waits for `count` publications of a version; returns the last of them."""
        of_version = lambda m: is_publication(m, uri) and m["params"].get("version") == version
        return self.wait_count(of_version, count, timeout)[-1]["params"]

    def shut_down(self):
        """Ends the session in order; returns the exit code and the seconds it took."""
        check(self.request("shutdown")["result"] is None, "the result of shutdown must be null")
        begin = time.monotonic()
        self.notify("exit")
        return self.wait_exit(10), time.monotonic() - begin


def is_publication(message, uri):
    return message.get("method") == "textDocument/publishDiagnostics" and message["params"]["uri"] == uri


def replacing(line, start, end, text):
    """A change that replaces part of one line."""
    return {
        "range": {"start": {"line": line, "character": start}, "end": {"line": line, "character": end}},
        "text": text,
    }


# --------------------------------------------------------------------------- scenarios

SCENARIOS = []
URI = "file:///scenario/stage.cir"


def scenario(demo=False, self_test=False, start=True):
    """Registers a scenario. It gets a started, initialised client unless `start` is false."""

    def register(action):
        SCENARIOS.append((action.__name__, demo, self_test, start, action))
        return action

    return register


def check_alive(client, uri=URI):
    """The server answers, and documents still work."""
    check("error" not in client.reply(client.hover(uri)), "hover fails")


def code_of(reply):
    return reply.get("error", {}).get("code")


@scenario()
def lower_case_header(c):
    c.open(URI)
    body = json.dumps({"jsonrpc": "2.0", "id": "low", "method": "no/such"}).encode()
    c.raw(b"content-length: %d\r\n\r\n%s" % (len(body), body))
    c.raw(b"CONTENT-TYPE: application/vscode-jsonrpc; charset=utf8\nContent-length:%d\n\n%s" % (len(body), body))
    check(len(c.wait_count(lambda m: m.get("id") == "low" and code_of(m) == -32601, 2)) == 2, "two replies")
    check_alive(c)


@scenario()
def malformed_json(c):
    c.open(URI)
    c.body('{"jsonrpc":"2.0","method":')
    c.wait_for(lambda m: m.get("id", 0) is None and code_of(m) == -32700)
    c.body('{"jsonrpc":"2.0","id":41,"method":"x",,}')
    check(code_of(c.reply(41)) == -32600, "the id was readable")
    check_alive(c)


@scenario()
def bad_headers(c):
    c.open(URI)
    noise = [
        b"this is no protocol at all\r\n\r\n",
        b"Content-Length: many\r\n\r\n{}",
        b"Content-Length: -1\r\n\r\n{}",
        b"Content-Length: 99999999999999999999\r\n\r\n{}",
        b"Content-Length: 999999999999\r\n\r\n{}",
        b"\x00\xff\xfe noise " * 2000,
        b'Content-Length: 2\r\n\r\n{"jsonrpc":"2.0"}',
    ]
    for bytes_ in noise:
        c.raw(bytes_)
        check_alive(c)


@scenario()
def length_too_great(c):
    c.open(URI)
    for excess in (1, 5, 16, 20, 30):
        body = b'{"jsonrpc":"2.0","id":"a%d","method":"no/such"}' % excess
        c.raw(b"Content-Length: %d\r\n\r\n%s" % (len(body) + excess, body))
        check_alive(c)
        check(code_of(c.reply(f"a{excess}")) == -32601, "the message itself was whole")


@scenario()
def mutated_frames(c):
    """Seeded damage to bodies and small errors in lengths; whatever follows is understood."""
    c.open(URI)
    chance = random.Random(7)
    document = {"textDocument": {"uri": URI, "version": 5}, "contentChanges": [replacing(0, 2, 3, "é\ud83d")]}
    place = {"textDocument": {"uri": URI}, "position": {"line": 0, "character": 0}}
    messages = [
        {"jsonrpc": "2.0", "method": "textDocument/didChange", "params": document},
        {"jsonrpc": "2.0", "id": "mutant", "method": "textDocument/hover", "params": place},
        {"jsonrpc": "2.0", "id": "mutant", "result": None},
    ]
    for round_ in range(4000):
        body = bytearray(json.dumps(chance.choice(messages)).encode())
        for _ in range(chance.randint(1, 6)):
            at = chance.randrange(len(body) or 1)
            kind = chance.choice("replace remove insert".split())
            if kind == "replace" and body:
                body[at] = chance.randrange(256)
            elif kind == "remove":
                del body[at : at + chance.randint(1, 20)]
            else:
                body[at:at] = bytes(chance.choice(b'{}[]",:\\u0d8\n\r') for _ in range(3))
        length = max(0, len(body) + chance.choice([0, 0, 0, 0, -3, 5, 40]))
        c.raw(b"Content-Length: %d\r\n\r\n%s" % (length, body))
        if round_ % 200 == 0:
            check_alive(c)
    check_alive(c)
    check("panic" not in c.stderr(), "a message led to a panic")


@scenario()
def invalid_utf8_body(c):
    c.open(URI)
    c.body(b'{"jsonrpc":"2.0","id":"\xfc","method":"no/such"}')
    c.body(b'{"jsonrpc":"2.0","method":"no/such","params":["\xff\xfe\xc3"]}')
    c.body(b'{"jsonrpc":"2.0","id":50,\xff}')
    check_alive(c)


@scenario()
def wrong_shapes(c):
    c.open(URI)
    deep = '{"jsonrpc":"2.0","id":60,"method":"x","params":%s%s}' % ("[" * 200, "]" * 200)
    bodies = [
        ("[1,2]", None, -32600),
        ('[{"jsonrpc":"2.0","method":"exit"}]', None, -32600),
        ("7", None, -32600),
        ('"text"', None, -32600),
        ("null", None, -32600),
        ('{"foo":1}', None, -32600),
        ('{"id":61,"method":"x"}', 61, -32600),
        ('{"jsonrpc":"2.0","id":1.5,"method":"x"}', 1.5, -32600),
        ('{"jsonrpc":"2.0","id":{},"method":"x"}', {}, -32600),
        ('{"jsonrpc":"2.0","id":62,"method":[]}', 62, -32600),
        (deep, 60, -32600),
        ('{"jsonrpc":"2.0","id":63}', 63, -32600),
    ]
    for body, answer_id, code in bodies:
        since = c.mark()
        c.body(body)
        c.wait_for(lambda m: m.get("id", 0) == answer_id and code_of(m) == code, since=since)
    for reply in ['{"jsonrpc":"2.0","id":12345,"result":1}', '{"id":9,"error":"text"}', '{"jsonrpc":"2.0","id":null,"error":{}}']:
        c.body(reply)
    check_alive(c)


@scenario()
def ordinary_refusals(c):
    c.open(URI)
    check(code_of(c.request("no/such")) == -32601, "unknown method")
    check(code_of(c.request("textDocument/hover", {"wrong": 1})) == -32602, "bad parameters")
    c.body('{"jsonrpc":"2.0","id":70,"method":"textDocument/hover","params":null}')
    check(code_of(c.reply(70)) == -32602, "parameters null")
    check(code_of(c.request("initialize", {"capabilities": {}})) == -32600, "second initialize")
    c.notify("no/such", {"a": 1})
    c.notify("$/no/such")
    c.notify("$/cancelRequest", {"id": 424242})
    check_alive(c)


@scenario(start=False)
def request_before_initialize(c):
    check(code_of(c.request("textDocument/hover", {})) == -32002, "not initialised")
    c.notify("textDocument/didOpen", {})
    c.initialize()
    c.open(URI)
    check_alive(c)


@scenario()
def unusable_notification_is_logged(c):
    c.open(URI)
    document = {"uri": URI, "version": "three"}
    c.notify("textDocument/didChange", {"textDocument": document, "contentChanges": []})
    check_alive(c)
    check("didChange" in c.stderr(), "nothing was logged")


@scenario()
def lone_surrogate(c):
    c.open(URI, TEXT)
    c.body(
        '{"jsonrpc":"2.0","method":"textDocument/didChange","params":{"textDocument":{"uri":"%s","version":2},'
        '"contentChanges":[{"range":{"start":{"line":0,"character":2},"end":{"line":0,"character":2}},"text":"\\ud83d"}]}}'
        % URI
    )
    c.wait_version(URI, 2)
    check_alive(c)


@scenario(demo=True)
def lone_surrogate_keeps_the_text(c):
    c.open(URI, "ab\n")
    c.body(
        '{"jsonrpc":"2.0","method":"textDocument/didChange","params":{"textDocument":{"uri":"%s","version":2},'
        '"contentChanges":[{"range":{"start":{"line":0,"character":1},"end":{"line":0,"character":1}},"text":"\\udc00"}]}}'
        % URI
    )
    c.change(URI, 3, replacing(0, 2, 3, "c"))
    texts = c.request("demo/state", {})["result"]["texts"]
    check(texts == [[URI, "a\ufffdc\n"]], f"the text is {texts}")


@scenario(demo=True)
def lost_edit_is_reported(c):
    c.open(URI)
    body = '{"jsonrpc":"2.0","method":"textDocument/didChange","params":{"textDocument":{"uri":"%s","version":2},"con' % URI
    c.body(body)
    lost = c.request("demo/state", {})["result"]["lost"]
    check([entry["uri"] for entry in lost] == [URI], f"reported: {lost}")


@scenario(self_test=True)
def panic_in_request(c):
    c.open(URI)
    for late in (False, True):
        check(code_of(c.request("squeg/selfTestPanic", {"late": late})) == -32603, "a panic is an internal error")
        check_alive(c)
    check("self test" in c.stderr(), "the panic was not logged")


@scenario(self_test=True)
def panic_in_notification(c):
    c.open(URI)
    for late in (False, True, False):
        c.notify("squeg/selfTestPanicNotice", {"late": late})
        check_alive(c)
    check("self test" in c.stderr(), "the panic was not logged")


@scenario()
def self_test_methods_are_absent_without_the_variable(c):
    check(code_of(c.request("squeg/selfTestPanic", {"late": False})) == -32601, "the method exists")


@scenario()
def changes_300_in_order(c):
    c.open(URI)
    for version in range(2, 302):
        c.change(URI, version, replacing(0, 2, 2, "x"))
    c.wait_version(URI, 301)
    versions = [p.get("version") for p in c.publications(URI)]
    check(versions == sorted(versions), "versions went backwards")
    check_alive(c)


@scenario(demo=True)
def changes_300_begin_in_order_and_hover_sees_the_last(c):
    c.open(URI)
    for version in range(2, 302):
        c.change(URI, version, replacing(0, 2, 2, "x"))
    hover = c.reply(c.hover(URI))
    check("301" in json.dumps(hover), f"hover saw {hover}")
    check(c.request("demo/state", {})["result"]["begun"] == list(range(2, 302)), "the order was lost")


def timed(action):
    begin = time.monotonic()
    result = action()
    return result, time.monotonic() - begin


@scenario(demo=True)
def light_request_beside_a_busy_handler(c):
    c.open(URI)
    busy = c.post("demo/slow", {"ms": 1000, "cpu": True})
    _, seconds = timed(lambda: check_alive(c))
    check(seconds < 0.3, f"the light request took {seconds:.3f} s")
    check(c.reply(busy)["result"] == "done", "the busy request was lost")


@scenario(demo=True)
def light_request_beside_many_busy_handlers(c):
    c.open(URI)
    busy = [c.post("demo/slow", {"ms": 700, "cpu": True}) for _ in range(3)]
    _, seconds = timed(lambda: check_alive(c))
    check(seconds < 0.6, f"the light request took {seconds:.3f} s")
    for one in busy:
        c.reply(one)


@scenario(demo=True)
def cancel_a_waiting_handler(c):
    slow = c.post("demo/slow", {"ms": 60000})
    c.notify("$/cancelRequest", {"id": slow})
    reply, seconds = timed(lambda: c.reply(slow))
    check(code_of(reply) == -32800, f"cancelled: {reply}")
    check(seconds < 0.5, f"it took {seconds:.3f} s")


@scenario(demo=True)
def cancel_and_light_request_beside_slow_ones(c):
    c.open(URI)
    slow = [c.post("demo/slow", {"ms": 3000}) for _ in range(5)]
    c.notify("$/cancelRequest", {"id": slow[4]})
    reply, seconds = timed(lambda: c.reply(slow[4]))
    check(code_of(reply) == -32800 and seconds < 0.5, f"cancel: {reply} after {seconds:.3f} s")
    _, seconds = timed(lambda: check_alive(c))
    check(seconds < 0.5, f"the light request took {seconds:.3f} s")


@scenario(demo=True)
def handlers_that_wait_for_the_client(c):
    c.answering = False
    c.open(URI)
    waiting = [c.post("demo/configuration", {}) for _ in range(4)]
    for _ in range(4):
        c.notify("demo/noteWaiting", {})
    questions = c.wait_count(lambda m: m.get("method") == "workspace/configuration", 8)
    for version in range(2, 402):
        c.change(URI, version, replacing(0, 2, 2, "x"))
        c.notify("demo/note", {})
    state = c.request("demo/state", {})["result"]
    check(len(state["begun"]) == 400 and state["notes"] == 400, f"{len(state['begun'])} changes, {state['notes']} notes")
    for question in questions:
        c.answer(question)
    for one in waiting:
        check(c.reply(one)["result"] == [None], "the handler got its answer")


@scenario(demo=True)
def waiting_requests_have_no_limit(c):
    c.answering = False
    waiting = [c.post("demo/configuration", {}) for _ in range(2500)]
    for _ in range(300):
        c.notify("demo/note", {})
    check(c.request("demo/state", {})["result"]["notes"] == 300, "later messages are stuck")
    for question in c.wait_count(lambda m: m.get("method") == "workspace/configuration", 2500):
        c.answer(question)
    for one in waiting:
        check("result" in c.reply(one), "the handler got its answer")


@scenario(demo=True)
def late_reply_of_the_client(c):
    c.answering = False
    c.open(URI)
    is_question = lambda m: m.get("method") == "workspace/configuration"
    check(c.request("demo/impatient", {})["result"] == {"answered": False}, "the handler gave up")
    c.answer(c.wait_for(is_question))
    check_alive(c)
    since = c.mark()
    cancelled = c.post("demo/configuration", {})
    question = c.wait_for(is_question, since=since)
    c.notify("$/cancelRequest", {"id": cancelled})
    check(code_of(c.reply(cancelled)) == -32800, "cancelled while it waits for the client")
    c.answer(question)
    c.answer(question)
    check_alive(c)
    check("panic" not in c.stderr(), "a late reply is nothing to report")


@scenario()
def shutdown_with_null_and_open_pipe(c):
    c.open(URI)
    c.body('{"jsonrpc":"2.0","id":80,"method":"shutdown","params":null}')
    reply = c.reply(80)
    check("error" not in reply and reply["result"] is None, f"shutdown: {reply}")
    check(code_of(c.request("textDocument/hover", {})) == -32600, "requests after shutdown are refused")
    begin = time.monotonic()
    c.body('{"jsonrpc":"2.0","method":"exit","params":null}')
    code = c.wait_exit(5)
    seconds = time.monotonic() - begin
    check(code == 0 and seconds < 1, f"exit code {code} after {seconds:.2f} s")


@scenario()
def shutdown_and_exit_in_one_write(c):
    c.open(URI)
    parts = [b'{"jsonrpc":"2.0","id":81,"method":"shutdown"}', b'{"jsonrpc":"2.0","method":"exit"}']
    begin = time.monotonic()
    c.raw(b"".join(b"Content-Length: %d\r\n\r\n%s" % (len(part), part) for part in parts))
    check(c.reply(81).get("result", 0) is None, "the reply is written before the end")
    code = c.wait_exit(5)
    check(code == 0 and time.monotonic() - begin < 1.1, f"exit code {code}")


@scenario()
def exit_without_shutdown(c):
    begin = time.monotonic()
    c.notify("exit")
    code = c.wait_exit(5)
    seconds = time.monotonic() - begin
    check(code == 1 and seconds < 1, f"exit code {code} after {seconds:.2f} s")


@scenario()
def end_of_input(c):
    c.open(URI)
    hover = c.hover(URI)
    c.close_input()
    check(c.reply(hover), "the reply under way is written")
    code = c.wait_exit(5)
    check(code == 1, f"exit code {code}")


@scenario()
def end_of_input_after_shutdown(c):
    c.request("shutdown")
    c.close_input()
    code = c.wait_exit(5)
    check(code == 0, f"exit code {code}")


@scenario()
def end_of_input_inside_a_frame(c):
    c.raw(b"Content-Length: 100\r\n\r\n{")
    c.close_input()
    check(c.wait_exit(5) == 1, "exit code")


@scenario(demo=True)
def exit_beside_a_busy_handler(c):
    for _ in range(8):
        c.post("demo/slow", {"ms": 20000, "cpu": True})
    c.post("shutdown")
    begin = time.monotonic()
    c.notify("exit")
    code = c.wait_exit(10)
    seconds = time.monotonic() - begin
    check(code == 0 and seconds < 1, f"exit code {code} after {seconds:.2f} s")


@scenario(start=False)
def client_that_stops_reading(c):
    c.post("initialize", {"processId": None, "rootUri": None, "capabilities": {}})
    c.notify("initialized", {})
    c.open(URI)
    begin = time.monotonic()
    hovers = {c.hover(URI) for _ in range(20000)}
    for version in range(2, 202):
        c.change(URI, version, replacing(0, 2, 2, "x"))
    print(f"      20,000 requests accepted unread in {time.monotonic() - begin:.2f} s")
    c.start_reading()
    c.wait_version(URI, 201)
    c.wait_count(lambda m: m.get("id") in hovers and "method" not in m, 20000)


@scenario(start=False)
def exit_of_a_client_that_stopped_reading(c):
    c.post("initialize", {"processId": None, "rootUri": None, "capabilities": {}})
    c.notify("initialized", {})
    c.open(URI)
    for _ in range(5000):
        c.hover(URI)
    c.post("shutdown")
    begin = time.monotonic()
    c.notify("exit")
    code = c.wait_exit(10)
    seconds = time.monotonic() - begin
    check(code == 0 and seconds < 1, f"exit code {code} after {seconds:.2f} s")


@scenario(start=False)
def client_that_closes_its_reading_end(c):
    c.process.stdout.close()
    c.start_reading()
    c.post("initialize", {"processId": None, "rootUri": None, "capabilities": {}})
    code = c.wait_exit(5)
    check(code == 1, f"exit code {code}")
    check("panic" not in c.stderr(), f"it ends loudly: {c.stderr()[-300:]}")


@scenario()
def text_of_20_megabytes(c):
    line = "R1 a b 1k $ padding text of an ordinary length\n"
    _, seconds = timed(lambda: (c.open(URI, "* big\n" + "* " + line * (20_000_000 // len(line))), c.hover(URI)))
    check_alive(c)
    print(f"      accepted in {seconds:.2f} s")


def test_parent_death(command):
    """The client process is killed while another process holds its pipes open."""
    parent = subprocess.Popen(["sleep", "1000"])
    with LspClient(command) as c:
        c.initialize(process_id=parent.pid)
        check_alive_without_document(c)
        parent.kill()
        begin = time.monotonic()
        code = c.wait_exit(12)
        print(f"      noticed after {time.monotonic() - begin:.1f} s")
        check(code == 1, f"exit code {code}")
    parent.wait()


def test_unknown_parent(command):
    """A process id that means nothing here must not end the session."""
    with LspClient(command) as c:
        c.initialize(process_id=2**31 - 7)
        check_alive_without_document(c)
        check(c.shut_down()[0] == 0, "an ordinary end")


def check_alive_without_document(client):
    check(code_of(client.request("no/such")) == -32601, "the server answers")


# --------------------------------------------------------------------------- running


def run_scenario(command, self_test, start, action):
    env = {"SQUEG_SELF_TEST": "1" if self_test else ""}
    with LspClient(command, env, reading=start) as client:
        if start:
            client.initialize()
        elif action.__name__ == "request_before_initialize":
            client.start_reading()
        action(client)
        check(not client.garbage, f"standard output holds more than the protocol: {client.garbage[:200]!r}")


def run_all(jobs):
    """Runs (name, function) pairs, prints a line for each and the sums; returns the exit code."""
    passed = failed = 0
    for name, job in jobs:
        begin = time.monotonic()
        try:
            job()
        except (Failure, KeyError, TypeError, OSError) as error:
            failed += 1
            print(f"FAIL  {name}: {type(error).__name__}: {error}", flush=True)
        else:
            passed += 1
            print(f"ok    {name} ({time.monotonic() - begin:.2f} s)", flush=True)
    print(f"{passed} passed, {failed} failed")
    return 1 if failed else 0


def bench(command):
    """Round trips of a light request, one at a time."""
    with LspClient(command) as c:
        c.initialize()
        c.open(URI)
        check_alive(c)
        times = sorted(timed(lambda: c.reply(c.hover(URI), LONG))[1] * 1e3 for _ in range(300))
        p95, p99 = times[int(len(times) * 0.95)], times[int(len(times) * 0.99)]
        print(f"hover round trip in ms: p50 {statistics.median(times):.3f} p95 {p95:.3f} p99 {p99:.3f} max {times[-1]:.3f}")


def main():
    arguments = sys.argv[1:]
    demo = measure = False
    only = ""
    while arguments and arguments[0].startswith("--"):
        option = arguments.pop(0)
        if option == "--demo":
            demo = True
        elif option == "--bench":
            measure = True
        elif option == "--only" and arguments:
            only = arguments.pop(0)
        else:
            sys.exit(__doc__)
    if not arguments:
        sys.exit(__doc__)
    if measure:
        return bench(arguments)
    jobs = [
        (name, lambda s=self_test, b=start, a=action: run_scenario(arguments, s, b, a))
        for name, needs_demo, self_test, start, action in SCENARIOS
        if demo or not needs_demo
    ]
    jobs.append(("parent_death", lambda: test_parent_death(arguments)))
    jobs.append(("unknown_parent", lambda: test_unknown_parent(arguments)))
    return run_all([(name, job) for name, job in jobs if only in name])


if __name__ == "__main__":
    sys.exit(main())
