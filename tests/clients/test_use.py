# SPDX-License-Identifier: GPL-3.0-or-later
"""How the command line is read, and what it teaches: options, help, completion, the manual page."""

import os
import re
import shutil
import subprocess
import unittest

from support import CLI, Case, Reply

ROOM = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "..", "clients", "cli")
COMMANDS = ["load", "list", "show", "report", "history", "publish", "withdraw", "ask", "path",
            "travel", "difference", "health", "about", "replay", "completion", "help"]


class Use(Case):

    def test_refuses_wrong_words_and_says_what_to_write(self):
        table = [
            (["lst"], 'did you mean "list"'),
            (["list", "--severr", "x"], "did you mean --server"),
            (["list", "extra"], "leeway list"),
            (["show"], "show NAME [REV]"),
            (["show", "Label"], "lower case"),
            (["show", "x" * 33], "at most 32"),
            (["show", "../etc"], "lower case"),
            (["show", "a", "0"], "whole number from 1"),
            (["show", "a", "1x"], "whole number from 1"),
            (["show", "a", "-3"], "whole number from 1"),
            (["publish", "a"], "publish NAME REV"),
            (["list", "--mode", "++"], "takes no option --mode"),
            (["list", "--json=yes"], "takes no value"),
            (["list", "--json", "--json"], "given twice"),
            (["list", "--server"], "wants a value"),
            (["list", "--timeout", "soon"], "seconds"),
            (["list", "--timeout", "nan"], "seconds"),
            (["list", "--timeout", "-1"], "seconds"),
            (["list", "--server", "cell-7:8470"], "http://127.0.0.1:8470"),
            (["list", "--server", "http://user:pw@cell"], "http://127.0.0.1:8470"),
            (["list", "--server", "ftp://cell"], "http://127.0.0.1:8470"),
            (["list", "--server", "http://"], "http://127.0.0.1:8470"),
            (["completion", "fish"], "completion bash"),
            (["help", "asc"], 'did you mean "ask"'),
            (["difference", "a", "1"], "difference NAME A B"),
            ([], "leeway list"),
        ]
        for words, wanted in table:
            with self.subTest(words=words):
                got = self.leeway(*words)
                self.assertEqual(got.status, 2)
                self.assertIn(wanted, got.err)
                self.assertEqual(got.out, "")
        self.assertEqual(self.service.asked, [])

    def test_takes_options_before_and_after_the_command(self):
        self.service.answers["GET /v1/mechanisms"] = Reply(200, {"mechanisms": []})
        for words in (["--json", "list"], ["list", "--json"],
                      ["list", "--json", f"--server={self.service.url}/"]):
            with self.subTest(words=words):
                got = self.leeway(*words)
                self.assertEqual((got.status, got.out), (0, '{"mechanisms": []}\n'))

    def test_every_command_has_help_with_an_example(self):
        for command in COMMANDS:
            with self.subTest(command=command):
                got = self.leeway("help", command)
                again = self.leeway(command, "--help")
                self.assertEqual(got.status, 0)
                if command != "help":  # "leeway help --help" is the overview
                    self.assertEqual(got.out, again.out)
                self.assertIn(f"usage: leeway {command}", got.out)
                self.assertIn("options\n", got.out)
        got = self.leeway("help")
        self.assertIn("no safety function", got.out)
        for command in COMMANDS:
            self.assertIn(command, got.out)
        self.assertEqual(self.service.asked, [])

    def test_lines_of_help_fit_a_terminal(self):
        for command in COMMANDS:
            for line in self.leeway("help", command).out.splitlines():
                self.assertLessEqual(len(line), 100, line)

    def test_version(self):
        got = self.leeway("--version")
        self.assertRegex(got.out, r"^leeway [0-9]+(\.[0-9]+)*\n$")
        self.assertEqual(got.status, 0)

    def test_full_disk_is_told(self):
        if not os.path.exists("/dev/full"):
            self.fail("this system has no /dev/full")
        with open("/dev/full", "wb") as full:
            done = subprocess.run([CLI, "help"], stdout=full, stderr=subprocess.PIPE,
                                  env=self.environment(), check=False)
        self.assertEqual(done.returncode, 2)
        self.assertIn(b"could not be written", done.stderr)


class Completion(Case):
    """The completion as bash runs it: COMP_WORDS as bash cuts them."""

    def complete(self, *words, env=None):
        script = f"""
            source <("$0" completion bash)
            compopt() {{ :; }}
            COMP_WORDS=("$0" "$@")
            COMP_CWORD=$#
            _leeway
            printf '%s\\n' "${{COMPREPLY[@]}}"
        """
        done = subprocess.run(["bash", "-c", script, CLI, *words], capture_output=True, check=False,
                              env=self.environment(**(env or {})), timeout=60)
        self.assertEqual(done.stderr, b"")
        self.assertEqual(done.returncode, 0)
        return done.stdout.decode().split()

    def test_bash_accepts_it(self):
        script = os.path.join(ROOM, "completion.bash")
        subprocess.run(["bash", "-n", script], check=True)
        got = self.leeway("completion", "bash")
        with open(script, encoding="utf-8") as file:
            self.assertEqual(got.out, file.read())

    def test_completes_commands_and_kinds(self):
        self.assertEqual(sorted(self.complete("")), sorted(COMMANDS))
        self.assertEqual(self.complete("hi"), ["history"])
        self.assertEqual(self.complete("ask", "ma"), ["margin"])
        self.assertEqual(self.complete("--json", "ask", "re"), ["reach"])
        self.assertEqual(self.complete("help", "publ"), ["publish"])
        self.assertEqual(self.complete("completion", ""), ["bash"])

    def test_completes_names_of_the_catalog(self):
        self.service.answers["GET /v1/mechanisms"] = Reply(200, {
            "mechanisms": [{"mechanism": "label-stage"}, {"mechanism": "lid-turner"},
                           {"mechanism": "tilt-table"}],
            "next": None})
        self.assertEqual(self.complete("show", "l"), ["label-stage", "lid-turner"])
        self.assertEqual(self.complete("ask", "inverse", "tilt"), ["tilt-table"])
        host, port = self.service.url[len("http://"):].split(":")
        self.assertEqual(self.complete("--server", "http", ":", f"//{host}", ":", port, "show", "t",
                                       env={"LEEWAY_SERVER": "http://127.0.0.1:1"}),
                         ["tilt-table"])

    def test_completes_nothing_where_nobody_answers(self):
        nobody = {"LEEWAY_SERVER": "http://127.0.0.1:1"}
        self.assertEqual(self.complete("show", "l", env=nobody), [])

    def test_completes_exactly_the_options_the_program_takes(self):
        for command in COMMANDS:
            with self.subTest(command=command):
                told = re.findall(r"^  --([a-z-]+)", self.leeway("help", command).out, re.M)
                offered = [word[2:] for word in self.complete(command, "--")]
                self.assertEqual(sorted(told), sorted(offered))

    def test_completes_files(self):
        self.write("one.replay", "")
        self.assertEqual(self.complete("replay", self.path("one")), [self.path("one.replay")])
        self.assertEqual(self.complete("load", self.path("o")), [self.path("one.replay")])


class Manual(unittest.TestCase):

    def page(self):
        done = subprocess.run(["man", "--warnings", "-l", os.path.join(ROOM, "leeway.1")],
                              capture_output=True, check=False,
                              env={"PATH": os.environ["PATH"], "LC_ALL": "C.UTF-8",
                                   "MANWIDTH": "90", "MANROFFOPT": ""})
        self.assertEqual(done.returncode, 0)
        self.assertEqual(done.stderr.decode(), "")
        return re.sub(".\b", "", done.stdout.decode())

    def test_formats_without_warnings_and_names_everything(self):
        self.assertIsNotNone(shutil.which("man"), "install man-db to check the manual page")
        page = self.page()
        for command in COMMANDS:
            self.assertIn(command, page)
        for command in COMMANDS:
            told = subprocess.run([CLI, "help", command], capture_output=True, check=True)
            for option in re.findall(r"^  (--[a-z-]+)", told.stdout.decode(), re.M):
                self.assertIn(option, page)
        for variable in ("LEEWAY_SERVER", "LEEWAY_TOKEN_FILE", "NO_COLOR"):
            self.assertIn(variable, page)
        self.assertIn("no safety function", re.sub(r"\s+", " ", page))


if __name__ == "__main__":
    unittest.main()
