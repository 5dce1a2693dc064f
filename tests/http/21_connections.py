#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Too many connections: the one too many is told so, and when to come again; nobody waits unheard,
and once others have gone there is room again."""
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, Wire, expect, run  # noqa: E402


def turned_away(wire):
    """503 with Retry-After, whether or not the client has sent something first."""
    answer = wire.answer()
    expect(answer is not None, "closed without a word")
    answer.problem(503, 1019)
    expect(int(answer.get("Retry-After")) >= 1, answer.headers)
    expect(answer.get("Connection") == "close" and wire.closed(), "it stays open")
    return answer.json()


def answers_503_when_all_connections_are_taken():
    with Daemon("--connections", "8", "--connections-per-address", "100") as daemon:
        wires = [daemon.wire() for _ in range(8)]
        for wire in wires:
            expect(wire.ask("GET", "/about").status == 200, "200 expected")
        for send in (False, True):
            with daemon.wire() as wire:
                if send:
                    wire.send(b"GET /about HTTP/1.1\r\nHost: localhost\r\n\r\n")
                turned_away(wire)
        expect(wires[0].ask("GET", "/about").status == 200, "an old connection is disturbed")
        for wire in wires:
            wire.socket.close()
        time.sleep(0.2)
        expect(daemon.ask("GET", "/about").status == 200, "there is no room again")
        expect(daemon.metric('leeway_http_refused_total{reason="connections_full"}') == 2, "count")


def answers_503_to_an_address_with_too_many():
    path = None
    with Daemon("--connections-per-address", "4", "--unix",
                os.path.join("/tmp", f"lwt-{os.getpid()}.sock")) as daemon:
        path = os.path.join("/tmp", f"lwt-{os.getpid()}.sock")
        wires = [daemon.wire() for _ in range(4)]
        for wire in wires:
            expect(wire.ask("GET", "/about").status == 200, "200 expected")
        with daemon.wire() as wire:
            turned_away(wire)
        others = [Wire(path) for _ in range(6)]
        for wire in others:
            expect(wire.ask("GET", "/about").status == 200, "a Unix socket has no address")
        for wire in wires + others:
            wire.socket.close()
    expect(not os.path.exists(path), "the socket file is left over")


def survives_a_crowd():
    """Ten times as many as may come, at once; all get an answer and the rest works on."""
    with Daemon("--connections", "16", "--connections-per-address", "100") as daemon:
        wires = [daemon.wire() for _ in range(160)]
        got = {200: 0, 503: 0}
        for wire in wires:
            try:
                wire.send(b"GET /about HTTP/1.1\r\nHost: localhost\r\n\r\n")
            except OSError:
                pass
        reset = 0
        for wire in wires:
            try:
                answer = wire.answer()
                expect(answer is not None, "closed without a word")
                got[answer.status] += 1
            except ConnectionError:
                reset += 1  # beyond the 32 whose close is waited for
            wire.socket.close()
        expect(got[200] >= 16 and got[503] >= 32, got, reset)
        time.sleep(0.3)
        expect(daemon.ask("GET", "/about").status == 200, "there is no room again")


def goes_on_when_descriptors_run_out():
    few = ("sh", "-c", 'ulimit -n 60; exec "$@"', "sh")
    with Daemon("--connections", "200", "--connections-per-address", "200",
                prefix=few) as daemon:
        wires = [daemon.wire() for _ in range(100)]
        time.sleep(0.5)
        before = os.times()
        expect(wires[0].ask("GET", "/about").status == 200, "an old connection is disturbed")
        for wire in wires:
            wire.socket.close()
        time.sleep(0.5)
        expect(daemon.ask("GET", "/about").status == 200, "it does not accept again")
        expect(daemon.metric('leeway_http_refused_total{reason="descriptors"}') >= 1, "count")
        expect(os.times().elapsed - before.elapsed < 20, "it took too long")


run(answers_503_when_all_connections_are_taken, answers_503_to_an_address_with_too_many,
    survives_a_crowd, goes_on_when_descriptors_run_out)
