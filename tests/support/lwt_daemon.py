# SPDX-License-Identifier: GPL-3.0-or-later
"""Starts a daemon on a free port of the loopback and talks to it, for the checks of tests/http.

The program is named by LWT_DAEMON (ctest sets it). A check is a list of functions given to run();
each gets nothing, starts what daemons it needs and uses expect() for what must hold. Standard
library only.
"""
import json
import os
import re
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import time
import traceback

SLOW = 1.0  # set below: sanitizer builds take longer
SANITIZER = re.compile(r"(AddressSanitizer|ThreadSanitizer|LeakSanitizer|runtime error:)")


class Failed(Exception):
    """Something did not hold."""


def expect(condition, *what):
    if not condition:
        raise Failed(" ".join(str(w) for w in what))


def program():
    path = os.environ.get("LWT_DAEMON")
    if not path or not os.access(path, os.X_OK):
        sys.exit("set LWT_DAEMON to the daemon to be checked")
    return path


class Answer:
    """One HTTP answer, taken apart."""

    def __init__(self, status, headers, body, version="HTTP/1.1"):
        self.status, self.headers, self.body, self.version = status, headers, body, version

    def all(self, name):
        return [v for k, v in self.headers if k.lower() == name.lower()]

    def get(self, name):
        values = self.all(name)
        return values[0] if values else None

    def json(self):
        return json.loads(self.body)

    def problem(self, status, code):
        """This is a problem document (RFC 9457) with this status and code of ours."""
        expect(self.status == status, f"status {status} expected, got", self.status, self.body)
        expect(self.get("Content-Type").startswith("application/problem+json"),
               "a problem document expected, got", self.get("Content-Type"))
        document = self.json()
        expect(document["status"] == status, "status member", document)
        expect(document["code"] == code, f"code {code} expected, got", document)
        for member in ("type", "title", "detail"):
            expect(document.get(member), f"no {member} in", document)
        return document


class Wire:
    """A socket on which bytes are written as they are, and answers read one by one."""

    def __init__(self, address, timeout=10.0, nodelay=True):
        family = socket.AF_UNIX if isinstance(address, str) else socket.AF_INET
        self.socket = socket.socket(family, socket.SOCK_STREAM)
        self.socket.settimeout(timeout * SLOW)
        if family == socket.AF_INET and nodelay:
            self.socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self.socket.connect(address)
        self.buffer = b""

    def __enter__(self):
        return self

    def __exit__(self, *unused):
        self.socket.close()

    def send(self, data):
        self.socket.sendall(data if isinstance(data, bytes) else data.encode())

    def _more(self):
        data = self.socket.recv(1 << 16)
        self.buffer += data
        return bool(data)

    def answer(self, head_only=False):
        """The next answer; None if the connection ends before one begins."""
        while b"\r\n\r\n" not in self.buffer:
            if not self._more():
                expect(not self.buffer, "the answer ends in its head:", self.buffer)
                return None
        head, self.buffer = self.buffer.split(b"\r\n\r\n", 1)
        lines = head.decode("latin-1").split("\r\n")
        version, status = lines[0].split(" ")[:2]
        headers = [tuple(line.split(": ", 1)) for line in lines[1:]]
        answer = Answer(int(status), headers, b"", version)
        if answer.status == 100:
            return answer
        length = answer.all("Content-Length")
        expect(len(length) == 1, "one Content-Length expected, got", length)
        if not head_only:
            n = int(length[0])
            while len(self.buffer) < n:
                expect(self._more(), f"the body ends after {len(self.buffer)} of {n} bytes")
            answer.body, self.buffer = self.buffer[:n], self.buffer[n:]
        return answer

    def closed(self):
        """Whether the other side closes, with nothing more to read."""
        try:
            while self._more():
                pass
        except ConnectionResetError:
            return True
        except socket.timeout:
            return False
        return not self.buffer

    def finish(self):
        """Says that no more comes and reads to the end, be it a reset; a silence is a failure."""
        try:
            self.socket.shutdown(socket.SHUT_WR)
            while self.socket.recv(1 << 16):
                pass
        except socket.timeout:
            raise Failed("the connection stays open after its end") from None
        except OSError:
            pass

    def ask(self, method, target, body=None, headers=(), host="localhost"):
        """One request on this connection, and its answer."""
        if isinstance(body, (dict, list)):
            body = json.dumps(body)
        if isinstance(body, str):
            body = body.encode()
        lines = [f"{method} {target} HTTP/1.1", f"Host: {host}"]
        lines += [f"{k}: {v}" for k, v in headers]
        if body is not None:
            lines.append(f"Content-Length: {len(body)}")
            if not any(k.lower() == "content-type" for k, _ in headers):
                lines.append("Content-Type: application/json")
        self.send("\r\n".join(lines).encode("latin-1") + b"\r\n\r\n" + (body or b""))
        return self.answer(head_only=method == "HEAD")


class Daemon:
    """A running daemon; leaves the with block stopped, its exit status and log checked."""

    def __init__(self, *options, ready=True, environment=None, prefix=(), pass_fds=(),
                 listen="127.0.0.1:0", expect_status=0):
        self.dir = tempfile.mkdtemp(prefix="lwt-")
        self.log_path = os.path.join(self.dir, "log")
        self.expect_status = expect_status
        port_file = os.path.join(self.dir, "port")
        command = list(prefix) + [program(), "--data", self.dir, "--port-file", port_file]
        if listen:
            command += ["--listen", listen]
        env = dict(os.environ, **(environment or {}))
        with open(self.log_path, "wb") as log:
            self.process = subprocess.Popen(command + list(options), stdout=log, stderr=log,
                                            stdin=subprocess.DEVNULL, env=env, pass_fds=pass_fds)
        self.port = None
        deadline = time.monotonic() + 30
        while ready and self.port is None:
            if os.path.exists(port_file):
                with open(port_file, encoding="ascii") as f:
                    self.port = int(f.read())
                break
            if self.process.poll() is not None or time.monotonic() > deadline:
                raise Failed("the daemon does not start: " + self.log())
            time.sleep(0.01)
        self.address = ("127.0.0.1", self.port)

    def __enter__(self):
        return self

    def __exit__(self, kind, *unused):
        try:
            self.stop(check=kind is None)
        finally:
            if kind is not None:
                print("    the end of the log:\n      " +
                      "\n      ".join(self.log().splitlines()[-12:]))
            shutil.rmtree(self.dir, ignore_errors=True)

    def log(self):
        with open(self.log_path, encoding="utf-8", errors="replace") as f:
            return f.read()

    def requests(self):
        """The log's lines about requests, each a dictionary."""
        return [dict(re.findall(r'(\w+)=("(?:[^"\\]|\\.)*"|\S+)', line))
                for line in self.log().splitlines() if " event=request " in line]

    def wire(self, **options):
        return Wire(self.address, **options)

    def ask(self, method, target, body=None, headers=(), **options):
        """One request on a connection of its own."""
        with self.wire() as wire:
            return wire.ask(method, target, body, headers, **options)

    def signal(self, number):
        self.process.send_signal(number)

    def wait(self, timeout=40):
        return self.process.wait(timeout)

    def stop(self, check=True):
        if self.process.poll() is None:
            self.signal(signal.SIGTERM)
            try:
                self.wait()
            except subprocess.TimeoutExpired:
                self.process.kill()
                self.process.wait()
                raise Failed("the daemon does not stop") from None
        if check:
            log = self.log()
            expect(not SANITIZER.search(log), "the sanitizer found something:\n" + log[-4000:])
            expect(self.process.returncode == self.expect_status,
                   f"exit status {self.expect_status} expected, got", self.process.returncode)

    def resident_kb(self):
        with open(f"/proc/{self.process.pid}/status", encoding="ascii") as f:
            return int(re.search(r"VmRSS:\s*(\d+) kB", f.read()).group(1))

    def metric(self, name):
        """One figure of /metrics, by its name with labels."""
        for line in self.ask("GET", "/metrics").body.decode().splitlines():
            if line.startswith(name + " "):
                return float(line.rsplit(" ", 1)[1])
        raise Failed(f"no figure {name} in /metrics")


def sanitized():
    """Whether the program is instrumented: it is then slower and uses more memory."""
    with open(program(), "rb") as f:
        data = f.read()
    return b"__asan_init" in data or b"__tsan_init" in data


def run(*checks):
    """Runs all checks; the exit status says whether each held."""
    global SLOW
    SLOW = 4.0 if sanitized() else 1.0
    bad = 0
    for check in checks:
        start = time.monotonic()
        try:
            check()
            print(f"  holds  {check.__name__}  ({time.monotonic() - start:.2f} s)", flush=True)
        except Exception as error:  # whatever went wrong, the other checks still run
            bad += 1
            print(f"  FAILED {check.__name__}: {error}", flush=True)
            if not isinstance(error, Failed):
                traceback.print_exc(file=sys.stdout)
    print(f"{len(checks) - bad} of {len(checks)} hold")
    sys.exit(1 if bad else 0)
