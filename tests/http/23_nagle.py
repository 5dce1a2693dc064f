#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Clients that write head and body apart with Nagle's algorithm on, as the socket blocks of PLCs do:
the kernel holds the body back until our acknowledgement, which it delays by 40 ms. The daemon
notices and acknowledges such a client's heads at once."""
import statistics
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402


def a_client_with_nagle_on_does_not_wait_for_acknowledgements():
    with Daemon() as daemon, daemon.wire(nodelay=False) as wire:
        took = []
        for _ in range(60):
            start = time.monotonic()
            wire.send(b"POST /echo HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
                      b"Content-Length: 2\r\n\r\n")
            wire.send(b"{}")
            expect(wire.answer().body == b"{}", "another body")
            took.append((time.monotonic() - start) * 1e3)
        median = statistics.median(took[5:])
        late = sum(t > 30 for t in took[5:])
        expect(median < 15 and late <= 8, f"median {median:.1f} ms, {late} of 55 above 30 ms")


run(a_client_with_nagle_on_does_not_wait_for_acknowledgements)
