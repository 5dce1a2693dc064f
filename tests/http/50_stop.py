#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Stopping under load: every request that was begun is answered, none is answered in part, long
questions that do not end in time get a 503, and the daemon leaves with exit status 0."""
import signal
import socket
import threading
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run, sanitized  # noqa: E402

BODY = b"[1,2,3]"
ASK = (b"POST %s HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
       b"Content-Length: 7\r\n\r\n" + BODY)


class Client(threading.Thread):
    """Asks over one kept connection until it is told that the connection closes. What it was not
    told and yet cut off from is noted in `lost`."""

    def __init__(self, daemon, target, pause=0.0):
        super().__init__()
        self.daemon_asked, self.target, self.pause = daemon, target, pause
        self.answered, self.lost, self.told = 0, [], False

    def run(self):
        with self.daemon_asked.wire() as wire:
            while True:
                try:
                    wire.send(ASK % self.target)
                    answer = wire.answer()
                except Exception as error:  # a reset, a part of an answer
                    self.lost.append(repr(error))
                    return
                if answer is None:
                    self.lost.append("closed without an answer")
                    return
                if answer.status != 200 or answer.body != BODY:
                    self.lost.append((answer.status, answer.body))
                    return
                self.answered += 1
                if answer.get("Connection") == "close":
                    self.told = True
                    return
                time.sleep(self.pause)


def loses_no_begun_answer():
    """Several rounds, since what can go wrong is a matter of moments."""
    for target in (b"/echo", b"/slow?ms=3"):
        for _ in range(3 if sanitized() else 8):
            with Daemon("--workers", "3") as daemon:
                clients = [Client(daemon, target) for _ in range(24)]
                for client in clients:
                    client.start()
                time.sleep(0.25)
                daemon.signal(signal.SIGTERM)
                for client in clients:
                    client.join()
                expect(daemon.wait() == 0, "exit status", daemon.process.returncode)
                lost = [c.lost for c in clients if c.lost]
                expect(not lost, f"{len(lost)} of {len(clients)} clients lost an answer:", lost[:3])
                expect(all(c.told for c in clients), "not told that the connection closes")
                done = sum(c.answered for c in clients)
                logged = sum(r["status"] == "200" for r in daemon.requests())
                expect(done == logged, f"{done} answers came, {logged} were logged")


def tells_clients_that_pause_between_questions():
    """Ones that poll every 50 ms are told with their next answer, not cut off while they pause."""
    with Daemon() as daemon:
        clients = [Client(daemon, b"/echo", 0.05) for _ in range(12)]
        for client in clients:
            client.start()
        time.sleep(0.4)
        daemon.signal(signal.SIGTERM)
        for client in clients:
            client.join()
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)
        expect(all(c.told and not c.lost for c in clients), [c.lost for c in clients if c.lost])


def answers_new_connections_that_the_kernel_has_taken():
    """Requests on connections that were made before the signal but not yet accepted."""
    with Daemon() as daemon:
        daemon.signal(signal.SIGSTOP)
        wires = [daemon.wire() for _ in range(20)]
        for wire in wires:
            wire.send(ASK % b"/echo")
        daemon.signal(signal.SIGTERM)
        daemon.signal(signal.SIGCONT)
        for wire in wires:
            answer = wire.answer()
            expect(answer is not None and answer.body == BODY, "closed without an answer")
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)


def waits_for_long_questions():
    with Daemon("--workers", "2") as daemon:
        wires = [daemon.wire() for _ in range(4)]
        for wire in wires:
            wire.send(ASK % b"/slow?ms=700")
        time.sleep(0.2)
        start = time.monotonic()
        daemon.signal(signal.SIGTERM)
        for wire in wires:
            answer = wire.answer()
            expect(answer.status == 200 and answer.body == BODY, answer.status)
            expect(answer.get("Connection") == "close", answer.headers)
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)
        expect(time.monotonic() - start < 5, "it took too long")


def waits_for_a_body_under_way():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.send((ASK % b"/echo")[:-3])
        time.sleep(0.2)
        daemon.signal(signal.SIGTERM)
        time.sleep(0.5)
        wire.send(BODY[-3:])
        answer = wire.answer()
        expect(answer is not None and answer.body == BODY, "closed without an answer")
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)


def gives_up_on_questions_that_do_not_end_in_time():
    """Two run and three wait when patience ends; each gets a 503, none is left suspended."""
    with Daemon("--workers", "2", "--drain-seconds", "1") as daemon:
        wires = [daemon.wire() for _ in range(5)]
        for wire in wires:
            wire.send(ASK % b"/slow?ms=2500")
            time.sleep(0.02)
        start = time.monotonic()
        daemon.signal(signal.SIGTERM)
        for wire in wires:
            answer = wire.answer()
            answer.problem(503, 1016)
            expect(int(answer.get("Retry-After")) >= 1, answer.headers)
        expect(0.8 <= time.monotonic() - start < 3, time.monotonic() - start)
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)


def leaves_when_a_question_never_ends():
    """The handler outlives all patience: the daemon ends without it and says so."""
    with Daemon("--workers", "1", "--drain-seconds", "1", expect_status=1) as daemon:
        wire = daemon.wire()
        wire.send(ASK % b"/slow?ms=60000")
        time.sleep(0.2)
        daemon.signal(signal.SIGTERM)
        wire.answer().problem(503, 1016)
        start = time.monotonic()
        daemon.wait()
        expect(time.monotonic() - start < 15, "it took too long")
        expect("still being worked on" in daemon.log(), daemon.log())


def idle_connections_do_not_hold_it_up():
    with Daemon() as daemon:
        wires = [daemon.wire() for _ in range(30)]
        for wire in wires[:15]:
            expect(wire.ask("GET", "/about").status == 200, "200 expected")
        start = time.monotonic()
        daemon.signal(signal.SIGINT)
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)
        expect(time.monotonic() - start < 3, f"it took {time.monotonic() - start:.1f} s")
        for wire in wires:
            expect(wire.closed(), "a connection is open")


def clients_that_do_not_read_do_not_hold_it_up_for_ever():
    with Daemon("--drain-seconds", "2") as daemon:
        wires = [daemon.wire() for _ in range(4)]
        for wire in wires:
            wire.socket.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 4096)
            wire.send(b"GET /big?bytes=30000000 HTTP/1.1\r\nHost: localhost\r\n\r\n")
        time.sleep(0.5)
        start = time.monotonic()
        daemon.signal(signal.SIGTERM)
        expect(daemon.wait() == 0, "exit status", daemon.process.returncode)
        expect(time.monotonic() - start < 12, f"it took {time.monotonic() - start:.1f} s")


def resets_in_the_middle_of_answers_kill_nothing():
    """SIGPIPE and broken sockets."""
    with Daemon() as daemon:
        for _ in range(15 if sanitized() else 100):
            wire = daemon.wire()
            wire.send(b"GET /big?bytes=3000000 HTTP/1.1\r\nHost: localhost\r\n\r\n" * 3)
            wire.socket.recv(100)
            wire.socket.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, b"\1\0\0\0\0\0\0\0")
            wire.socket.close()
        expect(daemon.ask("GET", "/about").status == 200, "it does not answer")


run(loses_no_begun_answer, tells_clients_that_pause_between_questions,
    answers_new_connections_that_the_kernel_has_taken,
    waits_for_long_questions, waits_for_a_body_under_way,
    gives_up_on_questions_that_do_not_end_in_time, leaves_when_a_question_never_ends,
    idle_connections_do_not_hold_it_up, clients_that_do_not_read_do_not_hold_it_up_for_ever,
    resets_in_the_middle_of_answers_kill_nothing)
