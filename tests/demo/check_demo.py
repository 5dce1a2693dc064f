# SPDX-License-Identifier: GPL-3.0-or-later
"""Checks the demo line's documents by a reading of their own (mechanism.py, numpy, no line shared
with the service). Run: python3 check_demo.py [FOLDER] [--figures]; exit status 1 if a check fails.

The expected figures below were computed by this script when the documents were written, except the
counts and mobilities, which follow from the drawings: they guard the documents against change, and
stand beside what the service reports.
"""
import json
import math
import os
import sys

import numpy as np

import lid_turner_ways as ways
from mechanism import DEGREE, Mechanism, turn_about, turn_of_zyx, vector_of_turn

# mobility; bodies and joints counted (6 a body, less 5 a joint, less 1 a fixed rod); spare drives;
# hold at home; margins at home. Margins take half the resolution and half the backlash as error.
EXPECT = {
    "tilt-table": (6, 6, 0, 0.4671, {"accuracy": 5.692, "accuracy angle": 5.319, "load": 4.140,
                   "load moment": 5.248, "speed": 2.333, "speed turn": 4.184}),
    "belt-hopper": (3, 3, 0, 0.6470, {"accuracy": 5.261, "load": 5.088, "speed": 2.667}),
    "lid-turner": (4, -3, 2, 0.5605, {"accuracy": 5.141, "load": 5.180, "speed": 3.000,
                   "accuracy shaft": 5.556, "load shaft": 3.729, "speed shaft": 6.667}),
    "label-stage": (3, -6, 1, 0.2434, {"accuracy": 5.402, "accuracy angle": 4.333, "load": 5.333,
                    "load moment": 5.333, "speed": 3.142, "speed turn": 5.000}),
    "case-packer": (6, 6, 0, 0.3114, {"accuracy": 4.279, "accuracy angle": 5.333, "load": 5.455,
                    "load moment": 3.200, "speed": 2.102, "speed turn": 2.667}),
}

# Poses that must lie within every limit, in home's mode: the room the README promises. Tilts are
# roll and pitch against home's orientation, degrees.
ROOM = {
    "tilt-table": [dict(x=sx * 50, y=sy * 50, z=520 + dz) for sx in (-1, 1) for sy in (-1, 1)
                   for dz in (-20, 40)]
                  + [dict(x=0, y=0, z=z, tilt=(r, p)) for z in (510, 545)
                     for r, p in ((15, 0), (-15, 0), (0, 15), (0, -15), (10, 10), (-10, 10),
                                  (10, -10), (-10, -10))],
    "belt-hopper": [dict(x=75 * math.cos(a * DEGREE), y=75 * math.sin(a * DEGREE), z=z)
                    for a in range(0, 360, 45) for z in (120, 460)],
    "lid-turner": [dict(x=75 * math.cos(a * DEGREE), y=75 * math.sin(a * DEGREE), z=z,
                        joints={"shaft": s})
                   for a in range(0, 360, 60) for z, s in ((340, -540), (470, 450))],
    "label-stage": [dict(x=sx * 40, y=sy * 40, rz=rz) for sx in (-1, 1) for sy in (-1, 1)
                    for rz in (-15, 15)],
    "case-packer": [dict(x=x, y=y, z=z, tilt=(0, 0)) for x in (360, 520) for y in (-200, 200)
                    for z in (450, 750)],
}

failures = []
figures = False


def verify(true, text, *values):
    if not true:
        failures.append(text % values)
        print("FAILED  " + text % values)


def show(text, *values):
    if figures:
        print(text % values)


# ---- which mode a posture is in, from the geometry ---------------------------------------------
def limb_signs(m, state):
    """One sign a limb: rails, + carriage above; two-link arms, + elbow left of the line from
    shoulder to pivot; the wrist arm, three: wrist ahead of the post, elbow high, bend positive."""
    name, bodies = m.doc["name"], state[0]

    def point(body, p):
        return bodies[body][0] @ (np.array(p, float) * m.unit) + bodies[body][1]

    at = {j["name"]: j["at"] for j in m.joints if "at" in j}
    out = []
    if name in ("belt-hopper", "lid-turner"):
        for d in m.drives:
            carriage = next(j for j in m.joints if j["name"] == d["moves"])["between"][1]
            rod = next(r for r in m.rods if r["between"][0] == carriage)
            upper, lower = m.rod_ends(rod, state)
            out.append(upper[2] - lower[2])
    elif name == "label-stage":
        for i in range(1, 5):
            s = point("bed", at["shoulder-%d" % i])
            e = point("crank-%d" % i, at["elbow-%d" % i])
            p = point("plate", at["pivot-%d" % i])
            out.append(np.cross((p - s)[:2], (e - s)[:2]))
    elif name == "case-packer":
        wrist, shoulder = point("wrist", at["wrist-pitch"]), point("turret", at["shoulder"])
        elbow, ahead = point("upper-arm", at["elbow"]), bodies["turret"][0] @ [1.0, 0, 0]
        reach = wrist - shoulder
        side = 1 if ahead @ reach > 0 else -1
        out = [ahead @ wrist, side * (np.cross(reach, elbow - shoulder)
                                      @ (bodies["turret"][0] @ [0, -1.0, 0])),
               math.sin(m.reading(m.drives[4], state) * DEGREE)]
    return [1 if v > 0 else -1 for v in out]


def signs_of_name(name, mode):
    """What a mode's name claims."""
    if name == "case-packer":
        return [{"front": 1, "high": 1, "plain": 1}.get(w, -1) for w in mode.split("-")]
    table = {"all-hanging": [1] * 6, "all-standing": [-1] * 6,
             "upper-standing": [-1] * 3 + [1] * 3, "north-standing": [-1, 1, 1, -1, 1, 1],
             "rods-hanging": [1] * 3, "rods-standing": [-1] * 3, "elbows-left": [1] * 4,
             "elbows-right": [-1] * 4, "left-right-left-right": [1, -1, 1, -1],
             "right-left-right-left": [-1, 1, -1, 1]}
    return table[mode]


# ---- the checks --------------------------------------------------------------------------------
def check_document(m):
    doc, name = m.doc, m.doc["name"]
    for r in m.rods:
        length = m.rod_length[r["name"]] / m.unit
        verify(abs(length - r["length"]) < 0.001, "%s %s: length says %s, the ends say %.6f", name,
               r["name"], r["length"], length)
    ranges = {j["name"]: j.get("range") for j in m.joints}
    ranges.update({r["name"]: r.get("range") for r in m.rods})
    for d in m.drives:
        low, high = ranges[d["moves"]]
        zero = m.at_reference(d) if d["moves"] not in m.rod_length else 0.0
        verify(d["range"][0] - zero >= low and d["range"][1] - zero <= high,
               "%s %s: the drive's range leaves that of %s", name, d["name"], d["moves"])
    names = ([j["name"] for j in m.joints] + [r["name"] for r in m.rods])
    verify(len(names) == len(set(names)), "%s: a joint's or rod's name is doubled", name)
    counted = (6 * len(m.bodies) - 5 * len(m.joints)
               - sum(1 for r in m.rods if r["name"] not in m.moved))
    verify(counted == EXPECT[name][1], "%s: counted mobility %d", name, counted)
    verify(len(m.drives) - len(doc["outputs"]) == EXPECT[name][2], "%s: spare drives", name)


def check_reference(m):
    name, state = m.doc["name"], m.reference()
    rows = m.closure()
    gap = np.max(np.abs(m.residual(rows, state))) if rows else 0.0
    verify(gap < 1e-12, "%s: reference posture open by %g", name, gap)
    verify(not m.limits_broken(state), "%s: reference breaks %s", name, m.limits_broken(state))
    home = m.doc["home"]
    if "drives" in home:
        state = m.follow_readings(state, home["drives"], 2)
    else:
        pose = dict(home["pose"])
        zyx = pose.pop("zyx")
        pose["turn"] = turn_of_zyx(*(zyx[k] * m.angle_unit for k in ("yaw", "pitch", "roll")))
        state = m.follow_pose(state, pose, 2)
    verify(state is not None, "%s: home does not assemble", name)
    return state


def check_ranks(m, home, random, count=8):
    """Mobility, drives and outputs at random assembled postures, walked to from home."""
    name = m.doc["name"]
    mobility = EXPECT[name][0]
    worst_kept, worst_dropped = 1.0, 0.0
    for _ in range(count):
        state = home
        for _ in range(3):
            k = m.freedom(state)[0]
            step = k @ random.normal(size=k.shape[1])
            moved = m.moved_by(state, 0.15 * step / np.max(np.abs(step)))
            state = m.assemble(moved) or state
        k, rank, _, kept, dropped = m.freedom(state)
        worst_kept, worst_dropped = min(worst_kept, kept), max(worst_dropped, dropped)
        verify(k.shape[1] == mobility, "%s: mobility %d at a random posture", name, k.shape[1])
        ak, tk, _ = m.rates(state)
        for what, a in (("drives", ak), ("outputs", tk)):
            s = np.linalg.svd(a, compute_uv=False)
            verify(s[mobility - 1] > 1e-4 * s[0], "%s: %s lose rank: %s", name, what, s)
    verify(worst_kept > 1e3 * worst_dropped, "%s: no gap in the rank: %g kept, %g dropped", name,
           worst_kept, worst_dropped)
    show("  mobility %d, counted %d, %d equations; kept %.1e dropped %.1e", mobility,
         EXPECT[name][1], sum(len(f(home)) for f, _ in m.closure()), worst_kept, worst_dropped)


def check_margins(m, home):
    name = m.doc["name"]
    hold = m.hold(home)
    verify(abs(hold - EXPECT[name][3]) < 1e-4, "%s: hold %.4f at home", name, hold)
    without = {d["name"]: m.hold(home, (d["name"],)) for d in m.drives}
    if EXPECT[name][2] > 0:
        verify(min(without.values()) > 0.1, "%s: a lost drive leaves %s", name, without)
    else:
        verify(max(without.values()) < 1e-9, "%s: a drive is spare: %s", name, without)
    margins, error = m.margins(home)
    want = EXPECT[name][4]
    verify(set(want) == set(margins), "%s: margins %s", name, sorted(margins))
    for k, v in margins.items():
        verify(abs(v - want.get(k, 0)) < 2e-3, "%s: %s at home %.4f", name, k, v)
        verify(2 <= v < 7, "%s: %s at home %.2f is not between 2 and 7", name, k, v)
    show("  hold %.4f; least without one drive %.4f; %s; error %s", hold, min(without.values()),
         ", ".join("%s %.2f" % i for i in margins.items()),
         ", ".join("%s %.4f" % i for i in error.items()))


def check_modes(m, home, random):
    name = m.doc["name"]
    verify(all(s > 0 for s in limb_signs(m, home)), "%s: home is not all plus", name)
    for mode, what in m.doc.get("modes", {}).items():
        example = what["example"]
        joints = example.get("joints") or m.joints_of_readings(example["drives"])
        state = m.assemble_near(joints, {}, random, 1)
        verify(state is not None, "%s %s: the example does not assemble", name, mode)
        if state is None:
            continue
        broken = m.limits_broken(state)
        verify(not broken, "%s %s: breaks %s", name, mode, broken)
        verify(limb_signs(m, state) == signs_of_name(name, mode), "%s %s: signs %s", name, mode,
               limb_signs(m, state))
        hold = m.hold(state)
        verify(hold > 0.1, "%s %s: hold %.4f", name, mode, hold)
        show("  mode %s: hold %.4f", mode, hold)


def check_checks(m, home):
    name = m.doc["name"]
    verify(len(m.doc["checks"]) >= 3, "%s: fewer than three checks", name)
    for i, c in enumerate(m.doc["checks"]):
        state = m.follow_readings(home, c["drives"])
        verify(state is not None, "%s check %d: does not assemble", name, i)
        if state is None:
            continue
        position, turn = m.tool_pose(state)[1], m.tool_pose(state)[0]
        off = max(abs(position["xyz".index(k)] / m.unit - c["pose"][k]) for k in "xyz"
                  if k in c["pose"])
        rows = m.pose_rows({k: v for k, v in c["pose"].items() if k not in "xyz"})
        spin = max((np.max(np.abs(f(state))) for f, _ in rows), default=0.0) / m.angle_unit
        verify(off < c["within"]["position"] and spin < c["within"]["angle"],
               "%s check %d: off by %g and %g", name, i, off, spin)
        verify(np.allclose(turn @ turn.T, np.eye(3)), "%s check %d: no rotation", name, i)
        verify(not m.limits_broken(state), "%s check %d: breaks %s", name, i,
               m.limits_broken(state))


def check_room(m, home):
    name = m.doc["name"]
    least = {}
    for place in ROOM[name]:
        goal = {k: v for k, v in place.items() if k != "tilt"}
        if "tilt" in place:
            roll, pitch = (a * DEGREE for a in place["tilt"])
            goal["turn"] = turn_of_zyx(0, pitch, roll) @ m.tool_pose(home)[0]
        state = m.follow_pose(home, goal, 6)
        verify(state is not None, "%s: %s does not assemble", name, place)
        if state is None:
            continue
        verify(not m.limits_broken(state), "%s: %s breaks %s", name, place,
               m.limits_broken(state))
        verify(limb_signs(m, state) == limb_signs(m, home), "%s: %s changes mode", name, place)
        margins = m.margins(state)[0]
        margins["hold"] = m.hold(state)
        for k, v in margins.items():
            least[k] = min(v, least.get(k, math.inf))
    show("  over the room: %s", ", ".join("%s %.2f" % i for i in least.items()))
    verify(least["hold"] > 0.05, "%s: hold %.3f in the room", name, least["hold"])


def check_first_question(m, home, line):
    name, words = m.doc["name"], dict(w.split("=") for w in line.split()[1:])
    goal = {k: float(words[k]) for k in ("x", "y", "z", "rz") if k in words}
    goal["joints"] = {k[6:]: float(v) for k, v in words.items() if k.startswith("joint.")}
    if "yaw" in words:
        goal["turn"] = turn_of_zyx(*(float(words[k]) * m.angle_unit
                                     for k in ("yaw", "pitch", "roll")))
    state = m.follow_pose(home, goal)
    verify(state is not None, "%s: first question out of reach", name)
    if state is None:
        return
    margins = m.margins(state)[0]
    least = min(margins, key=margins.get)
    verify(not m.limits_broken(state), "%s: first question breaks %s", name,
           m.limits_broken(state))
    # The least margin halves where the whole of resolution and backlash is taken as error.
    verify(margins[least] > 1.0 and 0.5 * min(v for k, v in margins.items()
                                              if k.startswith("accuracy")) > 1.0,
           "%s: first question has low margins: %s", name, margins)
    verify(limb_signs(m, state) == limb_signs(m, home), "%s: first question: other mode", name)
    show("  first question: least %s %.2f", least, margins[least])


def check_tilt_table(m):
    """The two sets of joints are no similar hexagons: the best fit of one on the other misses."""
    a = np.array([r["ends"][0] for r in m.rods], float)[:, :2]
    b = np.array([r["ends"][1] for r in m.rods], float)[:, :2]
    a, b = a - a.mean(0), b - b.mean(0)
    s = np.linalg.svd(a.T @ b, compute_uv=False)
    miss = math.sqrt((np.sum(b * b) - np.sum(s) ** 2 / np.sum(a * a)) / 6)
    verify(miss > 40, "tilt-table: the hexagons are similar to within %.1f mm", miss)
    show("  hexagons miss similarity by %.1f mm (root mean square)", miss)


def check_label_stage(m, random):
    """Home's pose in all 16 modes; the other elbow from the mirror image about shoulder-pivot."""
    at = {j["name"]: np.array(j["at"][:2], float) for j in m.joints}
    home, other = m.readings(m.reference()), {}
    for i, d in enumerate(m.drives, 1):
        line, crank = (at[k % i] - at["shoulder-%d" % i] for k in ("pivot-%d", "elbow-%d"))
        turn = 2 * (math.atan2(line[1], line[0]) - math.atan2(crank[1], crank[0]))
        other[d["name"]] = home[d["name"]] + (turn / DEGREE + 180) % 360 - 180
    holds = []
    for signs in ways.itertools.product([1, -1], repeat=4):
        readings = {k: home[k] if s > 0 else other[k] for k, s in zip(home, signs)}
        state = m.assemble_near(m.joints_of_readings(readings), {"x": 0, "y": 0, "rz": 0}, random)
        verify(state is not None and limb_signs(m, state) == list(signs)
               and not m.limits_broken(state), "label-stage: home's pose in mode %s", signs)
        holds.append(m.hold(state))
    verify(min(holds) > 0.07, "label-stage: hold %.3f in a mode at home", min(holds))
    show("  16 modes at home's pose: hold %.3f to %.3f", min(holds), max(holds))


def check_lid_turner(m, home, random):
    doc = m.doc
    # Law of the differential screw at random postures: 360 deg for lead 36 - (-24) = 60 mm.
    for _ in range(5):
        k = m.freedom(home)[0]
        state = m.assemble(m.moved_by(home, 0.2 * k @ random.normal(size=4)))
        verify(state is not None, "lid-turner: random posture")
        nuts = state[1]["guide"] / m.unit
        turn = state[1]["shaft"] / m.angle_unit
        verify(abs(turn + 360.0 * nuts / 60.0) < 1e-6, "lid-turner: %g mm turn the shaft %g",
               nuts, turn)
        twist = vector_of_turn(state[0]["lower-plate"][0])
        verify(np.max(np.abs(twist)) < 1e-9, "lid-turner: the plate turns by %s", twist)
    # Every level circle bounds the common region of the six.
    for i, d in enumerate(m.drives):
        share = len(ways.arc_points(doc, i, 3600)) / 10.0
        verify(share > 10, "lid-turner: level circle of %s bounds %.1f deg", d["name"], share)
        show("  level circle of %s bounds the region over %.1f deg", d["name"], share)
    # The plane reading of ways.py against the full machine, at home and in the named modes.
    for mode, what in doc["modes"].items():
        state = m.assemble_near(what["example"]["joints"], {}, random, 1)
        plane = ways.hold(doc, np.zeros((1, 2)), signs_of_name("lid-turner", mode))[0]
        verify(abs(plane - m.hold(state)) < 1e-6, "lid-turner %s: plane hold %g, full %g", mode,
               plane, m.hold(state))
    # All 64 modes are held with the plates in the middle.
    holds = [ways.hold(doc, np.zeros((1, 2)), signs)[0]
             for signs in ways.itertools.product([1, -1], repeat=6)]
    verify(min(holds) > 0.15, "lid-turner: hold %.3f in a mode at the middle", min(holds))
    show("  64 modes at the middle: hold %.3f to %.3f", min(holds), max(holds))
    # Four or five drives: no hold at all where an undriven carriage passes level, in any signs.
    largest, sets = 0.0, 0
    for n in (4, 5):
        for left in ways.itertools.combinations(range(6), n):
            sets += 1
            for i in set(range(6)) - set(left):
                arc = ways.arc_points(doc, i, 360)
                for signs in ways.itertools.product([1, -1], repeat=6):
                    if signs[i] > 0:
                        largest = max(largest, ways.hold(doc, arc, signs, left).max())
    verify(largest < 1e-9, "lid-turner: hold %g at rods level without that drive", largest)
    # Six drives: the way from all hanging to all standing.
    widest = ways.widest_way(doc, (1,) * 6, (-1,) * 6, range(6))
    verify(abs(widest - 0.4047) < 2e-3, "lid-turner: widest way holds %.4f", widest)
    show("  ways: largest hold at rods level %.1e with %d sets of four or five drives; widest way"
         " with six holds %.4f", largest, sets, widest)


def main():
    global figures
    words = [w for w in sys.argv[1:] if not w.startswith("--")]
    figures = "--figures" in sys.argv
    here = os.path.dirname(os.path.abspath(__file__))
    folder = words[0] if words else os.path.join(here, "..", "..", "deploy", "demo")
    random = np.random.default_rng(20)
    with open(os.path.join(folder, "first-questions.txt"), encoding="utf-8") as file:
        questions = {line.split()[0]: line for line in file if line.strip()}
    verify(sorted(questions) == sorted(EXPECT), "first-questions.txt names %s", sorted(questions))
    for name in EXPECT:
        m = Mechanism(os.path.join(folder, name + ".json"))
        verify(m.doc["name"] == name, "%s.json is named %s", name, m.doc["name"])
        show("%s", name)
        check_document(m)
        home = check_reference(m)
        check_ranks(m, home, random)
        check_margins(m, home)
        check_modes(m, home, random)
        check_checks(m, home)
        check_room(m, home)
        check_first_question(m, home, questions[name])
        if name == "tilt-table":
            check_tilt_table(m)
        if name == "label-stage":
            check_label_stage(m, random)
        if name == "lid-turner":
            check_lid_turner(m, home, random)
    print("%d checks failed" % len(failures) if failures else "demo line: all checks hold")
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
