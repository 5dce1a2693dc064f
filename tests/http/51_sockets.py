#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Where the daemon listens: several addresses, a Unix socket, sockets of a supervisor. Source of the
hand-over: LISTEN_FDS, LISTEN_PID as in the manual page sd_listen_fds(3)."""
import fcntl
import socket
import stat
import subprocess
import tempfile
import time
import os
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from lwt_daemon import Daemon, Wire, expect, program, run, sanitized  # noqa: E402

# The variables name the process that reads them, so a process sets them and becomes the daemon. The
# sockets come under numbers of 50 and more and are handed over as 3, 4, ...
HAND_OVER = """
import os, sys
fds = [int(fd) for fd in sys.argv[1].split(",")]
for i, fd in enumerate(fds):
    os.dup2(fd, 3 + i, inheritable=True)
    os.close(fd)
os.environ.update(LISTEN_PID=str(os.getpid()), LISTEN_FDS=str(len(fds)))
os.execv(sys.argv[2], sys.argv[2:])
"""


def path():
    return os.path.join(tempfile.mkdtemp(prefix="lwt-"), "s")


def serves_a_unix_socket_beside_tcp():
    where = path()
    with Daemon("--unix", where) as daemon:
        expect(stat.S_IMODE(os.stat(where).st_mode) == 0o660, oct(os.stat(where).st_mode))
        with Wire(where) as wire:
            for host in ("localhost", "anything"):
                expect(wire.ask("GET", "/about", host=host).status == 200, "200 expected")
            expect(wire.ask("POST", "/slow?ms=5", "[1]").body == b"[1]", "another body")
        expect(daemon.ask("GET", "/about").status == 200, "TCP")
    expect(not os.path.exists(where), "the socket file is left over")
    os.rmdir(os.path.dirname(where))


def takes_over_a_socket_file_of_the_dead_only():
    where = path()
    dead = socket.socket(socket.AF_UNIX)
    dead.bind(where)
    dead.close()
    with Daemon("--unix", where):
        second = subprocess.run([program(), "--data", "/tmp", "--listen", "127.0.0.1:0", "--unix",
                                 where], capture_output=True, text=True, timeout=30, check=False)
        expect(second.returncode == 1 and where in second.stderr, second)
        with Wire(where) as wire:
            expect(wire.ask("GET", "/about").status == 200, "the first lost its socket")
    with open(where, "w", encoding="ascii") as f:
        f.write("precious")
    third = subprocess.run([program(), "--data", "/tmp", "--listen", "127.0.0.1:0", "--unix", where],
                           capture_output=True, text=True, timeout=30, check=False)
    expect(third.returncode == 1, third)
    with open(where, encoding="ascii") as f:
        expect(f.read() == "precious", "a file that is no socket was removed")
    os.unlink(where)
    os.rmdir(os.path.dirname(where))


def says_that_the_port_is_taken():
    with Daemon() as daemon:
        done = subprocess.run([program(), "--data", "/tmp", "--port", str(daemon.port)],
                              capture_output=True, text=True, timeout=30, check=False)
        expect(done.returncode == 1 and str(daemon.port) in done.stderr, done)


def listens_on_several_addresses():
    with Daemon("--listen", "127.0.0.2:0") as daemon:
        time.sleep(0.2)  # for the log's thread
        text = daemon.log()
        ports = [line.split("msg=")[1] for line in text.splitlines() if "event=listen" in line]
        expect(len(ports) == 2 and ports[1].startswith("127.0.0.2:"), text)
        with Wire(("127.0.0.2", int(ports[1].split(":")[1]))) as wire:
            expect(wire.ask("GET", "/about").status == 200, "200 expected")


def inherited(listeners):
    """A daemon that is handed the sockets."""
    fds = tuple(listener.fileno() for listener in listeners)
    return Daemon(prefix=(sys.executable, "-c", HAND_OVER, ",".join(map(str, fds))), listen=None,
                  pass_fds=fds)


def high(sock):
    """The same socket under a number of 50 or more."""
    fd = fcntl.fcntl(sock.fileno(), fcntl.F_DUPFD_CLOEXEC, 50)
    result = socket.socket(sock.family, sock.type, fileno=fd)
    sock.close()
    return result


def takes_over_sockets_of_a_supervisor():
    tcp = socket.socket()
    tcp.bind(("127.0.0.1", 0))
    tcp.listen(16)
    tcp = high(tcp)
    where = path()
    unix = socket.socket(socket.AF_UNIX)
    unix.bind(where)
    unix.listen(16)
    unix = high(unix)
    port = tcp.getsockname()[1]
    early = Wire(("127.0.0.1", port))  # asked before the daemon was started
    early.send(b"GET /about HTTP/1.1\r\nHost: localhost\r\n\r\n")
    with inherited([tcp, unix]) as daemon:
        expect(daemon.port == port, "another port:", daemon.port)
        expect(early.answer().status == 200, "the early question is lost")
        with Wire(where) as wire:
            expect(wire.ask("GET", "/about").status == 200, "200 expected")
        early.socket.close()
    expect(os.path.exists(where), "the supervisor's socket file was removed")
    os.unlink(where)
    os.rmdir(os.path.dirname(where))


def refuses_a_handed_over_socket_that_others_reach():
    tcp = socket.socket()
    tcp.bind(("0.0.0.0", 0))
    tcp.listen(16)
    tcp = high(tcp)
    try:
        daemon = inherited([tcp])
    except Exception as error:
        expect("--token-file" in str(error), error)
    else:
        daemon.stop(check=False)
        expect(False, "it serves others without tokens")


def ignores_sockets_for_another_process():
    with Daemon(environment={"LISTEN_FDS": "3", "LISTEN_PID": "1"}) as daemon:
        expect(daemon.ask("GET", "/about").status == 200, "200 expected")


def is_ready_when_the_port_file_is_there():
    for _ in range(5):
        with Daemon() as daemon:
            answer = daemon.ask("GET", "/readyz")
            expect(answer.status == 200 and answer.json()["ready"], answer.body)


def starts_soon_and_small():
    """Idle, without a catalog: the part of the 20 MB that is HTTP's."""
    start = time.monotonic()
    with Daemon() as daemon:
        seconds = time.monotonic() - start
        expect(daemon.ask("GET", "/about").status == 200, "200 expected")
        if not sanitized():
            expect(seconds < 1, f"it took {seconds:.2f} s to start")
            expect(daemon.resident_kb() < 8000, f"{daemon.resident_kb()} kB")


run(serves_a_unix_socket_beside_tcp, takes_over_a_socket_file_of_the_dead_only,
    says_that_the_port_is_taken, listens_on_several_addresses, takes_over_sockets_of_a_supervisor,
    refuses_a_handed_over_socket_that_others_reach, ignores_sockets_for_another_process,
    is_ready_when_the_port_file_is_there, starts_soon_and_small)
