#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Runs the examples of README.md as printed and compares the answers with those printed.

    check_readme.py README.md            exit status 1 if an answer differs
    check_readme.py README.md --update   writes the answers that differ into the file

LEEWAYD and LEEWAY name the programs. The daemon is started afresh on a free port with the demo line
published, as deploy/up leaves it, and every 8470 in a command becomes that port. What is run:
- a ```sh block that is followed, with blank lines only between, by a ```text block with its answer;
- before that, a ```json block under a line "<!-- save as PATH -->" is written to PATH.
Everything happens in one scratch directory, in the order of the file.

Answers are compared word by word, so layout does not matter. Times, request ids and the numbers of
free ports are left out; three dots in the README stand for words not printed there. Whole numbers
and words must be the same; other numbers may differ by a ten-millionth part (or 1e-9 near zero),
since mathematical libraries differ in the last digits from one processor to the next.
"""
import json
import os
import re
import subprocess
import sys
import tempfile
import time

ROOT = os.path.dirname(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
PORT = "8470"
# Enough for the press of the README, little enough for a daemon under a sanitizer.
PREPARE_PATHS = "1000"
TIME = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d+)?Z")
REQUEST = re.compile(r"urn:leeway:request:[0-9a-f]{32}")
WORD = re.compile(r'\.\.\.|-?\d+(?:\.\d+)?(?:[eE][-+]?\d+)?(?![\w.]*[A-Za-z_])|\w[\w./:%+-]*|\S')
REL, ABS = 1e-7, 1e-9
WIDTH = 96


def blocks(text):
    """(kind, first line number, first and last character, content) of each fenced block."""
    found = []
    for m in re.finditer(r"^```(\w+)\n(.*?)^```$", text, re.M | re.S):
        found.append((m.group(1), text.count("\n", 0, m.start()) + 1, m.start(2), m.end(2),
                      m.group(2), m.start(), m.end()))
    return found


def steps(text):
    """What to do in order: ("save", line, path, content) or ("run", line, commands, answer, span)."""
    out = []
    all_blocks = blocks(text)
    for i, (kind, line, _, _, content, start, end) in enumerate(all_blocks):
        if kind == "json":
            m = re.search(r"<!-- save as (\S+) -->\s*\Z", text[:start])
            if m:
                out.append(("save", line, m.group(1), content, None))
        if kind == "sh" and i + 1 < len(all_blocks):
            then = all_blocks[i + 1]
            if then[0] == "text" and text[end:then[5]].strip() == "":
                out.append(("run", line, content, then[4], (then[2], then[3])))
    return out


def words(text):
    text = REQUEST.sub("urn:leeway:request", TIME.sub("TIME", text))
    return WORD.findall(text)


def number(word):
    try:
        return float(word)
    except ValueError:
        return None


def same(want, got):
    if want == got:
        return True
    a, b = number(want), number(got)
    if a is None or b is None or not re.search(r"[.eE]", want + got):
        return False
    return abs(a - b) <= ABS + REL * max(abs(a), abs(b))


def difference(want, got):
    """None if the words agree, else the first word at which they part (of want, of got)."""
    places = {0}  # how many words of got may be used up
    for i, word in enumerate(want):
        if word == "...":
            places = set(range(min(places), len(got) + 1))
            continue
        reached = {p + 1 for p in places if p < len(got) and same(word, got[p])}
        if not reached:
            p = max(places)
            return (" ".join(want[max(0, i - 6):i + 4]), " ".join(got[max(0, p - 6):p + 4]))
        places = reached
    if len(got) not in places:
        return ("(nothing more)", " ".join(got[max(places):max(places) + 12]))
    return None


def laid_out(value, indent=0, before=0):
    """JSON on lines of at most WIDTH columns; numbers as they came."""
    flat = json.dumps(value)
    if before + len(flat) < WIDTH or not isinstance(value, (dict, list)) or not value:
        return flat
    pad = " " * (indent + 2)
    keys = [json.dumps(k) + ": " for k in value] if isinstance(value, dict) else [""] * len(value)
    values = value.values() if isinstance(value, dict) else value
    out, line = "", pad
    for i, (key, item) in enumerate(zip(keys, values)):
        part = key + json.dumps(item) + ("," if i + 1 < len(value) else "")
        if line != pad and len(line) + len(part) > WIDTH:
            out, line = out + line.rstrip() + "\n", pad
        if len(line) + len(part) > WIDTH:
            part = key + laid_out(item, indent + 2, len(line) + len(key)) + (
                "," if i + 1 < len(value) else "")
        line += part + " "
    ends = "{}" if isinstance(value, dict) else "[]"
    return ends[0] + "\n" + out + line.rstrip() + "\n" + " " * indent + ends[1]


def as_printed(answer):
    """An answer as the README prints it: JSON laid out, the rest as it came."""
    if not answer.startswith("{"):
        return answer
    try:
        return laid_out(json.loads(answer)) + "\n"
    except ValueError:
        return answer


class Daemon:
    def __init__(self, scratch):
        self.log = open(os.path.join(scratch, "log"), "w")
        port_file = os.path.join(scratch, "port")
        data = os.path.join(scratch, "data")
        os.mkdir(data, 0o750)
        self.process = subprocess.Popen(
            [os.environ["LEEWAYD"], "--data", data, "--port", "0", "--port-file", port_file,
             "--prepare-paths", PREPARE_PATHS],
            stdin=subprocess.DEVNULL, stdout=self.log, stderr=self.log)
        for _ in range(600):
            if os.path.exists(port_file) and open(port_file).read().strip():
                break
            if self.process.poll() is not None:
                sys.exit("the daemon ended at once: " + open(self.log.name).read())
            time.sleep(0.05)
        self.port = open(port_file).read().strip().rsplit(":", 1)[-1]

    def stop(self):
        self.process.terminate()
        status = self.process.wait(timeout=60)
        self.log.close()
        return status


def run(commands, cwd, env):
    done = subprocess.run(["bash", "-c", commands], cwd=cwd, env=env, stdin=subprocess.DEVNULL,
                          stdout=subprocess.PIPE, stderr=subprocess.PIPE, timeout=60)
    return (done.stdout + done.stderr).decode("utf-8", "replace")


def prepare(env):
    """The demo line as deploy/up loads it."""
    demo = os.path.join(ROOT, "deploy", "demo")
    for name in sorted(os.listdir(demo)):
        if name.endswith(".json"):
            for command in (["load", os.path.join(demo, name)], ["publish", name[:-5], "1"]):
                done = subprocess.run([env["LEEWAY"]] + command, env=env, capture_output=True)
                if done.returncode != 0:
                    sys.exit("demo line: " + done.stdout.decode() + done.stderr.decode())


def main():
    path = sys.argv[1]
    update = "--update" in sys.argv[2:]
    text = open(path, encoding="utf-8").read()
    todo = steps(text)
    differ, ran, changes = 0, 0, []
    with tempfile.TemporaryDirectory() as scratch:
        daemon = Daemon(scratch)
        try:
            cwd = os.path.join(scratch, "here")
            programs = os.path.join(cwd, "build", "release", "bin")
            os.makedirs(programs)
            for name in ("LEEWAYD", "LEEWAY"):
                os.symlink(os.path.abspath(os.environ[name]),
                           os.path.join(programs, name.lower()))
            env = dict(os.environ, PATH=programs + ":" + os.environ["PATH"], NO_COLOR="1",
                       LEEWAY_SERVER="http://127.0.0.1:" + daemon.port)
            prepare(env)
            for kind, line, what, want, span in todo:
                if kind == "save":
                    with open(os.path.join(cwd, what), "w", encoding="utf-8") as out:
                        out.write(want)
                    continue
                ran += 1
                got = run(what.replace(PORT, daemon.port), cwd, env).replace(daemon.port, PORT)
                wrong = difference(words(want), words(got))
                if wrong is not None:
                    differ += 1
                    changes.append((span, as_printed(got)))
                    print("%s:%d: %s" % (path, line, what.strip()))
                    print("  printed:  ... %s" % wrong[0])
                    print("  answered: ... %s" % wrong[1])
        finally:
            status = daemon.stop()
    if update:
        for (start, end), answer in reversed(changes):
            text = text[:start] + answer.rstrip("\n") + "\n" + text[end:]
        open(path, "w", encoding="utf-8").write(text)
    print("%d examples, %d differ; the daemon ended with status %d" % (ran, differ, status))
    return 1 if (differ and not update) or ran < 15 or status != 0 else 0


if __name__ == "__main__":
    sys.exit(main())
