# SPDX-License-Identifier: GPL-3.0-or-later
"""The talk with the service when it goes wrong: nobody there, late, foreign, huge, refused, busy,
interrupted; and what must never reach a terminal or another server."""

import json
import os
import pty
import re
import select
import signal
import socket
import subprocess
import threading
import time
import unittest

from support import CLI, Case, Reply, answer, problem

LIST = "GET /v1/mechanisms"
ASK = ["ask", "reach", "label-stage", "x=10", "y=-20", "rz=5"]
REACH = "POST /v1/mechanisms/label-stage/reach"


class Contact(Case):

    def test_nobody_there(self):
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            url = f"http://127.0.0.1:{free.getsockname()[1]}"
            for words in (["list"], ASK, ["health"], ["load", "-"], ["about"]):
                with self.subTest(words=words):
                    got = self.leeway(*words, "--server", url, stdin=b'{"name": "a"}')
                    self.assertEqual((got.status, got.out), (3, ""))
                    self.assertIn(f"no service answers at {url}", got.err)
                    self.assertIn("deploy/up", got.err)

    def test_name_that_does_not_resolve(self):
        got = self.leeway("list", "--server", "http://no-such-host.invalid:1")
        self.assertEqual(got.status, 3)
        self.assertIn("--server URL", got.err)

    def test_late_answer(self):
        self.service.answers[LIST] = Reply(200, {}, wait_s=20)
        start = time.monotonic()
        got = self.leeway("list", "--timeout", "0.3")
        self.assertLess(time.monotonic() - start, 10)
        self.assertEqual(got.status, 3)
        self.assertIn("within 0.3 s", got.err)
        self.assertIn("--timeout SECONDS", got.err)

    def raw_server(self, *parts):
        """A server that sends these bytes to one client and hangs up."""
        listener = socket.socket()
        listener.bind(("127.0.0.1", 0))
        listener.listen(1)
        listener.settimeout(20)

        def serve():
            try:
                client, _ = listener.accept()
                with client:
                    client.recv(65536)
                    for part in parts:
                        client.sendall(part)
            except OSError:
                pass
            listener.close()

        thread = threading.Thread(target=serve, daemon=True)
        thread.start()
        self.addCleanup(thread.join, 20)
        return f"http://127.0.0.1:{listener.getsockname()[1]}"

    def test_answers_that_break_off(self):
        for parts in ([b""], [b"HTTP/1.1 200 OK\r\nContent-Length: 100\r\n\r\n{"],
                      [b"\x16\x03\x01 what"]):
            with self.subTest(parts=parts):
                got = self.leeway("list", "--server", self.raw_server(*parts))
                self.assertEqual((got.status, got.out), (3, ""))
                self.assertIn("next:", got.err)

    def test_answer_that_claims_to_be_huge(self):
        url = self.raw_server(b"HTTP/1.1 200 OK\r\nContent-Type: application/json\r\n"
                              b"Content-Length: 99999999999\r\n\r\n[")
        got = self.leeway("list", "--server", url)
        self.assertEqual((got.status, got.out), (2, ""))
        self.assertIn("64 MB", got.err)

    def test_answer_that_grows_huge(self):
        chunk = b"100000\r\n" + b" " * 0x100000 + b"\r\n"
        url = self.raw_server(b"HTTP/1.1 200 OK\r\nContent-Type: application/json\r\n"
                              b"Transfer-Encoding: chunked\r\n\r\n", *([chunk] * 66))
        got = self.leeway("list", "--server", url)
        self.assertEqual((got.status, got.out), (2, ""))
        self.assertIn("64 MB", got.err)

    def test_answer_with_too_many_values(self):
        self.service.answers[LIST] = Reply(200, b"[" + b"0," * 2_000_001 + b"0]")
        got = self.leeway("list")
        self.assertEqual(got.status, 2)
        self.assertIn("more than 2000000 values", got.err)

    def test_answers_that_are_no_json(self):
        table = [
            (Reply(200, b"<html>It works!</html>", "text/html"), "which is no JSON"),
            (Reply(200, b"", "application/json"), "which is no JSON"),
            (Reply(200, b'{"a": 1', "application/json"), "the text ends here"),
            (Reply(200, b'{"a": 1} x', "application/json"), "nothing more"),
            (Reply(200, b'{"a": NaN}', "application/json"), "expected a value"),
            (Reply(200, b'{"a": 1e999}', "application/json"), "below 1.8e308"),
            (Reply(200, b'{"a": 01}', "application/json"), "',' or '}'"),
            (Reply(200, b'{"a": "\xff"}', "application/json"), "UTF-8"),
            (Reply(200, b'{"a": "\x1b[2J"}', "application/json"), "control character"),
            (Reply(200, b'{"a": "\\u0000"}', "application/json"), "u0000"),
            (Reply(200, b'{"a": "\\ud800"}', "application/json"), "surrogate"),
            (Reply(200, b'{"a": 1, "a": 2}', "application/json"), "stands twice"),
            (Reply(200, b"[" * 100 + b"]" * 100, "application/json"), "deeper than 64"),
            (Reply(502, b"Bad gateway", "text/plain"), "status 502"),
            (Reply(302, b"", "text/html", {"Location": "http://elsewhere/login"}),
             "http://elsewhere/login"),
        ]
        for reply, wanted in table:
            with self.subTest(body=reply.body[:20], wanted=wanted):
                self.service.answers[LIST] = reply
                got = self.leeway("list")
                self.assertEqual((got.status, got.out), (2, ""))
                self.assertIn(wanted, got.err)
                self.assertNotIn("\x1b", got.err)

    def test_follows_no_redirect(self):
        other = type(self.service)()
        self.addCleanup(other.close)
        other.answers[LIST] = Reply(200, {"mechanisms": []})
        self.service.answers[LIST] = Reply(307, b"", "text/plain",
                                           {"Location": other.url + "/v1/mechanisms"})
        self.assertEqual(self.leeway("list").status, 2)
        self.assertEqual(other.asked, [])

    def test_uses_no_proxy(self):
        self.service.answers[LIST] = Reply(200, {"mechanisms": []})
        got = self.leeway("list", env={"http_proxy": "http://127.0.0.1:1",
                                       "ALL_PROXY": "http://127.0.0.1:1"})
        self.assertEqual(got.status, 0)

    def test_token_goes_out_and_is_asked_for(self):
        token = self.write("token", "abc.def-123\n")
        self.service.answers[LIST] = Reply(200, {"mechanisms": []})
        self.leeway("list")
        self.assertNotIn("authorization", self.service.asked[-1]["headers"])
        self.leeway("list", "--token-file", token)
        self.assertEqual(self.service.asked[-1]["headers"]["authorization"], "Bearer abc.def-123")
        self.leeway("list", env={"LEEWAY_TOKEN_FILE": token})
        self.assertEqual(self.service.asked[-1]["headers"]["authorization"], "Bearer abc.def-123")
        count = len(self.service.asked)
        for content, wanted in (("", "is empty"), ("a b\n", "without blanks"),
                                ("one\ntwo\n", "on one line"), ("x" * 2000, "more than")):
            got = self.leeway("list", "--token-file", self.write("token", content))
            self.assertEqual(got.status, 2)
            self.assertIn(wanted, got.err)
            self.assertNotIn("xxx", got.err)
        got = self.leeway("list", "--token-file", self.path("none"))
        self.assertEqual(got.status, 2)
        self.assertIn("No such file", got.err)
        self.assertEqual(len(self.service.asked), count)

    def test_401_and_403_say_how_to_give_a_token(self):
        token = self.write("token", "abc")
        self.service.answers[LIST] = problem(401, 1010, "A token is needed.")
        got = self.leeway("list")
        self.assertEqual(got.status, 2)
        self.assertIn("--token-file FILE", got.err)
        self.assertIn("LEEWAY_TOKEN_FILE", got.err)
        got = self.leeway("list", "--token-file", token)
        self.assertIn("ask whoever keeps the tokens", got.err)
        self.service.answers["POST /v1/mechanisms/a/revisions/1/publish"] = problem(
            403, 1011, "The role does not allow this.")
        got = self.leeway("publish", "a", "1", "--token-file", token)
        self.assertEqual(got.status, 2)
        self.assertIn("role admin", got.err)
        self.service.answers[LIST] = Reply(401, b"no", "text/plain")
        got = self.leeway("list")
        self.assertIn("--token-file FILE", got.err)

    def test_503_is_asked_again_politely(self):
        busy = problem(503, 1030, "Busy.", {"Retry-After": "1"})
        self.service.answers[REACH] = [busy, busy, Reply(200, answer())]
        start = time.monotonic()
        got = self.leeway(*ASK)
        self.assertEqual((got.status, got.err), (0, ""))
        self.assertGreaterEqual(time.monotonic() - start, 1.9)
        self.assertEqual(len(self.service.asked), 3)

    def test_503_ends_after_three_repeats(self):
        self.service.answers[REACH] = problem(503, 1030, "Busy.", {"Retry-After": "1"})
        got = self.leeway(*ASK)
        self.assertEqual((got.status, got.out), (2, ""))
        self.assertEqual(len(self.service.asked), 4)
        self.assertIn("ask again in 1 s", got.err)

    def test_503_with_a_long_wait_is_not_waited_for(self):
        self.service.answers[REACH] = problem(503, 1030, "Busy.", {"Retry-After": "3600"})
        got = self.leeway(*ASK)
        self.assertEqual(got.status, 2)
        self.assertEqual(len(self.service.asked), 1)
        self.assertIn("ask again in 3600 s", got.err)

    def interrupt(self, *words):
        process = subprocess.Popen([CLI, *words], env=self.environment(), stdout=subprocess.PIPE,
                                   stderr=subprocess.PIPE)
        end = time.monotonic() + 20
        while not self.service.asked and time.monotonic() < end:
            time.sleep(0.02)
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=20)
        self.assertEqual(process.returncode, -signal.SIGINT)
        self.assertNotIn(b"Sanitizer", err)
        self.assertIn(b"interrupted", err)
        return out.decode()

    def test_ctrl_c_ends_a_long_wait_at_once(self):
        self.service.answers[LIST] = Reply(200, {}, wait_s=20)
        start = time.monotonic()
        self.assertEqual(self.interrupt("list"), "")
        self.assertLess(time.monotonic() - start, 10)

    def test_ctrl_c_ends_a_polite_wait(self):
        self.service.answers[LIST] = problem(503, 1030, "Busy.", {"Retry-After": "20"})
        start = time.monotonic()
        self.interrupt("list")
        self.assertLess(time.monotonic() - start, 10)

    def test_problem_is_told_with_its_place(self):
        self.service.answers[REACH] = problem(
            422, 1021, "The question names a drive that is not there.", pointer="/pose/joints/shft",
            expected="a joint of the mechanism: shaft", got="shft")
        got = self.leeway(*ASK)
        self.assertEqual((got.status, got.out), (2, ""))
        for wanted in ("names a drive that is not there", "422", "1021", "/pose/joints/shft",
                       "expected  a joint of the mechanism: shaft", "got       shft"):
            self.assertIn(wanted, got.err)
        raw = self.leeway(*ASK, "--json")
        self.assertEqual(raw.status, 2)
        self.assertIn('"code": 1021', raw.out)

    def test_next_steps_by_status(self):
        for status, wanted in ((404, "leeway list"), (409, "leeway publish NAME REV"),
                               (412, "look again"), (413, "less at once"), (500, "its log")):
            self.service.answers[REACH] = problem(status, 1001, "No.")
            got = self.leeway(*ASK)
            self.assertEqual(got.status, 2)
            self.assertIn(wanted, got.err)

    def test_health_tells_alive_and_ready(self):
        self.service.answers["GET /healthz"] = Reply(200, {"status": "ok"})
        self.service.answers["GET /readyz"] = Reply(200, {"status": "ok"})
        self.assertEqual(self.leeway("health").status, 0)
        self.service.answers["GET /readyz"] = problem(503, 1031, "Not ready.",
                                                      {"Retry-After": "3600"})
        got = self.leeway("health")
        self.assertEqual(got.status, 1)
        self.assertIn("ready  no", got.out)


class Terminal(Case):
    """What a terminal gets to see."""

    def on_terminal(self, *words, **environment):
        """Output of the program when stdout and stderr are a terminal."""
        master, slave = pty.openpty()
        process = subprocess.Popen([CLI, *words], stdin=slave, stdout=slave, stderr=slave,
                                   env=self.environment(TERM="xterm", **environment))
        os.close(slave)
        out = b""
        end = time.monotonic() + 30
        while time.monotonic() < end:
            ready, _, _ = select.select([master], [], [], 0.05)
            try:
                got = os.read(master, 65536) if ready else b""
            except OSError:
                got = b""
            out += got
            if not got and process.poll() is not None:
                break
        os.close(master)
        process.wait(timeout=20)
        return out.decode()

    def test_colour_only_on_a_terminal_and_never_with_no_color(self):
        self.service.answers[REACH] = Reply(200, answer())
        self.assertNotIn("\x1b", self.leeway(*ASK, env={"TERM": "xterm"}).out)
        self.assertIn("\x1b[", self.on_terminal(*ASK))
        self.assertNotIn("\x1b", self.on_terminal(*ASK, NO_COLOR="1"))

    def test_progress_of_a_long_replay_is_shown_on_a_terminal(self):
        path = "/v1/mechanisms/label-stage/reach"
        line = json.dumps({"method": "POST", "path": path, "body": {"pose": {"x": 1}},
                           "expect": {"code": 1}})
        file = self.write("slow.replay", '{"format":"leeway-replay/1"}\n' + (line + "\n") * 3)
        self.service.answers[REACH] = Reply(200, answer(), wait_s=0.3)
        shown = self.on_terminal("replay", file)
        self.assertIn("\r2 of 3 asked, 0 differ", shown)
        self.assertIn("3 questions: 3 same, 0 differ", shown)
        self.assertNotIn("\x1b", shown)

    def test_foreign_text_cannot_drive_the_terminal(self):
        nasty = "red \u001b[31m bell \u0007 csi \u009b2J del \u007f end"
        self.service.answers[REACH] = Reply(200, answer(5, "undecided", reason=nasty,
                                                        mechanism=nasty, tool=nasty,
                                                        **{"key \u001b[0m": nasty}))
        shown = self.leeway(*ASK).out
        self.assertIn("undecided", shown)
        self.assertIsNone(re.search("[\x00-\x09\x0b-\x1f\x7f-\x9f]", shown))
        self.service.answers[REACH] = problem(422, 1001, nasty, detail=nasty, pointer=nasty,
                                              expected=nasty, got=nasty)
        told = self.leeway(*ASK).err
        self.assertIn("red", told)
        self.assertIsNone(re.search("[\x00-\x09\x0b-\x1f\x7f-\x9f]", told))
        self.service.answers[REACH] = Reply(500, nasty.encode(), "text/\x1b[1mplain")
        told = self.leeway(*ASK).err
        self.assertIsNone(re.search("[\x00-\x09\x0b-\x1f\x7f-\x9f]", told))


if __name__ == "__main__":
    unittest.main()
