#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""SIGTERM while a new document's list of all solutions is being made, which takes longer than the
patience of the stop: the client is told, the work ends within a few paths and the daemon with it,
and the catalog holds nothing of the half-done document and is whole."""
import os
import shutil
import signal
import sys
import tempfile
import time

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run, sanitized  # noqa: E402

HOPPER = "/v1/mechanisms/belt-hopper"
PATIENCE_S = 1
# After its patience: 1 s for the 503s to go out, and a moment for the worker to come back.
BOUND_S = PATIENCE_S + 1 + 1


def stops_in_bounded_time_and_keeps_the_catalog_whole():
    with open(os.path.join(HERE, "..", "..", "deploy", "demo", "belt-hopper.json"),
              encoding="utf-8") as f:
        document = f.read()
    data = tempfile.mkdtemp(prefix="lwt-stop-")
    try:
        # So many paths that the list is at work for a minute; the set of this machine stays open.
        with Daemon("--data", data, "--drain-seconds", str(PATIENCE_S), "--prepare-paths",
                    "10000000") as daemon:
            wire = daemon.wire(timeout=60)
            wire.send(b"PUT %s HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
                      b"Content-Length: %d\r\n\r\n%s"
                      % (HOPPER.encode(), len(document.encode()), document.encode()))
            time.sleep(0.5)
            start = time.monotonic()
            daemon.signal(signal.SIGTERM)
            answer = wire.answer()
            answer.problem(503, 1016)
            expect(int(answer.get("Retry-After")) >= 1, answer.headers)
            daemon.wait()
            took = time.monotonic() - start
            slack = 20 if sanitized() else 8  # the machine has other work
            expect(took < BOUND_S + slack, f"it took {took:.1f} s")
            expect("leaving without it" not in daemon.log(), daemon.log())
        with Daemon("--data", data, "--prepare-paths", "10") as daemon:
            expect(daemon.ask("GET", HOPPER).status == 404, "half a document was kept")
            stored = daemon.ask("PUT", HOPPER, document)
            expect(stored.status == 201, stored.status, stored.body)
    finally:
        shutil.rmtree(data, ignore_errors=True)


run(stops_in_bounded_time_and_keeps_the_catalog_whole)
