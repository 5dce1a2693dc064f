#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Draws each document of this folder in its reference posture as NAME.svg: top view (x right, y up)
and, for machines out of the plane, front view (x right, z up). Needs Python 3 alone.

    python3 sketch.py [FOLDER]
"""
import glob
import json
import os
import sys
from xml.sax.saxutils import escape

WIDTH, MARGIN = 460.0, 44.0
STYLE = ("text{font:11px sans-serif;fill:#333}.title{font-size:14px}.body{fill:#9db4c0;"
         "fill-opacity:.25;stroke:#5c7a89}.rod{stroke:#333;stroke-width:2}.driven{stroke:#b23a2a;"
         "stroke-width:3}.joint{fill:#fff;stroke:#333;stroke-width:1.5}.drive{fill:#b23a2a;"
         "stroke:#333}.rail{stroke:#b23a2a;stroke-width:1.5;stroke-dasharray:5 3}"
         ".axis{stroke:#2a6;stroke-width:1.5}.tool{stroke:#1a53a0;stroke-width:2}")


def hull(points):
    points = sorted(set(points))
    if len(points) < 3:
        return points

    def half(row):
        out = []
        for p in row:
            while len(out) > 1 and ((out[-1][0] - out[-2][0]) * (p[1] - out[-2][1])
                                    <= (out[-1][1] - out[-2][1]) * (p[0] - out[-2][0])):
                out.pop()
            out.append(p)
        return out[:-1]
    return half(points) + half(points[::-1])


def parts(doc):
    """Points of each moving body, and what is drawn of joints and rods."""
    bodies = {b: [] for b in doc["bodies"]}
    for j in doc.get("joints", []):
        for b in j["between"]:
            if "at" in j:
                bodies[b].append(tuple(j["at"]))
    for r in doc.get("rods", []):
        for b, end in zip(r["between"], r["ends"]):
            bodies[b].append(tuple(end))
    for t in doc["tools"]:
        bodies[t["body"]].append(tuple(t["at"]))
    return bodies


def extent(doc, u, v):
    points = [(0, 0, 0)] + [p for row in parts(doc).values() for p in row]
    for j in doc.get("joints", []):
        if j["type"] == "prismatic" and "range" in j:
            points += [tuple(a + t * x for a, x in zip(j["at"], j["axis"])) for t in j["range"]]
    return (min(p[u] for p in points), max(p[u] for p in points),
            min(p[v] for p in points), max(p[v] for p in points))


def view(doc, u, v, left, names):
    """One view as SVG lines and its height; u, v: which coordinates go right and up."""
    low_u, high_u, low_v, high_v = extent(doc, u, v)
    scale = (WIDTH - 2 * MARGIN) / max(high_u - low_u, high_v - low_v)
    height = (high_v - low_v) * scale + 2 * MARGIN

    def to(p):
        return (left + MARGIN + (p[u] - low_u) * scale,
                24 + height - MARGIN - (p[v] - low_v) * scale)

    def line(a, b, kind):
        return '<line class="%s" x1="%.1f" y1="%.1f" x2="%.1f" y2="%.1f"/>' % (
            (kind,) + to(a) + to(b))

    driven = {d["moves"] for d in doc["drives"]}
    out = ['<text x="%.0f" y="40">%s right, %s up; bar 100 %s</text>' % (
        left + 8, "xyz"[u], "xyz"[v], doc["units"]["length"])]
    out.append('<line class="axis" x1="%.1f" y1="46" x2="%.1f" y2="46"/>' % (
        left + 8, left + 8 + 100 * scale))
    for body, points in parts(doc).items():
        if body == doc["frame"]:
            continue
        flat = hull([tuple(round(c, 2) for c in to(p)) for p in points])
        out.append('<polygon class="body" points="%s"><title>%s</title></polygon>' % (
            " ".join("%.1f,%.1f" % p for p in flat), escape(body)))
    for j in doc.get("joints", []):
        if "at" not in j:
            continue
        if j["type"] == "prismatic" and j["axis"][u] == 0 and j["axis"][v] != 0:
            ends = [[a + t * x for a, x in zip(j["at"], j["axis"])] for t in j["range"]]
            out.append(line(ends[0], ends[1], "rail"))
        elif j["type"] == "revolute" and (j["axis"][u] or j["axis"][v]):
            ends = [[a + s * 45 * x for a, x in zip(j["at"], j["axis"])] for s in (-1, 1)]
            out.append(line(ends[0], ends[1], "rail"))
    for r in doc.get("rods", []):
        out.append(line(r["ends"][0], r["ends"][1], "driven" if r["name"] in driven else "rod"))
    for j in doc.get("joints", []):
        if "at" in j:
            x, y = to(j["at"])
            kind = "drive" if j["name"] in driven else "joint"
            out.append('<circle class="%s" cx="%.1f" cy="%.1f" r="4"><title>%s</title></circle>'
                       % (kind, x, y, escape(j["name"])))
            if names:
                out.append('<text x="%.1f" y="%.1f">%s</text>' % (x + 6, y - 5,
                                                                  escape(j["name"])))
    for t in doc["tools"]:
        x, y = to(t["at"])
        out.append('<path class="tool" d="M%.1f %.1fh12m-6 -6v12"><title>tool %s</title></path>'
                   % (x - 6, y, escape(t["name"])))
    x, y = to((0, 0, 0))
    out.append('<path class="axis" fill="none" d="M%.1f %.1fv-18m0 18h18"><title>origin</title>'
               '</path>' % (x, y))
    return out, height


def draw(doc):
    flat = doc["motion"] == "2T1R"
    views = [(0, 1)] if flat else [(0, 1), (0, 2)]
    lines, tall = [], 0.0
    for i, (u, v) in enumerate(views):
        part, height = view(doc, u, v, i * WIDTH, flat)
        lines += part
        tall = max(tall, height)
    size = (WIDTH * len(views) + (70 if flat else 0), tall + 24)
    return "\n".join(['<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %.0f %.0f" width="%.0f"'
                      ' height="%.0f">' % (size + size), "<style>%s</style>" % STYLE,
                      '<text class="title" x="8" y="20">%s: %s, reference posture</text>' % (
                          escape(doc["name"]), escape(doc["title"]))] + lines + ["</svg>", ""])


def main():
    folder = sys.argv[1] if len(sys.argv) > 1 else os.path.dirname(os.path.abspath(__file__))
    for path in sorted(glob.glob(os.path.join(folder, "*.json"))):
        with open(path, encoding="utf-8") as file:
            doc = json.load(file)
        with open(path[:-5] + ".svg", "w", encoding="utf-8") as file:
            file.write(draw(doc))
        print(path[:-5] + ".svg")


if __name__ == "__main__":
    main()
