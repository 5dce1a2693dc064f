#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""leewayd --backup FILE: a copy beside the running daemon and without one, from which another
daemon answers the same; what it refuses, it refuses with a sentence and leaves no half file."""
import json
import os
import shutil
import subprocess
import sys
import tempfile

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, program, run  # noqa: E402

STAGE = "/v1/mechanisms/label-stage"
POSE = {"pose": {"x": 15, "y": -10, "rz": 6}}


class Place:
    """A data directory that outlives its daemons, and room beside it."""

    def __enter__(self):
        self.root = tempfile.mkdtemp(prefix="lwt-backup-")
        self.data = os.path.join(self.root, "data")
        os.mkdir(self.data)
        return self

    def __exit__(self, *unused):
        shutil.rmtree(self.root, ignore_errors=True)

    def path(self, *names):
        return os.path.join(self.root, *names)


def backup(data, *words):
    return subprocess.run([program(), "--data", data, "--backup", *words], capture_output=True,
                          text=True, timeout=60, check=False)


def publish(daemon):
    with open(os.path.join(HERE, "..", "..", "deploy", "demo", "label-stage.json"),
              encoding="utf-8") as f:
        document = json.load(f)
    stored = daemon.ask("PUT", STAGE, document)
    expect(stored.status == 201, stored.status, stored.body)
    accept = [f["finding"] for f in stored.json()["findings"] if f["severity"] == "warning"]
    done = daemon.ask("POST", STAGE + "/revisions/1/publish", {"accept": accept})
    expect(done.status == 200, done.body)


def answer_of(daemon):
    answer = daemon.ask("POST", STAGE + "/reach", POSE)
    expect(answer.status == 200, answer.status, answer.body)
    answer = answer.json()
    answer.pop("served_at")
    return answer


def restored(place, copy, name):
    """What a daemon answers that starts from the copy."""
    data = place.path(name)
    os.mkdir(data)
    shutil.copy(copy, os.path.join(data, "catalog.sqlite"))
    with Daemon("--data", data) as daemon:
        return answer_of(daemon)


def copies_beside_a_running_daemon_and_without_one():
    with Place() as place:
        first, second = place.path("first.sqlite"), place.path("second.sqlite")
        with Daemon("--data", place.data) as daemon:
            publish(daemon)
            done = backup(place.data, first)
            expect(done.returncode == 0, done.stderr)
            expect(first in done.stdout, done.stdout)
            before = answer_of(daemon)
        done = backup(place.data, second)
        expect(done.returncode == 0, done.stderr)
        done = backup(place.data, second)  # over an older one
        expect(done.returncode == 0, done.stderr)
        expect(restored(place, first, "one") == before, "another answer from the first copy")
        expect(restored(place, second, "two") == before, "another answer from the second copy")
        parts = [n for n in os.listdir(place.root) if ".part" in n]
        expect(not parts, "left behind:", parts)


def refuses_with_a_sentence():
    with Place() as place:
        none = backup(place.data, place.path("copy"))
        expect(none.returncode == 1 and "no catalog" in none.stderr, none.returncode, none.stderr)
        expect(not os.path.exists(place.path("copy")), "a file was made")
        with Daemon("--data", place.data):
            own = backup(place.data, os.path.join(place.data, "catalog.sqlite"))
            expect(own.returncode == 1 and "itself" in own.stderr, own.returncode, own.stderr)
            nowhere = backup(place.data, place.path("none", "copy"))
            expect(nowhere.returncode == 1 and "none/copy" in nowhere.stderr, nowhere.stderr)
        nameless = backup(place.data)
        expect(nameless.returncode == 2 and "--backup" in nameless.stderr, nameless.stderr)


run(copies_beside_a_running_daemon_and_without_one, refuses_with_a_sentence)
