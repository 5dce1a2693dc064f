#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Headers: what spoils a head, what handlers are given, what every answer carries. Source: RFC 9110
sections 5.5, 7.2, 10 to 13."""
import base64
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402


def refuses_control_characters_in_values():
    with Daemon() as daemon:
        for value in (b"a\x01b", b"a\x7fb", b"a\x0bb"):
            with daemon.wire() as wire:
                wire.send(b"GET /about HTTP/1.1\r\nHost: localhost\r\nX-A: " + value + b"\r\n\r\n")
                wire.answer().problem(400, 1001)


def a_nul_in_a_value_hides_no_header():
    """The library may cut the value or refuse the head; a header behind it must not vanish."""
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"POST /echo HTTP/1.1\r\nHost: localhost\r\nX-A: a\0b\r\nContent-Length: 2\r\n"
                  b"Content-Length: 3\r\nContent-Type: application/json\r\n\r\n{}")
        expect(wire.socket.recv(12) == b"HTTP/1.1 400", "400 expected")


def refuses_names_that_are_no_tokens():
    with Daemon() as daemon:
        for name in (b"X A", b"X(A)", b"X\xe4"):
            with daemon.wire() as wire:
                wire.send(b"GET /about HTTP/1.1\r\nHost: localhost\r\n" + name + b": 1\r\n\r\n")
                wire.answer().problem(400, 1001)


def refuses_a_head_beyond_the_memory_of_a_connection():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"GET /about HTTP/1.1\r\nHost: localhost\r\n" +
                  b"".join(b"X-%d: %s\r\n" % (i, b"a" * 100) for i in range(400)) + b"\r\n")
        expect(wire.socket.recv(12) == b"HTTP/1.1 431", "431 expected")


def takes_a_head_of_8_kb():
    with Daemon() as daemon:
        expect(daemon.ask("GET", "/about", headers=[("X-A", "a" * 8000)]).status == 200, "refused")


def refuses_doubled_headers():
    with Daemon() as daemon, daemon.wire() as wire:
        for name, value in (("Authorization", "Bearer x"), ("Content-Type", "application/json")):
            wire.ask("GET", "/about", headers=[(name, value), (name, value)]).problem(400, 1004)


def joins_lists_that_come_in_parts():
    with Daemon() as daemon:
        got = daemon.ask("GET", "/v1/things/x", headers=[
            ("Accept", "text/plain;q=0.5"), ("If-Match", '"a"'), ("accept", "application/json"),
            ("If-Match", '"b"'), ("If-None-Match", "*"), ("ACCEPT", "*/*;q=0.1")]).json()
        expect(got["accept"] == "text/plain;q=0.5, application/json, */*;q=0.1", got)
        expect(got["if_match"] == '"a", "b"' and got["if_none_match"] == "*", got)


def answers_under_loopback_names_only_while_there_are_no_tokens():
    """Else a page in a browser could, by giving its own name our address, ask as an admin."""
    with Daemon() as daemon, daemon.wire() as wire:
        for host in ("localhost", "LOCALHOST:1", "127.0.0.1", "127.1.2.3:8470", "[::1]", "[::1]:1"):
            expect(wire.ask("GET", "/about", host=host).status == 200, host)
        for host in ("example.org", "localhost.example.org", "127.0.0.1.example.org", "10.0.0.1",
                     "[::2]", "[::1].example.org", "127.0.0.1@example.org", ""):
            got = wire.ask("GET", "/about", host=host).problem(421, 1014)
            expect(got.get("got", "") == host, got)


def every_answer_carries_its_headers():
    with Daemon() as daemon, daemon.wire() as wire:
        ids = set()
        for method, target, status in (("GET", "/about", 200), ("HEAD", "/about", 200),
                                       ("GET", "/nothing", 404), ("GET", "/faulty", 422),
                                       ("GET", "/slow?ms=1", 200), ("GET", "/memory", 503)):
            answer = wire.ask(method, target)
            expect(answer.status == status, method, target, answer.status)
            expect(answer.get("Cache-Control") == "no-store", answer.headers)
            expect(answer.get("Date"), answer.headers)
            expect(answer.get("Content-Type"), answer.headers)
            expect(len(answer.get("X-Request-Id")) == 32, answer.headers)
            ids.add(answer.get("X-Request-Id"))
        expect(len(ids) == 6, "request ids are used twice:", ids)


def an_answer_is_not_split_by_a_header():
    with Daemon() as daemon:
        answer = daemon.ask("GET", "/faulty")
        answer.json()
        expect(answer.get("ETag") == '"abc"' and not answer.get("X-Injected"), answer.headers)


def an_answer_cut_by_want_of_memory_is_503():
    with Daemon() as daemon:
        answer = daemon.ask("GET", "/memory")
        expect(answer.status == 503 and answer.json()["code"] == 1018, answer.body)
        expect(answer.get("Retry-After") == "1", answer.headers)


def takes_a_trace_id_where_it_is_well_formed():
    good = "0af7651916cd43dd8448eb211c80319c"  # the example of W3C Trace Context, section 3.2
    with Daemon() as daemon, daemon.wire() as wire:
        def asked(value):
            return wire.ask("GET", "/v1/things/x", headers=[("traceparent", value)])
        for value in (f"00-{good}-b7ad6b7169203331-01", f"cc-{good}-b7ad6b7169203331-01-more"):
            answer = asked(value)
            expect(answer.get("X-Request-Id") == good and answer.json()["id"] == good, value)
        for value in (f"00-{good.upper()}-b7ad6b7169203331-01", f"ff-{good}-b7ad6b7169203331-01",
                      f"00-{'0' * 32}-b7ad6b7169203331-01", f"00-{good}-{'0' * 16}-01",
                      f"00-{good}-b7ad6b7169203331-01-more", f"00-{good}-b7ad6b7169203331-0",
                      "", "00", "x" * 55):
            answer = asked(value)
            expect(answer.status == 200 and answer.get("X-Request-Id") != good, value)


def a_token_is_not_needed_and_not_read_on_the_loopback():
    with Daemon() as daemon:
        basic = "Basic " + base64.b64encode(b"a:b").decode()
        got = daemon.ask("GET", "/v1/things/x", headers=[("Authorization", basic)]).json()
        expect(got["token"] == "local" and got["role"] == 3, got)


run(refuses_control_characters_in_values, a_nul_in_a_value_hides_no_header,
    refuses_names_that_are_no_tokens, refuses_a_head_beyond_the_memory_of_a_connection,
    takes_a_head_of_8_kb, refuses_doubled_headers, joins_lists_that_come_in_parts,
    answers_under_loopback_names_only_while_there_are_no_tokens, every_answer_carries_its_headers,
    an_answer_is_not_split_by_a_header, an_answer_cut_by_want_of_memory_is_503,
    takes_a_trace_id_where_it_is_well_formed, a_token_is_not_needed_and_not_read_on_the_loopback)
