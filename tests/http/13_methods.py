#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Methods and routes. Source: RFC 9110 sections 9.1, 9.3.2, 10.2.1 and 15.5.6."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402


def names_the_methods_of_a_path():
    with Daemon() as daemon, daemon.wire() as wire:
        for method, target, allow in (("POST", "/about", "GET, HEAD"), ("GET", "/echo", "POST"),
                                      ("DELETE", "/v1/things/x", "GET, HEAD, PUT"),
                                      ("FOO", "/v1/things/x/ask", "GET, HEAD, POST"),
                                      ("OPTIONS", "/slow", "GET, HEAD, POST"),
                                      ("get", "/about", "GET, HEAD"),
                                      ("TRACE", "/about", "GET, HEAD"),
                                      ("HEAD", "/v1/things/x/parts/y/publish", "POST")):
            answer = wire.ask(method, target)
            if method != "HEAD":
                answer.problem(405, 1007)
            expect(answer.status == 405 and answer.get("Allow") == allow, method, target,
                   answer.status, answer.headers)


def an_unknown_path_is_404_for_any_method():
    with Daemon() as daemon, daemon.wire() as wire:
        for method in ("GET", "POST", "FOO", "DELETE"):
            wire.ask(method, "/nothing").problem(404, 1006)


def head_is_get_without_a_body():
    with Daemon() as daemon, daemon.wire() as wire:
        for target in ("/about", "/v1/things/x?a=1", "/nothing", "/slow?ms=1"):
            get = wire.ask("GET", target)
            head = wire.ask("HEAD", target)
            expect(head.status == get.status, target, head.status)
            for name in ("Content-Length", "Content-Type", "ETag"):
                expect(head.get(name) == get.get(name), target, name, head.headers)
        expect(wire.ask("GET", "/v1/things/x").json()["method"] == 0, "the handler does not see GET")


def routes_capture_what_stands_between():
    with Daemon() as daemon, daemon.wire() as wire:
        got = wire.ask("POST", "/v1/things/m-1/parts/2/publish", "{}").json()
        expect(got["param"] == ["m-1", "2"], got)
        expect(wire.ask("GET", "/v1/things").json()["param"] == [], "captures")


def fast_routes_run_on_lane_0_and_slow_ones_on_others():
    with Daemon("--workers", "3") as daemon, daemon.wire() as wire:
        lanes = {wire.ask("GET", "/v1/things/x").json()["lane"] for _ in range(50)}
        expect(lanes == {0}, lanes)
        lanes = {wire.ask("GET", "/slow?ms=0").json()["lane"] for _ in range(50)}
        expect(lanes and lanes <= {1, 2, 3}, lanes)


def a_batch_runs_on_another_lane_though_its_route_is_fast():
    """A body of more than 2 kB holds many questions: milliseconds, which others must not wait."""
    with Daemon() as daemon, daemon.wire() as wire:
        expect(wire.ask("POST", "/v1/things/x/ask", b"x" * 2048).json()["lane"] == 0, "2048 bytes")
        got = wire.ask("POST", "/v1/things/x/ask", b"x" * 2049).json()
        expect(got["lane"] > 0 and got["body_len"] == 2049, got)


run(names_the_methods_of_a_path, an_unknown_path_is_404_for_any_method, head_is_get_without_a_body,
    routes_capture_what_stands_between, fast_routes_run_on_lane_0_and_slow_ones_on_others,
    a_batch_runs_on_another_lane_though_its_route_is_fast)
