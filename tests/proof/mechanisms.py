# SPDX-License-Identifier: GPL-3.0-or-later
"""The geometry of the demo line's mechanisms, written down from their drawings and read from their
documents: where the limbs stand for a tool pose, in closed form, and how fast the drives run. All
numbers are Taylor jets of intervals (intervals.py); lengths in metres, angles in radians. Nothing
here is shared with the service.

Each class gives, for jets of the tool's motion and a branch (a sign a limb and point; branches()
lists what there is, named() what a mode of the document says):
  value     drives that slide: their coordinate, a jet each; None for drives that turn
  direction drives that turn: cosine and sine of their coordinate, a pair of jets each
  rates     drives by outputs, jets of shape (drives, outputs, points)
  positive  jets that must be above zero: limbs can be solved and keep their branch, joints and
            swivels within their limits
  regular   matrices of jets that must have full column rank: plates cannot turn
  twist     tool velocity (3) and turn rate (3) by outputs
"""
import functools
import json
from fractions import Fraction

import numpy as np

from intervals import Iv, Jet, PI, cross, dot, iv, jets, norm2, sin_cos, stack


class Outcome:
    def __init__(self):
        self.value, self.direction, self.positive, self.regular = [], [], [], []
        self.rates = self.twist = None


def signs(n):
    """Every choice of n signs, a row each."""
    return np.array([[1.0 if (k >> i) & 1 == 0 else -1.0 for i in range(n)]
                     for k in range(2 ** n)])


def constant(v, like):
    """Intervals of shape (k,) as jets over all points of another jet."""
    shape = v.shape + like.shape[-1:]
    zero = Iv(np.zeros(shape))
    full = Iv(np.broadcast_to(v.lo[..., None], shape), np.broadcast_to(v.hi[..., None], shape))
    return Jet(full, zero, zero)


class Mechanism:
    serial = False  # every joint is driven: drive rates are joint rates

    def __init__(self, path):
        with open(path, encoding="utf-8") as file:
            self.doc = doc = json.load(file, parse_float=Fraction)
        if doc["units"] != {"length": "mm", "angle": "deg"}:
            raise ValueError(path + ": millimetres and degrees are expected")
        self.name, self.drives, self.outputs = doc["name"], doc["drives"], doc["outputs"]
        self.joint = {j["name"]: j for j in doc.get("joints", [])}
        self.rod = {r["name"]: r for r in doc.get("rods", [])}
        self.tool = doc["tools"][0]
        q = self.tool["orientation"]["quaternion"]
        self.tool_quat = [Fraction(q[k]) for k in "wxyz"]
        needs = doc["needs"]
        self.length = self.mm(needs["characteristic_length"])
        self.n_drive, self.n_output = len(self.drives), len(self.outputs)

    # from the document's units, exactly enclosed
    @staticmethod
    @functools.lru_cache(maxsize=None)
    def mm(x):
        return iv(Fraction(x) / 1000)

    @staticmethod
    @functools.lru_cache(maxsize=None)
    def deg(x):
        return iv(Fraction(x) / 180) * PI

    @functools.lru_cache(maxsize=None)
    def sin_cos_deg(self, x):
        return sin_cos(self.deg(x))

    def point(self, v):
        return stack([self.mm(c) for c in v])

    def unit_of(self, drive):
        return self.deg if self.turns(drive) else self.mm

    def turns(self, drive):
        joint = self.joint.get(drive["moves"])
        return joint is not None and joint["type"] == "revolute"

    def reference(self, drive):
        """The reading as drawn, in the document's unit: a Fraction, or an interval for struts."""
        reading = drive["reading"]
        if Fraction(reading["per_unit"]) != 1:
            raise ValueError("per_unit is 1 in the demo line")
        return Fraction(reading.get("at_reference", 0))

    def limits(self):
        """Drives' ranges as changes from the drawing."""
        low, high = [], []
        for d in self.drives:
            unit = self.unit_of(d)
            if d["moves"] in self.rod:
                zero = self.rod_length(self.rod[d["moves"]])
            else:
                zero = unit(self.reference(d))
            a, b = unit(d["range"][0]) - zero, unit(d["range"][1]) - zero
            # rods and joints have ranges of their own
            own = self.rod.get(d["moves"], self.joint.get(d["moves"]))["range"]
            if d["moves"] in self.rod:
                c, e = unit(own[0]) - zero, unit(own[1]) - zero
            else:
                c, e = unit(own[0]), unit(own[1])
            low.append(float(max(a.hi, c.hi)))
            high.append(float(min(b.lo, e.lo)))
        return np.array(low), np.array(high)

    def rod_length(self, rod):
        a, b = rod["ends"]
        return iv(sum((Fraction(y) - Fraction(x)) ** 2 for x, y in zip(a, b)) / 10 ** 6).sqrt()

    def full_twist(self, like, turning):
        """Unit twists: outputs are the twist itself (shifts, and turns where there are some)."""
        n = self.n_output
        v, w = np.zeros((3, n)), np.zeros((3, n))
        for k in range(3):
            if k < n:
                v[k, k] = 1.0
            if turning and k + 3 < n:
                w[k, k + 3] = 1.0
        return constant(Iv(v), like), constant(Iv(w), like)

    def swivels(self, out, rod, u, turns):
        """u: unit vector from the first end to the second; turns: bodies' rotations or None."""
        for swivel, turn in zip(rod["swivels"], turns):
            axis = [Fraction(c) for c in swivel["axis"]]
            size = iv(sum(c * c for c in axis)).sqrt()
            least = self.sin_cos_deg(swivel["cone"])[1] * size
            a = constant(stack([iv(c) for c in axis]), u)
            if turn is not None:
                a = rotate(turn, a)
            out.positive.append(dot(a, u) - least)

    def joint_angle(self, out, joint, c, s):
        """Cosine and sine of a joint that is not driven, against its range: away from the middle of
        the range by less than half of it. Where the range is a whole turn or more, the joint must
        stay within half a turn of the drawing, so that it does not wind up."""
        low, high = (Fraction(x) for x in joint["range"])
        if high - low >= 360:
            out.positive.append(c + iv(Fraction(999, 1000)))
            return
        sm, cm = self.sin_cos_deg((low + high) / 2)
        out.positive.append(c * cm + s * sm - self.sin_cos_deg((high - low) / 2)[1])


def rotate(turn, v):
    """3x3 jets (row, column, points) times a vector."""
    return jets([dot(turn[i], v) for i in range(3)])


class Struts(Mechanism):
    """Six driven struts between a floor and a table."""

    def work(self, p, turn, joints, branch):
        out = Outcome()
        tool = [Fraction(c) for c in self.tool["at"]]
        rows = []
        for d in self.drives:
            rod = self.rod[d["moves"]]
            floor = constant(self.point(rod["ends"][0]), p)
            arm = constant(self.point([Fraction(c) - t for c, t in zip(rod["ends"][1], tool)]), p)
            arm = rotate(turn, arm)
            way = p + arm - floor
            length = norm2(way).sqrt()
            u = way / length
            out.value.append(length - self.rod_length(rod))
            out.direction.append(None)
            rows.append(jets([*(u[i] for i in range(3)), *(cross(arm, u)[i] for i in range(3))]))
            self.swivels(out, rod, u, (None, turn))
        out.rates = jets(rows)
        out.twist = self.full_twist(p, True)
        return out

    def branches(self):
        return np.zeros((1, 0))

    def named(self, mode):
        return ()


class RailPair(Mechanism):
    """Vertical carriages, each with two parallel equal rods to a plate that does not turn."""

    def pairs_of(self, drive):
        carriage = self.joint[drive["moves"]]["between"][1]
        a, b = [r for r in self.doc["rods"] if r["between"][0] == carriage]
        span = [[Fraction(y) - Fraction(x) for x, y in zip(*r["ends"])] for r in (a, b)]
        if span[0] != span[1] or a["between"] != b["between"]:
            raise ValueError("the rods of a pair are parallel and equal")
        if [Fraction(c) for c in self.joint[drive["moves"]]["axis"]] != [0, 0, 1]:
            raise ValueError("rails are upright")
        gap = [Fraction(x) - Fraction(y) for x, y in zip(a["ends"][1], b["ends"][1])]
        return a, gap

    def carriage(self, out, drive, shift, sign):
        """shift: of the plate from the drawing (3). Returns the unit vector along the rods."""
        rod, gap = self.pairs_of(drive)
        span = [Fraction(y) - Fraction(x) for x, y in zip(*rod["ends"])]
        span = constant(self.point(span), shift)
        way = span + shift       # as if the carriage stood as drawn
        length = self.rod_length(rod)
        under = length.square() - way[0].square() - way[1].square()
        out.positive.append(under)
        height = under.sqrt() * Iv(sign)
        # way_z - slide = -height: sign + has the carriage above
        out.value.append(way[2] + height)
        out.direction.append(None)
        u = jets([way[0], way[1], -height]) / length
        self.swivels(out, rod, u, (None, None))
        return u, gap

    @staticmethod
    def plate_stands(out, pairs, point):
        """No turn of a plate is left by its pairs of rods with all drives locked: turns w obey
        w . (gap x u) = 0 for each pair, and these vectors have rank three."""
        rows = [cross(constant(point(gap), u), u) for u, gap in pairs]
        out.regular.append(jets(rows))


class BeltHopper(RailPair):
    def work(self, p, turn, joints, branch):
        out = Outcome()
        shift = p - constant(self.point(self.tool["at"]), p)
        pairs = [self.carriage(out, d, shift, s) for d, s in zip(self.drives, branch)]
        # along the rod: slide u_z = v . u
        out.rates = jets([u / u[2] for u, _ in pairs])
        self.plate_stands(out, pairs, self.point)
        out.twist = self.full_twist(p, False)
        return out

    def branches(self):
        return signs(3)

    def named(self, mode):
        return {"rods-hanging": (1, 1, 1), "rods-standing": (-1, -1, -1)}[mode]


class LidTurner(RailPair):
    """Two plates over one another, each on three carriages, guided along one another; a spindle
    with two threads: as it turns, the plates come nearer."""

    def work(self, p, turn, joints, branch):
        out = Outcome()
        lower = p - constant(self.point(self.tool["at"]), p)
        lead = {n: Fraction(self.joint[n]["lead"]) for n in ("shaft", "upper-thread")}
        per_turn = lead["shaft"] - lead["upper-thread"]  # mm of the upper plate from the lower one
        per_rad = iv(per_turn / 1000) / (PI * 2.0)
        apart = joints[0] * per_rad
        upper = jets([lower[0], lower[1], lower[2] + apart])
        low, high = (self.mm(x) for x in self.joint["guide"]["range"])
        out.positive += [apart - low, high - apart]
        for name in ("shaft", "upper-thread"):
            low, high = (self.deg(x) for x in self.joint[name]["range"])
            out.positive += [joints[0] - low, high - joints[0]]
        rows = []
        pairs = []
        for d, s in zip(self.drives, branch):
            plate = self.pairs_of(d)[0]["between"][1]
            is_upper = plate == "upper-plate"
            u, gap = self.carriage(out, d, upper if is_upper else lower, s)
            pairs.append((u, gap))
            ratio = u / u[2]
            last = constant(per_rad if is_upper else Iv(0.0), p)
            rows.append(jets([ratio[0], ratio[1], constant(Iv(1.0), p), last]))
        out.rates = jets(rows)
        # The guide turns both plates as one: all six pairs hold them.
        self.plate_stands(out, pairs, self.point)
        out.twist = self.full_twist(p, False)
        return out

    def branches(self):
        return signs(6)

    def named(self, mode):
        return {"all-hanging": (1,) * 6, "all-standing": (-1,) * 6,
                "upper-standing": (-1,) * 3 + (1,) * 3,
                "north-standing": (-1, 1, 1, -1, 1, 1)}[mode]


class TwoLinks(Mechanism):
    """A plate in the plane on two-link arms, a driven shoulder each."""

    def flat(self, name):
        return [Fraction(c) for c in self.joint[name]["at"][:2]]

    def work(self, p, turn, joints, branch):
        out = Outcome()
        tool = [Fraction(c) for c in self.tool["at"][:2]]
        rows = []
        cosine, sine = turn[0, 0], turn[1, 0]
        for i, (d, sign) in enumerate(zip(self.drives, branch), 1):
            s, e, q = (self.flat("%s-%d" % (n, i)) for n in ("shoulder", "elbow", "pivot"))
            arm = [self.mm(a - b) for a, b in zip(q, tool)]
            arm = jets([cosine * arm[0] - sine * arm[1], sine * arm[0] + cosine * arm[1]])
            reach = jets([p[k] + arm[k] - self.mm(s[k]) for k in range(2)])
            first = [a - b for a, b in zip(e, s)]
            second = [a - b for a, b in zip(q, e)]
            aa = sum(x * x for x in first) / 10 ** 6
            bb = sum(x * x for x in second) / 10 ** 6
            cc = norm2(reach)
            out.positive.append(cc)
            # the crank's end: reach (aa - bb + cc) / (2 cc) + side; 16 area^2 = 4 aa cc - (..)^2
            along = cc + iv(aa - bb)
            under = cc * iv(4 * aa) - along.square()
            out.positive.append(under)
            root = under.sqrt() * Iv(sign)
            crank = jets([reach[0] * along - reach[1] * root, reach[1] * along + reach[0] * root])
            crank = crank / (cc * 2.0)
            link = reach - crank
            c, sn = self.turned(first, crank, aa)
            out.value.append(None)
            out.direction.append((c, sn))
            lc, ls = self.turned(second, link, bb)
            ec, es = lc * c + ls * sn, ls * c - lc * sn
            self.joint_angle(out, self.joint["elbow-%d" % i], ec, es)
            pc, ps = cosine * lc + sine * ls, sine * lc - cosine * ls
            self.joint_angle(out, self.joint["pivot-%d" % i], pc, ps)
            # link . velocity of the pivot = rate (crank x link)
            lever = crank[0] * link[1] - crank[1] * link[0]
            moment = arm[0] * link[1] - arm[1] * link[0]
            rows.append(jets([link[0], link[1], moment]) / lever)
        out.rates = jets(rows)
        v, w = np.zeros((3, 3)), np.zeros((3, 3))
        v[0, 0] = v[1, 1] = w[2, 2] = 1.0
        out.twist = constant(Iv(v), p), constant(Iv(w), p)
        return out

    @staticmethod
    def turned(drawn, now, square):
        """Cosine and sine of the turn from a drawn direction (mm, fractions); square: its length
        in m, squared."""
        x, y = (iv(c / 1000 / square) for c in drawn)
        return now[0] * x + now[1] * y, now[1] * x - now[0] * y

    def branches(self):
        return signs(4)

    def named(self, mode):
        return {"elbows-left": (1,) * 4, "elbows-right": (-1,) * 4,
                "left-right-left-right": (1, -1, 1, -1),
                "right-left-right-left": (-1, 1, -1, 1)}[mode]


class WristArm(Mechanism):
    """Six turning joints: post (z), shoulder and elbow (y), and three through one point (x, y, -z
    as drawn)."""
    serial = True

    def work(self, p, turn, joints, branch):
        front, high, plain = branch
        out = Outcome()
        names = [d["moves"] for d in self.drives]
        at = [[Fraction(c) for c in self.joint[n]["at"]] for n in names]
        axes = [[Fraction(c) for c in self.joint[n]["axis"]] for n in names]
        if axes != [[0, 0, 1], [0, 1, 0], [0, 1, 0], [1, 0, 0], [0, 1, 0], [0, 0, -1]] or \
                at[0][:2] != [0, 0] or any(a[1] != 0 for a in at) or at[4] != at[5] or \
                at[3][2] != at[4][2]:
            raise ValueError("not the arm that this file knows")
        tool = [Fraction(c) for c in self.tool["at"]]
        back = constant(self.point([a - b for a, b in zip(at[4], tool)]), p)
        arm = rotate(turn, back)     # from the tool point to the wrist centre
        w = p + arm
        rr = w[0].square() + w[1].square()
        out.positive.append(rr)
        r = rr.sqrt() * Iv(front)
        c1, s1 = w[0] / r, w[1] / r
        ahead = [r - self.mm(at[1][0]), w[2] - self.mm(at[1][2])]
        first = [at[2][0] - at[1][0], at[2][2] - at[1][2]]
        second = [at[4][0] - at[2][0], at[4][2] - at[2][2]]
        aa = sum(x * x for x in first) / 10 ** 6
        bb = sum(x * x for x in second) / 10 ** 6
        cc = ahead[0].square() + ahead[1].square()
        out.positive.append(cc)
        along = cc + iv(aa - bb)
        under = cc * iv(4 * aa) - along.square()
        out.positive.append(under)
        root = under.sqrt() * Iv(high)
        upper = jets([ahead[0] * along - ahead[1] * root, ahead[1] * along + ahead[0] * root])
        upper = upper / (cc * 2.0)
        fore = jets(ahead) - upper
        c2, s2 = self.about_y(first, upper, aa)
        c23, s23 = self.about_y(second, fore, bb)
        c3, s3 = c23 * c2 + s23 * s2, s23 * c2 - c23 * s2
        zero = constant(Iv(0.0), p)
        ex = jets([c1 * c23, s1 * c23, -s23])   # the forearm's x, y, z as turned
        ey = jets([-s1, c1, zero])
        ez = jets([c1 * s23, s1 * s23, c23])
        col = [jets([turn[0, k], turn[1, k], turn[2, k]]) for k in range(3)]
        q02, q12, q22 = dot(ex, col[2]), dot(ey, col[2]), dot(ez, col[2])
        q00, q01 = dot(ex, col[0]), dot(ex, col[1])
        bend2 = q12.square() + q22.square()
        out.positive.append(bend2)
        bend = bend2.sqrt() * Iv(plain)
        c4, s4 = q22 / bend, -q12 / bend
        c6, s6 = q00 / bend, q01 / bend
        out.direction = [(c1, s1), (c2, s2), (c3, s3), (c4, s4), (bend, q02), (c6, s6)]
        out.value = [None] * 6
        # rates: the wrist centre by the first three, the turn by the others
        n = 6
        v, turn_rate = self.full_twist(p, True)
        a4, a6 = ex, -col[2]
        a5 = jets([ey[i] * c4 + ez[i] * s4 for i in range(3)])
        columns = []
        for o in range(n):
            vo, wo = v[:, o], turn_rate[:, o]
            vw = vo + cross(wo, arm)
            side = c1 * vw[1] - s1 * vw[0]
            out_ = c1 * vw[0] + s1 * vw[1]
            d1 = side / r
            # about y, (ahead, up) moves by (up, -ahead) per radian
            whole = jets(ahead)
            d2 = (fore[0] * out_ + fore[1] * vw[2]) / (fore[0] * whole[1] - fore[1] * whole[0])
            d23 = (upper[0] * out_ + upper[1] * vw[2]) / (upper[0] * fore[1] - upper[1] * fore[0])
            rest = jets([wo[0] - ey[0] * d23, wo[1] - ey[1] * d23, wo[2] - d1])
            n4, n5, n6 = cross(a5, a6), cross(a6, a4), cross(a4, a5)
            columns.append(jets([d1, d2, d23 - d2, dot(rest, n4) / dot(a4, n4),
                                 dot(rest, n5) / dot(a5, n5), dot(rest, n6) / dot(a6, n6)]))
        m = jets(columns)
        out.rates = Jet(*(Iv(np.swapaxes(k.lo, 0, 1), np.swapaxes(k.hi, 0, 1))
                          for k in (m.a, m.b, m.c)))
        out.twist = self.full_twist(p, True)
        return out

    @staticmethod
    def about_y(drawn, now, square):
        """Cosine and sine of the turn about y that takes a drawn (x, z) to where it is."""
        x, z = (iv(c / 1000 / square) for c in drawn)
        return now[0] * x + now[1] * z, now[0] * z - now[1] * x

    def branches(self):
        return signs(3)

    def named(self, mode):
        """Front and plain are signs of this file; "high" is seen along the reach of the arm, which
        points backwards only where the wrist stands behind the shoulder: told by the caller's
        branch, so the second sign is left open."""
        words = mode.split("-")
        return (1 if words[0] == "front" else -1, None, 1 if words[2] == "plain" else -1)


KNOWN = {"tilt-table": Struts, "label-stage": TwoLinks, "belt-hopper": BeltHopper,
         "lid-turner": LidTurner, "case-packer": WristArm}
