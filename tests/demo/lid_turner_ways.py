# SPDX-License-Identifier: GPL-3.0-or-later
"""Ways of the lid-turner between its working modes, read from the document alone.

The plates never turn, so a posture is the place (x, y) of the tool, the two plate heights and one
sign a carriage (+ above its plate, rods hanging; - below, rods standing). Rod directions, and with
them the hold, depend on (x, y) and the signs only. Carriage i changes its sign where (x, y) lies on
its level circle. So the ways are paths in 64 copies of one plane region, joined along arcs.
"""
import heapq
import itertools
import math

import numpy as np


def stages(doc):
    """Per drive: centre of the level circle (column minus plate), rod length, plate's name."""
    rods = {}
    for rod in doc["rods"]:
        rods.setdefault(rod["between"][0], rod)
    out = []
    for drive in doc["drives"]:
        joint = next(j for j in doc["joints"] if j["name"] == drive["moves"])
        rod = rods[joint["between"][1]]
        d = np.array(rod["ends"][0], float) - np.array(rod["ends"][1], float)
        out.append((d[:2], np.linalg.norm(d), rod["between"][1]))
    return out


def allowed(doc, points, slack=1e-9):
    """Which points lie in all level discs and within the swivels' cones."""
    good = np.ones(len(points), bool)
    for (c, length, _), rod in zip(stages(doc), doc["rods"][::2]):
        level = np.linalg.norm(c - points, axis=1)
        good &= level <= length + slack
        good &= level >= length * math.cos(math.radians(rod["swivels"][0]["cone"]))
    return good


def arc_points(doc, i, count):
    """Points of level circle i that bound the common region, in order along the circle."""
    c, length, _ = stages(doc)[i]
    a = np.linspace(0, 2 * math.pi, count, endpoint=False)
    p = c + length * np.stack([np.cos(a), np.sin(a)], axis=1)
    return p[allowed(doc, p)]


def drive_rates(doc, points, signs):
    """A K for every point: K orthonormal in the measure of Mechanism.hold (lengths count alike)."""
    n = len(points)
    g = np.zeros((n, 6, 10))  # unknowns: x, y, upper height, lower height, six carriages
    for i, (c, length, plate) in enumerate(stages(doc)):
        d = (c - points) / length
        up = np.sqrt(np.maximum(0.0, 1 - np.sum(d * d, axis=1))) * signs[i]
        up[np.abs(up) < 1e-7] = 0.0  # on the circle: rods level
        g[:, i, 0:2] = d
        g[:, i, 2 if plate.startswith("upper") else 3] = up
        g[:, i, 4 + i] = -up
    k = np.swapaxes(np.linalg.svd(g)[2][:, 6:, :], 1, 2)
    measure = np.vstack([np.eye(10)[[0, 1, 3, 4, 5, 6, 7, 8, 9]],
                         math.sqrt(3) * (np.eye(10)[2] - np.eye(10)[3])])
    r = np.linalg.qr(measure @ k)[1]
    return (k @ np.linalg.inv(r))[:, 4:, :]


def hold(doc, points, signs, drives=range(6)):
    s = np.linalg.svd(drive_rates(doc, points, signs)[:, list(drives), :], compute_uv=False)
    return s[:, -1]


def widest_way(doc, start, goal, drives, step=6.0, arc=720):
    """Largest value that the hold need not fall below between two mode texts at the middle."""
    reach = max(length for _, length, _ in stages(doc))
    line = np.arange(-math.floor(reach / step), math.floor(reach / step) + 1) * step
    grid = np.array(list(itertools.product(line, line)))
    grid = grid[allowed(doc, grid)]
    arcs = [arc_points(doc, i, arc) for i in range(6)]
    points = np.vstack([grid] + arcs)
    owner = np.concatenate([np.full(len(grid), -1)]
                           + [np.full(len(a), i) for i, a in enumerate(arcs)])
    near = [np.flatnonzero(np.linalg.norm(points - p, axis=1) < 1.5 * step) for p in points]
    middle = int(np.argmin(np.linalg.norm(grid, axis=1)))
    table = {}

    def holds(signs):
        if signs not in table:
            table[signs] = hold(doc, points, signs, drives)
        return table[signs]

    best = {}
    queue = [(-holds(start)[middle], start, middle)]
    while queue:
        value, signs, p = heapq.heappop(queue)
        if (signs, p) in best:
            continue
        best[signs, p] = -value
        if signs == goal and p == middle:
            return -value
        for q in near[p]:
            if (signs, q) not in best:
                heapq.heappush(queue, (max(value, -holds(signs)[q]), signs, int(q)))
        if owner[p] >= 0:
            other = list(signs)
            other[owner[p]] = -other[owner[p]]
            other = tuple(other)
            if (other, p) not in best:
                heapq.heappush(queue, (max(value, -holds(other)[p]), other, p))
    return 0.0
