#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Tokens: who may do what, what a refusal says, that nothing secret is told or taken from a URL, and
that the daemon is not served to others without them. Source: RFC 6750 sections 2.1, 2.3 and 3."""
import hashlib
import signal
import subprocess
import tempfile
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, program, run  # noqa: E402

TOKENS = {"query": "token-of-the-plc", "author": "token-of-an-engineer", "admin": "token-of-a-chief"}


def line(name, role, token):
    return f"{name} {role} {hashlib.sha256(token.encode()).hexdigest()}\n"


class File:
    """A token file that goes away again."""

    def __init__(self, text=None, mode=0o600):
        self.path = tempfile.mktemp(prefix="lwt-tokens-")
        self.write(text or "# who may ask\n\n" +
                   "".join(line(f"t-{role}", role, token) for role, token in TOKENS.items()))
        os.chmod(self.path, mode)

    def write(self, text):
        with open(self.path, "w", encoding="ascii") as f:
            f.write(text)

    def __enter__(self):
        return self

    def __exit__(self, *unused):
        os.unlink(self.path)


def bearer(token):
    return [("Authorization", "Bearer " + token)]


def refused_start(options, *words, status=2):
    """The daemon does not start; its one sentence holds the words."""
    done = subprocess.run([program(), "--data", "/tmp", *options], capture_output=True, text=True,
                          timeout=30, check=False)
    text = done.stderr.strip().splitlines()[-1]
    expect(done.returncode == status, f"exit status {status} expected, got", done.returncode, text)
    expect(text.startswith("leewayd: "), text)
    for word in words:
        expect(word in text, repr(word), "not in", text)


def each_role_may_what_it_may():
    ways = (("GET", "/about", None, "none"), ("GET", "/v1/things/x", None, "query"),
            ("POST", "/echo", "{}", "query"), ("PUT", "/v1/things/x", "{}", "author"),
            ("POST", "/v1/things/x/parts/1/publish", "{}", "admin"))
    order = ["none", "query", "author", "admin"]
    with File() as file, Daemon("--token-file", file.path) as daemon, daemon.wire() as wire:
        for method, target, body, needed in ways:
            for role in order:
                headers = bearer(TOKENS[role]) if role != "none" else []
                answer = wire.ask(method, target, body, headers)
                if order.index(role) >= order.index(needed):
                    expect(answer.status == 200, role, method, target, answer.status, answer.body)
                elif role == "none":
                    answer.problem(401, 1011)
                    expect(answer.get("WWW-Authenticate") == 'Bearer realm="leeway"', answer.headers)
                else:
                    answer.problem(403, 1013)
                    told = answer.get("WWW-Authenticate")
                    expect('error="insufficient_scope"' in told and f'scope="{needed}"' in told, told)


def the_handler_learns_name_and_role():
    with File() as file, Daemon("--token-file", file.path) as daemon:
        got = daemon.ask("GET", "/v1/things/x", headers=bearer(TOKENS["author"])).json()
        expect(got["token"] == "t-author" and got["role"] == 2, got)


def refuses_tokens_that_are_none():
    with File() as file, Daemon("--token-file", file.path) as daemon, daemon.wire() as wire:
        good = TOKENS["query"]
        for value in ("Bearer wrong", "Bearer " + good + "x", "Bearer " + good[:-1], "Bearer ",
                      "Bearer", good, "Basic " + good, "Bearer " + good + " " + good,
                      "Bearer " + good + "," + good,
                      "Bearer " + hashlib.sha256(good.encode()).hexdigest()):
            answer = wire.ask("GET", "/v1/things/x", headers=[("Authorization", value)])
            answer.problem(401, 1012)
            expect('error="invalid_token"' in answer.get("WWW-Authenticate"), answer.headers)
        for value in ("Bearer  " + good, "bearer " + good, "BEARER " + good):
            answer = wire.ask("GET", "/v1/things/x", headers=[("Authorization", value)])
            expect(answer.status == 200, value, answer.status)


def takes_no_token_from_the_url():
    with File() as file, Daemon("--token-file", file.path) as daemon, daemon.wire() as wire:
        target = "/v1/things/x?access_token=" + TOKENS["query"]
        got = wire.ask("GET", target).problem(400, 1020)
        expect(TOKENS["query"] not in str(got), got)
        wire.ask("GET", target, headers=bearer(TOKENS["query"])).problem(400, 1020)
        wire.ask("GET", "/v1/things/x?token=" + TOKENS["query"]).problem(401, 1011)


def tells_and_logs_no_token():
    with File() as file, Daemon("--token-file", file.path, "--log-level", "debug") as daemon:
        said = b""
        for token in (TOKENS["query"], "a-wrong-token"):
            for target in ("/v1/things/x?secret-query=1", "/nothing", "/v1/things/x?access_token=" + token):
                said += daemon.ask("GET", target, headers=bearer(token)).body
        daemon.stop()
        for text in (said.decode(), daemon.log()):
            for secret in (TOKENS["query"], "a-wrong-token"):
                expect(secret not in text, secret, "is told")
        expect("secret-query" not in daemon.log(), "query text is logged")
        expect("token=t-query" in daemon.log(), "the token's name is not logged")


def other_hosts_are_served_with_tokens():
    with File() as file, Daemon("--token-file", file.path) as daemon:
        expect(daemon.ask("GET", "/about", host="example.org").status == 200, "200 expected")


def a_made_token_works():
    done = subprocess.run([program(), "--make-token", "new-plc", "query"], capture_output=True,
                          text=True, timeout=30, check=True).stdout.splitlines()
    token, added = done[1], done[3]
    expect(len(token) >= 43, "a short token", token)
    with File(added + "\n") as file, Daemon("--token-file", file.path) as daemon:
        got = daemon.ask("GET", "/v1/things/x", headers=bearer(token)).json()
        expect(got["token"] == "new-plc" and got["role"] == 1, got)
    again = subprocess.run([program(), "--make-token", "new-plc", "query"], capture_output=True,
                           text=True, timeout=30, check=True).stdout.splitlines()
    expect(again[1] != token, "the same token twice")
    refused_start(["--make-token", "New Plc", "query"], "name", "New Plc")
    refused_start(["--make-token", "plc", "root"], "role", "root")
    refused_start(["--make-token", "plc"], "name and a role")


def reads_the_file_again_on_a_signal():
    with File() as file, Daemon("--token-file", file.path) as daemon, daemon.wire() as wire:
        def status(token):
            return wire.ask("GET", "/v1/things/x", headers=bearer(token)).status

        def becomes(token, wanted):
            until = time.monotonic() + 10
            while status(token) != wanted and time.monotonic() < until:
                time.sleep(0.02)
            expect(status(token) == wanted, "the file is not read again")

        expect((status(TOKENS["query"]), status("next")) == (200, 401), "before")
        file.write(line("next", "query", "next"))
        daemon.signal(signal.SIGHUP)
        becomes("next", 200)
        expect(status(TOKENS["query"]) == 401, "a token taken out still works")
        file.write("next query abc\n")
        daemon.signal(signal.SIGHUP)
        time.sleep(0.3)
        expect(status("next") == 200, "a faulty file took the tokens away")
        daemon.stop()
        expect("line 1" in daemon.log() and "stay in force" in daemon.log(), daemon.log())


def refuses_to_serve_others_without_tokens():
    for address in ("0.0.0.0:0", "[::]:0", "192.0.2.1:8470"):
        refused_start(["--listen", address], "--token-file", address)
    refused_start(["--listen", "127.0.0.1:0", "--listen", "0.0.0.0:0"], "0.0.0.0:0")


def serves_others_with_tokens():
    with File() as file, Daemon("--token-file", file.path, listen="0.0.0.0:0") as daemon:
        daemon.ask("GET", "/v1/things/x").problem(401, 1011)
        expect(daemon.ask("GET", "/v1/things/x", headers=bearer(TOKENS["query"])).status == 200, "200")


def refuses_faulty_token_files():
    good = line("a", "query", "x")
    for text, words in ((good + "b boss " + "0" * 64, ["line 2", "role"]),
                        (good + "b query 123", ["line 2", "64 hexadecimal"]),
                        (good + good, ["line 2", "name was used"]),
                        (good + line("b", "admin", "x"), ["line 2", "same token"]),
                        ("A query " + "0" * 64, ["line 1", "name"]),
                        (good + "b query " + "0" * 64 + " more", ["line 2", "third word"]),
                        ("x" * 400, ["line 1"]), ("# nothing\n", ["--make-token"])):
        with File(text) as file:
            refused_start(["--token-file", file.path], file.path, *words)
    with File(mode=0o666) as file:
        refused_start(["--token-file", file.path], "chmod")
    refused_start(["--token-file", "/nonexistent"], "/nonexistent")
    refused_start(["--token-file", "/tmp"], "/tmp")


run(each_role_may_what_it_may, the_handler_learns_name_and_role, refuses_tokens_that_are_none,
    takes_no_token_from_the_url, tells_and_logs_no_token, other_hosts_are_served_with_tokens,
    a_made_token_works, reads_the_file_again_on_a_signal, refuses_to_serve_others_without_tokens,
    serves_others_with_tokens, refuses_faulty_token_files)
