# SPDX-License-Identifier: GPL-3.0-or-later
"""The command line against the real daemon: a document is loaded, published, asked, changed, asked
again by replay, and withdrawn. LEEWAYD names the daemon, LEEWAY_CLI the program.

The document is deploy/demo/tilt-table.json. What is checked against the outside: a drive's reading
is at_reference + per_unit * coordinate (the document format's own definition), so a revision whose
first drive has its at_reference moved by 1.5 must answer the same pose with that reading 1.5 higher
and nothing else changed."""

import json
import os
import re
import signal
import subprocess
import tempfile
import time
import unittest

from support import CLI

LEEWAYD = os.environ.get("LEEWAYD", "")
DEMO = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "..", "deploy", "demo")
POSE = ["x=20", "y=-15", "z=530", "yaw=4", "pitch=-6", "roll=8"]
SHIFT = 1.5


class Daemon(unittest.TestCase):

    def setUp(self):
        for name, value in (("LEEWAY_CLI", CLI), ("LEEWAYD", LEEWAYD)):
            if not value:
                self.fail(f"set {name} to the program to check")
        folder = tempfile.TemporaryDirectory()
        self.addCleanup(folder.cleanup)
        self.folder = folder.name
        self.env = {k: v for k, v in os.environ.items()
                    if k in ("PATH", "HOME", "TMPDIR") or k.endswith("SAN_OPTIONS")}
        with open(os.path.join(DEMO, "tilt-table.json"), encoding="utf-8") as file:
            self.document = json.load(file)

    def path(self, name):
        return os.path.join(self.folder, name)

    def start(self, *options):
        os.makedirs(self.path("data"), exist_ok=True)
        with open(self.path("log"), "ab") as log:
            daemon = subprocess.Popen(
                [LEEWAYD, "--data", self.path("data"), "--port", "0", "--port-file",
                 self.path("port"), *options], stdout=log, stderr=log, env=self.env)
        self.addCleanup(self.stop, daemon)
        end = time.monotonic() + 60
        while time.monotonic() < end and daemon.poll() is None:
            if os.path.exists(self.path("port")):
                with open(self.path("port"), encoding="utf-8") as file:
                    port = re.search(r"\d+\s*$", file.read())
                if port:
                    self.env["LEEWAY_SERVER"] = f"http://127.0.0.1:{port.group().strip()}"
                    if self.leeway("health").returncode == 0:
                        return daemon
            time.sleep(0.05)
        with open(self.path("log"), encoding="utf-8") as file:
            self.fail("the daemon does not answer: " + file.read()[-2000:])

    def stop(self, daemon):
        if daemon.poll() is None:
            daemon.send_signal(signal.SIGTERM)
            daemon.wait(timeout=60)
        self.assertEqual(daemon.returncode, 0)

    def leeway(self, *words, env=None):
        done = subprocess.run([CLI, *words], capture_output=True, timeout=120, check=False,
                              env={**self.env, **(env or {})}, text=True)
        self.assertNotIn("Sanitizer", done.stderr)
        self.assertNotIn("runtime error", done.stderr)
        return done

    def good(self, *words, status=0):
        done = self.leeway(*words)
        self.assertEqual((done.returncode, done.stderr), (status, ""), done.stdout)
        return done.stdout

    def load(self, document, name="document.json"):
        with open(self.path(name), "w", encoding="utf-8") as file:
            json.dump(document, file)
        return self.leeway("load", self.path(name))

    def test_a_day_with_the_command_line(self):
        self.start()
        self.assertIn("the catalog is empty", self.good("list"))
        self.assertIn("no safety function", self.good("about"))
        self.load_publish_and_look()
        self.ask_and_record()
        self.replay_against_a_changed_revision()
        self.refusals()
        self.good("withdraw", "tilt-table", "1", "--reason", "end of the day")
        late = self.leeway("ask", "reach", "tilt-table", *POSE)
        self.assertEqual(late.returncode, 2)
        self.assertIn("leeway publish NAME REV", late.stderr)

    def load_publish_and_look(self):
        done = self.load(self.document)
        self.assertEqual((done.returncode, done.stderr), (0, ""))
        self.assertIn("tilt-table revision 1, stored as a new draft", done.stdout)
        self.assertIn("stored before", self.load(self.document).stdout)
        draft = self.leeway("ask", "reach", "tilt-table", *POSE)
        self.assertEqual(draft.returncode, 2)
        self.assertIn("leeway publish", draft.stderr)
        self.good("publish", "tilt-table", "1", "--reason", "first of the day")
        self.assertRegex(self.good("list"), r"(?m)^tilt-table +1 ")
        self.assertIn("strut-1", self.good("show", "tilt-table"))
        self.assertEqual(json.loads(self.good("show", "tilt-table", "1", "--json")), self.document)
        self.assertRegex(self.good("report", "tilt-table"), r"(?m)^mobility")
        history = self.good("history", "tilt-table")
        self.assertIn("first of the day", history)

    def ask_and_record(self):
        record = ["--record", self.path("day.replay")]
        shown = self.good("ask", "inverse", "tilt-table", *POSE, *record)
        self.assertRegex(shown, r"(?m)^verdict +1 ok: ")
        inverse = json.loads(self.good("ask", "inverse", "tilt-table", *POSE, "--json"))
        readings = [f"{drive}={value!r}" for drive, value in
                    inverse["solutions"][0]["drives"].items()]
        forward = json.loads(self.good("ask", "forward", "tilt-table", *readings, "--orientation",
                                       "zyx", "--json", *record))
        pose = forward["solutions"][0]["pose"]
        # Round trip through two questions and the text of six readings: 1e-6 mm and deg.
        for got, want in ((pose["x"], 20), (pose["y"], -15), (pose["z"], 530),
                          (pose["zyx"]["yaw"], 4), (pose["zyx"]["pitch"], -6),
                          (pose["zyx"]["roll"], 8)):
            self.assertAlmostEqual(got, want, delta=1e-6)
        self.assertIn("forward\n", self.good("ask", "jacobian", "tilt-table", *readings, *record))
        self.assertEqual(self.good("ask", "margin", "tilt-table", *POSE, *record).count("<- least"),
                         1)
        self.good("ask", "reach", "tilt-table", *POSE, *record)
        far = self.good("ask", "reach", "tilt-table", "x=9000", *POSE[1:], *record, status=1)
        self.assertRegex(far, r"(?m)^verdict +[34] ")
        self.good("ask", "reach", "tilt-table", "x=9000", *POSE[1:], "--ok-any")
        metres = json.loads(self.good("ask", "inverse", "tilt-table", "x=0.02", "y=-0.015",
                                      "z=0.53", *POSE[3:], "--units", "m,deg", "--json", *record))
        for drive, value in inverse["solutions"][0]["drives"].items():
            self.assertAlmostEqual(metres["solutions"][0]["drives"][drive], value, delta=1e-9)

    def test_a_path(self):
        """A straight move there and back: the same verdicts as a table and as JSON, and its length
        by Pythagoras; recorded and replayed to the last digit."""
        self.start("--prepare-paths", "200")
        self.load(self.document)
        self.good("publish", "tilt-table", "1")
        start = "a1=520 a2=520 a3=520 a4=520 a5=520 a6=520"
        with open(self.path("job.csv"), "w", encoding="utf-8") as file:
            file.write("line,move,x,y,z,yaw,pitch,roll\nN10,line,3,4,525,0,0,0\n"
                       "N20,line,3,4,537,0,0,0\n")
        record = ["--record", self.path("path.replay")]
        shown = self.good("path", "tilt-table", self.path("job.csv"), "--from", start, *record)
        self.assertRegex(shown, r"(?m)^  N20 +line +1 ok +1 ")
        table = json.loads(self.good("path", "tilt-table", self.path("job.csv"), "--from", start,
                                     "--json"))
        self.assertAlmostEqual(table["moves"][1]["length"], 12, delta=1e-6)
        with open(self.path("job.json"), "w", encoding="utf-8") as file:
            json.dump(table["asked"]["through"], file)
        listed = json.loads(self.good("path", "tilt-table", self.path("job.json"), "--from", start,
                                      "--json"))
        self.assertEqual(listed["moves"], table["moves"])
        self.good("travel", "tilt-table", *start.split(), "--reach", "position=2,angle=1", *record)
        self.assertEqual(self.good("replay", self.path("path.replay"), "--tolerance",
                                   "length_mm=0,angle_deg=0,ratio=0,reading=0"),
                         "2 questions: 2 same, 0 differ\n")

    def replay_against_a_changed_revision(self):
        file = self.path("day.replay")
        exact = "length_mm=0,angle_deg=0,ratio=0,reading=0"
        self.assertEqual(self.good("replay", file, "--tolerance", exact),
                         "7 questions: 7 same, 0 differ\n")
        changed = json.loads(json.dumps(self.document))
        reading = changed["drives"][0].setdefault("reading", {})
        moved = changed["drives"][0]["name"]
        before = reading.get("at_reference", self.reference_length(changed))
        reading["at_reference"] = before + SHIFT
        for key in ("range",):
            if key in changed["drives"][0]:
                changed["drives"][0][key] = [value + SHIFT for value in changed["drives"][0][key]]
        changed.pop("checks", None)
        done = self.load(changed)
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertIn("revision 2", done.stdout)
        got = self.leeway("replay", file, "--revision", "2", "--json")
        self.assertEqual((got.returncode, got.stderr), (1, ""))
        lines = [json.loads(line) for line in got.stdout.splitlines()]
        inverse = [line for line in lines[:-1] if line["path"].endswith("/inverse")]
        self.assertEqual({line["pointer"] for line in inverse}, {f"/solutions/0/drives/{moved}"})
        for line in inverse:
            self.assertAlmostEqual(line["off_by"], SHIFT, delta=1e-9)
        self.assertEqual(self.leeway("replay", file).returncode, 0, "revision 1 still answers")
        self.assertIn(moved, self.good("difference", "tilt-table", "1", "2"))
        with open(file, encoding="utf-8") as recorded:
            kept = recorded.read()
        self.good("replay", file, "--revision", "2", "--update")
        self.good("replay", file, "--revision", "2", "--tolerance", exact)
        self.assertEqual(self.leeway("replay", file).returncode, 1)
        with open(file, "w", encoding="utf-8") as recorded:
            recorded.write(kept)

    @staticmethod
    def reference_length(document):
        ends = document["rods"][0]["ends"]
        return sum((a - b) ** 2 for a, b in zip(*ends)) ** 0.5

    def refusals(self):
        broken = json.loads(json.dumps(self.document))
        broken["drives"][2]["moves"] = "no-such-strut"
        done = self.load(broken)
        self.assertEqual((done.returncode, done.stdout), (2, ""))
        self.assertIn("/drives/2/moves", done.stderr)
        self.assertIn("not stored", done.stderr)
        done = self.leeway("ask", "forward", "tilt-table", "no-such-drive=3")
        self.assertEqual(done.returncode, 2)
        self.assertIn("/drives/no-such-drive", done.stderr)
        with open(self.path("batch.json"), "w", encoding="utf-8") as file:
            json.dump({"batch": [{"pose": {"x": 20, "y": -15, "z": 530,
                                           "zyx": {"yaw": 4, "pitch": -6, "roll": 8}}},
                                 {"pose": {"x": 1, "joints": {"no-such": 3}}}]}, file)
        done = self.leeway("ask", "inverse", "tilt-table", "--json-body", self.path("batch.json"))
        self.assertEqual(done.returncode, 2)
        self.assertRegex(done.stdout, r"(?s)answer 1 of 2\n.*1 ok: .*answer 2 of 2\nrefused ")
        self.assertIn("/batch/1/pose/joints/no-such", done.stdout)
        done = self.leeway("ask", "reach", "tilt-table", *POSE, "--expect", "00000000")
        self.assertEqual(done.returncode, 2)
        self.assertEqual(self.leeway("ask", "reach", "nowhere", *POSE).returncode, 2)
        self.assertEqual(self.leeway("publish", "tilt-table", "99").returncode, 2)

    def test_tokens(self):
        lines = []
        for name, role in (("script", "query"), ("keeper", "admin")):
            made = subprocess.run([LEEWAYD, "--make-token", name, role], capture_output=True,
                                  check=True, text=True, env=self.env).stdout
            line = re.search(rf"(?m)^.*({name} {role} [0-9a-f]{{64}})\s*$", made).group(1)
            token = re.search(r"(?m)^(?:token:?\s+)?(\S{20,})\s*$", made).group(1)
            lines.append(line)
            with open(self.path(name), "w", encoding="utf-8") as file:
                file.write(token + "\n")
        with open(self.path("tokens"), "w", encoding="utf-8") as file:
            file.write("\n".join(lines) + "\n")
        os.chmod(self.path("tokens"), 0o600)
        self.start("--token-file", self.path("tokens"))
        nobody = self.leeway("list")
        self.assertEqual(nobody.returncode, 2)
        self.assertIn("--token-file FILE", nobody.stderr)
        self.env["LEEWAY_TOKEN_FILE"] = self.path("script")
        self.assertIn("the catalog is empty", self.good("list"))
        refused = self.load(self.document)
        self.assertEqual(refused.returncode, 2)
        self.assertIn("role author or admin", refused.stderr)
        self.env["LEEWAY_TOKEN_FILE"] = self.path("keeper")
        self.assertEqual(self.load(self.document).returncode, 0)
        self.good("publish", "tilt-table", "1")
        self.assertIn("keeper", self.good("history", "tilt-table"))


if __name__ == "__main__":
    unittest.main()
