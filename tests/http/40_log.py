#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The log: a line a request, its figures true, readable by machines, and a reader who stops reading
does not stop the daemon."""
import re
import subprocess
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, Wire, expect, program, run, sanitized  # noqa: E402

LINE = re.compile(r'^time=\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{3}Z level=(error|warn|info|debug) '
                  r'event=\w+( \w+=("(\\.|[^"\\])*"|[^ "=]+))*$')


def a_line_a_request_with_true_figures():
    with Daemon() as daemon, daemon.wire() as wire:
        wire.ask("POST", "/echo", "[1,2]")
        wire.ask("HEAD", "/about")
        wire.ask("PUT", "/nothing", "{}")
        slow = wire.ask("GET", "/slow?ms=60&secret=1")
        wire.ask("BREW", "/about")
        daemon.stop()
        for line in daemon.log().splitlines():
            expect(LINE.match(line), "not key=value:", line)
        got = [(r["method"], r["route"], r["status"], r["code"], r["bytes"], r["token"])
               for r in daemon.requests()]
        expect(got[0] == ("POST", "echo", "200", "1", "5", "local"), got[0])
        expect(got[1][:4] == ("HEAD", "about", "200", "0"), got[1])
        expect(got[2][:4] == ("PUT", "none", "404", "1006"), got[2])
        expect(got[3][:3] == ("GET", "slow", "200"), got[3])
        expect(got[4][:4] == ("other", "none", "405", "1007"), got[4])
        line = daemon.requests()[3]
        expect(60000 <= int(line["us"]) < 5000000, line)
        expect(line["id"] == slow.get("X-Request-Id") and line["bytes"] == str(len(slow.body)), line)
        expect("secret" not in daemon.log(), "query text is logged")


def levels_hold_back_what_is_below_them():
    with Daemon("--log-level", "warn") as daemon:
        expect(daemon.ask("GET", "/about").status == 200, "200 expected")
        daemon.ask("GET", "/memory")
        daemon.stop()
        lines = daemon.log().splitlines()
        expect(len(lines) == 1 and "level=warn" in lines[0] and "status=503" in lines[0], lines)


def the_library_s_complaints_are_few():
    with Daemon("--log-level", "debug") as daemon:
        for _ in range(200):
            with daemon.wire() as wire:
                wire.send(b"nonsense\r\n\r\n")
                wire.closed()
        daemon.stop()
        n = daemon.log().count("event=http_library")
        expect(n <= 40, f"{n} lines")


def a_reader_who_stops_reading_does_not_stop_the_daemon():
    """Standard error is a pipe of 64 kB that nobody reads."""
    port_file = f"/tmp/lwt-port-{os.getpid()}"
    with subprocess.Popen([program(), "--data", "/tmp", "--listen", "127.0.0.1:0", "--port-file",
                           port_file], stderr=subprocess.PIPE) as process:
        until = time.monotonic() + 30
        while not os.path.exists(port_file) and time.monotonic() < until:
            time.sleep(0.01)
        with open(port_file, encoding="ascii") as f:
            address = ("127.0.0.1", int(f.read()))
        os.unlink(port_file)
        n = 3000 if sanitized() else 6000  # about 150 bytes each: more than pipe and ring hold
        with Wire(address) as wire:
            request = b"GET /about HTTP/1.1\r\nHost: localhost\r\n\r\n"
            for _ in range(n // 50):
                wire.send(request * 50)
                for _ in range(50):
                    expect(wire.answer().status == 200, "200 expected")
            metrics = wire.ask("GET", "/metrics").body.decode()
        dropped = int(re.search(r"^leeway_log_lines_dropped_total (\d+)$", metrics, re.M).group(1))
        expect(dropped > 0, "nothing was dropped, so nothing was checked")
        process.terminate()
        text = process.stderr.read().decode()
        expect(process.wait(30) == 0, "exit status", process.returncode)
        expect("event=log_dropped" in text, "the loss is not told")
        for line in text.splitlines():
            expect(LINE.match(line), "not key=value:", line)


run(a_line_a_request_with_true_figures, levels_hold_back_what_is_below_them,
    the_library_s_complaints_are_few, a_reader_who_stops_reading_does_not_stop_the_daemon)
