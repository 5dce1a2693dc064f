#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The margins of a machine with two drives to spare, worked out apart from the service: a planar
platform on five crank-and-link limbs. Rates by the textbook (Gosselin & Angeles, IEEE T-RA 6(3)
1990: each link's direction against platform and crank velocity), error and load by their
definitions: every combination of drive errors, and a linear programme (scipy, HiGHS) for the least
largest share of effort, its worst direction sought by scanning. Thresholds of reach by name.
"""
import itertools
import json
import math
import os
import sys

import numpy as np
from scipy.optimize import linprog

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(HERE, "..", "support"))
from lwt_daemon import Daemon, expect, run  # noqa: E402

N = 5
CRANK, LINK = 0.30, 0.35  # m, as everything below
BASE = np.array([[math.cos(a), math.sin(a)] for a in (0.2, 1.5, 2.6, 3.9, 5.2)]) * 0.55
PLATE = np.array([[math.cos(a), math.sin(a)] for a in (0.4, 1.3, 2.9, 3.7, 5.4)]) * 0.12
ELBOW = (1, 1, -1, 1, -1)
EFFORT = np.array([8.0, 12.0, 6.0, 9.0, 10.0])  # Nm
SPEED = np.array([6.0, 5.0, 7.0, 4.0, 6.5])  # rad/s
RESOLUTION = np.array([1e-4, 2e-4, 1.5e-4, 0.5e-4, 2.5e-4])  # rad
BACKLASH = np.array([2e-4, 0.0, 1e-4, 3e-4, 0.5e-4])
NEEDS = {"position_tolerance": 2e-4, "angle_tolerance": 1.5e-3, "force": 15.0, "moment": 1.2,
         "speed": 0.5, "turn_rate": 2.0, "characteristic_length": 0.12}
REFERENCE = (0.02, -0.01, 0.05)
POSES = [REFERENCE, (0.06, 0.05, -0.2), (-0.08, 0.02, 0.3), (0.01, -0.09, 0.1),
         (-0.03, 0.07, -0.35)]
HALF_RANGE = 1.6


def limb(i, pose):
    """Crank angle, elbow and corner of a limb."""
    x, y, turn = pose
    c, s = math.cos(turn), math.sin(turn)
    corner = np.array([x, y]) + np.array([[c, -s], [s, c]]) @ PLATE[i]
    d = corner - BASE[i]
    r = np.hypot(*d)
    bend = math.acos((r * r + CRANK ** 2 - LINK ** 2) / (2.0 * r * CRANK))
    angle = math.atan2(d[1], d[0]) + ELBOW[i] * bend
    return angle, BASE[i] + CRANK * np.array([math.cos(angle), math.sin(angle)]), corner


def rates(pose):
    """Crank rates by vx, vy and turn of the platform."""
    a = np.empty((N, 3))
    for i in range(N):
        angle, elbow, corner = limb(i, pose)
        n = (corner - elbow) / LINK
        arm = corner - np.array(pose[:2])
        crank = CRANK * np.array([-math.sin(angle), math.cos(angle)])
        a[i] = np.array([n[0], n[1], n @ np.array([-arm[1], arm[0]])]) / (n @ crank)
    return a


def document():
    joints, drives, bodies = [], [], ["bed", "plate"]
    for i in range(N):
        angle, elbow, corner = limb(i, REFERENCE)
        bodies += [f"crank-{i}", f"link-{i}"]
        for name, pair, at in ((f"shoulder-{i}", ["bed", f"crank-{i}"], BASE[i]),
                               (f"elbow-{i}", [f"crank-{i}", f"link-{i}"], elbow),
                               (f"pivot-{i}", [f"link-{i}", "plate"], corner)):
            joints.append({"name": name, "type": "revolute", "between": pair,
                           "at": [at[0], at[1], 0], "axis": [0, 0, 1]})
        drives.append({"name": f"m{i}", "moves": f"shoulder-{i}",
                       "reading": {"at_reference": angle, "unit": "rad"},
                       "range": [angle - HALF_RANGE, angle + HALF_RANGE], "speed": SPEED[i],
                       "torque": EFFORT[i], "resolution": RESOLUTION[i], "backlash": BACKLASH[i]})
    turn = REFERENCE[2] / 2.0
    return {"format": "leeway-mechanism/1", "name": "five-cranks",
            "units": {"length": "m", "angle": "rad"}, "frame": "bed", "bodies": bodies,
            "joints": joints, "drives": drives,
            "tools": [{"name": "plate", "body": "plate", "at": [REFERENCE[0], REFERENCE[1], 0],
                       "orientation": {"quaternion": {"w": math.cos(turn), "x": 0, "y": 0,
                                                      "z": math.sin(turn)}}}],
            "outputs": ["x", "y", "rz"], "motion": "2T1R", "needs": NEEDS}


def accuracy(a, keep):
    """Tolerance over the worst error, servos sharing by least squares weighed by 1/e^2."""
    e = 0.5 * (RESOLUTION + BACKLASH)[keep]
    gain = np.linalg.pinv(a[keep] / e[:, None])  # columns: what one e_i does
    errors = np.array([gain @ np.array(s) for s in
                       itertools.product((-1.0, 1.0), repeat=len(keep))])
    return min(NEEDS["position_tolerance"] / np.max(np.hypot(errors[:, 0], errors[:, 1])),
               NEEDS["angle_tolerance"] / np.max(np.abs(errors[:, 2])))


def share(a, angle, side):
    """Least largest share of effort that carries the rated load in one direction."""
    load = np.array([NEEDS["force"] * math.cos(angle), NEEDS["force"] * math.sin(angle),
                     side * NEEDS["moment"]])
    above = np.hstack([np.eye(N), -EFFORT[:, None]])
    below = np.hstack([-np.eye(N), -EFFORT[:, None]])
    found = linprog([0.0] * N + [1.0], A_ub=np.vstack([above, below]), b_ub=np.zeros(2 * N),
                    A_eq=np.hstack([a.T, np.zeros((3, 1))]), b_eq=-load,
                    bounds=[(None, None)] * N + [(0, None)], method="highs")
    expect(found.status == 0, "linear programme", found.message)
    return found.x[-1]


def worst_share(a):
    step = math.radians(6)
    coarse = sorted(((share(a, k * step, side), k * step, side)
                     for k in range(60) for side in (-1, 1)), reverse=True)
    best = 0.0
    for _, middle, side in coarse[:4]:
        low, high = middle - step, middle + step
        for _ in range(24):  # golden section: near its largest value the share has one top
            p, q = high - 0.618034 * (high - low), low + 0.618034 * (high - low)
            low, high = (p, high) if share(a, p, side) < share(a, q, side) else (low, q)
        best = max(best, share(a, 0.5 * (low + high), side))
    return best


def near(got, want, tolerance, *what):
    expect(abs(got - want) <= tolerance * abs(want), *what, "got", got, "want", want)


class Service:
    """A daemon with one mechanism published, whatever it warns of."""

    def __init__(self, text):
        self.document = json.loads(text)
        self.path = f"/v1/mechanisms/{self.document['name']}"

    def __enter__(self):
        self.daemon = Daemon("--prepare-paths", "1").__enter__()
        try:
            put = self.daemon.ask("PUT", self.path, json.dumps(self.document).encode(),
                                  [("Content-Type", "application/json")])
            expect(put.status == 201, "PUT", put.status, put.body)
            accept = [f["finding"] for f in put.json()["findings"] if f["severity"] == "warning"]
            publish = self.daemon.ask("POST", f"{self.path}/revisions/1/publish",
                                      json.dumps({"accept": accept}).encode(),
                                      [("Content-Type", "application/json")])
            expect(publish.status == 200, "publish", publish.status, publish.body)
        except BaseException:
            self.daemon.__exit__(*sys.exc_info())
            raise
        return self

    def __exit__(self, *what):
        return self.daemon.__exit__(*what)

    def ask(self, question, body):
        answer = self.daemon.ask("POST", f"{self.path}/{question}", json.dumps(body).encode(),
                                 [("Content-Type", "application/json")])
        expect(answer.status == 200, question, answer.status, answer.body)
        return answer.json()


def pose_of(pose):
    return {"x": pose[0], "y": pose[1], "rz": pose[2]}


def margins_by_their_definitions():
    with Service(json.dumps(document())) as service:
        for pose in POSES:
            a = rates(pose)
            answer = service.ask("margin", {"pose": pose_of(pose)})
            margins = answer["margins"]
            angles = np.array([limb(i, pose)[0] for i in range(N)])
            for i in range(N):
                got = answer["posture"]["drives"][f"m{i}"]
                expect(abs(math.remainder(got - angles[i], 2.0 * math.pi)) < 1e-9, "crank", i, got)
            every = list(range(N))
            near(margins["accuracy"]["value"], accuracy(a, every), 1e-8, "accuracy", pose)
            left = [accuracy(a, [k for k in every if k != d]) for d in every]
            near(margins["spare"]["value"], min(left), 1e-8, "spare", pose)
            expect(margins["spare"]["drive"] == f"m{int(np.argmin(left))}", "spare names",
                   margins["spare"]["drive"], left)
            holds = {w["drive"]: w["hold"] for w in answer["without_drive"]}
            least = min(holds, key=holds.get)
            expect(margins["spare"]["hold"] == {"value": holds[least], "drive": least},
                   "hold to spare", margins["spare"]["hold"], holds)
            linear = np.min(SPEED / np.hypot(a[:, 0], a[:, 1])) / NEEDS["speed"]
            turning = np.min(SPEED / np.abs(a[:, 2])) / NEEDS["turn_rate"]
            near(margins["speed"]["value"], min(linear, turning), 1e-8, "speed", pose)
            worst = worst_share(a)
            near(margins["load"]["value"], 1.0 / worst, 2e-5, "load", pose)
            expect(margins["load"]["value"] <= (1.0 + 1e-7) / worst, "a worse load than the worst")
            # The direction named is the worst: its own programme gives the margin.
            along = margins["load"]["direction"]["along"]
            about = margins["load"]["direction"]["about"]["z"]
            there = share(a, math.atan2(along["y"], along["x"]), math.copysign(1.0, about))
            near(margins["load"]["value"], 1.0 / there, 1e-7, "load in the direction named", pose)
            # Two preload directions, square to each other: efforts that the platform does not feel.
            basis = np.array([[p[f"m{i}"] for i in range(N)] for p in answer["preload_basis"]])
            expect(basis.shape == (2, N), "two preload directions", basis)
            expect(np.allclose(basis @ basis.T, np.eye(2), atol=1e-9), "orthonormal", basis)
            expect(np.allclose(basis @ a, 0.0, atol=1e-9), "no force at the platform", basis @ a)


def thresholds_by_name():
    with Service(json.dumps(document())) as service:
        for pose in POSES[:3]:
            margins = service.ask("margin", {"pose": pose_of(pose)})["margins"]
            for name in ("accuracy", "load", "speed", "spare", "travel", "hold"):
                value = margins[name]["value"]
                expect(value > 0.0, name, value)
                for least, code in ((0.999 * value, 1), (1.001 * value, 2)):
                    answer = service.ask("reach", {"pose": pose_of(pose),
                                                   "margin_min": {name: least}})
                    expect(answer["code"] == code, name, least, value, answer["code"])
                    expect(answer.get("failed_margin") == (name if code == 2 else None),
                           "failed margin", name, answer.get("failed_margin"))
                    near(answer["margins"][name]["value"], value, 1e-12, name, "in both")


def demo(name):
    with open(os.path.join(HERE, "..", "..", "deploy", "demo", f"{name}.json"),
              encoding="utf-8") as f:
        return f.read()


def spent(answer, drive, limb_name, joints):
    """Inverse singular and held, one drive no longer spare; the limb's joints move alone."""
    expect(answer["code"] in (1, 3), answer["code"], answer.get("reason"))
    expect(answer["classes"] == ["inverse"] and answer["kind"] == "inverse", answer["kind"])
    expect(answer["held"], "held")
    expect(drive in answer["no_longer_spare"], answer["no_longer_spare"])
    if answer["code"] == 1:
        names = answer["no_longer_spare"]
        expect(f"still held; drive{'s' if len(names) > 1 else ''} {' '.join(names)} no longer spare"
               in answer["reason"], answer["reason"])
    expect(not answer["weakest_hold"][0]["lost"], "nothing lost of hold")
    lost = answer["weakest_motion"]
    expect(len(lost) == 1 and lost[0]["lost"], lost)
    expect(lost[0]["limbs"] == [limb_name], lost[0]["limbs"])
    expect(sorted(lost[0]["joints"]) == sorted(joints), lost[0]["joints"])
    expect(list(lost[0]["drives"]) == [drive], lost[0]["drives"])
    expect("motion lost: shifting along the line" in lost[0]["says"] and
           f"moves with the tool at rest: limb {limb_name}" in lost[0]["says"], lost[0]["says"])
    expect(answer["leave_by"]["motion"]["either_way"], answer["leave_by"])
    without = {w["drive"]: w for w in answer["without_drive"]}
    expect(without[drive]["indispensable"] and without[drive]["hold"] < 1e-6, without[drive])
    # Stuck is another matter than free: one freedom less, and what is left is held.
    expect(without[drive]["braked"]["hold"] > 0.01, without[drive])
    expect(answer["margins"]["hold"]["value"] > 0.01, answer["margins"]["hold"])


def a_stretched_limb_of_the_label_stage():
    """Crank 150 and link 200 mm in line, by the drawing: from (-260, -190) to (20, 20), which the
    plate's first pivot (-60, -40) reaches at x = 80, y = 60."""
    with Service(demo("label-stage")) as service:
        answer = service.ask("margin", {"pose": {"x": 80, "y": 60, "rz": 0}})
        spent(answer, "m1", "shoulder-1", ["shoulder-1", "elbow-1", "pivot-1"])
        joints = answer["weakest_motion"][0]["joints"]
        # By hand: crank 1, link -150/200, so elbow -1.75 and pivot 0.75; shares of the largest.
        for name, rate in (("shoulder-1", 1.0), ("elbow-1", -1.75), ("pivot-1", 0.75)):
            near(joints[name] / joints["shoulder-1"], rate, 1e-5, name)
        axis, point = (answer["weakest_motion"][0]["screw"][k] for k in ("axis", "point"))
        near(abs(0.8 * axis["x"] + 0.6 * axis["y"]), 1.0, 1e-9, "along the limb")
        expect(abs((point["x"] - 20) * 0.6 - (point["y"] - 20) * 0.8) < 1e-3, "on the limb", point)


def a_level_rod_of_the_lid_turner():
    """By the drawing: the upper north rods, 212.424 long between their axes, lie level where the
    plate stands that far across from (0, 130); at 15 degrees the other rods still reach."""
    length = math.sqrt(130.0 ** 2 + 168.0 ** 2)
    turn = math.radians(15)
    with Service(demo("lid-turner")) as service:
        answer = service.ask("margin", {"pose": {"x": length * math.sin(turn),
                                                 "y": 130.0 - length * math.cos(turn), "z": 430,
                                                 "joints": {"shaft": 0}}, "mode": "all-hanging"})
        drive = [d["name"] for d in service.document["drives"]
                 if d["moves"] == "upper-rail-north"]
        spent(answer, drive[0], "upper-rail-north", ["upper-rail-north"])


if __name__ == "__main__":
    run(margins_by_their_definitions, thresholds_by_name, a_stretched_limb_of_the_label_stage,
        a_level_rod_of_the_lid_turner)
