#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Solution sets are kept with a revision: a restart gives the same answers to the last digit, a
damaged or missing set is made anew and the log says so. The list of modes is the same after a
restart, and its shares and postures are held against the questions themselves.

An instrumented program prepares with few paths (server/api/CMakeLists.txt): there a set may stay
open, and the checks compare with what the report says.
"""
import json
import os
import shutil
import sqlite3
import sys
import tempfile
import time

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run, sanitized  # noqa: E402

DEMO = os.path.join(HERE, "..", "..", "deploy", "demo")
TABLE = "/v1/mechanisms/tilt-table"


def text_of(name):
    with open(os.path.join(DEMO, name + ".json"), encoding="utf-8") as f:
        return f.read()


def put(daemon, name):
    stored = daemon.ask("PUT", f"/v1/mechanisms/{name}", text_of(name))
    expect(stored.status in (200, 201), name, stored.status, stored.body)
    return stored.json()


def publish(daemon, name):
    accept = [f["finding"] for f in put(daemon, name)["findings"] if f["severity"] == "warning"]
    done = daemon.ask("POST", f"/v1/mechanisms/{name}/revisions/1/publish", {"accept": accept})
    expect(done.status == 200, done.body)


def all_of(daemon, drives):
    answer = daemon.ask("POST", TABLE + "/forward", {"drives": drives, "all": True})
    expect(answer.status == 200, answer.status, answer.body)
    answer = answer.json()
    answer.pop("served_at")
    return answer


def home_readings():
    home = json.loads(text_of("tilt-table"))
    ranges = {d["name"]: d["range"] for d in home["drives"]}
    # Unequal, so that the posture is a general one; inside every range.
    return {name: low + (0.45 + 0.02 * i) * (high - low)
            for i, (name, (low, high)) in enumerate(sorted(ranges.items()))}


class Kept:
    """A directory that outlives its daemons."""

    def __enter__(self):
        self.dir = tempfile.mkdtemp(prefix="lwt-sets-")
        return self

    def __exit__(self, *unused):
        shutil.rmtree(self.dir, ignore_errors=True)

    def daemon(self):
        return Daemon("--data", self.dir)

    def catalog(self, statement, *values):
        with sqlite3.connect(os.path.join(self.dir, "catalog.sqlite")) as db:
            rows = db.execute(statement, values).fetchall()
        db.close()
        return rows


def the_report_tells_counts_and_proof():
    with Daemon() as daemon:
        put(daemon, "tilt-table")
        sets = daemon.ask("GET", TABLE + "/revisions/1/report").json()["solution_sets"]
        expect(sets["forward"]["drives"] == ["a1", "a2", "a3", "a4", "a5", "a6"], sets)
        expect(sets["inverse"] is None, "an explicit inverse needs no set", sets)
        if not sanitized():
            # Raghavan 1993: a general platform on six legs has 40 assemblies over the complex
            # numbers (from memory).
            expect(sets["forward"]["solutions"] == 40, sets)
            expect(sets["forward"]["basis"] == "trace", sets)
        found = put(daemon, "tilt-table")["findings"]
        is_open = sets["forward"]["basis"] != "trace"
        expect(any(f["finding"] == "forward-set-open" for f in found) == is_open, found)


def a_restart_changes_no_digit():
    drives = home_readings()
    with Kept() as kept:
        with kept.daemon() as daemon:
            publish(daemon, "tilt-table")
            before = all_of(daemon, drives)
            modes = daemon.ask("GET", TABLE + "/modes").body
            expect(before["found"]["complex"] is not None, before["found"])
        with kept.daemon() as daemon:
            expect(daemon.metric("leeway_models_loaded") == 1, "loaded before the first question")
            expect(all_of(daemon, drives) == before, "other answers after a restart")
            expect(daemon.ask("GET", TABLE + "/modes").body == modes, "other modes")
            expect(said(daemon, "1 published mechanisms are ready"), daemon.log())
            expect("sets_damaged" not in daemon.log(), daemon.log())


def said(daemon, text):
    """Whether the log says this; it is written a moment after the fact."""
    until = time.monotonic() + 5
    while text not in daemon.log() and time.monotonic() < until:
        time.sleep(0.05)
    return text in daemon.log()


def spoilt(kept, how):
    """Every kept set changed by `how`, and the checksum of the catalog with it or not."""
    tables = [r[0] for r in kept.catalog("SELECT name FROM sqlite_master WHERE type = 'table'")]
    name = [t for t in tables if "solution" in t]
    expect(len(name) == 1, "one table of solution sets expected", tables)
    count = kept.catalog(f"SELECT count(*) FROM {name[0]}")[0][0]
    expect(count == 1, "one set is kept, got", count)
    how(name[0])


def damage_is_found_and_made_good():
    drives = home_readings()
    with Kept() as kept:
        with kept.daemon() as daemon:
            publish(daemon, "tilt-table")
            before = all_of(daemon, drives)

        def flip(table):
            column = [r[1] for r in kept.catalog(f"PRAGMA table_info({table})")
                      if r[2].upper() == "BLOB" and "sum" not in r[1]]
            blob = bytearray(kept.catalog(f"SELECT {column[0]} FROM {table}")[0][0])
            blob[len(blob) // 2] ^= 0x10
            kept.catalog(f"UPDATE {table} SET {column[0]} = ?", bytes(blob))

        def drop(table):
            kept.catalog(f"DELETE FROM {table}")

        for how, damaged in ((flip, True), (drop, False)):
            spoilt(kept, how)
            with kept.daemon() as daemon:
                expect(all_of(daemon, drives) == before, "other answers from a set made anew")
                expect(said(daemon, "event=models_loaded"), daemon.log())
                expect(("event=sets_damaged" in daemon.log()) == damaged, daemon.log())
            with kept.daemon() as daemon:  # it was kept again
                expect(all_of(daemon, drives) == before, "other answers")
                expect(said(daemon, "event=models_loaded"), daemon.log())
                expect("event=sets_damaged" not in daemon.log(), daemon.log())


def modes_hold_what_they_say():
    with Daemon("--prepare-paths", "200") as daemon:
        base = "/v1/mechanisms/belt-hopper"
        publish(daemon, "belt-hopper")
        told = daemon.ask("GET", base + "/modes").json()
        sample = told["sample"]
        expect(0 < sample["reached"] <= sample["poses"], sample)
        expect(len(told["modes"]) == 8, "three limbs of two branches have eight modes")
        expect(max(m["held"] for m in told["modes"]) <= sample["reached"], told)
        expect(sum(m["held"] for m in told["modes"]) >= sample["reached"], told)
        for mode in told["modes"]:
            expect(abs(mode["share"] - mode["held"] / sample["reached"]) < 1e-15, mode)
            expect(("example" in mode) == (mode["held"] > 0), mode)
            if "example" not in mode:
                continue
            pose = {k: mode["example"]["pose"][k] for k in "xyz"}
            found = daemon.ask("POST", base + "/inverse",
                               {"pose": pose, "mode": mode["mode"]}).json()
            expect(found["code"] == 1, mode, found)
            for name, reading in found["solutions"][0]["drives"].items():
                expect(abs(reading - mode["example"]["drives"][name]) < 1e-6, mode, name, reading)


if __name__ == "__main__":
    run(the_report_tells_counts_and_proof, a_restart_changes_no_digit,
        damage_is_found_and_made_good, modes_hold_what_they_say)
