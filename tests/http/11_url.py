#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The request target: what is decoded, what is refused. Source: RFC 3986 sections 2 and 3, RFC 9112
section 3.2; the limits are Leeway's own."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

THING = "/v1/things/"


def refuses_paths_that_are_no_names():
    with Daemon() as daemon, daemon.wire() as wire:
        for target in (THING + "a%00b", THING + "a%2Fb", THING + "a%2fb", THING + "..",
                       THING + "%2E%2e", THING + "./x", THING + "a%20b", THING + "a%zz", THING + "a%2",
                       THING + "a~b", THING + "a:b", THING + "a+b", THING + "a#b", THING + "%C3%A4",
                       THING + "a\\b", THING + "a;b", THING + "/".join("abcdefghijklm")):
            wire.ask("GET", target).problem(400, 1002)
        expect(wire.ask("GET", "/about").status == 200, "the connection is spoiled")


def refuses_forms_that_are_no_path():
    with Daemon() as daemon, daemon.wire() as wire:
        for target in ("about", "*", "http:/about", "https://localhost/about", "http://localhost"):
            wire.ask("GET", target).problem(400, 1002)


def refuses_a_raw_nul_in_the_target():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"GET /about\0/../v1/things HTTP/1.1\r\nHost: localhost\r\n\r\n")
        wire.answer().problem(400, 1002)
        expect(wire.closed(), "the connection stays open")


def finds_nothing_at_other_paths():
    with Daemon() as daemon, daemon.wire() as wire:
        for target in ("/", "/nothing", "/about/", "//about", "/about/x", "/V1/things", "/v1/things/",
                       "/v1//things"):
            wire.ask("GET", target).problem(404, 1006)


def decodes_what_needs_no_encoding():
    with Daemon() as daemon:
        got = daemon.ask("GET", THING + "%61-b%2Ec_D9").json()
        expect(got["param"] == ["a-b.c_D9"], got)
        expect(got["path"] == "/v1/things/a-b.c_D9", got)
        got = daemon.ask("GET", "http://anywhere" + THING + "x?a=1").json()
        expect(got["path"] == "/v1/things/x" and got["query"] == [{"name": "a", "value": "1"}], got)


def decodes_the_query():
    with Daemon() as daemon:
        got = daemon.ask("GET", THING + "x?a=1&b=%2B%26+%C3%A9&a=2&c&=d&&e=x=y&f=").json()
        pairs = [(q["name"], q["value"].encode()) for q in got["query"]]
        expect(pairs == [("a", b"1"), ("b", "+& \u00e9".encode()), ("a", b"2"), ("c", b""),
                         ("", b"d"), ("e", b"x=y"), ("f", b"")], pairs)


def refuses_queries_that_can_not_be_read():
    with Daemon() as daemon, daemon.wire() as wire:
        for query in ("a=%00", "a%00=1", "a=%", "a=%1", "a=%g1", "a=%0a", "a=%7f", "a=%ff",
                      "a=%C3", "a=%C0%80", "a=%ED%A0%80", "a=%F4%90%80%80"):
            wire.ask("GET", THING + "x?" + query).problem(400, 1002)


def takes_64_members_and_no_more():
    with Daemon() as daemon, daemon.wire() as wire:
        query = "&".join(f"m{i}={i}" for i in range(64))
        got = wire.ask("GET", THING + "x?" + query).json()
        expect(len(got["query"]) == 64, len(got["query"]))
        wire.ask("GET", THING + "x?" + query + "&m64=64").problem(400, 1002)


def takes_1024_bytes_and_no_more():
    with Daemon() as daemon, daemon.wire() as wire:
        target = THING + "x?a="
        target += "1" * (1024 - len(target))
        expect(wire.ask("GET", target).status == 200, "a URL of 1024 bytes is refused")
        wire.ask("GET", target + "1").problem(414, 1003)
        wire.ask("POST", "/echo?a=" + "1" * 1024, "{}").problem(414, 1003)
        expect(wire.ask("GET", "/about").status == 200, "the connection is spoiled")


def refuses_a_target_beyond_the_memory_of_a_connection():
    """The library's own answer, not JSON."""
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"GET /about?" + b"a" * 40000 + b" HTTP/1.1\r\nHost: localhost\r\n\r\n")
        status = wire.socket.recv(12)
        expect(status in (b"HTTP/1.1 414", b"HTTP/1.1 431"), status)


run(refuses_paths_that_are_no_names, refuses_forms_that_are_no_path,
    refuses_a_raw_nul_in_the_target, finds_nothing_at_other_paths, decodes_what_needs_no_encoding,
    decodes_the_query, refuses_queries_that_can_not_be_read, takes_64_members_and_no_more,
    takes_1024_bytes_and_no_more, refuses_a_target_beyond_the_memory_of_a_connection)
