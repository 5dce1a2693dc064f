#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""/metrics: clean by promtool (Debian package prometheus), its figures true. Source of the format:
the Prometheus text exposition format 0.0.4."""
import re
import subprocess
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402


def promtool_finds_nothing():
    with Daemon() as daemon, daemon.wire() as wire:
        for target in ("/about", "/nothing", "/faulty", "/memory", "/slow?ms=1", "/v1/things/x"):
            wire.ask("GET", target)
        answer = wire.ask("GET", "/metrics")
        expect(answer.get("Content-Type").startswith("text/plain; version=0.0.4"), answer.headers)
        done = subprocess.run(["promtool", "check", "metrics"], input=answer.body, timeout=60,
                              capture_output=True, check=False)
        expect(done.returncode == 0 and not done.stderr and not done.stdout, done)


def counts_by_route_and_class():
    with Daemon() as daemon, daemon.wire() as wire:
        for _ in range(7):
            wire.ask("GET", "/about")
        for _ in range(3):
            wire.ask("GET", "/nothing")
        wire.ask("GET", "/faulty")
        wire.ask("GET", "/v1/things/x/ask")
        wire.ask("POST", "/v1/things/x/ask", "{}")
        wire.ask("POST", "/v1/things/x/ask", "{}", headers=[("Content-Type", "text/plain")])
        wire.ask("POST", "/about", "{}")
        total = "leeway_http_requests_total"
        for route, status, n in (("about", "2xx", 7), ("none", "4xx", 4), ("faulty", "4xx", 1),
                                 ("ask", "2xx", 2), ("ask", "4xx", 1), ("echo", "2xx", 0)):
            expect(daemon.metric(f'{total}{{route="{route}",status="{status}"}}') == n, route, status)
        refused = "leeway_http_refused_total"
        for reason, n in (("route", 3), ("method", 1), ("media_type", 1), ("framing", 0)):
            expect(daemon.metric(f'{refused}{{reason="{reason}"}}') == n, reason)


def durations_fall_into_their_buckets():
    with Daemon() as daemon, daemon.wire() as wire:
        for _ in range(4):
            wire.ask("GET", "/slow?ms=120")
        name = "leeway_http_request_duration_seconds"
        expect(daemon.metric(f'{name}_bucket{{route="slow",le="0.1"}}') == 0, "le 0.1")
        expect(daemon.metric(f'{name}_bucket{{route="slow",le="5"}}') == 4, "le 5")
        expect(daemon.metric(f'{name}_bucket{{route="slow",le="+Inf"}}') == 4, "le +Inf")
        expect(daemon.metric(f'{name}_count{{route="slow"}}') == 4, "count")
        expect(0.48 <= daemon.metric(f'{name}_sum{{route="slow"}}') < 10, "sum")


def gauges_follow():
    with Daemon() as daemon:
        wires = [daemon.wire() for _ in range(5)]
        wires[0].send(b"GET /slow?ms=800 HTTP/1.1\r\nHost: localhost\r\n\r\n")
        time.sleep(0.3)
        expect(daemon.metric("leeway_http_connections") == 6, "connections")
        expect(daemon.metric("leeway_http_requests_in_flight") == 2, "in flight")
        expect(daemon.metric("leeway_ready") == 1, "ready")
        expect(wires[0].answer().status == 200, "200 expected")
        for wire in wires:
            wire.socket.close()
        expect(abs(daemon.metric("process_start_time_seconds") - time.time()) < 60, "start")
        resident = daemon.metric("process_resident_memory_bytes") / 1024
        expect(0.5 < resident / daemon.resident_kb() < 2, resident)
        text = daemon.ask("GET", "/metrics").body.decode()
        expect(re.search(r'^leeway_build_info\{version="\d+\.\d+\.\d+"\} 1$', text, re.M), "build info")


run(promtool_finds_nothing, counts_by_route_and_class, durations_fall_into_their_buckets,
    gauges_follow)
