#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Forms of answer: 406 where nothing is welcome, problems in the form asked for. Source: RFC 9110
section 12.5.1, RFC 9457, and for text/plain Leeway's own short form for PLCs."""
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402


def refuses_an_accept_that_allows_nothing():
    with Daemon() as daemon, daemon.wire() as wire:
        for value in ("application/xml", "text/html, application/xhtml+xml", "*/*;q=0",
                      "application/json;q=0, text/*;q=0, image/webp"):
            got = wire.ask("GET", "/about", headers=[("Accept", value)]).problem(406, 1008)
            expect(got["got"] == value, got)


def takes_every_accept_that_allows_something():
    with Daemon() as daemon, daemon.wire() as wire:
        for value in ("", "*/*", "application/*", "text/plain", "application/json;q=0.001",
                      "text/html, */*;q=0.1", "application/problem+json", "APPLICATION/JSON",
                      'application/json; profile="a,b;q=0"', "text/plain;version=0.0.4;q=0.5",
                      "application/json;q=2"):
            answer = wire.ask("GET", "/about", headers=[("Accept", value)])
            expect(answer.status == 200, value, answer.status)


def problems_come_as_two_lines_to_those_who_want_text():
    with Daemon() as daemon, daemon.wire() as wire:
        answer = wire.ask("GET", "/nothing", headers=[("Accept", "text/plain")])
        expect(answer.status == 404 and answer.get("Content-Type").startswith("text/plain"), answer)
        lines = answer.body.decode("ascii").splitlines()
        expect(lines[0] == "code=1006" and lines[1].startswith("what="), lines)
        expect(len(answer.body) <= 255, len(answer.body))


run(refuses_an_accept_that_allows_nothing, takes_every_accept_that_allows_something,
    problems_come_as_two_lines_to_those_who_want_text)
