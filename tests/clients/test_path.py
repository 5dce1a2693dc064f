# SPDX-License-Identifier: GPL-3.0-or-later
"""Paths and free travel as typed, as sent and as shown, against a service that says what it is told.
Questions and answers have the shapes of the service's contract; the table is RFC 4180."""

import json
import unittest
from urllib.parse import parse_qsl, urlsplit

from support import Case, Reply, answer, problem, solution

PATH = "/v1/mechanisms/label-stage/path"
TABLE = 'line,move,x,y\r\nN10,line,15,-10\r\n"a ""b"", c",line,0,0\r\n'
START = {"drives": {"m1": 90, "m2": -1.5}}


def move(no, code=1, outcome="ok", **more):
    return {"no": no, "move": "line", "examined": True, "code": code, "outcome": outcome,
            "at": 1, "limits_broken": [], "least": {}, "length": 10, "turn": 0, "end": None,
            "boxes": 3, **more}


def path_answer(*moves, code=1, outcome="ok", **more):
    asked = {"from": START, "through": [{"line": "N10", "move": "line", "pose": {"x": 15}}]}
    return answer(code, outcome, asked=asked, start=solution("+-", {"m1": 90, "m2": -1.5}),
                  moves=list(moves), boxes=3, **more)


class Sent(Case):

    def run_path(self, name, content, *words, status=0):
        self.service.answers = {}
        reply = Reply(200, path_answer(move(1)))
        file = self.write(name, content)

        def answers(request):
            self.assertEqual(urlsplit(request["path"]).path, PATH)
            return reply
        self.service.answers = Anything(answers)
        got = self.leeway("path", "label-stage", file, *words)
        self.assertEqual((got.status, got.err), (status, ""))
        return self.service.asked[-1]

    def query(self, *words):
        request = self.run_path("job.csv", TABLE, *words)
        self.assertEqual(request["headers"]["content-type"], "text/csv")
        self.assertEqual(request["body"], TABLE.encode())
        pairs = parse_qsl(urlsplit(request["path"]).query, keep_blank_values=True,
                          strict_parsing=True)
        self.assertEqual(len(dict(pairs)), len(pairs))
        return dict(pairs)

    def test_a_table_goes_out_as_it_stands(self):
        readings = {"from.drive.m1": "90", "from.drive.m2": "-1.5"}
        self.assertEqual(self.query("from.m1=90", "from.m2=-1.5"), readings)
        self.assertEqual(self.query("--from", "m1=90 m2=-1.5", "--margin-min", "1.25",
                                    "--units", "m,rad", "--tool", "camera", "--revision", "2",
                                    "--budget", "64", "--timeout-ms", "500", "--certificate",
                                    "--ref", "a &=%~", "--expect", "1234abcd",
                                    "--orientation", "zyx"),
                         {**readings, "margin_min": "1.25", "units.length": "m", "units.angle": "rad", "tool": "camera",
                          "revision": "2", "budget": "64", "timeout_ms": "500",
                          "certificate": "true", "ref": "a &=%~", "expect": "1234abcd",
                          "orientation": "zyx"})
        self.assertEqual(self.query("--from", "x=1 y=2 yaw=3 joint.wrist.first=4 mode=+-",
                                    "--margin-min", "load=0.5,travel=0.1"),
                         {"from.x": "1", "from.y": "2", "from.yaw": "3",
                          "from.joint.wrist.first": "4", "mode": "+-", "margin_min.load": "0.5",
                          "margin_min.travel": "0.1"})
        self.assertEqual(self.query("--from", "qw=1 qx=0 qy=0 qz=0"),
                         {"from.qw": "1", "from.qx": "0", "from.qy": "0", "from.qz": "0"})

    def test_json_goes_out_with_what_was_typed(self):
        moves = [{"move": "line", "pose": {"x": 1e-17}}]
        request = self.run_path("job.json", json.dumps(moves), "from.m1=90", "from.m2=-1.5",
                                "--near", "x=1", "--units", "m")
        self.assertEqual(request["headers"]["content-type"], "application/json")
        self.assertEqual(json.loads(request["body"]),
                         {"through": moves, "from": {**START, "near": {"x": 1}},
                          "units": {"length": "m"}})
        whole = {"from": START, "through": moves, "certificate": True}
        request = self.run_path("job", " \n" + json.dumps(whole), "--budget", "7")
        self.assertEqual(json.loads(request["body"]), {**whole, "budget": 7})

    def test_refused_before_anything_is_asked(self):
        table = self.write("job.csv", TABLE)
        moves = self.write("job.json", json.dumps({"from": START, "through": [], "budget": 3}))
        broken = self.write("broken.json", '{"through": [}')
        cases = [
            ([], "path NAME FILE"),
            (["label-stage"], "path NAME FILE"),
            (["label-stage", table], "--from"),
            (["label-stage", table, "x=1", "from.m1=1"], "beside it"),
            (["label-stage", table, "from.m1=1", "--near", "x=1"], "JSON file"),
            (["label-stage", table, "from.m1=1", "from.x=1"], "not by both"),
            (["label-stage", table, "from.m1=1", "--timeout-ms", "600001"], "600000"),
            (["label-stage", moves, "--budget", "4"], 'says "budget" already'),
            (["label-stage", moves, "from.m1=4"], 'says "from" already'),
            (["label-stage", broken, "from.m1=4"], "line 1, column 14"),
            (["label-stage", self.path("none.csv"), "from.m1=1"], "none.csv"),
            (["label-stage", table, "from.m1=1", "--mode", "++"], "takes no option --mode"),
        ]
        for words, wanted in cases:
            with self.subTest(words=words):
                got = self.leeway("path", *words)
                self.assertEqual((got.status, got.out), (2, ""))
                self.assertIn(wanted, got.err)
        self.assertEqual(self.service.asked, [])

    def test_free_travel(self):
        target = "/v1/mechanisms/label-stage/free-travel"
        self.service.answers["POST " + target] = Reply(200, answer())
        for words in (["travel", "label-stage"], ["ask", "free-travel", "label-stage"]):
            got = self.leeway(*words, "m1=90", "m2=-1.5", "--budget", "9", "--margin-min", "2")
            self.assertEqual((got.status, got.err), (0, ""))
            self.assertEqual(self.asked_body(), {**START, "budget": 9, "margin_min": 2})
        got = self.leeway("travel", "label-stage", "x=1", "--mode", "+-", "--reach",
                          "position=40,angle=30", "--timeout-ms", "500")
        self.assertEqual(self.asked_body(), {"pose": {"x": 1}, "mode": "+-", "timeout_ms": 500,
                                             "reach": {"position": 40, "angle": 30}})
        got = self.leeway("travel", "label-stage", "m1=1", "--reach", "far")
        self.assertIn("position=40,angle=30", got.err)
        self.assertEqual(got.status, 2)


class Anything(dict):
    """Answers of a fake service for every path."""

    def __init__(self, answers):
        super().__init__()
        self.answers = answers

    def get(self, key, default=None):
        return self.answers


class Shown(Case):

    def show(self, reply, *words):
        self.service.answers["POST " + PATH] = reply
        file = self.write("job.json", '[{"move": "line", "pose": {"x": 1}}]')
        return self.leeway("path", "label-stage", file, "from.m1=90", *words)

    def test_a_table_of_moves_and_the_trouble(self):
        least = {"load": {"at_least": 1.5, "value": 1.625, "at": 0.25},
                 "speed": {"at_least": 2, "value": 2.5, "at": 1},
                 "hold": {"at_least": 0.1, "value": 0.2, "at": 0.5}}
        limit = {"of": "drive", "name": "m2", "no": 2, "value": 171.5, "range": [-170, 170],
                 "over": 1.5}
        got = self.show(Reply(200, path_answer(
            move(1, line="N10", least=least),
            move(2, 3, "limit", line="N20", at=0.75, cause="limit", drive="m2",
                 limits_broken=[limit], reason="a drive comes to its limit"),
            {"no": 3, "line": "N30", "move": "line", "examined": False}, code=3,
            outcome="limit")))
        self.assertEqual((got.status, got.err), (1, ""))
        self.assertRegex(got.out, r"(?m)^verdict +3 limit: ")
        self.assertRegex(got.out,
                         r"(?m)^  N10 +line +1 ok +1 +load +1\.625 +1\.5 +0\.25 +-$")
        self.assertRegex(got.out, r"(?m)^  N20 +line +3 limit +0\.75 +- +- +- +- +limit m2$")
        self.assertRegex(got.out, r"(?m)^  N30 +line +not examined +- ")
        self.assertRegex(got.out, r"(?ms)^N20: a drive comes to its limit\n.*drive m2 171\.5 is 1\.5 "
                                  r"beyond \[-170, 170\]\n  next: ")
        self.assertNotIn("through", got.out)

    def test_undecided_shows_what_is_open(self):
        got = self.show(Reply(200, path_answer(
            move(1, 5, "undecided", at=0.5, open=[0.5, 0.625], cause="budget"), code=5,
            outcome="undecided")))
        self.assertEqual(got.status, 1)
        self.assertRegex(got.out, r"(?m)^  +1 +line +5 undecided +0\.5 .* budget$")
        self.assertIn("open: 0.5, 0.625 of the move; more --budget", got.out)
        self.assertEqual(self.show(Reply(200, path_answer(move(1, 5, "undecided"), code=5)),
                                   "--ok-any").status, 0)

    def test_clear_is_said_as_proved(self):
        got = self.show(Reply(200, path_answer(move(1))))
        self.assertEqual(got.status, 0)
        self.assertIn("1 ok: every point of every move is proved clear", got.out)
        raw = self.show(Reply(200, path_answer(move(1))), "--json")
        self.assertEqual(json.loads(raw.out), path_answer(move(1)))

    def test_a_refused_table(self):
        got = self.show(problem(400, 1079, "The table can not be read", pointer="/3/y", findings=[
            {"finding": "malformed-csv", "pointer": "/3/y", "text": "Row 3, column y: no.",
             "expected": "RFC 4180", "got": ""}]))
        self.assertEqual((got.status, got.out), (2, ""))
        self.assertIn("Row 3, column y: no.", got.err)

    def test_ways(self):
        free = {"at_least": 40, "blocked_at": None, "code": 1, "outcome": "ok",
                "limits_broken": []}
        stopped = {"at_least": 12.25, "blocked_at": 12.5, "code": 7, "outcome": "singular",
                   "cause": "inverse", "limb": "arm-2", "limits_broken": []}
        axes = {name: {"minus": free, "plus": stopped} for name in "xy"}
        axes["z"] = {"minus": None, "plus": None}
        target = "POST /v1/mechanisms/label-stage/free-travel"
        self.service.answers[target] = Reply(200, answer(along=axes, about=axes, boxes=7,
                                                         start=solution("+", {"m1": 90})))
        got = self.leeway("travel", "label-stage", "m1=90")
        self.assertEqual((got.status, got.err), (0, ""))
        self.assertRegex(got.out, r"(?m)^  along -x +40 +- +1 ok +-$")
        self.assertRegex(got.out, r"(?m)^  about \+y +12\.25 +12\.5 +7 singular +inverse arm-2$")
        self.assertEqual(got.out.count("no such freedom"), 4)


class Recorded(Case):

    def test_a_path_is_recorded_as_json_and_replayed(self):
        """A replay file holds JSON alone: a table is recorded as the service understood it."""
        said = path_answer(move(1, least={"load": {"at_least": 1.5, "value": 1.625, "at": 0.25}}))
        self.service.answers = Anything(lambda request: Reply(200, said))
        table = self.write("job.csv", TABLE)
        record = ["--record", self.path("job.replay")]
        self.leeway("path", "label-stage", table, "from.m1=90", "from.m2=-1.5", *record)
        listed = self.write("job.json", '[{"move": "line", "pose": {"x": 15}}]')
        self.leeway("path", "label-stage", listed, "from.m1=90", *record)
        entries = [json.loads(line) for line in self.read("job.replay").splitlines()[1:]]
        self.assertEqual([e["path"] for e in entries], [PATH, PATH])
        self.assertEqual(entries[0]["body"], {**said["asked"], "units": said["units"]})
        self.assertEqual(entries[1]["body"], {"from": {"drives": {"m1": 90}}, "through": [
            {"move": "line", "pose": {"x": 15}}]})
        got = self.leeway("replay", self.path("job.replay"))
        self.assertEqual((got.status, got.out), (0, "2 questions: 2 same, 0 differ\n"))
        self.assertEqual(json.loads(self.service.asked[-2]["body"]), entries[0]["body"])
        # Another share of the move differs, another number of boxes does not.
        said["moves"][0]["boxes"] = 5
        said["boxes"] = 5
        self.assertEqual(self.leeway("replay", self.path("job.replay")).status, 0)
        said["moves"][0]["least"]["load"]["at"] = 0.26
        got = self.leeway("replay", self.path("job.replay"), "--json")
        self.assertEqual(got.status, 1)
        first = json.loads(got.out.splitlines()[0])
        self.assertEqual((first["pointer"], first["kind"]), ("/moves/0/least/load/at", "ratio"))


if __name__ == "__main__":
    unittest.main()
