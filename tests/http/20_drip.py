#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Clients that send so slowly that each byte starts an inactivity timeout anew: a request's head and
body each have a time of their own, and nobody else is disturbed. (2 s here; 5 and 15 s by default.)"""
import socket
import threading
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

OPTIONS = ("--head-seconds", "2", "--body-seconds", "2", "--idle-seconds", "30")


def drips_until_closed(daemon, first, rest, wire=None):
    """Sends `first`, then a byte of `rest` each 0.2 s; seconds until the other side closed, and
    what it said."""
    wire = wire or daemon.wire()
    start = time.monotonic()
    said = b""
    wire.send(first)
    wire.socket.settimeout(0.2)
    with wire:
        for byte in rest * 100:
            try:
                wire.send(bytes([byte]))
                data = wire.socket.recv(65536)
                said += data
                if not data:
                    break
            except socket.timeout:
                pass
            except OSError:
                break
            if time.monotonic() - start > 10:
                break
    return time.monotonic() - start, said


def ends_between(seconds, low, high, said, status=b"HTTP/1.1 408"):
    expect(low <= seconds <= high, f"closed after {seconds:.1f} s, not {low} to {high} s")
    expect(said.startswith(status), "said", said[:80])


def ends_a_first_line_that_drips():
    with Daemon(*OPTIONS) as daemon:
        seconds, said = drips_until_closed(daemon, b"GET /abo", b"u")
        ends_between(seconds, 1.7, 4.0, said)
        expect(b'"code":1017' in said, said)
        expect(daemon.metric('leeway_http_refused_total{reason="slow_head"}') == 1, "not counted")


def ends_headers_that_drip():
    with Daemon(*OPTIONS) as daemon:
        seconds, said = drips_until_closed(
            daemon, b"GET /about HTTP/1.1\r\nHost: localhost\r\nX: ", b"a")
        ends_between(seconds, 1.7, 4.0, said)


def ends_a_body_that_drips():
    with Daemon(*OPTIONS) as daemon:
        seconds, said = drips_until_closed(
            daemon, b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
            b"Content-Length: 5000\r\n\r\n", b"1")
        ends_between(seconds, 1.7, 4.0, said)
        expect(daemon.metric('leeway_http_refused_total{reason="slow_body"}') == 1, "not counted")


def ends_a_refused_body_that_drips():
    with Daemon(*OPTIONS) as daemon:
        seconds, said = drips_until_closed(
            daemon, b"POST /nothing HTTP/1.1\r\nHost: localhost\r\nContent-Length: 5000\r\n\r\n", b"1")
        ends_between(seconds, 1.7, 4.0, said)


def ends_chunks_that_drip():
    with Daemon(*OPTIONS) as daemon:
        seconds, said = drips_until_closed(
            daemon, b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
            b"Transfer-Encoding: chunked\r\n\r\n", b"1\r\n1\r\n")
        ends_between(seconds, 1.7, 4.0, said)


def ends_a_second_request_that_drips():
    with Daemon(*OPTIONS) as daemon:
        wire = daemon.wire()
        expect(wire.ask("GET", "/about").status == 200, "200 expected")
        time.sleep(0.6)
        seconds, said = drips_until_closed(daemon, b"GE", b"T", wire)
        ends_between(seconds, 1.7, 4.0, said)


def ends_a_connection_that_is_silent():
    with Daemon("--idle-seconds", "1", "--head-seconds", "2") as daemon, daemon.wire() as wire:
        start = time.monotonic()
        expect(wire.ask("GET", "/about").status == 200, "200 expected")
        expect(wire.closed(), "it stays open")
        expect(0.5 <= time.monotonic() - start <= 5, time.monotonic() - start)


def keeps_a_silent_connection_for_longer_than_a_head_may_take():
    with Daemon(*OPTIONS) as daemon, daemon.wire() as fresh, daemon.wire() as used:
        expect(used.ask("GET", "/about").status == 200, "200 expected")
        time.sleep(4)
        for wire in (fresh, used):
            expect(wire.ask("GET", "/about").status == 200, "it was closed")


def a_long_question_is_not_a_slow_client():
    with Daemon(*OPTIONS) as daemon, daemon.wire() as wire:
        expect(wire.ask("POST", "/slow?ms=4500", "{}").status == 200, "200 expected")
        expect(wire.ask("GET", "/about").status == 200, "200 expected")


def notices_clients_that_leave_with_their_last_bytes():
    """The end of the stream comes together with half a request, on a connection used before."""
    with Daemon("--idle-seconds", "60", "--head-seconds", "60", "--body-seconds", "60") as daemon:
        for half in (b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
                     b"Content-Length: 100\r\n\r\nhalf", b"GET /about HTTP/1.1\r\nHost: loc",
                     b"GE", b"GET /about HTTP/1.1\r\nHost: localhost\r\n\r\n"):
            with daemon.wire() as wire:
                expect(wire.ask("GET", "/about").status == 200, "200 expected")
                wire.socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_CORK, 1)
                wire.send(half)
                start = time.monotonic()
                wire.socket.shutdown(socket.SHUT_WR)
                if half.endswith(b"localhost\r\n\r\n"):
                    expect(wire.answer().status == 200, "the last question is not answered")
                expect(wire.closed(), "it stays open after", half)
                expect(time.monotonic() - start < 3, time.monotonic() - start)


def others_do_not_notice():
    with Daemon(*OPTIONS) as daemon:
        head = b"GET /about HTTP/1.1\r\nHost: localhost\r\nX: "
        threads = [threading.Thread(target=drips_until_closed, args=(daemon, head, b"a"))
                   for _ in range(40)]
        for thread in threads:
            thread.start()
        worst = 0
        with daemon.wire() as wire:
            until = time.monotonic() + 3
            while time.monotonic() < until:
                start = time.monotonic()
                expect(wire.ask("POST", "/echo", "[1]").body == b"[1]", "another body")
                worst = max(worst, time.monotonic() - start)
                time.sleep(0.002)
        for thread in threads:
            thread.join()
        expect(worst < 0.5, f"the slowest answer took {worst:.3f} s")
        expect(daemon.metric("leeway_http_connections") <= 2, "connections are left over")


run(ends_a_first_line_that_drips, ends_headers_that_drip, ends_a_body_that_drips,
    ends_a_refused_body_that_drips, ends_chunks_that_drip, ends_a_second_request_that_drips,
    ends_a_connection_that_is_silent, keeps_a_silent_connection_for_longer_than_a_head_may_take,
    a_long_question_is_not_a_slow_client, notices_clients_that_leave_with_their_last_bytes,
    others_do_not_notice)
