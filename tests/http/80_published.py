#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Published and recomputed values asked of the service over HTTP: the documents and numbers of
tests/cases, the same that tests/core checks without a socket. Units, readings and poses go through
the service's own edge here. Sources stand beside the numbers, in SOURCE.md.
"""
import json
import math
import os
import sys

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

CASES = os.path.join(HERE, "..", "cases")


def read(folder, name="cases.json"):
    with open(os.path.join(CASES, folder, name), encoding="utf-8") as f:
        return json.load(f)


def near(got, want, tolerance, *what):
    expect(abs(got - want) <= tolerance, *what, "got", repr(got), "want", repr(want), "off by",
           repr(got - want))


def turn_off(a_deg, b_deg):
    return abs(math.remainder(a_deg - b_deg, 360.0))


class Service:
    """A daemon with one published mechanism."""

    def __init__(self, folder):
        self.text = json.dumps(read(folder, "model.json")).encode()
        self.name = json.loads(self.text)["name"]

    def __enter__(self):
        self.daemon = Daemon("--prepare-paths", "200").__enter__()
        try:
            put = self.call("PUT", f"/v1/mechanisms/{self.name}", self.text)
            expect(put.status == 201, "PUT", put.status, put.body)
            target = f"/v1/mechanisms/{self.name}/revisions/1/publish"
            publish = self.call("POST", target, b"{}")
            if publish.status != 200:
                # Warnings are accepted by name; the report lists them.
                report = self.call("GET", f"/v1/mechanisms/{self.name}/revisions/1/report").json()
                codes = sorted({f["code"] for f in report["findings"]
                                if f["severity"] == "warning"})
                publish = self.call("POST", target, json.dumps({"accept": codes}).encode())
            expect(publish.status == 200, "publish", publish.status, publish.body)
        except BaseException:
            self.daemon.__exit__(*sys.exc_info())
            raise
        return self

    def __exit__(self, *what):
        return self.daemon.__exit__(*what)

    def call(self, method, target, body=None):
        headers = [("Content-Type", "application/json")] if body is not None else []
        return self.daemon.ask(method, target, body, headers)

    def ask(self, question, **members):
        reply = self.call("POST", f"/v1/mechanisms/{self.name}/{question}",
                          json.dumps(members).encode())
        expect(reply.status == 200, question, reply.status, reply.body)
        return reply.json()


def drives_of(solution):
    return [solution["drives"][key] for key in sorted(solution["drives"])]


def named(values):
    return {f"m{i + 1}": value for i, value in enumerate(values)}


def full_pose(position, quaternion):
    sign = 1.0 if quaternion[0] >= 0.0 else -1.0
    return dict(zip("xyz", position), quaternion=dict(zip("wxyz", [sign * q for q in quaternion])))


def six_struts_of_mourrain():
    case = read("mourrain-1993")
    with Service("mourrain-1993") as service:
        for posture in case["postures"]:
            pose = full_pose(posture["position"], posture["quaternion"])
            answer = service.ask("inverse", pose=pose)
            expect(answer["code"] == 1 and answer["complete"] and len(answer["solutions"]) == 1,
                   answer)
            lengths = drives_of(answer["solutions"][0])
            for got, want in zip(lengths, case["length"]):
                near(got, want, case["tolerance"]["length"], "strut")
            start = dict(pose, x=pose["x"] + 0.003, z=pose["z"] - 0.002)
            answer = service.ask("forward", drives=named(case["length"]), near=start)
            expect(answer["code"] == 1, answer)
            for key, want in zip("xyz", posture["position"]):
                near(answer["solutions"][0]["pose"][key], want, 1e-12, key)
            answer = service.ask("jacobian", pose=pose)
            near(answer["condition_forward"] / posture["condition"], 1.0, 1e-7, "condition")


def eight_modes_of_a_3_rrr():
    case = read("kotlarski-2008")
    x, y, angle = case["pose"]
    pose = {"x": x, "y": y, "rz": math.degrees(angle)}
    with Service("kotlarski-2008") as service:
        answer = service.ask("inverse", pose=pose)
        expect(answer["code"] == 1 and answer["complete"], answer)
        expect(len({s["mode"] for s in answer["solutions"]}) == 8, "eight modes", answer)
        for mode in case["modes"]:
            match = [s for s in answer["solutions"]
                     if all(turn_off(g, w) < 1e-9
                            for g, w in zip(drives_of(s), mode["theta_deg"]))]
            expect(len(match) == 1, "one solution for", mode["theta_deg"])
            again = service.ask("inverse", pose=pose, mode=match[0]["mode"])
            expect(drives_of(again["solutions"][0]) == drives_of(match[0]), "same by mode")
            start = {"pose": dict(pose, x=x + 0.002, y=y - 0.001), "mode": match[0]["mode"]}
            there = service.ask("forward", drives=match[0]["drives"], near=start)
            expect(there["code"] == 1, there)
            got = there["solutions"][0]["pose"]
            near(got["x"], x, 1e-9, "x")
            near(got["y"], y, 1e-9, "y")
            near(got["rz"], pose["rz"], 1e-7, "rz")


def both_branches_of_a_delta():
    case = read("williams-2016")
    with Service("williams-2016") as service:
        for item in case["inverse"]:
            pose = dict(zip("xyz", item["point"]))
            answer = service.ask("inverse", pose=pose)
            expect(answer["complete"] and len(answer["solutions"]) == 8, answer)
            seen = set()
            for solution in answer["solutions"]:
                which = []
                for got, pair in zip(drives_of(solution), item["theta_deg"]):
                    off = [turn_off(got, want) for want in pair]
                    near(min(off), 0.0, case["tolerance"]["angle_deg"], "crank")
                    which.append(off.index(min(off)))
                seen.add(tuple(which))
            expect(len(seen) == 8, "all combinations", seen)
        for item in case["forward"]:
            below = min(item["points"], key=lambda p: p[2])
            start = {"x": below[0] + 0.02, "y": below[1] - 0.015, "z": below[2] + 0.01}
            answer = service.ask("forward", drives=named(item["theta_deg"]), near=start)
            expect(answer["code"] == 1, answer)
            for key, want in zip("xyz", below):
                near(answer["solutions"][0]["pose"][key], want, case["tolerance"]["length"], key)


def jacobian_of_the_pantograph():
    case = read("campion-2005")
    mode = case["modes"][1]
    with Service("campion-2005") as service:
        posture = {"drives": named(mode["theta_deg"])}
        answer = service.ask("forward", **posture)
        expect(answer["code"] == 1, answer)
        near(answer["solutions"][0]["pose"]["x"], case["point"][0], 1e-9, "x")
        near(answer["solutions"][0]["pose"]["y"], case["point"][1], 1e-9, "y")
        answer = service.ask("jacobian", **posture)
        matrix = answer["forward"]
        expect([r["name"] for r in matrix["rows"]] == ["x", "y"], matrix)
        expect([c["name"] for c in matrix["columns"]] == ["m1", "m2"], matrix)
        expect([r["unit"] for r in matrix["rows"]] == ["mm/s"] * 2, matrix)
        for got, want in zip(matrix["values"], mode["jacobian"]):
            for g, w in zip(got, want):
                # mm per degree here, mm per rad in the case
                near(math.degrees(g), w, 100 * case["tolerance"]["jacobian"], "entry")
        near(answer["condition_forward"], mode["condition"], case["tolerance"]["condition"],
             "condition")


def eight_solutions_of_the_wrist_arm():
    case = read("corke-2011")
    with Service("corke-2011") as service:
        want = [[math.degrees(v) for v in row] for row in case["inverse"]]
        posture = {"drives": named([math.degrees(v) for v in case["q"]])}
        forward = service.ask("forward", **posture)
        expect(forward["code"] == 1, forward)
        pose = forward["solutions"][0]["pose"]
        for key, row in zip("xyz", case["pose"]):
            near(pose[key], row[3], case["tolerance"]["position"], key)
        answer = service.ask("inverse", pose=pose)
        expect(answer["complete"] and answer["found"]["real"] == 8, answer)
        used = set()
        for solution in answer["solutions"]:
            off = [max(turn_off(g, w) for g, w in zip(drives_of(solution), row)) for row in want]
            near(min(off), 0.0, math.degrees(case["tolerance"]["angle"]), "joints")
            used.add(off.index(min(off)))
        expect(len(used) == 8, "every listed solution", used)
        jacobian = service.ask("jacobian", **posture)
        near(jacobian["condition_forward"], case["condition"], case["tolerance"]["condition"],
             "condition")
        for i, row in enumerate(case["jacobian"]):
            for got, want in zip(jacobian["twist"]["values"][i], row):
                # Rates per degree here: the linear rows are m, the angular ones deg.
                near(math.degrees(got) if i < 3 else got, want, 1e-11, "row", i)


def differential_screw_over_many_turns():
    case = read("khurmi-gupta-2005")
    travel = case["pairs"][0]["travel_per_turn"]
    with Service("khurmi-gupta-2005") as service:
        for turns in (1, -1, 10, -7.25, 143.5):
            answer = service.ask("forward", drives={"wheel": 360.0 * turns})
            expect(answer["code"] == 1, answer)
            near(answer["solutions"][0]["pose"]["z"], travel * turns, 1e-9 * abs(turns) + 1e-9,
                 "travel")
            back = service.ask("inverse", pose={"z": travel * turns})
            near(back["solutions"][0]["drives"]["wheel"], 360.0 * turns, 1e-6, "wheel")


if __name__ == "__main__":
    run(six_struts_of_mourrain, eight_modes_of_a_3_rrr, both_branches_of_a_delta,
        jacobian_of_the_pantograph, eight_solutions_of_the_wrist_arm,
        differential_screw_over_many_turns)
