#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Revisions change while questions run: every answer is whole, names the revision that made it, and
once a publication is acknowledged no later question is answered by the one before. Each revision
moves the tool by a known length, so an answer shows by its numbers which geometry made it.
"""
import json
import os
import random
import sys
import threading

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run, sanitized  # noqa: E402

DEMO = os.path.join(HERE, "..", "..", "deploy", "demo")
READINGS = {"m1": 90, "m2": 180, "m3": 270, "m4": 0}  # the drawing: the plate stands at 0, 0


def revision(shift_mm):
    with open(os.path.join(DEMO, "label-stage.json"), encoding="utf-8") as f:
        document = json.load(f)
    document["tools"][0]["at"] = [shift_mm, 0, 0]
    document["checks"] = []
    return document


def answers_follow_the_published_revision():
    count = 4 if sanitized() else 10
    with Daemon() as daemon:
        base = "/v1/mechanisms/label-stage"
        shift = {}
        for k in range(1, 4):
            put = daemon.ask("PUT", base, revision(10 * k))
            expect(put.status == 201, put.status, put.body)
            shift[put.json()["revision"]] = 10 * k
        publish = daemon.ask("POST", f"{base}/revisions/1/publish")
        expect(publish.status == 200, publish.body)
        # The revision that must answer, with a serial number; a second entry: either may.
        acknowledged, stop, faults, asked = [(1, 0)], threading.Event(), [], [0]

        def ask_on():
            with daemon.wire() as wire:
                while not stop.is_set() and not faults:
                    before = acknowledged[0]
                    answer = wire.ask("POST", base + "/forward", {"drives": READINGS})
                    changing = len(acknowledged) > 1
                    after = acknowledged[0]
                    body = answer.json()
                    asked[0] += 1
                    if answer.status != 200:
                        faults.append((answer.status, body))
                        continue
                    x = body["solutions"][0]["pose"]["x"]
                    if abs(x - shift[body["revision"]]) > 1e-9:
                        faults.append(("numbers of another revision", x, body["revision"]))
                    if before == after and not changing and body["revision"] != before[0]:
                        faults.append(("an old revision answered", body["revision"], before))

        threads = [threading.Thread(target=ask_on) for _ in range(3)]
        for thread in threads:
            thread.start()
        choice = random.Random(7)
        for serial in range(1, count + 1):
            number = choice.choice([n for n in shift if n != acknowledged[0][0]])
            acknowledged.append(None)
            done = daemon.ask("POST", f"{base}/revisions/{number}/publish")
            expect(done.status == 200 and done.json()["answering"] == number, done.body)
            now = daemon.ask("POST", base + "/forward", {"drives": READINGS}).json()
            expect(now["revision"] == number, "the old revision still answers", now["revision"])
            acknowledged[:] = [(number, serial)]
        stop.set()
        for thread in threads:
            thread.join()
        expect(not faults, faults)
        expect(asked[0] > 20, "only", asked[0], "questions were asked")


def withdrawing_ends_the_answers():
    with Daemon() as daemon:
        base = "/v1/mechanisms/label-stage"
        daemon.ask("PUT", base, revision(10))
        daemon.ask("POST", base + "/revisions/1/publish")
        expect(daemon.ask("POST", base + "/forward", {"drives": READINGS}).status == 200)
        daemon.ask("POST", base + "/revisions/1/withdraw", {"reason": "wrong drawing"})
        daemon.ask("POST", base + "/forward", {"drives": READINGS}).problem(409, 1062)
        daemon.ask("POST", base + "/forward",
                   {"drives": READINGS, "revision": 1}).problem(409, 1064)
        # The same content may be put anew and is a new revision.
        put = daemon.ask("PUT", base, revision(10))
        expect(put.status == 201 and put.json()["revision"] == 2, put.status, put.body)


run(answers_follow_the_published_revision, withdrawing_ends_the_answers)
