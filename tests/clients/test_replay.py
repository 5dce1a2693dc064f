# SPDX-License-Identifier: GPL-3.0-or-later
"""Recording questions and asking them again: the file, the comparison, the exit status."""

import json
import os
import signal
import subprocess
import time
import unittest

from support import CLI, Case, Reply, answer, problem, solution

HEAD = {"format": "leeway-replay/1"}
PATH = "/v1/mechanisms/label-stage/inverse"


def entry(expect, **more):
    return {"method": "POST", "path": PATH, "body": {"pose": {"x": 10}}, "expect": expect, **more}


class Replay(Case):

    def file(self, *entries, head=None):
        lines = [json.dumps({**HEAD, **(head or {})})] + [
            e if isinstance(e, str) else json.dumps(e) for e in entries]
        return self.write("q.replay", "\n".join(lines) + "\n")

    def replay(self, expect, got, *words, head=None, **more):
        """One question: what is expected, what comes."""
        self.service.answers[f"POST {PATH}"] = got if isinstance(got, Reply) else Reply(200, got)
        return self.leeway("replay", self.file(entry(expect, **more), head=head), *words)

    def differences(self, *args, **more):
        got = self.replay(*args, "--json", **more)
        lines = [json.loads(line) for line in got.out.splitlines()]
        self.assertEqual(got.status, 1 if len(lines) > 1 else 0, got.err)
        self.assertEqual(lines[-1]["differences"], len(lines) - 1)
        return {line["pointer"]: line for line in lines[:-1]}

    def test_same_answers(self):
        got = self.replay(answer(), answer())
        self.assertEqual((got.status, got.err), (0, ""))
        self.assertEqual(got.out, "1 questions: 1 same, 0 differ\n")
        self.assertEqual(self.asked_body(), {"pose": {"x": 10}})

    def test_a_difference_is_told_with_all_its_numbers(self):
        got = self.replay(answer(solutions=[solution("++", {"m1": 12.5})]),
                          answer(solutions=[solution("++", {"m1": 12.625})]), note="pick 7")
        self.assertEqual(got.status, 1)
        lines = got.out.splitlines()
        self.assertEqual(lines[0], f"line 2  POST {PATH}  (pick 7)")
        self.assertEqual(lines[1].split(), ["pointer", "expected", "got", "off", "by", "tolerance"])
        self.assertEqual(lines[2].split(), ["/solutions/0/drives/m1", "12.5", "12.625", "0.125",
                                            "1e-06", "reading"])
        self.assertEqual(lines[3], "1 questions: 0 same, 1 differ (1 differences); furthest off: "
                                   "line 2 /solutions/0/drives/m1, off by 0.125")

    def test_only_what_is_expected_is_compared(self):
        self.assertEqual(self.differences({"code": 1}, answer(more=[1, 2, 3])), {})
        self.assertEqual(list(self.differences({"code": 1, "gone": 3}, answer())), ["/gone"])

    def test_what_changes_by_itself_is_left_out_unless_asked(self):
        one = answer()
        other = answer(revision=4, digest="cd" * 32, state="draft",
                       served_at="2026-01-01T00:00:00.000Z")
        self.assertEqual(self.differences(one, other), {})
        self.assertEqual(sorted(self.differences(one, other, "--check", "digest,revision")),
                         ["/digest", "/revision"])
        self.assertEqual(sorted(self.differences(one, other, check=["state"])), ["/state"])
        self.assertEqual(sorted(self.differences(one, other, head={"check": ["served_at"]})),
                         ["/served_at"])

    def test_ignored_members(self):
        one, other = answer(reason="a", mode="+"), answer(reason="b", mode="-")
        self.assertEqual(sorted(self.differences(one, other)), ["/mode", "/reason"])
        self.assertEqual(sorted(self.differences(one, other, "--ignore", "reason")), ["/mode"])
        self.assertEqual(self.differences(one, other, ignore=["reason"],
                                          head={"ignore": ["mode"]}), {})

    def test_tolerances_by_kind(self):
        def with_pose(**pose):
            return answer(solutions=[solution("++", {"m1": 1}, pose=pose)])
        # kind by kind: pointer, expected, just inside, just outside 1e-6
        for make, pointer, kind in [
                (lambda v: with_pose(x=v), "/solutions/0/pose/x", "length_mm"),
                (lambda v: with_pose(rz=v), "/solutions/0/pose/rz", "angle_deg"),
                (lambda v: with_pose(zyx={"yaw": v}), "/solutions/0/pose/zyx/yaw", "angle_deg"),
                (lambda v: with_pose(joints={"shaft": v}), "/solutions/0/pose/joints/shaft",
                 "reading"),
                (lambda v: answer(margins={"load": {"asked": True, "value": v}}),
                 "/margins/load/value", "ratio"),
                (lambda v: answer(disagreement={"m1": v}), "/disagreement/m1", "reading"),
                (lambda v: answer(residual={"position": v}), "/residual/position", "length_mm"),
                (lambda v: answer(off_by={"angle": v}), "/off_by/angle", "angle_deg")]:
            with self.subTest(pointer=pointer):
                self.assertEqual(self.differences(make(0.5), make(0.5 + 0.9e-6)), {})
                found = self.differences(make(0.5), make(0.5 + 1.1e-6))
                self.assertEqual(list(found), [pointer])
                self.assertEqual(found[pointer]["kind"], kind)
                self.assertAlmostEqual(found[pointer]["off_by"], 1.1e-6, delta=1e-12)
                self.assertEqual(self.differences(make(0.5), make(0.5 + 1e-3), "--tolerance",
                                                  f"{kind}=0.01"), {})
                self.assertEqual(self.differences(make(0.5), make(0.5 + 1e-3),
                                                  tolerance={kind: 0.01}), {})
                self.assertEqual(list(self.differences(make(0.5), make(0.5 + 1e-3),
                                                       tolerance={kind: 1e-4},
                                                       head={"tolerance": {kind: 1}})), [pointer])

    def test_tolerances_follow_the_units(self):
        units = {"length": "m", "angle": "rad"}
        one = answer(units=units, residual={"position": 0.0, "angle": 0.0})
        # 1e-6 mm is 1e-9 m; 1e-6 deg is 1.745e-8 rad.
        self.assertEqual(self.differences(
            one, answer(units=units, residual={"position": 0.9e-9, "angle": 1.7e-8})), {})
        self.assertEqual(sorted(self.differences(
            one, answer(units=units, residual={"position": 1.1e-9, "angle": 1.8e-8}))),
            ["/residual/angle", "/residual/position"])

    def test_large_ratios_are_compared_relatively(self):
        one = answer(condition_forward=2e6)
        self.assertEqual(self.differences(one, answer(condition_forward=2e6 + 1.9)), {})
        self.assertEqual(len(self.differences(one, answer(condition_forward=2e6 + 2.1))), 1)

    def test_tolerance_by_pointer_beats_the_kinds(self):
        one = answer(solutions=[solution("++", {"m1": 1, "m2": 1})])
        other = answer(solutions=[solution("++", {"m1": 1.05, "m2": 1.05})])
        self.assertEqual(list(self.differences(one, other, at={"/solutions/*/drives/m1": 0.1})),
                         ["/solutions/0/drives/m2"])
        self.assertEqual(self.differences(one, other, head={"at": {"/solutions/0/drives/*": 0.1}}),
                         {})

    def test_codes_and_counts_are_equal_or_not(self):
        self.assertEqual(list(self.differences({"code": 1}, answer(2, "low_margin"), "--tolerance",
                                               "ratio=100")), ["/code"])
        self.assertEqual(list(self.differences({"found": {"real": 4}}, answer(found={"real": 3}),
                                               "--tolerance", "ratio=100")), ["/found/real"])

    def test_types_and_texts(self):
        self.assertEqual(sorted(self.differences(
            {"a": 1, "b": "x", "c": True, "d": None, "e": [1], "f": {}},
            answer(a="1", b="y", c=False, d=0, e={}, f=[]))), ["/a", "/b", "/c", "/d", "/e", "/f"])

    def test_names_with_slashes_are_escaped_in_pointers(self):
        self.assertEqual(list(self.differences({"a/b~c": 1}, answer(**{"a/b~c": 5}))), ["/a~1b~0c"])

    def test_orientations_that_are_the_same(self):
        def with_pose(**pose):
            return answer(solutions=[solution("++", {}, pose=pose)])
        self.assertEqual(self.differences(
            with_pose(quaternion={"w": 0, "x": 1, "y": 0, "z": 0}),
            with_pose(quaternion={"w": 0, "x": -1, "y": 0, "z": 0})), {})
        self.assertEqual(self.differences(with_pose(zyx={"yaw": 180}),
                                          with_pose(zyx={"yaw": -180})), {})
        self.assertEqual(len(self.differences(with_pose(joints={"shaft": 180}),
                                              with_pose(joints={"shaft": -180}))), 1)
        self.assertEqual(len(self.differences(
            with_pose(quaternion={"w": 0, "x": 1, "y": 0, "z": 0}),
            with_pose(quaternion={"w": 0, "x": 0, "y": -1, "z": 0}))), 2)

    def test_solutions_belong_together_by_mode(self):
        a, b = solution("++", {"m1": 1}), solution("+-", {"m1": 2})
        self.assertEqual(self.differences(answer(solutions=[a, b]), answer(solutions=[b, a])), {})
        found = self.differences(answer(solutions=[a, b]), answer(solutions=[b]))
        self.assertEqual(sorted(found), ["/solutions", "/solutions/0"])
        self.assertEqual(found["/solutions"]["note"], "expected 2, got 1")
        self.assertEqual(found["/solutions/0"]["note"], "no solution in this mode")
        same = solution("++", {"m1": 2})
        self.assertEqual(len(self.differences(answer(solutions=[a, same]),
                                              answer(solutions=[same, a]))), 2)

    def test_refusals_can_be_expected(self):
        refusal = problem(422, 1021, "No such drive.", pointer="/drives/m9")
        self.assertEqual(self.differences({"code": 1021, "pointer": "/drives/m9"}, refusal,
                                          status=422), {})
        found = self.differences({"code": 1}, refusal)
        self.assertEqual(sorted(found), ["", "/code"])
        self.assertEqual(found[""]["expected"], 200)
        self.assertEqual(found[""]["got"], 422)

    def test_question_not_answered_is_an_error_and_the_rest_is_asked(self):
        self.service.answers[f"POST {PATH}"] = [problem(500, 1090, "Broken."), Reply(200, answer())]
        got = self.leeway("replay", self.file(entry(answer()), entry(answer())))
        self.assertEqual(got.status, 2)
        self.assertIn("2 questions: 1 same, 0 differ, 1 not answered", got.out)
        self.assertIn("line 2 was not answered", got.err)
        self.service.answers[f"POST {PATH}"] = [problem(500, 1090, "Broken."), Reply(200, answer())]
        got = self.leeway("replay", self.path("q.replay"), "--json")
        self.assertEqual([json.loads(line) for line in got.out.splitlines()], [
            {"questions": 2, "asked": 2, "same": 1, "differ": 0, "differences": 0,
             "not_answered": 1}])
        for reply in (problem(401, 1010, "Token."), Reply(200, b"<html>", "text/html")):
            self.assertEqual(self.replay(answer(), reply).status, 2)

    def test_nobody_there(self):
        got = self.leeway("replay", self.file(entry(answer()), entry(answer())), "--server",
                          "http://127.0.0.1:1")
        self.assertEqual(got.status, 3)
        self.assertIn("1 not asked", got.out)

    def test_another_revision_or_mechanism(self):
        body = {"pose": {"x": 1}, "revision": 2, "expect": "abcdef01"}
        self.service.answers[f"POST {PATH}"] = Reply(200, answer())
        other = "POST /v1/mechanisms/label-stage-b/inverse"
        self.service.answers[other] = Reply(200, answer(mechanism="label-stage-b"))
        file = self.file(entry(answer(), body=body))
        self.assertEqual(self.leeway("replay", file).status, 0)
        self.assertEqual(self.asked_body(), body)
        self.assertEqual(self.leeway("replay", file, "--revision", "7").status, 0)
        self.assertEqual(self.asked_body(), {"pose": {"x": 1}, "revision": 7})
        self.assertEqual(self.leeway("replay", file, "--mechanism", "label-stage-b").status, 0)
        batch = {"batch": [{"pose": {"x": 1}, "revision": 1}, {"pose": {"x": 2}}]}
        self.leeway("replay", self.file(entry(answer(), body=batch)), "--revision", "7")
        self.assertEqual(self.asked_body(),
                         {"batch": [{"pose": {"x": 1}}, {"pose": {"x": 2}}], "revision": 7})
        get = {"method": "GET", "path": "/v1/mechanisms/label-stage/reach?x=1&revision=2&y=3",
               "expect": {"code": 1}}
        wanted = "/v1/mechanisms/label-stage/reach?revision=7&x=1&y=3"
        self.service.answers[f"GET {wanted}"] = Reply(200, answer())
        self.assertEqual(self.leeway("replay", self.file(get), "--revision", "7").status, 0)
        self.assertEqual(self.service.asked[-1]["path"], wanted)

    def test_faults_of_the_file_are_told_before_anything_is_asked(self):
        good = entry(answer())
        table = [
            ("", "the file is empty"), ("{}\n", "line 1: expected the head"),
            ('{"format": "leeway-replay/2"}\n', "line 1: expected the head"),
            (self.text({"expectt": 1}), "line 2: /expectt: unknown member"),
            (self.text(drop="expect"), "line 2: /expect"),
            (self.text(drop="body"), "line 2: /body"),
            (self.text({"expect": 3}), "line 2: /expect"),
            (self.text({"body": []}), "line 2: /body"),
            (self.text({"method": "PUT"}), "line 2: /method"),
            (self.text({"method": "GET"}), "line 2: /path"),
            (self.text({"method": "GET", "path": "/v1/mechanisms/a/reach"}), "line 2: /body"),
            (self.text({"status": 99}), "line 2: /status"),
            (self.text({"status": 200.5}), "line 2: /status"),
            (self.text({"note": 3}), "line 2: /note"),
            (self.text({"tolerance": {"inch": 1}}), "line 2: /tolerance/inch"),
            (self.text({"tolerance": {"ratio": -1}}), "line 2: /tolerance/ratio"),
            (self.text({"tolerance": 3}), '"tolerance" and "at"'),
            (self.text({"at": {"m1": 3}}), "line 2: /at/m1"),
            (self.text({"at": {"/m1": "3"}}), "line 2: /at/~1m1"),
            (self.text({"check": ["a", 1]}), "line 2: /check"),
            (self.text({"ignore": "a"}), "line 2: /ignore"),
            (json.dumps(HEAD) + "\n\n[1]\n", "line 3: expected one JSON object"),
            (json.dumps(HEAD) + "\n" + json.dumps(good) + "\n{\n", "line 3, column 2"),
        ]
        for path in ("/v1/mechanisms/a/revisions/1/publish", "/v1/mechanisms/a/publish",
                     "/v1/mechanisms/a", "/v1/mechanisms/A/inverse", "/v1/mechanisms//inverse",
                     "/v1/mechanisms/a/inverse?x=1", "/v1/mechanisms/a/inverse#", "/metrics",
                     "http://elsewhere/v1/mechanisms/a/inverse", "/v1/mechanisms/../a/inverse",
                     "/v1/mechanisms/a/inverse\r\nX: y", "/v1/mechanisms/a/map"):
            table.append((self.text({"path": path}), "line 2: /path"))
        for text, wanted in table:
            with self.subTest(wanted=wanted, text=text[:120]):
                got = self.leeway("replay", self.write("bad.replay", text))
                self.assertEqual((got.status, got.out), (2, ""))
                self.assertIn(wanted, got.err)
        for words, wanted in ((["--tolerance", "mm=1"], "length_mm=V"),
                              (["--tolerance", "ratio=-1"], "length_mm=V"),
                              (["--revision", "x"], "no revision"),
                              (["--mechanism", "A"], "lower case")):
            got = self.leeway("replay", self.file(good), *words)
            self.assertEqual(got.status, 2)
            self.assertIn(wanted, got.err)
        self.assertEqual(self.service.asked, [])

    @staticmethod
    def text(more=None, drop=None):
        line = {**entry(answer()), **(more or {})}
        line.pop(drop, None)
        return json.dumps(HEAD) + "\n" + json.dumps(line) + "\n"

    def test_a_file_from_another_system_or_without_a_last_line_end(self):
        text = json.dumps(HEAD) + "\r\n\r\n" + json.dumps(entry(answer()))
        self.service.answers[f"POST {PATH}"] = Reply(200, answer())
        self.assertEqual(self.leeway("replay", self.write("dos.replay", text)).status, 0)
        got = self.leeway("replay", "-", stdin=text.encode())
        self.assertEqual((got.status, got.out), (0, "1 questions: 1 same, 0 differ\n"))

    def test_update_rewrites_only_what_differs(self):
        same = '{"expect":{"code":1},   "method":"POST","path":"%s","body":{"pose":{"x":1}}}' % PATH
        file = self.file(same, entry({"margin": 1.5, "solutions": [{"mode": "+", "drives": {
            "m1": 1}}]}, note="kept"), head={"title": "two questions"})
        new = answer(margin=0.1 + 0.2, solutions=[solution("+", {"m1": 2, "m2": 3})])
        self.service.answers[f"POST {PATH}"] = Reply(200, new)
        os.chmod(file, 0o640)
        got = self.leeway("replay", file, "--update")
        self.assertEqual(got.status, 0)
        self.assertIn("expectations rewritten", got.out)
        lines = self.read("q.replay").splitlines()
        self.assertEqual(json.loads(lines[0]), {**HEAD, "title": "two questions"})
        self.assertEqual(lines[1], same)
        self.assertEqual(json.loads(lines[2]), entry(
            {"margin": 0.30000000000000004, "solutions": [{"mode": "+", "drives": {"m1": 2}}]},
            note="kept"))
        self.assertEqual(os.stat(file).st_mode & 0o777, 0o640)
        self.assertEqual(os.listdir(self.folder), ["q.replay"])
        self.assertEqual(self.leeway("replay", file).status, 0)

    def test_update_takes_a_new_status_too(self):
        file = self.file(entry({"code": 1}))
        self.service.answers[f"POST {PATH}"] = problem(422, 1021, "No.")
        self.assertEqual(self.leeway("replay", file, "--update").status, 0)
        self.assertEqual(json.loads(self.read("q.replay").splitlines()[1])["status"], 422)
        self.assertEqual(self.leeway("replay", file).status, 0)

    def test_update_leaves_the_file_where_something_went_unanswered(self):
        file = self.file(entry({"margin": 1}), entry({"margin": 1}))
        before = self.read("q.replay")
        self.service.answers[f"POST {PATH}"] = [Reply(200, answer(margin=2)),
                                                problem(500, 1090, "Broken.")]
        got = self.leeway("replay", file, "--update")
        self.assertEqual(got.status, 2)
        self.assertIn("left as it is", got.err)
        self.assertEqual(self.read("q.replay"), before)
        self.assertEqual(self.leeway("replay", "-", "--update", stdin=before.encode()).status, 2)

    def test_ctrl_c_leaves_the_file_and_tells_how_far_it_came(self):
        file = self.file(*[entry({"margin": 1})] * 3)
        before = self.read("q.replay")
        self.service.answers[f"POST {PATH}"] = [Reply(200, answer(margin=2)),
                                                Reply(200, {}, wait_s=20)]
        process = subprocess.Popen([CLI, "replay", file, "--update"], env=self.environment(),
                                   stdout=subprocess.PIPE, stderr=subprocess.PIPE)
        end = time.monotonic() + 20
        while len(self.service.asked) < 2 and time.monotonic() < end:
            time.sleep(0.02)
        process.send_signal(signal.SIGINT)
        out, _ = process.communicate(timeout=20)
        self.assertEqual(process.returncode, -signal.SIGINT)
        self.assertIn(b"1 not asked", out)
        self.assertEqual(self.read("q.replay"), before)

    def test_no_progress_off_a_terminal(self):
        self.service.answers[f"POST {PATH}"] = Reply(200, answer())
        got = self.leeway("replay", self.file(*[entry(answer())] * 50))
        self.assertEqual((got.status, got.err), (0, ""))
        self.assertEqual(got.out, "50 questions: 50 same, 0 differ\n")


class Record(Case):

    def ask(self, *words):
        return self.leeway("ask", "inverse", "label-stage", "x=0.1", "--record",
                           self.path("new.replay"), *words)

    def test_recorded_questions_replay(self):
        exact = answer(margin=0.1 + 0.2, text="Größe \" \\ \n", empty=[], deep={"a": [{}]})
        self.service.answers[f"POST {PATH}"] = [Reply(200, exact),
                                                problem(422, 1021, "No.", pointer="/pose")] * 2
        self.assertEqual(self.ask().status, 0)
        self.assertEqual(self.ask("--json", "--tool", "camera").status, 2)
        lines = [json.loads(line) for line in self.read("new.replay").splitlines()]
        self.assertEqual(lines[0], HEAD)
        self.assertEqual(lines[1], {"method": "POST", "path": PATH, "body": {"pose": {"x": 0.1}},
                                    "status": 200, "expect": exact})
        self.assertEqual(lines[2]["body"], {"pose": {"x": 0.1}, "tool": "camera"})
        self.assertEqual((lines[2]["status"], lines[2]["expect"]["code"]), (422, 1021))
        got = self.leeway("replay", self.path("new.replay"))
        self.assertEqual((got.status, got.out), (0, "2 questions: 2 same, 0 differ\n"))

    def test_troubles_of_the_service_are_not_recorded(self):
        for reply in (problem(401, 1010, "Token."), problem(403, 1011, "Role."),
                      problem(500, 1090, "Broken."), Reply(200, b"<html>", "text/html")):
            self.service.answers[f"POST {PATH}"] = reply
            self.assertEqual(self.ask().status, 2)
        self.assertEqual(self.read("new.replay"), "")

    def test_never_adds_to_a_file_of_another_kind(self):
        self.service.answers[f"POST {PATH}"] = Reply(200, answer())
        for content in ("precious notes\n", '{"format":"leeway-mechanism/1"}\n', "{}"):
            file = self.write("new.replay", content)
            got = self.ask()
            self.assertEqual(got.status, 2)
            self.assertIn("is no replay file", got.err)
            self.assertEqual(self.read("new.replay"), content)
            os.remove(file)
        got = self.leeway("ask", "inverse", "label-stage", "x=1", "--record", self.folder)
        self.assertEqual(got.status, 2)
        self.assertEqual(self.service.asked, [])

    def test_appends_after_a_missing_line_end(self):
        self.write("new.replay", json.dumps(HEAD))
        self.service.answers[f"POST {PATH}"] = Reply(200, answer())
        self.assertEqual(self.ask().status, 0)
        self.assertEqual(len(self.read("new.replay").splitlines()), 2)
        self.assertEqual(self.leeway("replay", self.path("new.replay")).status, 0)


if __name__ == "__main__":
    unittest.main()
