#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Bodies: limits stated and chunked, the client that sends all before it reads, Expect, types.
Source: RFC 9110 sections 10.1.1, 15.5.14 and 15.5.16; the limits are Leeway's own."""
import http.client
import json
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

KB = 1024
CHUNKED = (b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
           b"Transfer-Encoding: chunked\r\n\r\n")


def takes_bodies_up_to_the_limit_of_the_route():
    with Daemon() as daemon, daemon.wire() as wire:
        for size in (0, 1, 100, 1995, 1996, 1997, 16 * KB, 64 * KB - 1, 64 * KB):
            body = b"x" * size
            answer = wire.ask("POST", "/echo", body)
            expect(answer.status == 200 and answer.body == body, size, answer.status)


def gives_handlers_a_body_with_an_end():
    with Daemon() as daemon, daemon.wire() as wire:
        for size in (0, 1, 4096, 4 * KB * KB):
            got = wire.ask("PUT", "/v1/things/x", b"x" * size).json()
            expect(got["body_len"] == size and got["body_end"] == 0, size, got)


def refuses_a_byte_more_and_goes_on():
    with Daemon() as daemon, daemon.wire() as wire:
        for size in (64 * KB + 1, 200 * KB, KB * KB):
            got = wire.ask("POST", "/echo", b"x" * size).problem(413, 1009)
            expect(got["got"] == f"{size} bytes" and "65536" in got["expected"], got)
        expect(wire.ask("POST", "/echo", "[]").body == b"[]", "the connection is spoiled")


def refuses_a_great_body_unread():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
                  b"Content-Length: 999999999999\r\n\r\n" + b"x" * 1000)
        answer = wire.answer()
        answer.problem(413, 1009)
        expect(answer.get("Connection") == "close" and wire.closed(), "the connection stays open")


def an_ordinary_client_gets_the_refusal_of_a_great_body():
    """It writes the whole body first and reads only then."""
    with Daemon() as daemon:
        client = http.client.HTTPConnection("127.0.0.1", daemon.port, timeout=20)
        client.request("POST", "/echo", body=b"x" * 900 * KB,
                       headers={"Content-Type": "application/json"})
        answer = client.getresponse()
        expect(answer.status == 413 and json.loads(answer.read())["code"] == 1009, answer.status)
        client.close()


def counts_chunked_bodies():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(CHUNKED + b"10000\r\n" + b"x" * 0x10000 + b"\r\n0\r\n\r\n")
        answer = wire.answer()
        expect(answer.status == 200 and len(answer.body) == 64 * KB, answer.status)
        wire.send(CHUNKED + b"10001\r\n" + b"x" * 0x10001 + b"\r\n0\r\n\r\n")
        wire.answer().problem(413, 1009)
        expect(wire.ask("POST", "/echo", "[]").body == b"[]", "the connection is spoiled")


def cuts_off_a_chunked_body_without_end():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(CHUNKED)
        sent = 0
        try:
            while sent < 64 * KB * KB:
                wire.send(b"4000\r\n" + b"x" * 0x4000 + b"\r\n")
                sent += 0x4000
        except (BrokenPipeError, ConnectionResetError):
            pass
        expect(sent < 32 * KB * KB, "it read on and on:", sent)
        expect(daemon.ask("GET", "/about").status == 200, "the daemon does not answer")


def gathers_bodies_that_come_byte_by_byte():
    with Daemon() as daemon, daemon.wire() as wire:
        body = b'{"a": [1, 2, 3]}'
        wire.send(b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
                  b"Content-Length: %d\r\n\r\n" % len(body))
        for i in range(len(body)):
            wire.send(body[i:i + 1])
        expect(wire.answer().body == body, "another body")


def refuses_a_body_where_none_is_taken():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.ask("GET", "/about", b"{}").problem(413, 1009)
        expect(wire.ask("GET", "/about").status == 200, "the connection is spoiled")


def says_100_continue_only_to_those_it_will_hear():
    head = (b"POST %s HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
            b"Expect: 100-continue\r\nContent-Length: %d\r\n\r\n")
    with Daemon() as daemon:
        with daemon.wire() as wire:
            wire.send(head % (b"/echo", 2))
            expect(wire.answer().status == 100, "100 expected")
            wire.send(b"{}")
            expect(wire.answer().body == b"{}", "another body")
        for target, size, status, code in ((b"/echo", 70000, 413, 1009), (b"/x", 2, 404, 1006)):
            with daemon.wire() as wire:
                wire.send(head % (target, size))
                wire.answer().problem(status, code)
                expect(wire.closed(), "the connection stays open")


def takes_json_only():
    with Daemon() as daemon, daemon.wire() as wire:
        for value in ("application/json", "Application/JSON", "application/json; charset=utf-8",
                      'application/json;charset="UTF-8"', "application/json ; x=y"):
            answer = wire.ask("POST", "/echo", "{}", headers=[("Content-Type", value)])
            expect(answer.status == 200, value, answer.status)
        for value in ("text/plain", "application/x-www-form-urlencoded", "application/jsonx",
                      "application/json; charset=latin-1", "application", ""):
            got = wire.ask("POST", "/echo", "{}", headers=[("Content-Type", value)])
            expect(got.problem(415, 1010).get("got", "") == value, value)
        wire.send(b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Length: 2\r\n\r\n{}")
        wire.answer().problem(415, 1010)


def an_absent_body_needs_no_type():
    with Daemon() as daemon, daemon.wire() as wire:
        got = wire.ask("POST", "/v1/things/x/parts/1/publish", headers=[("Content-Length", "0")])
        expect(got.status == 200 and got.json()["body_len"] == 0, got.status)
        got = wire.ask("POST", "/v1/things/x/parts/1/publish")
        expect(got.status == 200 and got.json()["body_len"] == 0, got.status)


run(takes_bodies_up_to_the_limit_of_the_route, gives_handlers_a_body_with_an_end,
    refuses_a_byte_more_and_goes_on, refuses_a_great_body_unread,
    an_ordinary_client_gets_the_refusal_of_a_great_body, counts_chunked_bodies,
    cuts_off_a_chunked_body_without_end, gathers_bodies_that_come_byte_by_byte,
    refuses_a_body_where_none_is_taken, says_100_continue_only_to_those_it_will_hear,
    takes_json_only, an_absent_body_needs_no_type)
