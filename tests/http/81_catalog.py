#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Documents, revisions and states over HTTP against the daemon itself, and over a restart."""
import json
import os
import subprocess
import sys
import time

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

DEMO = os.path.join(HERE, "..", "..", "deploy", "demo")
NAMES = ("tilt-table", "belt-hopper", "lid-turner", "label-stage", "case-packer")


def text(name):
    with open(os.path.join(DEMO, name + ".json"), encoding="utf-8") as f:
        return f.read()


def load(daemon, name, document=None):
    """Puts and publishes, accepting every warning; returns the number of the revision."""
    answer = daemon.ask("PUT", f"/v1/mechanisms/{name}", document or text(name))
    expect(answer.status in (200, 201), name, answer.status, answer.body)
    put = answer.json()
    accept = [f["finding"] for f in put["findings"] if f["severity"] == "warning"]
    answer = daemon.ask("POST", f"/v1/mechanisms/{name}/revisions/{put['revision']}/publish",
                        {"accept": accept, "reason": "check"})
    expect(answer.status == 200, name, answer.status, answer.body)
    return put["revision"]


def stores_and_gives_back_the_same_bytes():
    with Daemon() as daemon:
        for name in NAMES:
            answer = daemon.ask("PUT", f"/v1/mechanisms/{name}", text(name))
            expect(answer.status == 201, name, answer.status, answer.body)
            place, tag = answer.get("Location"), answer.get("ETag")
            expect(tag == f'"{answer.json()["digest"]}"', tag)
            got = daemon.ask("GET", place)
            expect(got.body == text(name).encode(), "another text came back")
            expect(got.get("ETag") == tag, got.get("ETag"))
            got = daemon.ask("GET", place, headers=[("If-None-Match", tag)])
            expect(got.status == 304 and got.body == b"", got.status)
            got = daemon.ask("GET", place, headers=[("If-None-Match", '"other", W/' + tag)])
            expect(got.status == 304, got.status)
            got = daemon.ask("HEAD", place)
            expect(got.status == 200 and int(got.get("Content-Length")) == len(text(name)),
                   got.status, got.headers)


def order_and_layout_do_not_make_a_new_revision():
    document = json.loads(text("label-stage"))
    turned = json.dumps(dict(reversed(document.items())), indent=7)
    with Daemon() as daemon:
        first = daemon.ask("PUT", "/v1/mechanisms/label-stage", text("label-stage"))
        again = daemon.ask("PUT", "/v1/mechanisms/label-stage", turned)
        expect(first.status == 201 and again.status == 200, first.status, again.status)
        expect(first.json()["digest"] == again.json()["digest"])


def refused_documents_leave_nothing_behind():
    document = json.loads(text("label-stage"))
    with Daemon() as daemon:
        document["joints"][2]["axis"] = [0, 0, 0]
        document["drives"][1]["moves"] = "shoulder-9"
        answer = daemon.ask("PUT", "/v1/mechanisms/label-stage", document)
        problem = answer.problem(422, 1074)
        places = [f["pointer"] for f in problem["findings"]]
        expect("/joints/2/axis" in places and "/drives/1/moves" in places, places)
        daemon.ask("GET", "/v1/mechanisms/label-stage").problem(404, 1060)
        expect(daemon.ask("GET", "/v1/mechanisms").json()["mechanisms"] == [])


def tags_guard_against_a_lost_change():
    other = text("label-stage").replace("Label inspection stage", "Label stage 2")
    with Daemon() as daemon:
        target = "/v1/mechanisms/label-stage"
        once = [("If-None-Match", "*")]
        answer = daemon.ask("PUT", target, text("label-stage"), headers=once)
        expect(answer.status == 201, answer.status)
        daemon.ask("PUT", target, other, headers=once).problem(412, 1066)
        tag = answer.get("ETag")
        expect(daemon.ask("PUT", target, other, headers=[("If-Match", tag)]).status == 201)
        daemon.ask("PUT", target, text("label-stage"),
                   headers=[("If-Match", tag)]).problem(412, 1066)
        state = daemon.ask("GET", target + "/state")
        tag = state.get("ETag")
        publish = target + "/revisions/2/publish"
        expect(daemon.ask("POST", publish, {}, headers=[("If-Match", tag)]).status == 200)
        daemon.ask("POST", target + "/revisions/1/publish", {},
                   headers=[("If-Match", tag)]).problem(412, 1066)


def roles_are_kept():
    with Daemon(ready=False, expect_status=0) as probe:
        pass_lines, tokens = "", {}
        for role in ("query", "author", "admin"):
            out = subprocess.run([os.environ["LWT_DAEMON"], "--make-token", role, role],
                                 capture_output=True, text=True, check=True).stdout
            words = out.split()
            line = next(l for l in out.splitlines() if l.startswith(f"{role} {role} "))
            tokens[role] = next(w for w in words if w not in line.split() and len(w) >= 32)
            pass_lines += line + "\n"
        path = os.path.join(probe.dir, "tokens")
        with open(path, "w", encoding="ascii") as f:
            f.write(pass_lines)
        os.chmod(path, 0o600)
        with Daemon("--token-file", path) as daemon:
            def ask(role, *request):
                return daemon.ask(*request, headers=[("Authorization", "Bearer " + tokens[role])])
            target = "/v1/mechanisms/label-stage"
            ask("query", "PUT", target, text("label-stage")).problem(403, 1013)
            expect(ask("author", "PUT", target, text("label-stage")).status == 201)
            ask("author", "POST", target + "/revisions/1/publish").problem(403, 1013)
            expect(ask("admin", "POST", target + "/revisions/1/publish").status == 200)
            events = ask("query", "GET", target + "/history").json()["events"]
            expect(events[0]["by"] == "admin", events)
            daemon.ask("GET", target).problem(401, 1011)
            expect(daemon.ask("GET", "/healthz").status == 200)


def everything_is_there_after_a_restart():
    question = {"pose": {"x": 15, "y": -10, "rz": 6}}
    with Daemon() as first:
        load(first, "label-stage")
        before = first.ask("POST", "/v1/mechanisms/label-stage/inverse", question).json()
        first.stop()
        # The same directory, served anew.
        port = os.path.join(first.dir, "port2")
        process = subprocess.Popen([os.environ["LWT_DAEMON"], "--data", first.dir, "--listen",
                                    "127.0.0.1:0", "--port-file", port],
                                   stderr=subprocess.DEVNULL)
        try:
            deadline = time.monotonic() + 30
            while not os.path.exists(port) and time.monotonic() < deadline:
                time.sleep(0.02)
            with open(port, encoding="ascii") as f:
                first.address = ("127.0.0.1", int(f.read()))
            after = first.ask("POST", "/v1/mechanisms/label-stage/inverse", question).json()
        finally:
            process.terminate()
            expect(process.wait(40) == 0, "exit status", process.returncode)
        for answer in (before, after):
            answer.pop("served_at")
        expect(before == after, "another answer after the restart")


def pages_link_to_the_next():
    with Daemon() as daemon:
        for name in NAMES:
            daemon.ask("PUT", f"/v1/mechanisms/{name}", text(name))
        seen, target = [], "/v1/mechanisms?limit=2"
        while target:
            answer = daemon.ask("GET", target)
            seen += [m["mechanism"] for m in answer.json()["mechanisms"]]
            link = answer.get("Link")
            target = link[1:link.index(">")] if link else None
        expect(seen == sorted(NAMES), seen)


run(stores_and_gives_back_the_same_bytes, order_and_layout_do_not_make_a_new_revision,
    refused_documents_leave_nothing_behind, tags_guard_against_a_lost_change, roles_are_kept,
    everything_is_there_after_a_restart, pages_link_to_the_next)
