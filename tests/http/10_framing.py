#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Where a request ends must be certain: a proxy in front may read an ambiguous one otherwise and so
let a second request through unseen. Source of the rules: RFC 9112 sections 5.1, 6.1 to 6.3."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

HEAD = b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
HIDDEN = b"GET /v1/things/hidden HTTP/1.1\r\nHost: localhost\r\n\r\n"


def refused(head, body, code=1001, status=400):
    """One problem comes back, the connection closes, and nothing behind it was answered."""
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(head + b"\r\n" + body + HIDDEN)
        answer = wire.answer()
        answer.problem(status, code)
        expect(answer.get("Connection") == "close", "Connection: close expected", answer.headers)
        expect(wire.closed(), "the connection stays open, or more came:", wire.buffer)
        daemon.stop()
        expect(not any(r["route"] == "thing" for r in daemon.requests()),
               "the hidden request was answered")


def refuses_two_different_lengths():
    refused(HEAD + b"Content-Length: 2\r\nContent-Length: 60\r\n", b"{}")


def refuses_two_equal_lengths():
    refused(HEAD + b"Content-Length: 2\r\nContent-Length: 2\r\n", b"{}")


def refuses_a_length_beside_chunks():
    refused(HEAD + b"Content-Length: 2\r\nTransfer-Encoding: chunked\r\n", b"2\r\n{}\r\n0\r\n\r\n")


def refuses_chunks_beside_a_length():
    refused(HEAD + b"Transfer-Encoding: chunked\r\nContent-Length: 2\r\n", b"2\r\n{}\r\n0\r\n\r\n")


def refuses_another_coding():
    refused(HEAD + b"Transfer-Encoding: gzip\r\n", b"")


def refuses_a_second_coding():
    refused(HEAD + b"Transfer-Encoding: gzip, chunked\r\n", b"2\r\n{}\r\n0\r\n\r\n")


def refuses_chunked_twice():
    refused(HEAD + b"Transfer-Encoding: chunked\r\nTransfer-Encoding: chunked\r\n",
            b"2\r\n{}\r\n0\r\n\r\n")


def refuses_chunked_by_another_name():
    refused(HEAD + b"Transfer-Encoding: xchunked\r\n", b"2\r\n{}\r\n0\r\n\r\n")


def refuses_a_blank_before_the_colon():
    refused(HEAD + b"Content-Length : 2\r\n", b"{}")


def refuses_chunks_in_http_1_0():
    refused(HEAD.replace(b"HTTP/1.1", b"HTTP/1.0") + b"Transfer-Encoding: chunked\r\n",
            b"2\r\n{}\r\n0\r\n\r\n")


def refuses_two_hosts():
    refused(HEAD + b"Host: elsewhere\r\nContent-Length: 2\r\n", b"{}")


def refuses_an_unknown_expectation():
    refused(HEAD + b"Expect: a-miracle\r\nContent-Length: 2\r\n", b"{}", 1005, 417)


def refuses_a_length_that_is_no_number():
    """The library's own answer: the status is right, the body is not JSON; clients must branch on
    the status."""
    for length in (b"2x", b"-2", b"0x10", b"99999999999999999999999999"):
        with Daemon() as daemon, daemon.wire() as wire:
            wire.send(HEAD + b"Content-Length: " + length + b"\r\n\r\n{}" + HIDDEN)
            first = wire.socket.recv(12)
            expect(first in (b"HTTP/1.1 400", b"HTTP/1.1 413"), length, first)
            wire.closed()
            daemon.stop()
            expect(not any(r["route"] == "thing" for r in daemon.requests()),
                   "the hidden request was answered")


def refuses_a_missing_host():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"GET /about HTTP/1.1\r\n\r\n")
        expect(wire.socket.recv(12) == b"HTTP/1.1 400", "400 expected")


def takes_chunks():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(HEAD + b"Transfer-Encoding: Chunked\r\n\r\n3\r\n[1,\r\n3;x=y\r\n2] \r\n0\r\n\r\n")
        answer = wire.answer()
        expect((answer.status, answer.body) == (200, b"[1,2] "), answer.status, answer.body)
        expect(wire.ask("GET", "/about").status == 200, "the connection is spoiled")


def answers_pipelined_requests_in_order():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send(b"".join(HEAD + b"Content-Length: %d\r\n\r\n%d" % (len(str(i)), i)
                           for i in range(200)))
        got = [wire.answer().body for _ in range(200)]
        expect(got == [b"%d" % i for i in range(200)], "out of order:", got)


def answers_http_1_0():
    with Daemon() as daemon:
        with daemon.wire() as wire:
            wire.send(b"GET /about HTTP/1.0\r\n\r\n")
            expect(wire.answer().status == 200, "200 expected")
            expect(wire.closed(), "an HTTP/1.0 connection stays open without keep-alive")
        with daemon.wire() as wire:
            for _ in range(2):
                wire.send(b"GET /about HTTP/1.0\r\nConnection: keep-alive\r\n\r\n")
                expect(wire.answer().status == 200, "200 expected")


run(refuses_two_different_lengths, refuses_two_equal_lengths, refuses_a_length_beside_chunks,
    refuses_chunks_beside_a_length, refuses_another_coding, refuses_a_second_coding,
    refuses_chunked_twice, refuses_chunked_by_another_name, refuses_a_blank_before_the_colon,
    refuses_chunks_in_http_1_0, refuses_two_hosts, refuses_an_unknown_expectation,
    refuses_a_length_that_is_no_number, refuses_a_missing_host, takes_chunks,
    answers_pipelined_requests_in_order, answers_http_1_0)
