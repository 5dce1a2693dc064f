#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The five questions about the five demo machines over HTTP: identities between questions, forms,
batches, the PLC's lines. No value here is copied from the service: each answer is held against
another question or against arithmetic in this file.
"""
import math
import os
import sys
import urllib.parse

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

DEMO = os.path.join(HERE, "..", "..", "deploy", "demo")
POSES = {
    "tilt-table": {"x": 20, "y": -15, "z": 530, "zyx": {"yaw": 4, "pitch": -6, "roll": 8}},
    "belt-hopper": {"x": 35, "y": -25, "z": 400},
    "lid-turner": {"x": 20, "y": -15, "z": 420, "joints": {"shaft": 360}},
    "label-stage": {"x": 15, "y": -10, "rz": 6},
    "case-packer": {"x": 460, "y": 120, "z": 560, "zyx": {"yaw": 15, "pitch": 0, "roll": 180}},
}


class Line:
    """A daemon with the demo line published."""

    def __enter__(self):
        self.daemon = Daemon("--prepare-paths", "1").__enter__()
        for name in POSES:
            with open(os.path.join(DEMO, name + ".json"), encoding="utf-8") as f:
                put = self.daemon.ask("PUT", f"/v1/mechanisms/{name}", f.read())
            expect(put.status == 201, name, put.status, put.body)
            accept = [f["finding"] for f in put.json()["findings"] if f["severity"] == "warning"]
            done = self.daemon.ask("POST", f"/v1/mechanisms/{name}/revisions/1/publish",
                                   {"accept": accept})
            expect(done.status == 200, name, done.status, done.body)
        return self

    def __exit__(self, *error):
        self.daemon.__exit__(*error)

    def ask(self, name, question, body, status=200):
        answer = self.daemon.ask("POST", f"/v1/mechanisms/{name}/{question}", body)
        expect(answer.status == status, name, question, answer.status, answer.body)
        return answer.json()


def near(got, want, tolerance, *what):
    expect(abs(got - want) <= tolerance, *what, "got", repr(got), "want", repr(want))


def forward_of_inverse_is_the_pose():
    with Line() as line:
        for name, pose in POSES.items():
            inverse = line.ask(name, "inverse", {"pose": pose})
            good = [s for s in inverse["solutions"] if s["within_limits"]]
            expect(good, name, "has no solution within limits")
            for solution in good:
                forward = line.ask(name, "forward", {"drives": solution["drives"],
                                                     "near": {"joints": solution["joints"]}})
                expect(forward["code"] == 1, name, forward["code"], forward.get("reason"))
                got = forward["solutions"][0]["pose"]
                for axis in "xyz":
                    if axis in pose:
                        near(got[axis], pose[axis], 1e-6, name, axis)
                expect(forward["solutions"][0]["mode"] == solution["mode"], name)


def a_small_step_follows_the_jacobian():
    """d pose = J d drives to first order: central differences of forward, step 1e-4 units."""
    h = 1e-4
    with Line() as line:
        for name in ("tilt-table", "belt-hopper", "case-packer"):
            start = line.ask(name, "inverse", {"pose": POSES[name]})["solutions"][0]
            jacobian = line.ask(name, "jacobian", {"drives": start["drives"],
                                                   "near": {"joints": start["joints"]}})
            twist = jacobian["twist"]
            for k, column in enumerate(twist["columns"]):
                side = []
                for sign in (1, -1):
                    drives = dict(start["drives"])
                    drives[column["name"]] += sign * h
                    side.append(line.ask(name, "forward", {
                        "drives": drives, "near": {"joints": start["joints"]}})
                        ["solutions"][0]["pose"])
                for i, axis in enumerate("xyz"):
                    difference = (side[0][axis] - side[1][axis]) / (2 * h)
                    near(twist["values"][i][k], difference, 2e-4 * (1 + abs(difference)), name,
                         column["name"], axis)


def matrices_carry_names_and_units():
    with Line() as line:
        answer = line.ask("lid-turner", "jacobian", {"pose": POSES["lid-turner"]})
        rows = [(r["name"], r["unit"]) for r in answer["forward"]["rows"]]
        expect(rows == [("x", "mm/s"), ("y", "mm/s"), ("z", "mm/s"), ("shaft", "deg/s")], rows)
        product = [[sum(a * b for a, b in zip(row, column))
                    for column in zip(*answer["inverse"]["values"])]
                   for row in answer["forward"]["values"]]
        for i, row in enumerate(product):
            for k, value in enumerate(row):
                near(value, float(i == k), 1e-8, "forward times inverse", i, k)


def the_reference_point_moves_as_a_rigid_body_says():
    """v(p) = v(tool) + w x (p - tool), planar: a point 100 mm along x."""
    with Line() as line:
        base = {"pose": POSES["label-stage"]}
        at_tool = line.ask("label-stage", "jacobian", base)["twist"]["values"]
        pose = POSES["label-stage"]
        moved = dict(base, point=[pose["x"] + 100, pose["y"], 0])
        at_point = line.ask("label-stage", "jacobian", moved)["twist"]["values"]
        for k in range(4):
            w = math.radians(at_tool[5][k])
            near(at_point[0][k], at_tool[0][k], 1e-9)
            near(at_point[1][k], at_tool[1][k] + w * 100, 1e-9)


def the_plc_asks_with_plain_members():
    with Line() as line, line.daemon.wire() as wire:
        plain = [("Accept", "text/plain")]
        for name, pose in POSES.items():
            flat = {}
            for key, value in pose.items():
                if key == "zyx":
                    flat.update(value)
                elif key == "joints":
                    flat.update({f"joint.{k}": v for k, v in value.items()})
                else:
                    flat[key] = value
            query = urllib.parse.urlencode(dict(flat, ref="PLC 4"), quote_via=urllib.parse.quote)
            answer = wire.ask("GET", f"/v1/mechanisms/{name}/reach?{query}", headers=plain)
            expect(answer.status == 200 and len(answer.body) <= 255, answer.status, answer.body)
            lines = dict(l.split("=", 1) for l in answer.body.decode("ascii").splitlines())
            whole = line.ask(name, "reach", {"pose": pose})
            expect(lines["ref"] == "PLC 4" and int(lines["code"]) == whole["code"], lines)
            expect(lines["outcome"] == whole["outcome"] and lines["tag"] == whole["digest"][:8])
            expect(lines["mode"] == whole["solution"]["mode"], lines)
            near(float(lines["margin"]), whole["least"]["value"], 1e-7 * whole["least"]["value"])
            expect(lines["margin_of"] == whole["least"]["name"], lines)


def a_plus_in_a_query_is_a_plus_in_a_mode():
    with Line() as line, line.daemon.wire() as wire:
        for written in ("+-++", "%2B-%2B%2B", "%20-+%2B"):
            answer = wire.ask("GET", f"/v1/mechanisms/label-stage/reach?x=1&y=2&rz=3&mode={written}")
            expect(answer.status == 200, answer.status, answer.body)
            expect(answer.json()["asked"]["mode"] == "+-++", answer.json()["asked"])


def query_members_are_known_and_single():
    with Line() as line, line.daemon.wire() as wire:
        base = "/v1/mechanisms/label-stage/reach?x=1&y=2&rz=3"
        for more, code in (("&x=1", 1056), ("&xx=1", 1051), ("&from.m9=1", 1051),
                           ("&margin_min.lod=1", 1051), ("&rz=NaN", 1056), ("&z=NaN", 1055),
                           ("&z=1e999", 1055), ("&z=0x10", 1055), ("&z=", 1055),
                           ("&qw=1", 1055), ("&revision=0", 1055), ("&ref=", 1055),
                           ("&expect=123", 1055)):
            wire.ask("GET", base + more).problem(400, code)
        wire.ask("GET", base + "&tool=none").problem(422, 1070)
        wire.ask("GET", base + "&distance=1").problem(400, 1051)
        wire.ask("POST", "/v1/mechanisms/label-stage/reach?x=1",
                 {"pose": POSES["label-stage"]}).problem(400, 1051)


def a_long_batch_is_answered_in_order():
    with Line() as line:
        poses = [{"x": i % 30, "y": -(i % 7), "rz": i % 5} for i in range(256)]
        answer = line.ask("label-stage", "inverse", {"batch": [{"pose": p} for p in poses]})
        expect(answer["count"] == 256 and len(answer["answers"]) == 256)
        for pose, one in zip(poses, answer["answers"]):
            expect(one["asked"]["pose"] == pose, one["asked"], pose)
        line.ask("label-stage", "inverse", {"batch": [{"pose": p} for p in poses + poses[:1]]},
                 status=400)
        line.ask("label-stage", "inverse", {"batch": []}, status=400)


def verdicts_are_answers_and_nonsense_is_an_error():
    with Line() as line:
        far = line.ask("label-stage", "reach", {"pose": {"x": 9000, "y": 0, "rz": 0}})
        expect(far["code"] == 4 and far["outcome"] == "out_of_reach", far["code"])
        from_here = {"pose": POSES["label-stage"], "margin_min": 0,
                     "from": {"drives": {"m1": 90, "m2": 180, "m3": 270, "m4": 0}}}
        move = line.ask("label-stage", "reach", from_here)
        expect(move["code"] == 1 and move["checked"] == "move")
        demand = dict(pose=POSES["label-stage"], margin_min={"accuracy": 1000})
        low = line.ask("label-stage", "reach", demand)
        expect(low["code"] == 2 and low["failed_margin"] == "accuracy", low["code"])
        torn = line.ask("label-stage", "forward",
                        {"drives": {"m1": 80, "m2": 181, "m3": 275, "m4": 3}})
        expect(torn["code"] == 8 and torn["solutions"], torn["code"])
        line.ask("label-stage", "inverse", {"pose": {"x": "one"}}, status=400)
        room = line.ask("label-stage", "margin",
                        {"pose": {"x": 1, "y": 1, "rz": 1}, "distance": {}})["distance"]
        for side in ("forward", "inverse"):
            expect(0.0 < room[side]["at_least"] < room[side]["at_most"], side, room[side])
        line.ask("label-stage", "margin", {"pose": {"x": 1, "y": 1, "rz": 1}, "distance": 3},
                 status=400)
        line.ask("label-stage", "inverse", {"pose": {}, "mode": "sideways"}, status=400)


run(forward_of_inverse_is_the_pose, a_small_step_follows_the_jacobian,
    matrices_carry_names_and_units, the_reference_point_moves_as_a_rigid_body_says,
    the_plc_asks_with_plain_members, a_plus_in_a_query_is_a_plus_in_a_mode,
    query_members_are_known_and_single, a_long_batch_is_answered_in_order,
    verdicts_are_answers_and_nonsense_is_an_error)
