# SPDX-License-Identifier: GPL-3.0-or-later
"""A second, slow and plain reading of a mechanism document, for checking the demo line.

It shares no line with the service. Every moving body is a position and a rotation matrix, every
joint a finite screw motion (rotation by its angle about its axis, shift along it), every rod a
distance. Equations and Jacobian are numeric; Newton steps are least squares. Lengths are held in
units of the characteristic length, angles in radians.
"""
import itertools
import json
import math

import numpy as np

DEGREE = math.pi / 180.0


def cross_matrix(v):
    return np.array([[0, -v[2], v[1]], [v[2], 0, -v[0]], [-v[1], v[0], 0]], float)


def turn_about(axis, angle):
    """Rotation matrix of a finite turn about a unit axis (Rodrigues)."""
    k = cross_matrix(axis)
    return np.eye(3) + math.sin(angle) * k + (1 - math.cos(angle)) * (k @ k)


def turn_by_vector(v):
    angle = np.linalg.norm(v)
    return np.eye(3) if angle < 1e-300 else turn_about(np.asarray(v) / angle, angle)


def vector_of_turn(r):
    """Rotation vector of a matrix, for turns under half a revolution."""
    s = np.array([r[2, 1] - r[1, 2], r[0, 2] - r[2, 0], r[1, 0] - r[0, 1]]) / 2
    sine, cosine = np.linalg.norm(s), (np.trace(r) - 1) / 2
    return s if sine < 1e-12 else s * (math.atan2(sine, cosine) / sine)


def turn_of_quaternion(q):
    w, x, y, z = q
    return np.array([[1 - 2 * (y * y + z * z), 2 * (x * y - w * z), 2 * (x * z + w * y)],
                     [2 * (x * y + w * z), 1 - 2 * (x * x + z * z), 2 * (y * z - w * x)],
                     [2 * (x * z - w * y), 2 * (y * z + w * x), 1 - 2 * (x * x + y * y)]])


def quaternion_of_turn(r):
    """w, x, y, z with w >= 0, taken from the largest of the four."""
    four = np.array([np.trace(r), r[0, 0], r[1, 1], r[2, 2]])
    big = int(np.argmax(four))
    if big == 0:
        w = math.sqrt(1 + four[0]) / 2
        q = [w, (r[2, 1] - r[1, 2]) / (4 * w), (r[0, 2] - r[2, 0]) / (4 * w),
             (r[1, 0] - r[0, 1]) / (4 * w)]
    else:
        i, j, k = big - 1, big % 3, (big + 1) % 3
        a = math.sqrt(1 + r[i, i] - r[j, j] - r[k, k]) / 2
        q = [0.0] * 4
        q[0] = (r[k, j] - r[j, k]) / (4 * a)
        q[1 + i] = a
        q[1 + j] = (r[i, j] + r[j, i]) / (4 * a)
        q[1 + k] = (r[i, k] + r[k, i]) / (4 * a)
    q = np.array(q) / np.linalg.norm(q)
    return -q if q[0] < 0 else q


def turn_of_zyx(yaw, pitch, roll):
    return (turn_about(np.array([0., 0, 1]), yaw) @ turn_about(np.array([0., 1, 0]), pitch)
            @ turn_about(np.array([1., 0, 0]), roll))


class Mechanism:
    """State: displacement (R, p) of each body from the reference posture, q of each joint."""

    def __init__(self, path):
        with open(path, encoding="utf-8") as file:
            self.doc = doc = json.load(file)
        self.length_unit = {"mm": 1e-3, "m": 1.0}[doc["units"]["length"]]
        self.angle_unit = {"deg": DEGREE, "rad": 1.0}[doc["units"]["angle"]]
        self.scale = doc["needs"]["characteristic_length"] * self.length_unit
        self.unit = self.length_unit / self.scale  # document length -> our length
        self.bodies = [b for b in doc["bodies"] if b != doc["frame"]]
        self.joints = doc.get("joints", [])
        self.rods = doc.get("rods", [])
        self.drives = doc["drives"]
        for j in self.joints:
            if j["type"] not in ("revolute", "prismatic", "helical"):
                raise ValueError("joint type not used by the demo line: " + j["type"])
        self.axis = {j["name"]: np.array(j["axis"], float) / np.linalg.norm(j["axis"])
                     for j in self.joints}
        self.at = {j["name"]: np.array(j.get("at", [0, 0, 0]), float) * self.unit
                   for j in self.joints}
        self.ends = {r["name"]: [np.array(e, float) * self.unit for e in r["ends"]]
                     for r in self.rods}
        self.rod_length = {n: np.linalg.norm(e[1] - e[0]) for n, e in self.ends.items()}
        self.moved = {d["moves"]: d for d in self.drives}
        self.index = {b: 6 * i for i, b in enumerate(self.bodies)}
        for i, j in enumerate(self.joints):
            self.index[j["name"]] = 6 * len(self.bodies) + i
        self.unknowns = 6 * len(self.bodies) + len(self.joints)
        self.tool = doc["tools"][0]
        o = self.tool["orientation"]["quaternion"]
        self.tool_turn = turn_of_quaternion([o["w"], o["x"], o["y"], o["z"]])
        self.tool_at = np.array(self.tool["at"], float) * self.unit

    # states ---------------------------------------------------------------------------------
    def reference(self):
        return ({b: (np.eye(3), np.zeros(3)) for b in self.doc["bodies"]},
                {j["name"]: 0.0 for j in self.joints})

    def moved_by(self, state, step):
        bodies, q = dict(state[0]), dict(state[1])
        for b in self.bodies:
            i = self.index[b]
            r, p = bodies[b]
            bodies[b] = (turn_by_vector(step[i + 3:i + 6]) @ r, p + step[i:i + 3])
        for j in self.joints:
            q[j["name"]] += step[self.index[j["name"]]]
        return bodies, q

    def nudged(self, state, name, i, h):
        """moved_by for the single unknown i, which belongs to body or joint `name`."""
        bodies, q = state
        if name in q:
            return bodies, {**q, name: q[name] + h}
        (r, p), step = bodies[name], np.zeros(6)
        step[i - self.index[name]] = h
        return {**bodies, name: (turn_by_vector(step[3:]) @ r, p + step[:3])}, q

    def turning(self, name):
        return any(j["name"] == name and j["type"] != "prismatic" for j in self.joints)

    # equations ------------------------------------------------------------------------------
    def joint_error(self, j, state):
        """Six numbers: where the second body is against where the joint puts it."""
        (r1, p1), (r2, p2) = (state[0][b] for b in j["between"])
        axis, at, q = self.axis[j["name"]], self.at[j["name"]], state[1][j["name"]]
        turn, slide = q, 0.0
        if j["type"] == "prismatic":
            turn, slide = 0.0, q
        elif j["type"] == "helical":
            slide = j["lead"] * self.unit * q / (2 * math.pi)
        r = turn_about(axis, turn)
        p = at - r @ at + slide * axis
        return np.concatenate([r2 @ at + p2 - (r1 @ (r @ at + p) + p1),
                               vector_of_turn((r1 @ r).T @ r2)])

    def rod_ends(self, rod, state):
        return [state[0][b][0] @ e + state[0][b][1]
                for b, e in zip(rod["between"], self.ends[rod["name"]])]

    def rod_now(self, rod, state):
        a, b = self.rod_ends(rod, state)
        return np.linalg.norm(b - a)

    def closure(self):
        """List of (function of state -> array, names of the unknowns it depends on)."""
        rows = [(lambda s, j=j: self.joint_error(j, s), list(j["between"]) + [j["name"]])
                for j in self.joints]
        for r in self.rods:
            if r["name"] not in self.moved:
                rows.append((lambda s, r=r: np.array([self.rod_now(r, s)
                                                      - self.rod_length[r["name"]]]),
                             list(r["between"])))
        return rows

    def coordinate(self, name):
        """A joint coordinate or a rod's change of length, as a row."""
        for r in self.rods:
            if r["name"] == name:
                return (lambda s: np.array([self.rod_now(r, s) - self.rod_length[name]]),
                        list(r["between"]))
        return lambda s: np.array([s[1][name]]), [name]

    def tool_pose(self, state):
        r, p = state[0][self.tool["body"]]
        return r @ self.tool_turn, r @ self.tool_at + p

    def jacobian(self, rows, state, h=1e-6):
        """Central differences, each row group against the unknowns it depends on."""
        values = [f(state) for f, _ in rows]
        out = np.zeros((sum(len(v) for v in values), self.unknowns))
        top = 0
        for (f, names), v in zip(rows, values):
            for n in names:
                if n not in self.index:
                    continue
                for i in range(self.index[n], self.index[n] + (6 if n in self.bodies else 1)):
                    out[top:top + len(v), i] = (f(self.nudged(state, n, i, h))
                                                - f(self.nudged(state, n, i, -h))) / (2 * h)
            top += len(v)
        return out

    def tool_rows(self, state):
        """Tool twist at the tool point (three shifts, three turns) by the unknowns."""
        out = np.zeros((6, self.unknowns))
        i = self.index[self.tool["body"]]
        out[:3, i:i + 3] = np.eye(3)
        out[3:, i + 3:i + 6] = np.eye(3)
        out[:3, i + 3:i + 6] = -cross_matrix(state[0][self.tool["body"]][0] @ self.tool_at)
        return out

    def residual(self, rows, state):
        return np.concatenate([np.zeros(0)] + [f(state) for f, _ in rows])

    def assemble(self, state, extra=(), iterations=60, tolerance=1e-13):
        """Newton by least squares on closure and extra rows; None where it does not settle."""
        rows = self.closure() + list(extra)
        for _ in range(iterations):
            e = self.residual(rows, state)
            if not len(e) or np.max(np.abs(e)) < tolerance:
                return state
            step = -np.linalg.lstsq(self.jacobian(rows, state), e, rcond=1e-10)[0]
            big = np.max(np.abs(step))
            state = self.moved_by(state, step if big < 0.4 else step * (0.4 / big))
        return state if np.max(np.abs(self.residual(rows, state))) < 1e-11 else None

    def follow(self, state, rows_at, steps=12):
        """Least-squares tracking from a state while rows_at(t) goes from t = 0 to 1; the last step
        must close exactly. Between, spare readings may contradict one another."""
        for k in range(1, steps + 1):
            rows = rows_at(k / steps)
            for _ in range(2):
                both = [(lambda s, f=f: 1e3 * f(s), n) for f, n in self.closure()] + rows
                step = np.linalg.lstsq(self.jacobian(both, state), -self.residual(both, state),
                                       rcond=1e-12)[0]
                state = self.moved_by(state, step)
        return self.assemble(state, rows_at(1.0))

    def follow_readings(self, state, goal, steps=12):
        start = self.readings(state)
        return self.follow(state, lambda t: self.reading_rows(
            {k: start[k] + (v - start[k]) * t for k, v in goal.items()}), steps)

    def follow_pose(self, state, goal, steps=12):
        """Members of `goal`: x y z, rz, joints, or a rotation matrix under "turn"."""
        now = self.pose(state)
        turn = self.tool_pose(state)[0]

        def rows_at(t):
            pose = {k: now[k] + (goal[k] - now[k]) * t for k in ("x", "y", "z", "rz")
                    if k in goal}
            pose["joints"] = {k: now["joints"][k] + (v - now["joints"][k]) * t
                              for k, v in goal.get("joints", {}).items()}
            rows = self.pose_rows(pose)
            if "turn" in goal:
                want = turn @ turn_by_vector(t * vector_of_turn(turn.T @ goal["turn"]))
                rows.append((lambda s: vector_of_turn(want.T @ self.tool_pose(s)[0]),
                             [self.tool["body"]]))
            return rows
        return self.follow(state, rows_at, steps)

    def joints_of_readings(self, readings):
        return {d["moves"]: (readings[d["name"]] - self.at_reference(d)) / self.per_unit(d)
                for d in self.drives if d["name"] in readings}

    def assemble_near(self, joints, near, random, tries=40):
        """The posture with these joint coordinates (document units) and, where given, this tool
        pose. Bodies start where the given joints put them, else as drawn, then at random."""
        given = {k: v * self.unit_of(k) for k, v in joints.items()}
        # Given to four decimals: coordinates beyond the freedoms are met by least squares only.
        rows = []
        for name, value in given.items():
            f, names = self.coordinate(name)
            rows.append((lambda s, f=f, value=value: f(s) - value, names))
        rows += self.pose_rows(near)
        for trial in range(tries):
            bodies, q = self.reference()
            for j in self.joints:
                name, (first, second) = j["name"], j["between"]
                if name in given:
                    q[name] = given[name]
                elif trial and j["type"] == "revolute":
                    q[name] = random.uniform(-3, 3)
                else:
                    continue
                axis, at = self.axis[name], self.at[name]
                r = np.eye(3) if j["type"] == "prismatic" else turn_about(axis, q[name])
                slide = q[name] * axis if j["type"] == "prismatic" else np.zeros(3)
                if second != self.tool["body"] or not near:
                    r1, p1 = bodies[first]
                    bodies[second] = (r1 @ r, r1 @ (at - r @ at + slide) + p1)
            found = self.settle((bodies, q), rows)
            if found is not None:
                return found
        return None

    def settle(self, state, rows, allowed=1e-4):
        """Least squares of the rows under closure: closed to rounding, rows to `allowed`."""
        both = [(lambda s, f=f: 1e3 * f(s), n) for f, n in self.closure()] + rows
        for _ in range(25):
            step = np.linalg.lstsq(self.jacobian(both, state), -self.residual(both, state),
                                   rcond=1e-12)[0]
            big = np.max(np.abs(step))
            state = self.moved_by(state, step if big < 0.4 else step * (0.4 / big))
            if big < 1e-12:
                break
        state = self.assemble(state)
        if state is None or np.max(np.abs(self.residual(rows, state))) > allowed:
            return None
        return state

    # units ----------------------------------------------------------------------------------
    def unit_of(self, name):
        """Document unit of a coordinate in our units."""
        return self.angle_unit if self.turning(name) else self.unit

    def at_reference(self, drive):
        default = 0.0
        if drive["moves"] in self.rod_length:
            default = self.rod_length[drive["moves"]] / self.unit
        return drive.get("reading", {}).get("at_reference", default)

    def per_unit(self, drive):
        return drive.get("reading", {}).get("per_unit", 1.0)

    def reading(self, drive, state):
        value = self.coordinate(drive["moves"])[0](state)[0] / self.unit_of(drive["moves"])
        return self.at_reference(drive) + self.per_unit(drive) * value

    def readings(self, state):
        return {d["name"]: float(self.reading(d, state)) for d in self.drives}

    def reading_rows(self, readings):
        rows = []
        for d in self.drives:
            if d["name"] not in readings:
                continue
            f, names = self.coordinate(d["moves"])
            want = ((readings[d["name"]] - self.at_reference(d)) / self.per_unit(d)
                    * self.unit_of(d["moves"]))
            rows.append((lambda s, f=f, want=want: f(s) - want, names))
        return rows

    def pose_rows(self, pose):
        """Rows that hold the members of a document pose (x y z, quaternion, rz, joints)."""
        rows = []
        body = [self.tool["body"]]
        for i, c in enumerate("xyz"):
            if c in pose:
                rows.append((lambda s, i=i, v=pose[c] * self.unit:
                             np.array([self.tool_pose(s)[1][i] - v]), body))
        want = None
        if "rz" in pose:
            want = turn_about(np.array([0., 0, 1]), pose["rz"] * self.angle_unit)
        elif "quaternion" in pose:
            want = turn_of_quaternion([pose["quaternion"][k] for k in "wxyz"])
        if want is not None:
            rows.append((lambda s: vector_of_turn(want.T @ self.tool_pose(s)[0]), body))
        for name, v in pose.get("joints", {}).items():
            f, names = self.coordinate(name)
            rows.append((lambda s, f=f, v=v * self.unit_of(name): f(s) - v, names))
        return rows

    def pose(self, state):
        """The tool pose as the document would write it, outputs' form."""
        r, p = self.tool_pose(state)
        out = {c: float(v / self.unit) for c, v in zip("xyz", p)}
        outputs = self.doc["outputs"]
        if "rx" in outputs:
            out["quaternion"] = dict(zip("wxyz", map(float, quaternion_of_turn(r))))
        elif "rz" in outputs:
            out["rz"] = math.atan2(r[1, 0], r[0, 0]) / self.angle_unit
        names = [o for o in outputs if o not in ("x", "y", "z", "rx", "ry", "rz")]
        if names:
            out["joints"] = {n: float(self.coordinate(n)[0](state)[0] / self.unit_of(n))
                             for n in names}
        for c in "xyz":
            if c not in outputs:
                del out[c]
        return out

    # limits ---------------------------------------------------------------------------------
    def limits_broken(self, state, tolerance=1e-9):
        broken = []

        def look(name, value, low_high):
            low, high = low_high
            if low is not None and value < low - tolerance:
                broken.append((name, value, low_high))
            if high is not None and value > high + tolerance:
                broken.append((name, value, low_high))

        for j in self.joints:
            if "range" in j:
                look(j["name"], state[1][j["name"]] / self.unit_of(j["name"]), j["range"])
        for r in self.rods:
            if "range" in r:
                look(r["name"], self.rod_now(r, state) / self.unit, r["range"])
            a, b = self.rod_ends(r, state)
            for end, body in enumerate(r["between"]):
                swivel = r.get("swivels", [None, None])[end]
                if swivel:
                    axis = state[0][body][0] @ np.array(swivel["axis"], float)
                    c = axis @ (b - a) / np.linalg.norm(axis) / np.linalg.norm(b - a)
                    angle = math.acos(max(-1.0, min(1.0, c))) / DEGREE
                    look("%s end %d" % (r["name"], end + 1), angle,
                         [None, swivel["cone"] * self.angle_unit / DEGREE])
        for d in self.drives:
            if "range" in d:
                look(d["name"], self.reading(d, state), d["range"])
        return broken

    # ranks and margins ----------------------------------------------------------------------
    def freedom(self, state, cut=1e-7):
        """Null space of the closure derivative, its rank, the values either side of the cut."""
        g = self.jacobian(self.closure(), state)
        u, s, vt = np.linalg.svd(g)
        rank = int(np.sum(s > cut * s[0])) if len(s) else 0
        kept = s[rank - 1] / s[0] if rank else 1.0
        dropped = s[rank] / s[0] if rank < len(s) else 0.0
        return vt[rank:].T, rank, g.shape[0], kept, dropped

    def rates(self, state):
        """Drive rows A K and output rows T K on the null space K; K itself."""
        k = self.freedom(state)[0]
        drives = self.jacobian([self.coordinate(d["moves"]) for d in self.drives], state)
        tool = self.tool_rows(state)
        rows = []
        for o in self.doc["outputs"]:
            if o in ("x", "y", "z"):
                rows.append(tool["xyz".index(o)])
            elif o in ("rx", "ry", "rz"):
                rows.append(tool[3 + "xyz".index(o[1])])
            else:
                rows.append(self.jacobian([self.coordinate(o)], state)[0])
        return drives @ k, np.array(rows) @ k, k

    def screw_weight(self):
        """Slide of a whole differential screw per radian, in characteristic lengths."""
        leads = [j["lead"] for j in self.joints if j["type"] == "helical"]
        return abs(leads[0] - leads[1]) * self.unit / (2 * math.pi) if len(leads) == 2 else 1.0

    def hold(self, state, without=()):
        """Smallest singular value of the drive rates over unit motions of the whole machine: joint
        coordinates and the tool body's twist, turns in radians, lengths over the characteristic
        length, helical turns by what they slide the nuts. This file's own weights."""
        k = self.freedom(state)[0]
        measure = [self.tool_rows(state)]
        for j in self.joints:
            row = np.zeros((1, self.unknowns))
            row[0, self.index[j["name"]]] = (self.screw_weight() if j["type"] == "helical"
                                             else 1.0)
            measure.append(row)
        m = np.vstack(measure) @ k
        q, r = np.linalg.qr(m)
        rows = [self.coordinate(d["moves"]) for d in self.drives if d["name"] not in without]
        a = self.jacobian(rows, state) @ k
        s = np.linalg.svd(a @ np.linalg.inv(r), compute_uv=False)
        return s[-1] if len(s) == k.shape[1] else 0.0

    def drive_error(self, d):
        per = self.unit_of(d["moves"]) / abs(self.per_unit(d))
        return (d["resolution"] / 2 + d["backlash"] / 2) * per

    def margins(self, state):
        """Accuracy, load and speed at a posture against the needs, as ratios; and the shaft's."""
        ak, tk, _ = self.rates(state)
        needs, outputs = self.doc["needs"], self.doc["outputs"]
        shift = [i for i, o in enumerate(outputs) if o in ("x", "y", "z")]
        spin = [i for i, o in enumerate(outputs) if o in ("rx", "ry", "rz")]
        out = {}
        e = np.array([self.drive_error(d) for d in self.drives])
        response = tk @ np.linalg.pinv(ak / e[:, None])
        signs = np.array(list(itertools.product([-1, 1], repeat=len(e)))).T
        def worst(rows):
            return np.max(np.linalg.norm(response[rows] @ signs, axis=0))
        error = {}
        error["position"] = worst(shift) / self.unit
        out["accuracy"] = needs["position_tolerance"] / error["position"]
        if spin and "angle_tolerance" in needs:
            error["angle"] = worst(spin) / self.angle_unit
            out["accuracy angle"] = needs["angle_tolerance"] / error["angle"]
        # Forces: thrust in newtons; moments over the characteristic length, in newtons too.
        f = np.array([d["thrust"] if "thrust" in d else d["torque"] / self.scale
                      for d in self.drives])
        vertices = self.load_vertices(ak, f)
        def load(rows, amount):
            return 1.0 / max(np.linalg.norm(tk[rows] @ v) * amount for v in vertices)
        out["load"] = load(shift, needs["force"])
        if spin and "moment" in needs:
            out["load moment"] = load(spin, needs["moment"] / self.scale)
        inverse = ak @ np.linalg.inv(tk)
        speed = np.array([d["speed"] * self.unit_of(d["moves"]) / abs(self.per_unit(d))
                          for d in self.drives])
        def fastest(rows):
            return np.min(speed / np.maximum(np.linalg.norm(inverse[:, rows], axis=1), 1e-12))
        out["speed"] = fastest(shift) / self.unit / needs["speed"]
        if spin and "turn_rate" in needs:
            out["speed turn"] = fastest(spin) / self.angle_unit / needs["turn_rate"]
        for name, n in needs.get("joints", {}).items():
            row = [outputs.index(name)]
            error[name] = worst(row) / self.unit_of(name)
            out["accuracy " + name] = n["tolerance"] / error[name]
            out["load " + name] = load(row, n["moment"] / self.scale)
            out["speed " + name] = fastest(row) / self.unit_of(name) / n["speed"]
        return out, error

    @staticmethod
    def load_vertices(ak, f):
        """Vertices v of { v : sum f_i |(A K v)_i| <= 1 }: the least largest share of the drives
        for a load b is the maximum of b.v over them (linear programming duality)."""
        n, m = ak.shape
        out = []
        for rows in itertools.combinations(range(n), m - 1):
            u, s, vt = np.linalg.svd(ak[list(rows)])
            if s[-1] < 1e-9 * max(s[0], 1e-30):
                continue
            v = vt[-1]
            out.append(v / np.sum(f * np.abs(ak @ v)))
        return out
