# SPDX-License-Identifier: GPL-3.0-or-later
"""Verifies certificates of proved moves again, from the mechanism's document alone.

  check_certificate.py --documents FOLDER --printer PROGRAM [--moves N] [--at-least N]
  check_certificate.py --documents FOLDER FILE

A certificate is one JSON line: mechanism, mode, kind of move, the two poses (tool position in
metres, orientation as w x y z, output joints in radians), and pieces: intervals low..high of the
move with what is claimed on each. Each piece is cut until interval arithmetic (intervals.py) over
closed forms of the geometry (mechanisms.py) shows for every point of it that
  - every limb can be solved, in the branch that the first piece's readings name;
  - each drive's coordinate lies in drive_low..drive_high, and that range within its limits;
    undriven joints and swivels stay within theirs;
  - the drive rates by output rates, lengths over the characteristic length, have full column rank,
    their least singular value at least `hold`; plates that must not turn cannot;
  - speed, accuracy and load margins reach the piece's figures, and these the certificate's.
Pieces must join from 0 to 1. There is no slack: what cannot be shown at the deepest cut is "not
verified", and that is a failure. `hold` counts, where a mechanism has spare drives or fewer than
six outputs, in the service's own coordinates; what is verified here is the same number for the
drive rates by output rates. Where every joint is driven, drive rates are joint rates and hold is
one: a claim above that is refused. Load is verified where there are as many drives as outputs.

With --printer, certificates are made on the spot, all are verified, and copies with one number
falsified must be refused, each for its reason.
"""
import argparse
import json
import os
import subprocess
import sys

import numpy as np

from intervals import Iv, Jet, angle_of, dot, iv, jets, norm2, sin_cos, stack
from falsified import falsified
from mechanisms import KNOWN, constant

DEEPEST = 26   # cuts of a piece
MOST_CELLS = 60000


# ---- the move ----------------------------------------------------------------------------------
def quaternion_product(a, b):
    return [a[0] * b[0] - a[1] * b[1] - a[2] * b[2] - a[3] * b[3],
            a[0] * b[1] + a[1] * b[0] + a[2] * b[3] - a[3] * b[2],
            a[0] * b[2] + a[2] * b[0] + a[3] * b[1] - a[1] * b[3],
            a[0] * b[3] + a[3] * b[0] + a[1] * b[2] - a[2] * b[1]]


def conjugate(q):
    return [q[0], -q[1], -q[2], -q[3]]


def unit(q):
    size = q[0].square()
    for c in q[1:]:
        size = size + c.square()
    return [c / size.sqrt() for c in q]


def matrix(q):
    w, x, y, z = q
    return [[1.0 - (y * y + z * z) * 2.0, (x * y - w * z) * 2.0, (x * z + w * y) * 2.0],
            [(x * y + w * z) * 2.0, 1.0 - (x * x + z * z) * 2.0, (y * z - w * x) * 2.0],
            [(x * z - w * y) * 2.0, (y * z + w * x) * 2.0, 1.0 - (x * x + y * y) * 2.0]]


def plain_cross(u, v):
    return [u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2], u[0] * v[1] - u[1] * v[0]]


def plain_dot(u, v):
    return u[0] * v[0] + u[1] * v[1] + u[2] * v[2]


class Move:
    """One certificate's move as enclosed numbers."""

    def __init__(self, mechanism, certificate):
        start, end = certificate["from"], certificate["to"]
        self.circle = certificate["kind"] == "circle"
        p0, p1 = ([Iv(c) for c in pose["position"]] for pose in (start, end))
        zero = [Iv(0.0)] * 3
        self.rot0 = [[Iv(float(i == j)) for j in range(3)] for i in range(3)]
        self.axis, self.turn = [Iv(0.0), Iv(0.0), Iv(1.0)], Iv(0.0)
        if "quaternion" in start:
            drawn = unit([iv(c) for c in mechanism.tool_quat])
            q0, q1 = (quaternion_product(unit([Iv(c) for c in pose["quaternion"]]),
                                         conjugate(drawn)) for pose in (start, end))
            self.rot0 = matrix(q0)
            rest = quaternion_product(conjugate(q0), q1)
            if rest[0].lo < 0:
                rest = [-c for c in rest]
            size = plain_dot(rest[1:], rest[1:]).sqrt()
            self.axis = [c / size for c in rest[1:]]
            self.turn = angle_of(size, rest[0]) * 2.0
        self.from_, self.along = p0, [b - a for a, b in zip(p0, p1)]
        self.centre, self.out, self.side, self.sweep = zero, zero, zero, Iv(0.0)
        if self.circle:
            self.set_circle(p0, [Iv(c) for c in certificate["via"]["position"]], p1)
        self.joints = [(Iv(a), Iv(b) - a) for a, b in zip(start.get("joints", []),
                                                           end.get("joints", []))]

    def set_circle(self, p0, via, p1):
        """Centre by the two chords' middle planes; the way from start over via to end."""
        a = [x - y for x, y in zip(via, p0)]
        b = [x - y for x, y in zip(p1, p0)]
        n = plain_cross(a, b)
        aa, bb, nn = plain_dot(a, a), plain_dot(b, b), plain_dot(n, n)
        u, v = plain_cross(b, n), plain_cross(n, a)
        to = [(x * aa + y * bb) / (nn * 2.0) for x, y in zip(u, v)]
        self.centre = [x + y for x, y in zip(p0, to)]
        self.out = [-x for x in to]
        size = nn.sqrt()
        self.side = plain_cross([x / size for x in n], self.out)
        last = [x - y for x, y in zip(p1, self.centre)]
        y, x = plain_dot(last, self.side), plain_dot(last, self.out)
        self.sweep = angle_of(y, x)
        if self.sweep.hi < 0:
            self.sweep = self.sweep + PI_TWICE

    def numbers(self):
        """Everything in one row, in a fixed order."""
        flat = [c for row in self.rot0 for c in row] + self.axis + [self.turn]
        flat += self.from_ + self.along + self.centre + self.out + self.side + [self.sweep]
        return flat + [c for pair in self.joints for c in pair]


PI_TWICE = angle_of(Iv(0.0), Iv(-1.0)) * 2.0


def motion(moves, circle, number, t):
    """Jets of tool point, turn and output joints at t (intervals); number: the move of each."""
    at = moves[:, number]
    zero, one = Iv(np.zeros(t.shape)), Iv(np.ones(t.shape))
    time = Jet(t, one, zero)

    def swing(rate):
        s, c = sin_cos(rate * t)
        half = rate.square() * 0.5
        return Jet(s, rate * c, -(half * s)), Jet(c, -(rate * s), -(half * c))

    def linear(first, rate):
        return time * rate + first

    rot0 = [[constant_of(at[3 * i + j], zero) for j in range(3)] for i in range(3)]
    axis, turn = [at[9 + i] for i in range(3)], at[12]
    skew = [[None, -axis[2], axis[1]], [axis[2], None, -axis[0]], [-axis[1], axis[0], None]]
    s, c = swing(turn)
    v = 1.0 - c
    small = [[(c if i == j else s * skew[i][j]) + v * (axis[i] * axis[j]) for j in range(3)]
             for i in range(3)]
    rot = jets([jets([dot(jets(rot0[i]), jets([small[k][j] for k in range(3)]))
                      for j in range(3)]) for i in range(3)])
    line = jets([linear(at[13 + i], at[16 + i]) for i in range(3)])
    s, c = swing(at[28])
    arc = jets([c * at[22 + i] + s * at[25 + i] + at[19 + i] for i in range(3)])
    which = circle[number]

    def choose(a, b):
        return Iv(np.where(which, a.lo, b.lo), np.where(which, a.hi, b.hi))
    p = Jet(choose(arc.a, line.a), choose(arc.b, line.b), choose(arc.c, line.c))
    count = (at.shape[0] - 29) // 2
    return p, rot, [linear(at[29 + 2 * i], at[30 + 2 * i]) for i in range(count)]


def constant_of(v, zero):
    return Jet(v, zero, zero)


# ---- what holds on a cell ----------------------------------------------------------------------
class Cells:
    """Points of jets: the middles of n cells, then the n cells themselves."""

    def __init__(self, low, high):
        self.n = len(low)
        self.mid = 0.5 * (low + high)
        self.half = np.maximum(np.nextafter(high - self.mid, np.inf),
                               np.nextafter(self.mid - low, np.inf))
        self.t = Iv(np.concatenate([self.mid, low]), np.concatenate([self.mid, high]))
        self.square = np.nextafter(self.half * self.half, np.inf)

    def some(self, where):
        part = Cells.__new__(Cells)
        part.n, part.mid, part.half = len(where), self.mid[where], self.half[where]
        part.square = self.square[where]
        return part

    def parts(self, jet):
        """Value and slope in the middle, curvature and value over the cell."""
        n = self.n
        return jet.a[..., :n], jet.b[..., :n], jet.c[..., n:], jet.a[..., n:]

    def least(self, jet):
        """A lower bound over the cell."""
        a, b, c, whole = self.parts(jet)
        series = a + b * Iv(-self.half, self.half) + c * Iv(np.zeros(self.n), self.square)
        return np.fmax(series.lo, whole.lo)

    def above(self, jet, strictly=True):
        least = self.least(jet)
        good = least > 0 if strictly else least >= 0
        full = np.broadcast_to(good, good.shape[:-1] + (self.n,))
        return np.all(full.reshape(-1, self.n), axis=0)

    def below_somewhere(self, jet):
        """Surely negative in the middle of the cell."""
        return np.any((jet.a[..., :self.n].hi < 0).reshape(-1, self.n), axis=0)


def product(a, b):
    """Matrices of intervals (rows, inner, points) times (inner, columns, points)."""
    p = a[:, :, None] * b[None, :, :]
    total = p[:, 0]
    for k in range(1, p.shape[1]):
        total = total + p[:, k]
    return total


def surely_positive_definite(cells, gram):
    """gram: jets (m, m, points). Near the middle it is linear, which makes the two ends decide;
    what is left over is added as intervals. By congruence with a plain matrix, and Gershgorin's
    discs."""
    a, b, c, _ = cells.parts(gram)
    m = a.shape[0]
    mid = np.moveaxis(0.5 * (a.lo + a.hi), -1, 0)
    with np.errstate(all="ignore"):
        value, vector = np.linalg.eigh(np.where(np.isfinite(mid), mid, 0.0))
        scale = 1.0 / np.sqrt(np.maximum(value, 1e-30))
    w = Iv(np.moveaxis(scale[:, :, None] * np.swapaxes(vector, 1, 2), 0, -1))
    wt = Iv(np.swapaxes(w.lo, 0, 1))
    rest = c * Iv(np.zeros(cells.n), cells.square)
    good = np.all(value > 0, axis=1)
    for end in (-cells.half, cells.half):
        e = product(product(w, a + b * Iv(end) + rest), wt)
        for i in range(m):
            others = np.zeros(cells.n)
            for j in range(m):
                if j != i:
                    others = np.nextafter(others + e[i, j].mag(), np.inf)
            good &= e[i, i].lo > others
    return good


def transpose(jet):
    return Jet(*(Iv(np.swapaxes(k.lo, 0, 1), np.swapaxes(k.hi, 0, 1))
                 for k in (jet.a, jet.b, jet.c)))


def gram_of(rates):
    p = rates[:, :, None] * rates[:, None, :]
    total = p[0]
    for d in range(1, p.shape[0]):
        total = total + p[d]
    return total


def solve(cells, m, rhs):
    """m^-1 rhs as jets: both times a plain approximate inverse first, then elimination."""
    size = m.shape[0]
    mid = np.moveaxis(0.5 * (m.a.lo + m.a.hi)[..., :cells.n], -1, 0)
    near = np.full(mid.shape, np.nan)
    for k in range(cells.n):
        if np.all(np.isfinite(mid[k])):
            try:
                near[k] = np.linalg.inv(mid[k])
            except np.linalg.LinAlgError:
                pass
    near = np.moveaxis(near, 0, -1)
    near = Iv(np.concatenate([near, near], axis=-1))

    def times(j):
        return Jet(product(near, j.a), product(near, j.b), product(near, j.c))
    both = [times(m), times(rhs)]
    rows = [jets([*(both[0][i, j] for j in range(size)),
                  *(both[1][i, j] for j in range(rhs.shape[1]))]) for i in range(size)]
    for k in range(size):
        rows[k] = rows[k] * rows[k][k].inverse()
        for i in range(size):
            if i != k:
                rows[i] = rows[i] - rows[k] * rows[i][k]
    return jets([row[size:] for row in rows])


# ---- one mechanism's certificates --------------------------------------------------------------
REASONS = ("a limb, joint or swivel", "a plate may turn", "a drive's range", "hold", "speed",
           "accuracy", "load")


class Checker:
    def __init__(self, mechanism):
        self.m = mechanism
        needs = mechanism.doc["needs"]
        self.need = {}
        for name, unit_of in (("position_tolerance", mechanism.mm),
                              ("angle_tolerance", mechanism.deg),
                              ("speed", mechanism.mm), ("turn_rate", mechanism.deg),
                              ("force", iv), ("moment", iv)):
            if name in needs:
                self.need[name] = unit_of(needs[name])
        self.joint_need = needs.get("joints", {})
        self.error, self.speed, self.effort = [], [], []
        for d in mechanism.drives:
            unit_of = mechanism.unit_of(d)
            self.error.append((unit_of(d["resolution"]) + unit_of(d["backlash"])) * 0.5)
            self.speed.append(unit_of(d["speed"]))
            self.effort.append(iv(d.get("thrust", d.get("torque"))))
        self.limit_low, self.limit_high = mechanism.limits()

    # each check: jets that must not be negative, from the claim
    def ranges(self, out, low, high):
        """low, high: (drives, points)."""
        for d in range(self.m.n_drive):
            a, b = Iv(low[d]), Iv(high[d])
            if out.value[d] is not None:
                yield out.value[d] - a
                yield -(out.value[d] - b)
                continue
            c, s = out.direction[d]
            (sa, ca), (sb, cb) = sin_cos(a), sin_cos(b)
            yield s * ca - c * sa
            yield c * sb - s * cb
            sm, cm = sin_cos(Iv(0.5 * (low[d] + high[d])))
            yield c * cm + s * sm

    def speeds(self, rates, claim):
        """speed^2 - (need claim)^2 |columns|^2, a drive each."""
        kinds = self.m.outputs
        sets = [("speed", [i for i, k in enumerate(kinds) if k in ("x", "y", "z")]),
                ("turn_rate", [i for i, k in enumerate(kinds) if k in ("rx", "ry", "rz")])]
        wanted = [(self.need[n], columns) for n, columns in sets if columns and n in self.need]
        for name, need in self.joint_need.items():
            if "speed" in need:
                wanted.append((self.m.deg(need["speed"]), [kinds.index(name)]))
        for need, columns in wanted:
            k = (need * Iv(claim)).square()
            for d in range(self.m.n_drive):
                yield self.speed[d].square() - norm2(jets([rates[d, c] for c in columns])) * k

    def by_drives(self, cells, rates):
        """Outputs by drives, (outputs, drives): the servos share by least squares, weighed by their
        errors; and the same times each drive's error."""
        n, m = self.m.n_drive, self.m.n_output
        weight = stack([1.0 / e for e in self.error])
        j = rates * weight[:, None, None]
        # Columns of like size; powers of two, exact.
        mid = np.nanmedian(np.abs(j.a.lo), axis=(0, 2))
        size = np.exp2(-np.round(np.log2(np.maximum(mid, 1e-12))))
        j = j * Iv(size[None, :, None])
        if n == m:
            eye = constant(Iv(np.eye(n)), j)
            x = solve(cells, j, eye)
        else:
            x = solve(cells, gram_of(j), transpose(j))
        return x * Iv(size[:, None, None])

    def accuracies(self, x, twist, claim):
        """(tolerance / claim)^2 - |error|^2 for every choice of the drives' signs."""
        n = self.m.n_drive
        signs = np.array([[1.0 if (k >> d) & 1 == 0 else -1.0 for d in range(n)]
                          for k in range(2 ** (n - 1))])
        sets = [(self.need[name], part) for name, part in
                (("position_tolerance", twist[0]), ("angle_tolerance", twist[1]))
                if name in self.need]
        for name, need in self.joint_need.items():
            if "tolerance" in need:
                row = np.zeros((1, self.m.n_output))
                row[0, self.m.outputs.index(name)] = 1.0
                sets.append((self.m.deg(need["tolerance"]), constant(Iv(row), x)))
        for tolerance, part in sets:
            e = self.times(part, x)
            total = e[None, :, 0] * Iv(signs[:, 0, None, None])
            for d in range(1, n):
                total = total + e[None, :, d] * Iv(signs[:, d, None, None])
            square = norm2(Jet(*(Iv(np.swapaxes(k.lo, 0, 1), np.swapaxes(k.hi, 0, 1))
                                 for k in (total.a, total.b, total.c))))
            yield (tolerance / Iv(claim)).square() - square

    @staticmethod
    def times(part, x):
        """(k, outputs) jets times (outputs, drives) jets."""
        p = part[:, :, None] * x[None]
        total = p[:, 0]
        for o in range(1, p.shape[1]):
            total = total + p[:, o]
        return total

    def loads(self, x, twist, claim):
        """thrust error / claim - power of the load, force and moment in their worst directions,
        while one drive moves by its error."""
        for d in range(self.m.n_drive):
            total = None
            for name, part in (("force", twist[0]), ("moment", twist[1])):
                if name not in self.need:
                    continue
                way = self.times(part, x[:, d:d + 1])[:, 0]
                square = norm2(way) * self.need[name].square()
                total = root_of(square) if total is None else total + root_of(square)
            yield self.effort[d] * self.error[d] / Iv(claim) - total

    def geometry(self, certs, number, t, branch):
        """At points t, of the moves `number`, in the branches (signs, points)."""
        p, rot, joints = motion(certs["numbers"], certs["circle"], number, t)
        return self.m.work(p, rot, joints, branch)

    def examine(self, certs, pieces, cells, piece, todo):
        """What still has to be shown of each cell: todo (reasons, cells), cleared where it is.
        Returns where a claim is surely false, likewise."""
        m, n = self.m, cells.n
        both = np.concatenate([piece, piece])
        out = self.geometry(certs, pieces["move"][both], cells.t, pieces["branch"][:, both])
        claim = {k: v[..., both] for k, v in pieces.items()}
        wrong = np.zeros(todo.shape, bool)

        def take(reason, jets_, part, where, strictly=False):
            """part: the cells that the jets are of, `where` their places."""
            good, false = np.ones(part.n, bool), np.zeros(part.n, bool)
            for jet in jets_:
                good &= part.above(jet, strictly)
                false |= part.below_somewhere(jet)
            todo[reason, where] &= ~good
            wrong[reason, where] |= false & asked[reason, where]

        def of(reasons):
            where = np.flatnonzero(np.any(todo[reasons], axis=0))
            two = np.concatenate([where, where + n])
            return where, two, cells.some(where)
        asked = todo.copy()
        if np.any(todo[0]):
            take(0, out.positive, cells, np.arange(n), True)
        if np.any(todo[2]):
            take(2, self.ranges(out, claim["drive_low"], claim["drive_high"]), cells, np.arange(n))
        for reason in (1, 3):
            where, two, part = of([reason])
            if len(where) > 0 and reason == 1:
                for matrix_ in out.regular:
                    todo[1, where] &= ~surely_positive_definite(part, gram_of(matrix_[..., two]))
            elif len(where) > 0 and m.serial:
                wrong[3, where] = pieces["hold"][piece[where]] > 1.0
                todo[3, where] = wrong[3, where]
            elif len(where) > 0:
                todo[3, where] &= ~self.holds(part, out.rates[..., two], claim["hold"][two])
        if not out.regular:
            todo[1] = False
        where, two, part = of([4])
        if len(where) > 0:
            take(4, self.speeds(out.rates[..., two], claim["speed"][two]), part, where)
        if m.n_drive != m.n_output:
            todo[6] = False
        where, two, part = of([5, 6])
        if len(where) > 0:
            x = self.by_drives(part, out.rates[..., two])
            twist = [t[..., two] for t in out.twist]
            if np.any(todo[5]):
                take(5, self.accuracies(x, twist, claim["accuracy"][two]), part, where)
            if np.any(todo[6]):
                take(6, self.loads(x, twist, claim["load"][two]), part, where)
        return wrong

    def holds(self, cells, rates, claim):
        row = stack([Iv(1.0) if self.m.turns(d) else 1.0 / self.m.length for d in self.m.drives])
        column = stack([self.m.length if o in ("x", "y", "z") else Iv(1.0)
                        for o in self.m.outputs])
        gram = gram_of(rates * row[:, None, None] * column[None, :, None])
        gram = gram - Iv(np.eye(self.m.n_output)[:, :, None]) * Iv(claim).square()
        return surely_positive_definite(cells, gram)

    def start_branches(self, certs, certificates):
        """(branches, certificates): which have the drives in the first piece's ranges at the
        start."""
        all_ = self.m.branches()
        n, k = len(all_), len(certificates)
        number = np.tile(np.arange(k), n)
        first = [c["pieces"][0] for c in certificates]
        low, high = (np.tile(np.array([p[name] for p in first]).T, n)
                     for name in ("drive_low", "drive_high"))
        with np.errstate(all="ignore"):
            out = self.geometry(certs, number, Iv(np.zeros(n * k)), np.repeat(all_, k, axis=0).T)
            inside = np.ones(n * k, bool)
            for jet in self.ranges(out, low, high):
                inside &= jet.a.hi >= 0
        return inside.reshape(n, k)


def root_of(square):
    """Square root of jets that are no smaller than zero; where they may vanish, by value alone."""
    with np.errstate(all="ignore"):
        root = square.sqrt()
        n = square.a.lo.shape[-1] // 2
        bad = ~np.isfinite(root.c.lo) | ~np.isfinite(root.c.hi)
        bad = bad | np.concatenate([bad[..., n:], bad[..., :n]], axis=-1)
        whole = np.concatenate([square.a.hi[..., n:]] * 2, axis=-1)
        high = np.nextafter(np.sqrt(np.maximum(whole, 0.0)), np.inf)
    return Jet(Iv(np.where(bad, 0.0, root.a.lo), np.where(bad, high, root.a.hi)),
               Iv(np.where(bad, 0.0, root.b.lo), np.where(bad, 0.0, root.b.hi)),
               Iv(np.where(bad, 0.0, root.c.lo), np.where(bad, 0.0, root.c.hi)))


# ---- certificates ------------------------------------------------------------------------------
def well_formed(checker, certificate):
    """What needs no geometry: None, or what is wrong."""
    pieces = certificate["pieces"]
    at = 0.0
    for i, p in enumerate(pieces):
        if p["low"] != at or not p["high"] > p["low"]:
            return "piece %d does not begin where the one before it ends" % i
        at = p["high"]
        low, high = np.array(p["drive_low"]), np.array(p["drive_high"])
        if not (np.all(low <= high) and np.all(low >= checker.limit_low)
                and np.all(high <= checker.limit_high)):
            return "piece %d: a drive leaves its limits" % i
        if i > 0:
            before = pieces[i - 1]
            if not (np.all(low <= before["drive_high"]) and np.all(high >= before["drive_low"])):
                return "piece %d: a drive jumps" % i
        turning = [checker.m.turns(d) for d in checker.m.drives]
        if np.any((high - low)[turning] > 3.0):
            return "piece %d: a drive turns by half a turn" % i
        if not p["hold"] > 0:
            return "piece %d: no hold is claimed" % i
        for name, least in certificate["at_least"].items():
            if not p["margin"][name] >= least:
                return "piece %d: less %s than asked" % (i, name)
    return None if at == 1.0 else "the pieces end at %g" % at


def verify(checker, certificates, deepest=DEEPEST, only=None):
    """One text for each certificate: None where it is verified, else why not. And how many cells.
    only: the one reason that is looked at, for each certificate (falsified ones)."""
    verdict = [well_formed(checker, c) for c in certificates]
    moves = [Move(checker.m, c) for c in certificates]
    certs = {"numbers": stack([stack(m.numbers()) for m in moves]),
             "circle": np.array([m.circle for m in moves])}
    certs["numbers"] = Iv(certs["numbers"].lo.T, certs["numbers"].hi.T)
    fits = checker.start_branches(certs, certificates)
    branch = [None] * len(certificates)
    for k, c in enumerate(certificates):
        found = checker.m.branches()[fits[:, k]]
        if verdict[k] is not None:
            continue
        if len(found) != 1:
            verdict[k] = "the first readings fit %d branches" % len(found)
            continue
        branch[k] = found[0]
        named = checker.m.named(c["mode"]) if c["mode"] else ()
        if any(a is not None and a != b for a, b in zip(named, found[0])):
            verdict[k] = "the mode is %s, its readings say otherwise" % c["mode"]
    members = [k for k, v in enumerate(verdict) if v is None]
    return verdict, verify_pieces(checker, certificates, members, branch, certs, verdict, deepest,
                                  only)


def table(certificates, members, branch):
    rows = [(k, p) for k in members for p in certificates[k]["pieces"]]

    def column(get):
        return np.array([get(p) for _, p in rows])
    return {"move": np.array([k for k, _ in rows]),
            "branch": np.array([branch[k] for k, _ in rows]).T,
            "low": column(lambda p: p["low"]), "high": column(lambda p: p["high"]),
            "hold": column(lambda p: p["hold"]),
            "drive_low": column(lambda p: p["drive_low"]).T,
            "drive_high": column(lambda p: p["drive_high"]).T,
            "speed": column(lambda p: p["margin"]["speed"]),
            "accuracy": column(lambda p: p["margin"]["accuracy"]),
            "load": column(lambda p: max(p["margin"]["load"], 1e-300))}


def verify_pieces(checker, certificates, members, branch, certs, verdict, deepest, only):
    if not members:
        return 0
    pieces = table(certificates, members, branch)
    piece = np.arange(len(pieces["move"]))
    low, high = pieces["low"].copy(), pieces["high"].copy()
    todo = np.ones((len(REASONS), len(piece)), bool)
    if only is not None:
        todo = np.array([[only[k] == r for k in pieces["move"]] for r in range(len(REASONS))])
    used = 0
    for depth in range(deepest + 1):
        used += len(piece)
        cells = Cells(low, high)
        with np.errstate(all="ignore"):
            wrong = checker.examine(certs, pieces, cells, piece, todo)
        if depth == deepest or len(piece) > MOST_CELLS:
            fails = wrong | todo
        else:
            fails = wrong
        for i in np.flatnonzero(np.any(fails, axis=0)):
            k = pieces["move"][piece[i]]
            if verdict[k] is None:
                verdict[k] = "%s at %.9g: %s" % (
                    "false" if np.any(wrong[:, i]) else "not verified", cells.mid[i],
                    REASONS[int(np.argmax(fails[:, i]))])
        lost = np.array([verdict[k] is not None for k in pieces["move"][piece]], bool)
        keep = np.any(todo, axis=0) & ~lost
        if not np.any(keep):
            break
        mid = cells.mid[keep]
        piece = np.concatenate([piece[keep], piece[keep]])
        low, high = np.concatenate([low[keep], mid]), np.concatenate([mid, high[keep]])
        todo = np.concatenate([todo[:, keep], todo[:, keep]], axis=1)
    return used


# ---- running ------------------------------------------------------------------------------------
def main():
    parser = argparse.ArgumentParser()
    parser.add_argument("--documents", required=True)
    parser.add_argument("--printer")
    parser.add_argument("--moves", type=int, default=16)
    parser.add_argument("--at-least", type=int, default=1)
    parser.add_argument("file", nargs="?")
    options = parser.parse_args()
    if options.printer:
        text = subprocess.run([options.printer, str(options.moves)], check=True,
                              stdout=subprocess.PIPE, text=True).stdout
    else:
        with open(options.file, encoding="utf-8") as file:
            text = file.read()
    by_name = {}
    for line in text.splitlines():
        c = json.loads(line)
        by_name.setdefault(c["mechanism"], []).append(c)
    verified, failures = 0, 0
    for name, certificates in by_name.items():
        checker = Checker(KNOWN[name](os.path.join(options.documents, name + ".json")))
        verdict, cells = verify(checker, certificates)
        count = sum(len(c["pieces"]) for c, v in zip(certificates, verdict) if v is None)
        verified += count
        print("%s: %d of %d moves, %d pieces verified with %d cells"
              % (name, sum(v is None for v in verdict), len(certificates), count, cells),
              flush=True)
        for k, v in enumerate(verdict):
            if v is not None:
                failures += 1
                print("FAILED  %s, move %d: %s" % (name, k, v))
        good = next((c for c, v in zip(certificates, verdict) if v is None), None)
        if good is None or not options.printer:
            continue
        cases = list(falsified(checker, good))
        answer, _ = verify(checker, [c for _, _, c in cases], deepest=8,
                           only=[r for _, r, _ in cases])
        for (what, _, _), v in zip(cases, answer):
            if v is None:
                failures += 1
                print("FAILED  %s: a certificate with %s is taken" % (name, what))
            else:
                print("  refused, %s: %s" % (what, v))
    print("%d pieces verified" % verified)
    if verified < options.at_least:
        print("FAILED  at least %d were expected" % options.at_least)
        failures += 1
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
