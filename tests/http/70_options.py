#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Command line and configuration file: what is refused is named, with option or file and line; the
command line wins; --help teaches."""
import subprocess
import tempfile
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, expect, program, run  # noqa: E402


def call(*options):
    return subprocess.run([program(), *options], capture_output=True, text=True, timeout=30,
                          check=False)


def refused(options, *words):
    done = call(*options)
    expect(done.returncode == 2, f"exit status 2 expected, got {done.returncode}", done.stderr)
    lines = done.stderr.splitlines()
    expect(len(lines) == 1 and lines[0].startswith("leewayd: "), done.stderr)
    for word in words:
        expect(word in lines[0], repr(word), "not in", lines[0])


class File:
    def __init__(self, text):
        self.path = tempfile.mktemp(prefix="lwt-conf-")
        with open(self.path, "w", encoding="utf-8") as f:
            f.write(text)

    def __enter__(self):
        return self.path

    def __exit__(self, *unused):
        os.unlink(self.path)


def refuses_options_that_are_none():
    refused(["--wrokers", "3"], "--wrokers", "--help")
    refused(["x"], '"x"')
    refused(["--workers"], "--workers", "value")
    for value in ("0", "65", "-1", "1.5", "3x", "", "99999999999999999999"):
        refused(["--workers", value], "--workers", "1 to 64", f'"{value}"')
    refused(["--port", "65536"], "--port", "65535")
    refused(["--log-level=loud"], "--log-level", '"loud"')
    refused(["--data", ""], "--data")
    refused(["--listen", "127.0.0.1:1"] * 5, "--listen", "4")


def refuses_addresses_that_are_none():
    for value in ("8470", "localhost", "127.0.0.1:", ":8470", "127.0.0.1:99999", "127.0.0.1:x",
                  "::1:8470", "127.0.0.1:-1"):
        refused(["--listen", value], f'"{value}"', "ADDR:PORT")


def names_file_and_line():
    for text, words in (("workers = 3\n\n# more\nworkers 3\n", ["line 4", "key = value"]),
                        ("worker = 3\n", ["line 1", '"worker"']),
                        ("workers = many\n", ["line 1", "workers", '"many"']),
                        ("config = x\n", ["line 1", '"config"'])):
        with File(text) as path:
            refused(["--config", path], path, *words)
    refused(["--config", "/nonexistent"], "/nonexistent")


def the_command_line_wins():
    with File("# ours\nworkers=7\n  log-level =  debug  \nlisten = 192.0.2.1:1\n") as path:
        with Daemon("--config", path) as daemon:
            daemon.ask("GET", "/about")
            daemon.stop()
            expect("7 workers" in daemon.log(), daemon.log())
        with Daemon("--workers", "3", "--config=" + path) as daemon:
            daemon.stop()
            expect("3 workers" in daemon.log(), daemon.log())
        refused(["--config", path, "--data", "/tmp"], "192.0.2.1:1", "--token-file")


def help_and_version_speak():
    done = call("--help")
    expect(done.returncode == 0 and not done.stderr, done)
    for word in ("--listen", "--token-file", "--data", "--make-token", "SIGTERM", "503",
                 "no safety function"):
        expect(word in done.stdout, word, "is not explained")
    expect(all(len(line) <= 100 for line in done.stdout.splitlines()), "long lines")
    done = call("--version")
    expect(done.returncode == 0 and done.stdout.startswith("leewayd "), done)


def a_quick_check_tries_everything_and_leaves():
    done = call("--quick-check", "--data", "/tmp", "--listen", "127.0.0.1:0")
    expect(done.returncode == 0 and "in order" in done.stdout, done)
    with Daemon() as daemon:
        done = call("--quick-check", "--data", "/tmp", "--port", str(daemon.port))
        expect(done.returncode == 1 and str(daemon.port) in done.stderr, done)


run(refuses_options_that_are_none, refuses_addresses_that_are_none, names_file_and_line,
    the_command_line_wins, help_and_version_speak, a_quick_check_tries_everything_and_leaves)
