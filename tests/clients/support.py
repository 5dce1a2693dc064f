# SPDX-License-Identifier: GPL-3.0-or-later
"""What the checks of the command line share: a service that says what a check tells it to say, and
a way to run `leeway` without anything of the caller's environment getting in.

LEEWAY_CLI names the program under test. Nothing here knows how the program is made."""

import http.server
import json
import os
import subprocess
import tempfile
import threading
import unittest

CLI = os.environ.get("LEEWAY_CLI", "")


class Reply:
    """One answer of the fake service."""

    def __init__(self, status=200, body=b"", kind="application/json", headers=None, wait_s=0.0):
        self.status = status
        self.body = body if isinstance(body, bytes) else json.dumps(body).encode()
        self.kind = kind
        self.headers = headers or {}
        self.wait_s = wait_s


class FakeService:
    """Listens on a free port of 127.0.0.1. `answers` maps "METHOD /path" to a Reply, a list of
    Replies (one after another, the last one again and again), or a function of the request."""

    def __init__(self):
        self.answers = {}
        self.asked = []  # dictionaries: method, path, headers, body
        self.stopping = threading.Event()
        service = self

        class Handler(http.server.BaseHTTPRequestHandler):
            protocol_version = "HTTP/1.1"

            def log_message(self, *_):
                pass

            def serve(self):
                length = int(self.headers.get("Content-Length", "0"))
                request = {"method": self.command, "path": self.path,
                           "headers": {k.lower(): v for k, v in self.headers.items()},
                           "body": self.rfile.read(length)}
                service.asked.append(request)
                answer = service.answers.get(f"{self.command} {self.path}")
                if isinstance(answer, list):
                    answer = answer.pop(0) if len(answer) > 1 else answer[0]
                if callable(answer):
                    answer = answer(request)
                if answer is None:
                    answer = problem(404, 1004, "There is no such resource.")
                if answer.wait_s:
                    service.stopping.wait(answer.wait_s)
                try:
                    self.send_response(answer.status)
                    if answer.kind:
                        self.send_header("Content-Type", answer.kind)
                    for name, value in answer.headers.items():
                        self.send_header(name, value)
                    self.send_header("Content-Length", str(len(answer.body)))
                    self.end_headers()
                    self.wfile.write(answer.body)
                except (BrokenPipeError, ConnectionResetError):
                    pass

            do_GET = do_POST = do_PUT = do_DELETE = serve

        self.server = http.server.ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        self.server.daemon_threads = True
        self.url = f"http://127.0.0.1:{self.server.server_address[1]}"
        self.thread = threading.Thread(target=self.server.serve_forever, kwargs={
            "poll_interval": 0.02}, daemon=True)
        self.thread.start()

    def close(self):
        self.stopping.set()
        self.server.shutdown()
        self.server.server_close()
        self.thread.join(5)


def problem(status, code, title, headers=None, **more):
    """A problem document (RFC 9457) as the contract shapes it."""
    body = {"type": "/problems/test", "title": title, "status": status, "code": code, **more}
    return Reply(status, body, "application/problem+json", headers)


def answer(code=1, outcome="ok", **more):
    """An answer with the members every answer carries."""
    return {"mechanism": "label-stage", "revision": 3, "state": "published", "digest": "ab" * 32,
            "tool": "camera", "units": {"length": "mm", "angle": "deg"},
            "asked": {"pose": {"x": 10, "y": -20, "rz": 5}},
            "served_at": "2025-01-02T03:04:05.678Z", "code": code, "outcome": outcome, **more}


def solution(mode, drives, **more):
    return {"mode": mode, "drives": drives, "joints": {"knee-1": 12.25},
            "pose": {"x": 10, "y": -20, "z": 0, "rz": 5}, "within_limits": True,
            "limits_broken": [], "residual": {"position": 1e-12, "angle": 2e-13}, **more}


class Case(unittest.TestCase):
    """A check with a fake service and a directory of its own."""

    maxDiff = None

    def setUp(self):
        if not CLI:
            self.fail("set LEEWAY_CLI to the program to check")
        self.service = FakeService()
        self.addCleanup(self.service.close)
        folder = tempfile.TemporaryDirectory()
        self.addCleanup(folder.cleanup)
        self.folder = folder.name

    def path(self, name):
        return os.path.join(self.folder, name)

    def write(self, name, content):
        with open(self.path(name), "wb") as file:
            file.write(content if isinstance(content, bytes) else content.encode())
        return self.path(name)

    def read(self, name):
        with open(self.path(name), "rb") as file:
            return file.read().decode()

    def environment(self, **more):
        """Only what the program needs; sanitizer options are handed on."""
        kept = {k: v for k, v in os.environ.items()
                if k in ("PATH", "HOME", "TMPDIR") or k.endswith("SAN_OPTIONS")}
        return {**kept, "LEEWAY_SERVER": self.service.url, **more}

    def leeway(self, *words, stdin=b"", env=None, timeout=60):
        """Runs the program; .out and .err are its texts, .status its exit status."""
        done = subprocess.run([CLI, *words], input=stdin, capture_output=True, timeout=timeout,
                              env=self.environment(**(env or {})), check=False)
        done.out = done.stdout.decode()
        done.err = done.stderr.decode()
        done.status = done.returncode
        for word in ("Sanitizer", "runtime error"):
            self.assertNotIn(word, done.err)
        return done

    def asked_body(self, at=-1):
        return json.loads(self.service.asked[at]["body"])
