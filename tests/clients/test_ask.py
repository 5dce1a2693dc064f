# SPDX-License-Identifier: GPL-3.0-or-later
"""Questions as typed and as sent, answers as sent and as shown, verdicts and exit statuses. The
shapes of questions and answers are those of the service's contract (sections 2 to 5)."""

import json
import unittest

from support import Case, Reply, answer, problem, solution

ROOT = "POST /v1/mechanisms/label-stage/"


class Questions(Case):
    """Words in, body out."""

    def body(self, *words, **options):
        self.service.answers[ROOT + words[0]] = Reply(200, answer())
        got = self.leeway("ask", words[0], "label-stage", *words[1:], **options)
        self.assertEqual((got.status, got.err), (0, ""))
        headers = self.service.asked[-1]["headers"]
        self.assertEqual(headers["content-type"], "application/json")
        return self.asked_body()

    def test_bodies(self):
        table = [
            (["inverse", "x=10", "y=-20.5", "rz=5"], {"pose": {"x": 10, "y": -20.5, "rz": 5}}),
            (["inverse", "x=1", "yaw=1", "pitch=2", "roll=3"],
             {"pose": {"x": 1, "zyx": {"yaw": 1, "pitch": 2, "roll": 3}}}),
            (["inverse", "qw=1", "qx=0", "qy=0", "qz=-0"],
             {"pose": {"quaternion": {"w": 1, "x": 0, "y": 0, "z": 0}}}),
            (["inverse", "rvx=1", "rvy=2", "rvz=3"],
             {"pose": {"rotation_vector": {"x": 1, "y": 2, "z": 3}}}),
            (["inverse", "dx=0", "dy=0", "dz=1"],
             {"pose": {"direction": {"x": 0, "y": 0, "z": 1}}}),
            (["inverse", "x=1", "joint.shaft=720", "--mode", "+-++"],
             {"pose": {"x": 1, "joints": {"shaft": 720}}, "mode": "+-++"}),
            (["inverse", "x=1", "mode=+-"], {"pose": {"x": 1}, "mode": "+-"}),
            (["inverse", "x=1", "--near", "m1=10 m2=20"],
             {"pose": {"x": 1}, "near": {"drives": {"m1": 10, "m2": 20}}}),
            (["inverse", "x=1", "--near", "x=1,y=2"], {"pose": {"x": 1}, "near": {"x": 1, "y": 2}}),
            (["inverse", "x=1", "near.m1=10", "near.m2=20"],
             {"pose": {"x": 1}, "near": {"drives": {"m1": 10, "m2": 20}}}),
            (["inverse", "x=1", "--near", "x=1 mode=++"],
             {"pose": {"x": 1}, "near": {"pose": {"x": 1}, "mode": "++"}}),
            (["inverse", "x=1", "near.joint.wrist.first=3"],
             {"pose": {"x": 1}, "near": {"joints": {"wrist.first": 3}}}),
            (["forward", "m1=10", "m2=2e1"], {"drives": {"m1": 10, "m2": 20}}),
            (["forward", "m1=10", "drive.yaw=2", "--all"],
             {"drives": {"m1": 10, "yaw": 2}, "all": True}),
            (["jacobian", "m1=10", "m2=20", "--point", "x=1,y=2,z=3", "--in", "tool"],
             {"drives": {"m1": 10, "m2": 20}, "point": {"x": 1, "y": 2, "z": 3}, "in": "tool"}),
            (["jacobian", "x=1", "--mode", "++"], {"pose": {"x": 1}, "mode": "++"}),
            (["margin", "joint.knee-1=3", "joint.wrist.second=4"],
             {"joints": {"knee-1": 3, "wrist.second": 4}}),
            (["margin", "m1=1", "--distance", "--budget", "500"],
             {"drives": {"m1": 1}, "distance": {"budget": 500}}),
            (["margin", "m1=1", "--distance"], {"drives": {"m1": 1}, "distance": {}}),
            (["reach", "x=1", "from.m1=3", "from.m2=4", "--mode", "any"],
             {"pose": {"x": 1}, "from": {"drives": {"m1": 3, "m2": 4}}, "mode": "any"}),
            (["reach", "x=1", "--from", "m1=3"], {"pose": {"x": 1}, "from": {"drives": {"m1": 3}}}),
            (["reach", "x=1", "--from", "x=0 y=0 mode=++"],
             {"pose": {"x": 1}, "from": {"pose": {"x": 0, "y": 0}, "mode": "++"}}),
            (["reach", "x=1", "from.m1=3", "near.m1=2"],
             {"pose": {"x": 1}, "from": {"drives": {"m1": 3}, "near": {"drives": {"m1": 2}}}}),
            (["reach", "x=1", "--margin-min", "1.5", "--budget", "9"],
             {"pose": {"x": 1}, "margin_min": 1.5, "budget": 9}),
            (["reach", "x=1", "--margin-min", "load=1.2,travel=0.05"],
             {"pose": {"x": 1}, "margin_min": {"load": 1.2, "travel": 0.05}}),
            (["reach", "x=1", "--tool", "camera", "--revision", "2", "--units", "m,rad", "--ref",
              "N10", "--expect", "abcdef01", "--orientation", "zyx"],
             {"pose": {"x": 1}, "tool": "camera", "revision": 2,
              "units": {"length": "m", "angle": "rad"}, "ref": "N10", "expect": "abcdef01",
              "orientation": "zyx"}),
            (["reach", "x=1", "--units", "rad"], {"pose": {"x": 1}, "units": {"angle": "rad"}}),
        ]
        for words, wanted in table:
            with self.subTest(words=words):
                self.assertEqual(self.body(*words), wanted)

    def test_numbers_arrive_with_the_same_bits(self):
        for text in ("0.1", "0.30000000000000004", "1e-300", "9007199254740993", "123456.789012345",
                     "-2.2250738585072014e-308", "1.7976931348623157e308", "5e-324"):
            with self.subTest(text=text):
                got = self.body("forward", f"m1={text}")["drives"]["m1"]
                self.assertEqual(float(got).hex(), float(text).hex())

    def test_numbers_do_not_depend_on_the_locale(self):
        # Whether the locale exists or not: the program never asks for one.
        body = self.body("forward", "m1=0.5", env={"LC_ALL": "de_DE.UTF-8", "LANG": "de_DE.UTF-8"})
        self.assertEqual(body, {"drives": {"m1": 0.5}})

    def test_refuses_wrong_questions_before_asking(self):
        table = [
            (["invers", "x=1"], 'did you mean "inverse"'),
            (["inverse"], "wants a pose"),
            (["inverse", "m1=1"], "ask forward"),
            (["inverse", "x=1", "x=2"], "given twice"),
            (["inverse", "x"], "NAME=VALUE"),
            (["inverse", "=1"], "NAME=VALUE"),
            (["inverse", "x=1,5"], "decimal point"),
            (["inverse", "x="], "decimal point"),
            (["inverse", "x=nan"], "decimal point"),
            (["inverse", "x=inf"], "decimal point"),
            (["inverse", "x=1e999"], "decimal point"),
            (["inverse", "x=0x10"], "decimal point"),
            (["inverse", "x= 1"], "decimal point"),
            (["inverse", "x=1mm"], "decimal point"),
            (["inverse", "x=1", "M1=3"], "lower case"),
            (["inverse", "x=1", "joint.=3"], "joint's name"),
            (["inverse", "x=1", "joint.a..b=3"], "joint's name"),
            (["inverse", "x=1", "rx=3"], "roll="),
            (["inverse", "x=1", "mode=++", "--mode", "++"], "given twice"),
            (["inverse", "x=1", "--all"], "it is for forward"),
            (["inverse", "x=1", "--from", "m1=1"], "it is for reach"),
            (["inverse", "x=1", "from.m1=1"], "it is for reach"),
            (["inverse", "x=1", "--near", ""], "expected values"),
            (["inverse", "x=1", "--near", "m1"], "NAME=VALUE"),
            (["inverse", "x=1", "--near", "m1=1 x=2"], "not by both"),
            (["inverse", "x=1", "near.mode=++"], "names no posture"),
            (["inverse", "x=1", "--revision", "0"], "no revision"),
            (["inverse", "x=1", "--units", "inch"], "mm or m"),
            (["inverse", "x=1", "--units", "mm,m"], "mm or m"),
            (["inverse", "x=1", "--units", ""], "mm or m"),
            (["forward", "x=1"], "ask inverse"),
            (["forward"], "wants the drives' readings"),
            (["forward", "m1=1", "--mode", "++"], "--near"),
            (["margin", "m1=1", "x=2"], "not by both"),
            (["margin", "m1=1", "--mode", "++"], "give --near"),
            (["margin", "m1=1", "--budget", "5"], "--distance"),
            (["jacobian", "m1=1", "--point", "x=1"], "x=..,y=..,z=.."),
            (["jacobian", "m1=1", "--point", "x=1,y=2,z=3,rz=4"], "x=..,y=..,z=.."),
            (["reach", "x=1", "near.m1=2"], "from.NAME"),
            (["reach", "x=1", "--margin-min", "much"], "expected a number"),
            (["reach", "x=1", "--margin-min", "load=1,load=2"], "expected a number"),
            (["reach", "x=1", "--budget", "-5"], "whole number"),
            (["reach", "x=1", "--json-body", "-"], "leave out"),
            (["reach", "--json-body", "-", "--tool", "camera"], "put"),
        ]
        for words, wanted in table:
            with self.subTest(words=words):
                got = self.leeway("ask", words[0], "label-stage", *words[1:], stdin=b"{}")
                self.assertEqual((got.status, got.out), (2, ""))
                self.assertIn(wanted, got.err)
        self.assertEqual(self.service.asked, [])

    def test_written_questions(self):
        question = {"batch": [{"pose": {"x": 0.1}}, {"pose": {"x": 0.30000000000000004}}]}
        text = json.dumps(question)
        file = self.write("q.json", text)
        self.assertEqual(self.body("inverse", "--json-body", file), question)
        self.assertEqual(self.body("inverse", "--json-body", "-", stdin=text.encode()), question)
        for bad, wanted in ((b"[1]", "one question"), (b"{", "the text ends here"),
                            (b'{"pose": {"x": 1, "x": 2}}', "stands twice"), (b"", "ends here")):
            got = self.leeway("ask", "inverse", "label-stage", "--json-body", "-", stdin=bad)
            self.assertEqual(got.status, 2)
            self.assertIn(wanted, got.err)
        got = self.leeway("ask", "inverse", "label-stage", "--json-body", self.path("none"))
        self.assertIn("No such file", got.err)


class Answers(Case):
    """Answers in, tables out."""

    def ask(self, kind, shown, *words):
        self.service.answers[ROOT + kind] = shown if isinstance(shown, Reply) else Reply(200, shown)
        values = ["m1=1"] if kind in ("forward", "margin", "jacobian") else ["x=10"]
        return self.leeway("ask", kind, "label-stage", *values, *words)

    def test_verdicts_become_exit_statuses_and_words(self):
        table = [(1, "ok", 0), (2, "low_margin", 1), (3, "limit", 1), (4, "out_of_reach", 1),
                 (5, "undecided", 1), (6, "other_mode", 1), (7, "singular", 1),
                 (8, "inconsistent", 1), (9, "blocked", 1)]
        for code, outcome, status in table:
            with self.subTest(code=code):
                got = self.ask("reach", answer(code, outcome, reason="because of this"))
                self.assertEqual(got.status, status)
                self.assertRegex(got.out, rf"(?m)^verdict +{code} {outcome}: ")
                self.assertRegex(got.out, r"(?m)^reason +because of this$")
                self.assertEqual("\nnext " in got.out, code != 1)
                self.assertEqual(self.ask("reach", answer(code, outcome), "--ok-any").status, 0)
                raw = self.ask("reach", answer(code, outcome), "--json")
                self.assertEqual(raw.status, status)
                self.assertEqual(json.loads(raw.out)["code"], code)
        self.assertIn("never take this as yes", self.ask("reach", answer(5, "undecided")).out)

    def test_an_answer_without_a_verdict_is_an_error(self):
        self.assertEqual(self.ask("reach", {"hello": 1}).status, 2)
        self.assertEqual(self.ask("reach", {"hello": 1}, "--ok-any").status, 2)
        self.assertEqual(self.ask("reach", answer(0, "nothing"), "--ok-any").status, 2)

    def test_ok_any_forgives_no_refusal(self):
        self.assertEqual(self.ask("reach", problem(422, 1001, "No."), "--ok-any").status, 2)

    def test_json_is_printed_as_it_came(self):
        body = b'{"code" : 1,\n "outcome":"ok", "x": 0.1000000000000000055511151231257827}'
        got = self.ask("reach", Reply(200, body), "--json")
        self.assertEqual(got.out.encode(), body + b"\n")

    def test_head_says_who_answered(self):
        got = self.ask("reach", answer(ref="N10")).out
        self.assertIn("label-stage revision 3, published, digest abababab, tool camera, mm and deg",
                      got)
        self.assertRegex(got, r"(?m)^asked +pose \(x 10, y -20, rz 5\)$")
        self.assertRegex(got, r"(?m)^ref +N10$")

    def test_solutions_table(self):
        limit = {"of": "drive", "name": "m2", "no": 2, "value": 171.5, "range": [-170, 170],
                 "over": 1.5}
        got = self.ask("inverse", answer(
            found={"complex": 4, "real": 2, "within_limits": 1, "not_converged": 0},
            complete=True, basis="explicit",
            solutions=[solution("++", {"m1": 12.3456789012, "m2": -5}, mode_name="elbows-left"),
                       solution("+-", {"m1": -100.5, "m2": 171.5}, within_limits=False,
                                limits_broken=[limit])])).out
        lines = [line for line in got.splitlines() if line.startswith("  ")]
        self.assertEqual(lines[0].split(), ["no", "mode", "name", "m1", "m2", "within", "limits",
                                            "limits", "broken"])
        self.assertEqual(lines[1].split(), ["1", "++", "elbows-left", "12.345679", "-5", "yes",
                                            "-"])
        self.assertEqual(lines[2].split()[:5], ["2", "+-", "-", "-100.5", "171.5"])
        self.assertEqual(lines[2].split()[5:], ["no", "m2"])
        self.assertEqual(lines[3], "  2: drive m2 171.5 is 1.5 beyond [-170, 170]")
        self.assertRegex(got, r"complete +yes, no solution is missing \(explicit\)")
        ends = [line.index(number) + len(number) for line, number in
                zip(lines[1:], ("12.345679", "-100.5"))]
        self.assertEqual(ends[0], ends[1], "numbers stand right-aligned")

    def test_forward_shows_the_pose(self):
        pose = {"x": 1, "y": 2, "z": 3, "quaternion": {"w": 1, "x": 0, "y": 0, "z": 0},
                "joints": {"shaft": 720}}
        got = self.ask("forward", answer(
            8, "inconsistent", disagreement={"m1": 0.5, "m2": -0.25},
            allowed={"m1": 0.1, "m2": 0.1}, suspect="m1", complete=False, basis="local",
            solutions=[solution(None, {"m1": 1}, pose=pose)]))
        self.assertEqual(got.status, 1)
        header = next(line for line in got.out.splitlines() if line.startswith("  no"))
        self.assertEqual(header.split()[:11], ["no", "mode", "m1", "x", "y", "z", "qw", "qx", "qy",
                                               "qz", "joint.shaft"])
        self.assertRegex(got.out, r"(?m)^disagreement +m1 0\.5, m2 -0\.25$")
        self.assertRegex(got.out, r"(?m)^suspect +m1$")
        self.assertIn("there may be further solutions (local)", got.out)

    def test_margins_table_marks_the_least(self):
        got = self.ask("margin", answer(
            margins={"load": {"asked": True, "value": 1.25, "drive": "m2",
                              "direction": {"along": {"x": 0, "y": 0.6, "z": -0.8},
                                            "about": {"x": 0, "y": 0, "z": 0}},
                              "amount": {"value": 25, "unit": "N"}},
                     "speed": {"asked": True, "value": 0.75, "drive": "m3"},
                     "accuracy": {"asked": False}},
            least={"name": "speed", "value": 0.75},
            posture=solution("++", {"m1": 1}))).out
        rows = {line.split()[0]: line for line in got.splitlines() if line.startswith("  ")}
        self.assertEqual(rows["load"].split()[:4], ["load", "yes", "1.25", "m2"])
        self.assertIn("along (0 0.6 -0.8)", rows["load"])
        self.assertNotIn("about", rows["load"])
        self.assertIn("25 N", rows["load"])
        self.assertTrue(rows["speed"].endswith("<- least"))
        self.assertEqual(got.count("<- least"), 1)
        self.assertEqual(rows["accuracy"].split()[:3], ["accuracy", "no", "-"])
        self.assertIn("\nposture\n", got)

    def test_margin_says_what_is_nearest_to_singular(self):
        got = self.ask("margin", answer(
            kind="inverse", held=True, freedoms=3, no_longer_spare=["m1", "m4"],
            weakest_hold=[{"value": 0.2, "lost": False, "says": "motion held least (0.2): turning",
                           "screw": {"kind": "none"}, "outputs": {"x": 1}}],
            weakest_motion=[{"value": 0, "lost": True, "says": "motion lost: shifting along x",
                             "screw": {"kind": "none"}, "outputs": {"x": 1}, "limbs": ["a"],
                             "joints": {"elbow-1": 1, "shoulder-1": -0.5}, "drives": {"m1": 1}}],
            leave_by={"hold": None,
                      "motion": {"growth": 0.01, "measured_at": "drives", "either_way": True,
                                 "outputs": {"x": 0}, "drives": {"m1": 0.25}}},
            posture=solution("++", {"m1": 1}))).out
        self.assertRegex(got, r"(?m)^kind +inverse$")
        self.assertRegex(got, r"(?m)^no longer spare m1, m4$")
        lines = got.splitlines()
        at = lines.index("nearest to singular (0 = singular)")
        self.assertEqual(lines[at + 1:at + 5], [
            "  motion held least (0.2): turning",
            "  motion lost: shifting along x",
            "    joints elbow-1 1, shoulder-1 -0.5",
            "  motion grows by 0.01 over the step m1 0.25, or back"])
        self.assertNotIn("weakest", got, "told once")

    def test_matrices_have_names_and_units(self):
        got = self.ask("jacobian", answer(forward={
            "rows": [{"name": "x", "unit": "mm/s"}, {"name": "rz", "unit": "deg/s"}],
            "columns": [{"name": "m1", "unit": "deg/s"}, {"name": "m2", "unit": "deg/s"}],
            "values": [[1.5, -2], [-1e-16, 1e-9]]})).out
        lines = got.splitlines()
        at = lines.index("forward")
        self.assertEqual(lines[at + 1].split(), ["m1", "[deg/s]", "m2", "[deg/s]"])
        self.assertEqual(lines[at + 2].split(), ["x", "[mm/s]", "1.5", "-2"])
        # What is below 1e-12 is the rounding of a zero and shown so.
        self.assertEqual(lines[at + 3].split(), ["rz", "[deg/s]", "0", "1e-09"])

    def test_members_nobody_foresaw_are_shown(self):
        got = self.ask("reach", answer(new_member={"a": 1, "b": [1, 2]}, words=["p", "q"],
                                       rows=[{"a": 1, "b": "x"}, {"a": 22, "c": True}])).out
        self.assertRegex(got, r"(?m)^new member +a 1, b \(1, 2\)$")
        self.assertRegex(got, r"(?m)^words +p, q$")
        self.assertRegex(got, r"(?m)^  +22  -  yes$")

    def test_batch_counts_as_its_worst_member(self):
        refused = {"status": 422, "code": 1021, "title": "No such drive.", "pointer": "/batch/1"}
        for members, status in (([answer(), answer()], 0),
                                ([answer(), answer(4, "out_of_reach")], 1),
                                ([answer(4, "out_of_reach"), refused], 2)):
            got = self.ask("inverse", {"mechanism": "label-stage", "count": 2,
                                       "answers": members})
            self.assertEqual(got.status, status)
            self.assertIn("answer 2 of 2", got.out)
        self.assertIn("refused       No such drive. (status 422, code 1021)", got.out)
        self.assertIn("/batch/1", got.out)


class Catalog(Case):
    """Commands about documents."""

    def test_load_shows_findings_with_places(self):
        self.service.answers["PUT /v1/mechanisms/label-stage"] = Reply(201, {
            "mechanism": "label-stage", "revision": 4, "state": "draft", "digest": "cd" * 32,
            "findings": [
                {"severity": "note", "code": "mobility", "pointer": "", "text": "Mobility 3."},
                {"severity": "warning", "code": "singular-reference", "pointer": "/joints/2",
                 "text": "The reference posture is singular.", "expected": "", "got": ""}]})
        document = b'{"format": "leeway-mechanism/1",\n "name": "label-stage", "x": 0.10}'
        file = self.write("label.json", document)
        got = self.leeway("load", file)
        self.assertEqual(got.status, 0)
        self.assertEqual(self.service.asked[0]["body"], document, "the bytes of the file go out")
        self.assertIn("label-stage revision 4, stored as a new draft, digest cdcdcdcd", got.out)
        self.assertLess(got.out.index("warning singular-reference"), got.out.index("note mobility"))
        self.assertIn("/joints/2", got.out)
        self.assertIn("leeway publish label-stage 4 --accept singular-reference", got.out)
        got = self.leeway("load", "-", stdin=document)
        self.assertEqual(got.status, 0)

    def test_load_refused(self):
        self.service.answers["PUT /v1/mechanisms/label-stage"] = problem(
            422, 1040, "The document has errors.", detail="The axis has no length.",
            pointer="/joints/0/axis", findings=[
                {"finding": "axis-zero", "pointer": "/joints/0/axis",
                 "text": "The axis has no length.", "expected": "a direction", "got": "[0,0,0]"},
                {"finding": "name-unknown", "pointer": "/drives/1/moves",
                 "text": "No such joint.", "expected": "a joint", "got": "elbov"}])
        file = self.write("label.json", '{"name": "label-stage"}')
        got = self.leeway("load", file)
        self.assertEqual((got.status, got.out), (2, ""))
        for wanted in ("not stored", "axis-zero: The axis has no length.", "/joints/0/axis",
                       "name-unknown: No such joint.", "/drives/1/moves", "elbov"):
            self.assertEqual(got.err.count(wanted), 1, wanted)

    def test_load_checks_the_file_first(self):
        table = [("{\n  \"name\": \"a\",\n}", "line 3, column 1"), ("[]", "/name"),
                 ('{"name": "A"}', "/name"), ('{"name": 3}', "/name"), ("", "ends here")]
        for content, wanted in table:
            got = self.leeway("load", self.write("bad.json", content))
            self.assertEqual(got.status, 2)
            self.assertIn(wanted, got.err)
        self.assertIn("No such file", self.leeway("load", self.path("none.json")).err)
        self.assertEqual(self.service.asked, [])

    def test_load_of_many_files_goes_on_and_tells_the_worst(self):
        for name in ("a", "c"):
            self.service.answers[f"PUT /v1/mechanisms/{name}"] = Reply(200, {
                "mechanism": name, "revision": 1, "state": "published"})
        files = [self.write(f"{name}.json", json.dumps({"name": name})) for name in "abc"]
        got = self.leeway("load", *files)
        self.assertEqual(got.status, 2)
        self.assertIn("a revision 1, stored before, published", got.out)
        self.assertIn("c revision 1", got.out)
        self.assertIn("b.json: not stored", got.err)

    def test_publish_and_withdraw(self):
        path = "/v1/mechanisms/label-stage/revisions/4/"
        self.service.answers[f"POST {path}publish"] = Reply(200, {"state": "published"})
        self.service.answers[f"POST {path}withdraw"] = Reply(200, {"state": "withdrawn"})
        got = self.leeway("publish", "label-stage", "4", "--accept", "one,two", "--reason",
                          "Größe")
        self.assertEqual((got.status, got.err), (0, ""))
        self.assertEqual(self.asked_body(), {"accept": ["one", "two"], "reason": "Größe"})
        self.assertIn("answers from now on", got.out)
        got = self.leeway("withdraw", "label-stage", "4")
        self.assertEqual(got.status, 0)
        self.assertEqual(self.asked_body(), {})
        self.assertIn("leeway publish NAME REV", got.out)

    def test_list_follows_the_pages(self):
        get = "GET /v1/mechanisms"
        answers = self.service.answers
        row = {"mechanism": "label-stage", "answering": 3, "digest": "ab" * 32, "revisions": 4}
        answers[get] = Reply(200, {"mechanisms": [row], "next": "label-stage"})
        answers[f"{get}?cursor=label-stage"] = Reply(200, {
            "mechanisms": [{**row, "mechanism": "lid-turner", "answering": None}], "next": None})
        got = self.leeway("list")
        self.assertEqual((got.status, got.err), (0, ""))
        self.assertEqual([line.split() for line in got.out.splitlines()], [
            ["mechanism", "answering", "digest", "revisions"],
            ["label-stage", "3", "abababab", "4"], ["lid-turner", "-", "abababab", "4"]])
        self.assertEqual(len(self.leeway("list", "--json").out.splitlines()), 2)
        answers[f"{get}?cursor=label-stage"] = problem(500, 1090, "Broken.")
        self.assertEqual(self.leeway("list").status, 2)
        answers[get] = Reply(200, {"mechanisms": [], "next": None})
        self.assertIn("leeway load FILE", self.leeway("list").out)
        answers[get] = Reply(200, {"machines": []})
        self.assertEqual(self.leeway("list").status, 2)

    def test_publish_tells_which_warnings_to_accept(self):
        self.service.answers["POST /v1/mechanisms/a/revisions/1/publish"] = problem(
            409, 1065, "Warnings.", findings=[
                {"finding": "singular-reference", "pointer": "", "text": "Singular.",
                 "expected": "", "got": ""},
                {"finding": "mode-named-twice", "pointer": "/modes/b", "text": "Twice."}])
        got = self.leeway("publish", "a", "1")
        self.assertEqual(got.status, 2)
        self.assertIn("--accept singular-reference,mode-named-twice", got.err)
        self.assertNotIn("expected", got.err)

    def test_looking(self):
        get = "GET /v1/mechanisms"
        answers = self.service.answers
        document = {"format": "leeway-mechanism/1", "name": "a", "joints": [
            {"name": "j1", "type": "revolute", "axis": [0, 0, 1]}]}
        answers[f"{get}/a"] = Reply(200, {"mechanism": "a", "answering": 2, "revisions": 3})
        answers[f"{get}/b"] = Reply(200, {"mechanism": "b", "answering": None, "revisions": 1})
        answers[f"{get}/a/revisions/2"] = Reply(200, document)
        answers[f"{get}/b/revisions/1"] = Reply(200, document)
        answers[f"{get}/a/revisions/2/report"] = Reply(200, {"mobility": {"computed": 3},
                                                            "findings": []})
        answers[f"{get}/a/revisions"] = Reply(200, {"revisions": [
            {"revision": 2, "digest": "cd" * 32, "state": "published"}], "next": None})
        answers[f"{get}/a/history"] = Reply(200, {"events": [
            {"no": 1, "action": "publish", "by": "local", "reason": "measured"}], "next": None})
        answers[f"{get}/a/difference?from=1&to=2"] = Reply(200, {
            "mechanism": "a", "from": {"revision": 1, "state": "draft", "digest": "12" * 32},
            "to": {"revision": 2, "state": "published", "digest": "34" * 32},
            "changes": [{"of": "joint", "name": "j1", "what": "at", "text": "joint j1: moved"}]})
        answers["GET /about"] = Reply(200, {"what_it_is_not": ["no safety function"]})
        self.assertIn("revolute", self.leeway("show", "a", "2").out)
        shown = self.leeway("show", "a").out
        self.assertRegex(shown, r"answering +2")
        self.assertIn("document of revision 2", shown)
        self.assertIn("document of revision 1", self.leeway("show", "b").out)
        self.assertEqual(json.loads(self.leeway("show", "a", "--json").out), document)
        report = self.leeway("report", "a").out
        self.assertRegex(report, r"^revision +2\n")
        self.assertRegex(report, r"mobility +computed 3\n\nfindings\n  none\n$")
        history = self.leeway("history", "a").out
        self.assertIn("cdcdcdcd", history)
        self.assertIn("measured", history)
        difference = self.leeway("difference", "a", "1", "2").out
        self.assertIn("to    revision 2, published, digest 34343434", difference)
        self.assertIn("  joint j1: moved", difference)
        self.assertIn("no safety function", self.leeway("about").out)
        self.assertEqual(self.leeway("show", "c").status, 2)


if __name__ == "__main__":
    unittest.main()
