# SPDX-License-Identifier: Apache-2.0
"""What README.md and DEVELOPERS.md show and promise, tried out."""

import random
import re
import unittest
from unittest import mock

from apparatus import DEAD_TIME_S, RABI_HZ, ROOT, InFolder, excited, program

import halfturn

README = (ROOT / "README.md").read_text(encoding="utf-8")
GUIDE = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def block(language):
    return re.search(rf"^```{language}\n(.*?)^```$", README, re.DOTALL | re.MULTILINE).group(1)


def skeleton(text):
    """Words without numbers and line breaks: what stays the same where the last digits differ."""
    return re.sub(r"[-+−]?\d[\d.]*(\(\d+\))?", "#", " ".join(text.split()))


class Shown(InFolder):
    def test_the_python_example_runs(self):
        daemon = self.daemon()
        draw, loaded = random.Random(7), []
        names = {"measure": lambda t: sum(draw.random() < 0.02 + 0.93 * excited(t - DEAD_TIME_S, RABI_HZ) for _ in range(100)),
                 "load": loaded.append}
        local = lambda: client_of(daemon.requests)
        client_of = halfturn.Client
        with mock.patch.object(halfturn, "Client", local), mock.patch("builtins.print"):
            exec(block("python"), names)
        self.assertNotEqual(names["fit"].verdict, "refuse", names["fit"].why)
        self.assertEqual(set(loaded[0]), {"flip", "split"})
        with local() as client:
            self.assertEqual(client.status()["drives"]["red"]["pulses"], loaded[0])
            self.assertEqual(len(client.history("red")), 1)

    def test_the_configuration_is_right(self):
        run = program("check", self.write("lab.yaml", block("yaml")))
        self.assertEqual((run.returncode, run.stderr), (0, ""))

    def test_the_calibration_loop_runs(self):
        daemon = self.daemon()
        text = (ROOT / "examples/calibration_loop.py").read_text()
        with mock.patch("sys.argv", ["calibration_loop.py", daemon.requests]), mock.patch("builtins.print") as printed:
            random.seed(3)
            exec(compile(text, "calibration_loop.py", "exec"), {"__name__": "__main__"})
        self.assertIn(printed.call_args_list[0].args[0], ("apply", "keep"))
        self.assertEqual(printed.call_args_list[1].args[0], "loaded")

    def test_the_fit_prints_what_is_shown(self):
        for scan, config in (("flop.csv", "first-night.yaml"), ("amplitude.csv", "amplitude.yaml")):
            with self.subTest(scan):
                run = program("fit", ROOT / "examples" / scan, "--config", ROOT / "examples" / config)
                self.assertEqual(run.returncode, 0, run.stderr)
                shown = re.search(r"\$ halfturn fit examples/" + re.escape(scan) + r"[^\n]*\n((?:    [^\n]*\n|\n)*)", README).group(1)
                self.assertEqual(skeleton(run.stdout), skeleton(shown))

    def test_links_lead_somewhere(self):
        for name, text in (("README.md", README), ("DEVELOPERS.md", GUIDE)):
            links = [link for link in re.findall(r"\]\(([^)#]+)[^)]*\)", text) if "://" not in link]
            self.assertGreater(len(links), 0, name)
            for link in links:
                with self.subTest(file=name, link=link):
                    self.assertTrue((ROOT / link).exists())

    def test_files_named_in_the_guide_are_there(self):
        names = set(re.findall(r"`((?:model|plugin|schemas|tests|examples)/[A-Za-z0-9_./-]+)`", GUIDE))
        self.assertGreater(len(names), 30)
        for name in names:
            with self.subTest(name):
                self.assertTrue((ROOT / name).exists())


class Limits(InFolder):
    def test_requests_of_later_versions_are_not_available(self):
        peer = self.peer(self.daemon())
        axis = {"duration_s": [1e-6 * i for i in range(1, 9)], "shots": 100}
        scan = {"scan_name": "a", "drive": "red", "counts": [10] * 8, **axis}
        for kind, body in (("next", {"drive": "red", "shots": 100}), ("begin", {"scan": {"scan_name": "a", "drive": "red"}}),
                           ("fit", {"scan": {**scan, "counts": [[10] * 8] * 2, "sites": ["l", "r"]}})):
            with self.subTest(kind=kind, fields=sorted(body)):
                reply = peer.ask(kind, body)
                self.assertEqual((reply["kind"], reply.get("code")), ("error", "not_available"), reply)

    def test_commands_and_options_of_later_versions_are_bad_usage(self):
        flop = ROOT / "examples/flop.csv"
        for words in (["refit", "--log", "x.db"], ["next"], ["keygen", self.folder], ["fit", flop, "--plot", "x.svg"]):
            with self.subTest(words):
                self.assertEqual(program(*words).returncode, 2)

    def test_configurations_of_later_versions_have_faults(self):
        good = block("yaml")
        for before, after in (("format: 1\n", "format: 1\ncurve: {}\n"),
                              ("log: nights.db", 'sockets: {requests: "tcp://0.0.0.0:7411"}\nlog: nights.db')):
            with self.subTest(after):
                run = program("check", self.write("lab.yaml", good.replace(before, after, 1)))
                self.assertEqual(run.returncode, 2)
                self.assertIn("not available in this version", " ".join(run.stderr.split() + run.stdout.split()))


if __name__ == "__main__":
    unittest.main()
