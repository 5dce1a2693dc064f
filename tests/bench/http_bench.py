#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""HTTP side by side: a reach question against a static answer of the same size.

Starts leewayd on the loopback with one demo mechanism (or measures a running one, --url and --pid)
and lets wrk ask over keep-alive connections, in short rounds of each case in turn, so that a
machine that changes its pace slows all of them. Printed a case: answers a second, median and 99th
percentile of the latency, and the CPU time the daemon's threads used a request, taken from the
kernel (/proc/PID/task/*/schedstat). Then the ratios, with the core's own time taken off: bench_core
beside leewayd (--core), run in each round on the daemon's core, tells it. Last, the latency at half
of the greatest rate.

No static answer of the daemon has just the size of an answer to reach. lwt_echo_daemon (--still)
is the same program, with the same HTTP room, whose handlers only copy bytes that lie ready: it
gives static answers of exactly the sizes of the others. Without it GET /about stands for them.

On a machine shared with other work only the least CPU times and their ratio are worth quoting.
"""
import argparse
import glob
import http.client
import json
import os
import re
import shutil
import signal
import socket
import statistics
import subprocess
import sys
import tempfile
import time

HERE = os.path.dirname(os.path.abspath(__file__))
ROOT = os.path.dirname(os.path.dirname(HERE))
WRK_SCRIPT = """
local delay_ms = %(delay_ms).3f
wrk.method = %(method)s
wrk.body = %(body)s
for _, pair in ipairs({%(headers)s}) do wrk.headers[pair[1]] = pair[2] end
if delay_ms > 0 then
  -- wrk waits whole milliseconds: rounded up or down by chance, so that the mean is right.
  function delay() return math.floor(delay_ms * (0.5 + math.random()) + math.random()) end
end
function done(summary, latency, requests)
  io.write(string.format('RESULT {"requests": %%d, "us": %%d, "p50": %%d, "p99": %%d, ' ..
    '"refused": %%d, "broken": %%d, "late": %%d}\\n', summary.requests, summary.duration,
    latency:percentile(50), latency:percentile(99), summary.errors.status,
    summary.errors.connect + summary.errors.read + summary.errors.write, summary.errors.timeout))
end
"""


def stop(sentence):
    sys.exit(f"http_bench: {sentence}")


def lua_text(text):
    if text is None:
        return "nil"
    return '"' + "".join(c if c.isalnum() else f"\\{ord(c):03d}" for c in text) + '"'


class Case:
    """One kind of request."""

    def __init__(self, name, method, path, body=None, headers=None):
        self.name, self.method, self.path, self.body = name, method, path, body
        self.headers = headers or {}
        self.static = None  # the case it is held against
        self.bytes = 0
        self.rounds = []

    def script(self, delay_ms=0):
        pairs = ", ".join(f"{{{lua_text(k)}, {lua_text(v)}}}" for k, v in self.headers.items())
        return WRK_SCRIPT % {"delay_ms": delay_ms, "method": lua_text(self.method),
                             "body": lua_text(self.body), "headers": pairs}

    def least_cpu_us(self):
        return min(r["cpu_us"] for r in self.rounds)


class Service:
    """The daemon measured: one of ours on a free port, or one that runs already."""

    def __init__(self, options, program=None):
        self.process = self.data = None
        if options.url and program is None:
            match = re.fullmatch(r"http://([0-9.]+):(\d+)/?", options.url)
            if not match or not options.pid:
                stop("--url wants http://ADDRESS:PORT, together with --pid")
            self.host, self.port, self.pid = match[1], int(match[2]), options.pid
            return
        program = program or os.path.join(options.bin, "leewayd")
        if not os.access(program, os.X_OK):
            stop(f"no program {program}; build it, or name its directory with --bin")
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            self.host, self.port = free.getsockname()
        self.data = tempfile.mkdtemp(prefix="leeway-bench-")
        self.log = open(os.path.join(self.data, "log"), "wb")
        self.process = subprocess.Popen(
            [program, "--data", os.path.join(self.data, "catalog"), "--port", str(self.port)],
            stdin=subprocess.DEVNULL, stdout=self.log, stderr=self.log)
        self.pid = self.process.pid

    def ask(self, method, path, body=None, headers=None):
        connection = http.client.HTTPConnection(self.host, self.port, timeout=10)
        try:
            connection.request(method, path, body=body, headers=headers or {})
            answer = connection.getresponse()
            return answer.status, answer.read()
        finally:
            connection.close()

    def wait_ready(self):
        end = time.monotonic() + 20
        while time.monotonic() < end:
            if self.process and self.process.poll() is not None:
                break
            try:
                if self.ask("GET", "/readyz")[0] == 200:
                    return
            except OSError:
                pass
            time.sleep(0.05)
        stop("the daemon did not become ready:\n" + self.last_words())

    def last_words(self):
        if not self.data:
            return ""
        with open(os.path.join(self.data, "log"), encoding="utf-8", errors="replace") as log:
            return "".join(log.readlines()[-8:])

    def publish(self, name):
        demo = os.path.join(ROOT, "deploy", "demo")
        with open(os.path.join(demo, name + ".json"), "rb") as document:
            status, text = self.ask("PUT", f"/v1/mechanisms/{name}", document.read(),
                                    {"Content-Type": "application/json"})
        if status not in (200, 201):
            stop(f"{name} was refused with {status}: {text[:400]!r}")
        revision = json.loads(text)["revision"]
        accept = []
        with open(os.path.join(demo, "accept.txt"), encoding="utf-8") as lines:
            for words in (line.split() for line in lines):
                if len(words) > 1 and words[0] == name:
                    accept = words[1].split(",")
        body = json.dumps({"accept": accept, "reason": "bench"})
        status, text = self.ask("POST", f"/v1/mechanisms/{name}/revisions/{revision}/publish", body,
                                {"Content-Type": "application/json"})
        if status not in (200, 201, 204):
            stop(f"{name} could not be published, {status}: {text[:400]!r}")

    def cpu_ns(self):
        """CPU time of all threads; /proc/PID/schedstat alone would show the first one only."""
        total = 0
        for path in glob.glob(f"/proc/{self.pid}/task/*/schedstat"):
            try:
                with open(path, encoding="ascii") as stat:
                    total += int(stat.read().split()[0])
            except (FileNotFoundError, ProcessLookupError):
                pass  # a thread that has just ended
        return total

    def resident_kb(self):
        with open(f"/proc/{self.pid}/status", encoding="ascii") as status:
            return int(re.search(r"VmRSS:\s*(\d+)", status.read())[1])

    def end(self):
        if self.process:
            self.process.send_signal(signal.SIGTERM)
            try:
                self.process.wait(timeout=20)
            except subprocess.TimeoutExpired:
                self.process.kill()
                self.process.wait()
        if self.data:
            self.log.close()
            shutil.rmtree(self.data, ignore_errors=True)


def run_wrk(service, case, seconds, connections, delay_ms=0):
    with tempfile.NamedTemporaryFile("w", suffix=".lua") as script:
        script.write(case.script(delay_ms))
        script.flush()
        before = service.cpu_ns()
        done = subprocess.run(
            ["wrk", "-t", "1", "-c", str(connections), "-d", f"{seconds}s", "-s", script.name,
             f"http://{service.host}:{service.port}{case.path}"],
            stdin=subprocess.DEVNULL, capture_output=True, text=True, timeout=seconds + 20,
            check=False)
        spent_ns = service.cpu_ns() - before
    match = re.search(r"^RESULT (\{.*\})$", done.stdout, re.M)
    if not match:
        stop(f"wrk did not report: {done.stdout[-400:]}{done.stderr[-400:]}")
    result = json.loads(match[1])
    if result["requests"] == 0 or result["refused"] or result["broken"]:
        stop(f"{case.name}: {result['requests']} answers, {result['refused']} refused, "
             f"{result['broken']} broken\n{service.last_words()}")
    if result["late"]:  # a fact about this machine, not about the daemon's answers
        print(f"# {case.name}: {result['late']} answers took longer than 2 s")
    result["rate"] = result["requests"] / (result["us"] * 1e-6)
    result["cpu_us"] = spent_ns * 1e-3 / result["requests"]
    return result


def cases_for(name):
    """The reach question of deploy/demo/first-questions.txt, as POST and as a PLC asks it."""
    with open(os.path.join(ROOT, "deploy", "demo", "first-questions.txt"), encoding="utf-8") as f:
        lines = [line.split() for line in f]
    words = next((line[1:] for line in lines if line and line[0] == name), None)
    if words is None:
        stop(f"deploy/demo/first-questions.txt asks nothing of {name}")
    pairs = [word.split("=", 1) for word in words if re.fullmatch(r"[a-z.]+=-?[0-9.]+", word)]
    pose, zyx, quaternion = {}, {}, {}
    for key, value in pairs:
        if key in ("yaw", "pitch", "roll"):
            zyx[key] = float(value)
        elif key in ("qw", "qx", "qy", "qz"):
            quaternion[key[1:]] = float(value)
        elif key.startswith("joint."):
            pose.setdefault("joints", {})[key[6:]] = float(value)
        else:
            pose[key] = float(value)
    if zyx:
        pose["zyx"] = zyx
    if quaternion:
        pose["quaternion"] = quaternion
    query = "&".join(f"{key}={value}" for key, value in pairs)
    path = f"/v1/mechanisms/{name}/reach"
    return [Case("GET /about (static)", "GET", "/about"),
            Case("POST reach (JSON)", "POST", path, json.dumps({"pose": pose}),
                 {"Content-Type": "application/json"}),
            Case("GET reach (text/plain)", "GET", f"{path}?{query}", None,
                 {"Accept": "text/plain"})]


def core_us(program, mechanism, core):
    """The core's own time for reach at a pose, the least of its rounds, on the daemon's core."""
    where = ["taskset", "-c", str(core)] if core is not None else []
    done = subprocess.run(where + [program, f"{mechanism} reach by pose"], stdin=subprocess.DEVNULL,
                          capture_output=True, text=True, timeout=30, check=False,
                          env={**os.environ, "LW_BENCH_ROUNDS": "25"})
    match = re.search(r"^[a-z-]+ reach by pose,\d+,\d+,([0-9.]+),", done.stdout, re.M)
    if not match:
        stop(f"{program} did not report: {done.stdout[-400:]}{done.stderr[-400:]}")
    return float(match[1])


def pin(services):
    """Daemons on one core, this script and wrk on another, so that they do not trade places."""
    cores = sorted(os.sched_getaffinity(0))
    if len(cores) < 2 or not all(service.process for service in services):
        return None, "not pinned"
    for service in services:
        for task in os.listdir(f"/proc/{service.pid}/task"):
            os.sched_setaffinity(int(task), {cores[0]})
    os.sched_setaffinity(0, {cores[1]})
    return cores[0], f"daemon on core {cores[0]}, wrk on core {cores[1]}"


def half_load(rate):
    """Connections, and the mean wait of each between two requests in ms, that make half of rate.

    Never more connections than half of what the daemon grants one address by default (64): on a
    fast machine they wait less, instead of being more.
    """
    connections = max(1, min(32, round(rate / 2 * 0.010)))
    return connections, 1e3 * connections / (rate / 2)


def try_case(service, case):
    """One answer, which must be good; notes its size."""
    status, body = service.ask(case.method, case.path, case.body, case.headers)
    if status != 200:
        stop(f"{case.name} answers {status}: {body[:400]!r}")
    case.bytes = len(body)


def measure(service, still, options):
    cases = cases_for(options.mechanism)
    for case in list(cases):
        try_case(service, case)
        case.service = service
        if case is not cases[0]:
            case.static = cases[0]
            if still:
                case.static = Case(f"GET of {case.bytes} bytes (static)", "GET",
                                   f"/still/{case.bytes}")
                case.static.service = still
                try_case(still, case.static)
                cases.append(case.static)
    core, where = pin([service, still] if still else [service])
    own_us = []
    for turn in range(options.rounds):
        for case in cases if turn % 2 == 0 else reversed(cases):
            case.rounds.append(run_wrk(case.service, case, options.seconds, options.connections))
        own_us.append(core_us(options.core, options.mechanism, core) if options.core
                      else options.core_us)
    print(f"# http: {options.mechanism}, {options.connections} keep-alive connections, {where}")
    print(f"# other load at the end (1 min): {os.getloadavg()[0]:.2f}, "
          f"daemon holds {service.resident_kb()} kB")
    print("case,answer_bytes,rounds,best_per_s,p50_us,p99_us,cpu_us_min,cpu_us_median")
    for case in cases:
        best = max(case.rounds, key=lambda r: r["rate"])
        print(f"{case.name},{case.bytes},{len(case.rounds)},{best['rate']:.0f},{best['p50']},"
              f"{best['p99']},{case.least_cpu_us():.2f},"
              f"{statistics.median(r['cpu_us'] for r in case.rounds):.2f}")
    print(f"# the core's own time: least {min(own_us):.2f} us, "
          f"median {statistics.median(own_us):.2f} us")
    above = []
    for case in (c for c in cases if c.static):
        paired = statistics.median((a["cpu_us"] - own) / b["cpu_us"] for a, own, b
                                   in zip(case.rounds, own_us, case.static.rounds))
        least = (case.least_cpu_us() - min(own_us)) / case.static.least_cpu_us()
        print(f"# {case.name} without the core / {case.static.name}: {least:.2f} of the least, "
              f"{paired:.2f} median of paired rounds")
        if paired > options.ratio_max:
            above.append(f"{case.name}: CPU ratio {paired:.2f} > {options.ratio_max:g}")
    asked = cases[1]
    rate = max(r["rate"] for r in asked.rounds)
    connections, delay_ms = half_load(rate)
    # What a connection needs beside its wait shows in a short trial; the wait is shorter by it.
    trial = run_wrk(service, asked, 1, connections, delay_ms)
    delay_ms = max(0.1, 2 * delay_ms - 1e3 * connections / trial["rate"])
    half = run_wrk(service, asked, 2 * options.seconds, connections, delay_ms)
    print(f"# {asked.name} at half load: {half['rate']:.0f} of {rate:.0f} a second over "
          f"{connections} connections, p50 {half['p50']} us, p99 {half['p99']} us")
    if half["p99"] > options.p99_max_us:
        above.append(f"p99 at half load {half['p99']} us > {options.p99_max_us:g} us")
    for sentence in above:
        print(f"# above the bar: {sentence}")
    return 1 if above and options.check else 0


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    build = os.environ.get("LEEWAY_BUILD", os.path.join(ROOT, "build"))
    parser.add_argument("--bin", default=os.path.join(build, "release", "bin"),
                        help="directory of leewayd")
    parser.add_argument("--url", help="measure the daemon there instead; wants --pid too")
    parser.add_argument("--pid", type=int, help="process of that daemon")
    parser.add_argument("--mechanism", default="tilt-table")
    parser.add_argument("--rounds", type=int, default=4)
    parser.add_argument("--seconds", type=int, default=1, help="length of a round")
    parser.add_argument("--connections", type=int, default=8)
    parser.add_argument("--still", help="lwt_echo_daemon, which gives static answers of any size")
    parser.add_argument("--core", help="bench_core, which measures the core's own time, taken off")
    parser.add_argument("--core-us", type=float, default=0.0,
                        help="that time, where it is known and --core is not given")
    parser.add_argument("--ratio-max", type=float, default=1.5)
    parser.add_argument("--p99-max-us", type=float, default=1000.0)
    parser.add_argument("--check", action="store_true", help="status 1 if a bar is not met")
    options = parser.parse_args()
    if options.rounds < 1 or options.seconds < 1 or options.connections < 1:
        stop("--rounds, --seconds and --connections want 1 or more")
    if options.rounds * options.seconds > 6:
        stop("rounds times seconds must be at most 6, so that a run stays under 20 s")
    if not shutil.which("wrk"):
        stop("wrk is missing: apt-get install wrk")
    service = Service(options)
    still = None
    try:
        service.wait_ready()
        if service.process:
            service.publish(options.mechanism)
        if options.still:
            still = Service(options, options.still)
            still.wait_ready()
        return measure(service, still, options)
    finally:
        service.end()
        if still:
            still.end()


if __name__ == "__main__":
    sys.exit(main())
