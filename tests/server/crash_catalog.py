#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Kills a writing catalog with SIGKILL again and again and looks for every acknowledged write.

    crash_catalog.py DRIVER [--kills 250] [--fresh 25] [--seconds 100]

All kills but the "fresh" ones fall on one growing directory; the fresh ones fall into the making of
a new catalog. After each kill the file is opened by the next run through the catalog's own code
(recovery of the log, quick check, a write load again); after every fifth also by Python's own
sqlite3 module, which looks for everything acknowledged since its last look and recomputes each
digest with hashlib, and by `catalog_driver check`. At the end everything acknowledged is looked for
once more. Last, the checks themselves are tried on a damaged copy.

What this shows: no acknowledged write is lost, and none is half there, when the process dies at any
instant. It says nothing on loss of power: the kernel lives on here and keeps what was written.
"""
import argparse
import fcntl
import hashlib
import os
import random
import shutil
import signal
import sqlite3
import subprocess
import sys
import tempfile
import time

SEED = 20240917
F_SETPIPE_SZ = 1031


class Fault(Exception):
    pass


def start(driver, directory, seed):
    child = subprocess.Popen([driver, "write", directory, str(seed)], stdout=subprocess.PIPE)
    try:  # room for all lines of one run, so that the driver never waits for us
        fcntl.fcntl(child.stdout.fileno(), F_SETPIPE_SZ, 1 << 20)
    except OSError:
        pass
    return child


def kill(child):
    """Kills the child; returns the lines that came through whole."""
    child.send_signal(signal.SIGKILL)
    text = child.stdout.read().decode("ascii")
    child.stdout.close()
    if child.wait() != -signal.SIGKILL:
        raise Fault(f"the driver ended by itself ({child.returncode}): {text[-300:]!r}")
    return text[: text.rfind("\n") + 1].splitlines()


def run_check(driver, directory):
    done = subprocess.run([driver, "check", directory], stdout=subprocess.PIPE, timeout=60)
    text = done.stdout.decode("ascii").strip()
    if done.returncode != 0 or not text.startswith("whole "):
        raise Fault(f"check: {text!r} (status {done.returncode})")
    return int(text.split()[1])


def open_file(directory):
    # Nobody else has it open now, so this second reader of the format may.
    return sqlite3.connect(os.path.join(directory, "catalog.sqlite"))


def look_for(db, lines):
    """Every acknowledgement has its row, whole. Returns how many were looked for."""
    ids = dict(db.execute("SELECT name, id FROM mechanism"))
    for line in lines:
        kind, name, number, what = line.split()
        key = (ids.get(name), int(number))
        if kind == "rev":
            row = db.execute(
                "SELECT document, digest FROM revision WHERE mechanism_id = ? AND number = ?", key
            ).fetchone()
            if row is None:
                raise Fault(f"lost: {line}")
            if row[1] != what or hashlib.sha256(row[0].encode()).hexdigest() != what:
                raise Fault(f"not whole: {line}")
        elif kind in ("pub", "wdr"):
            row = db.execute(
                "SELECT action FROM state_event WHERE mechanism_id = ? AND number = ?"
                " AND serial = ?",
                key + (int(what),),
            ).fetchone()
            if row != ({"pub": "publish", "wdr": "withdraw"}[kind],):
                raise Fault(f"lost: {line} (found {row})")
        elif kind == "sol":
            row = db.execute(
                "SELECT content FROM solution_set WHERE mechanism_id = ? AND number = ?", key
            ).fetchone()
            if row != (bytes([key[1] % 256]) * int(what),):
                raise Fault(f"lost or not whole: {line}")
        else:
            raise Fault(f"unexpected line {line!r}")
    return len(lines)


def integrity(db):
    found = db.execute("PRAGMA integrity_check").fetchall()
    if found != [("ok",)]:
        raise Fault(f"integrity_check: {found[:3]}")
    if db.execute("PRAGMA foreign_key_check").fetchall():
        raise Fault("foreign_key_check finds orphans")


def everything_stored_is_whole(db):
    """Also what was not acknowledged is there as a whole or not at all, and without gaps."""
    for document, digest in db.execute("SELECT document, digest FROM revision"):
        if hashlib.sha256(document.encode()).hexdigest() != digest:
            raise Fault(f"a stored revision is not whole: {digest}")
    for table, column in (("revision", "number"), ("state_event", "serial")):
        for _, count, least, most in db.execute(
            f"SELECT mechanism_id, COUNT(*), MIN({column}), MAX({column}) FROM {table}"
            " GROUP BY mechanism_id"
        ):
            if least != 1 or most != count:
                raise Fault(f"{table}: {count} rows numbered {least} to {most}")


def must_fail(what, call):
    try:
        call()
    except (Fault, sqlite3.DatabaseError):
        return
    raise Fault(f"the check does not notice {what}")


def the_checks_can_fail(directory, driver, acknowledged, scratch):
    """Damages copies and expects the checks above to notice."""
    def damaged(sql):
        copy = tempfile.mkdtemp(dir=scratch)
        shutil.copy(os.path.join(directory, "catalog.sqlite"), copy)
        db = open_file(copy)
        for trigger in ("revision_is_kept", "revision_is_fixed", "state_event_is_kept"):
            db.execute(f"DROP TRIGGER {trigger}")
        if db.execute(sql).rowcount < 1:
            raise Fault(f"nothing to damage: {sql}")
        db.commit()
        return copy, db

    def some(*kinds):
        """The place in the tables of some acknowledged write of these kinds."""
        name, number = [x for x in acknowledged if x.startswith(kinds)][-1].split()[1:3]
        return (
            f"number = {number} AND mechanism_id = (SELECT id FROM mechanism WHERE name = '{name}')"
        )

    _, db = damaged(f"DELETE FROM revision WHERE {some('rev')}")
    must_fail("a lost revision", lambda: look_for(db, acknowledged))
    db.close()
    copy, db = damaged(f"UPDATE revision SET document = document || ' ' WHERE {some('rev')}")
    must_fail("a changed text", lambda: look_for(db, acknowledged))
    must_fail("a changed text (all)", lambda: everything_stored_is_whole(db))
    db.close()
    must_fail("a changed text (driver)", lambda: run_check(driver, copy))
    _, db = damaged(f"DELETE FROM state_event WHERE {some('pub', 'wdr')}")
    must_fail("a lost event", lambda: look_for(db, acknowledged))
    db.close()
    _, db = damaged("UPDATE solution_set SET content = x'00'")
    must_fail("a changed solution set", lambda: look_for(db, acknowledged))
    db.close()


def growing(options, directory, rng):
    """The kills on one directory. Returns all acknowledgements and the count of useful kills."""
    everything, unseen = [], []
    useful = during_open = 0
    deadline = time.monotonic() + options.seconds
    for i in range(options.kills):
        if time.monotonic() > deadline:
            raise Fault(f"only {i} of {options.kills} kills in {options.seconds} s")
        child = start(options.driver, directory, SEED + i)
        if i % 5 == 4:  # somewhere in the opening: recovery of the log, check, first writes
            time.sleep(rng.uniform(0, options.open_ms / 1000))
            lines = kill(child)
        else:
            line = child.stdout.readline().decode("ascii")
            if line != "ready\n":
                child.kill()
                raise Fault(f"the catalog does not open after kill {i}: {line!r}")
            time.sleep(rng.uniform(0, 0.03))
            lines = ["ready"] + kill(child)
        if lines[:1] == ["ready"]:
            useful += 1
            unseen += lines[1:]
            everything += lines[1:]
        elif lines:
            raise Fault(f"the catalog does not open after kill {i}: {lines[0]!r}")
        else:
            during_open += 1
        if i % 5 == 3 or i == options.kills - 1:
            if i % 10 == 3:  # one time our own recovery first, one time Python's
                run_check(options.driver, directory)
            db = open_file(directory)
            look_for(db, unseen)
            integrity(db)
            db.close()
            unseen = []
    return everything, useful, during_open


def fresh(options, scratch, rng):
    """Kills into the making of a new catalog: what is left must open."""
    for i in range(options.fresh):
        directory = os.path.join(scratch, f"fresh-{i}")
        child = start(options.driver, directory, SEED - i - 1)
        time.sleep(rng.uniform(0, options.open_ms / 1000))
        lines = kill(child)
        run_check(options.driver, directory)
        db = open_file(directory)
        look_for(db, lines[1:])
        db.close()
        shutil.rmtree(directory)


def measure_opening(options, scratch):
    """Milliseconds from the start of the driver until it writes, with some to spare."""
    directory = os.path.join(scratch, "first")
    begin = time.monotonic()
    child = start(options.driver, directory, 1)
    child.stdout.readline()
    taken = time.monotonic() - begin
    kill(child)
    shutil.rmtree(directory)
    return 1000 * 1.3 * taken


def main():
    parser = argparse.ArgumentParser(description="kills a writing catalog and checks what is left")
    parser.add_argument("driver")
    parser.add_argument("--kills", type=int, default=250)
    parser.add_argument("--fresh", type=int, default=25)
    parser.add_argument("--seconds", type=float, default=100)
    options = parser.parse_args()
    rng = random.Random(SEED)
    begin = time.monotonic()
    scratch = tempfile.mkdtemp(prefix="lwd-crash-")
    try:
        options.open_ms = measure_opening(options, scratch)
        directory = os.path.join(scratch, "growing")
        acknowledged, useful, during_open = growing(options, directory, rng)
        if useful < 200 and options.kills >= 250:
            raise Fault(f"only {useful} kills fell on a writing process, expected 200")
        for kind in ("rev", "pub", "wdr", "sol"):
            if not any(line.startswith(kind) for line in acknowledged):
                raise Fault(f"nothing of kind {kind} was ever acknowledged")
        stored = run_check(options.driver, directory)
        db = open_file(directory)
        look_for(db, acknowledged)
        integrity(db)
        everything_stored_is_whole(db)
        db.close()
        fresh(options, scratch, rng)
        the_checks_can_fail(directory, options.driver, acknowledged, scratch)
        size = os.path.getsize(os.path.join(directory, "catalog.sqlite")) / 1e6
        revisions = sum(line.startswith("rev") for line in acknowledged)
        print(
            f"{options.kills} kills on one directory: {useful} while writing, {during_open} while"
            f" opening; {options.fresh} while making a new one\n"
            f"{len(acknowledged)} writes acknowledged ({revisions} revisions), all there and whole;"
            f" {stored} revisions stored; {size:.1f} MB; {time.monotonic() - begin:.1f} s"
        )
    except Fault as fault:
        print(f"FAILED: {fault}; the directory is kept: {scratch}", file=sys.stderr)
        return 1
    except BaseException:
        shutil.rmtree(scratch)
        raise
    shutil.rmtree(scratch)
    return 0


if __name__ == "__main__":
    sys.exit(main())
