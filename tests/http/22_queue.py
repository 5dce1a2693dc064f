#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Long questions beside short ones: they run in workers with the connection suspended, wait in a
bounded queue, are each answered once, and never hold up a short one."""
import threading
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run, sanitized  # noqa: E402


def ask_all(daemon, targets):
    """Asks each target on a connection of its own at the same time; the answers in order."""
    wires = [daemon.wire() for _ in targets]
    for wire, target in zip(wires, targets):
        wire.send(f"GET {target} HTTP/1.1\r\nHost: localhost\r\n\r\n")
    answers = [wire.answer() for wire in wires]
    for wire in wires:
        wire.socket.close()
    return answers


def runs_as_many_at_once_as_there_are_workers():
    with Daemon("--workers", "4") as daemon:
        start = time.monotonic()
        answers = ask_all(daemon, ["/slow?ms=400"] * 8)
        seconds = time.monotonic() - start
        expect(all(a.status == 200 for a in answers), [a.status for a in answers])
        expect(0.75 <= seconds < 2.5, f"8 questions of 0.4 s on 4 workers took {seconds:.2f} s")
        expect({a.json()["lane"] for a in answers} == {1, 2, 3, 4}, "not every worker worked")


def answers_503_when_the_queue_is_full():
    with Daemon("--workers", "1", "--queue", "3") as daemon:
        wires = [daemon.wire() for _ in range(8)]
        for wire in wires:
            wire.send(b"GET /slow?ms=300 HTTP/1.1\r\nHost: localhost\r\n\r\n")
            time.sleep(0.02)
        answers = [wire.answer() for wire in wires]
        status = [a.status for a in answers]
        expect(status.count(200) == 4 and status.count(503) == 4, status)
        for answer in answers:
            if answer.status == 503:
                answer.problem(503, 1015)
                expect(int(answer.get("Retry-After")) >= 1, answer.headers)
        for wire in wires:
            expect(wire.ask("GET", "/about").status == 200, "a connection is spoiled")
            wire.socket.close()
        expect(daemon.metric('leeway_http_refused_total{reason="queue_full"}') == 4, "count")
        expect(daemon.metric("leeway_http_queue_depth") == 0, "the queue is not empty")


def short_questions_do_not_wait_for_long_ones():
    with Daemon("--workers", "2") as daemon:
        stop = threading.Event()

        def keep_asking():
            with daemon.wire() as wire:
                while not stop.is_set():
                    wire.ask("POST", "/slow?ms=200", "{}")

        threads = [threading.Thread(target=keep_asking) for _ in range(6)]
        for thread in threads:
            thread.start()
        took = []
        with daemon.wire() as wire:
            until = time.monotonic() + 1.5
            while time.monotonic() < until:
                start = time.monotonic()
                expect(wire.ask("POST", "/echo", "[1]").status == 200, "200 expected")
                took.append(time.monotonic() - start)
        stop.set()
        for thread in threads:
            thread.join()
        took.sort()
        median = took[len(took) // 2]
        expect(median < 0.02, f"median {median * 1e3:.1f} ms beside questions of 200 ms")


def answers_each_once_and_its_own():
    """Thousands of suspensions and resumptions, each answer the echo of its own question."""
    each = 60 if sanitized() else 250
    wrong = []

    with Daemon("--workers", "4") as daemon:
        def ask(number):
            with daemon.wire() as wire:
                for i in range(each):
                    body = b"[%d,%d]" % (number, i)
                    answer = wire.ask("POST", "/slow?ms=0", body)
                    if answer.status != 200 or answer.body != body:
                        wrong.append((answer.status, answer.body, body))

        threads = [threading.Thread(target=ask, args=(n,)) for n in range(16)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        expect(not wrong, wrong[:3])
        expect(daemon.metric('leeway_http_requests_total{route="slow",status="2xx"}') == 16 * each,
               "count")


def pipelined_long_questions_come_in_order():
    with Daemon() as daemon, daemon.wire() as wire:
        for i in range(20):
            wire.send("POST /slow?ms=%d HTTP/1.1\r\nHost: localhost\r\nContent-Length: 2\r\n"
                      "Content-Type: application/json\r\n\r\n%02d" % (5 - i % 5, i))
        got = [wire.answer().body for _ in range(20)]
        expect(got == [b"%02d" % i for i in range(20)], got)


def a_client_that_leaves_costs_nothing():
    with Daemon("--workers", "2") as daemon:
        for _ in range(20):
            with daemon.wire() as wire:
                wire.send(b"GET /slow?ms=50 HTTP/1.1\r\nHost: localhost\r\n\r\n")
        time.sleep(1.5)
        expect(daemon.metric("leeway_http_connections") == 1, "connections are left over")
        expect(daemon.metric("leeway_http_requests_in_flight") == 1, "requests are left over")


run(runs_as_many_at_once_as_there_are_workers, answers_503_when_the_queue_is_full,
    short_questions_do_not_wait_for_long_ones, answers_each_once_and_its_own,
    pipelined_long_questions_come_in_order, a_client_that_leaves_costs_nothing)
