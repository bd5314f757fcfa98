# SPDX-License-Identifier: Apache-2.0
"""The script of the first night, with the program that is built already: what it leaves, and that it leaves no daemon."""

import csv
import os
import pathlib
import re
import signal
import subprocess
import time
import unittest

from apparatus import PATIENCE_S, PROGRAM, ROOT, InFolder, program

SCRIPT = ROOT / "examples/first-night.sh"


def daemons(folder):
    """Ids of the processes that serve a configuration in this folder."""
    found = []
    for entry in pathlib.Path("/proc").glob("[0-9]*/cmdline"):
        try:
            words = entry.read_bytes().split(b"\0")
        except OSError:
            continue  # ended meanwhile
        if b"serve" in words and any(word.startswith(os.fsencode(folder)) for word in words):
            found.append(int(entry.parent.name))
    return found


class FirstNight(InFolder):
    def setUp(self):
        super().setUp()
        self.addCleanup(lambda: [os.kill(pid, signal.SIGKILL) for pid in daemons(self.folder)])

    def start(self, *arguments):
        return subprocess.Popen(["bash", str(SCRIPT), *arguments], cwd=self.folder, env={**os.environ, "HALFTURN": PROGRAM},
                                stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True)

    def run_night(self, *arguments):
        process = self.start(*arguments)
        text, _ = process.communicate(timeout=120)
        return process.returncode, text

    def wait_until(self, true):
        until = time.monotonic() + PATIENCE_S
        while not true():
            self.assertLess(time.monotonic(), until, "waited in vain")
            time.sleep(0.01)

    def test_a_night_leaves_its_folder_and_no_daemon(self):
        status, text = self.run_night("--hours", "1")
        self.assertEqual(status, 0, text)
        [night] = self.folder.iterdir()
        self.assertIn(str(night), text)
        self.assertIn("laser-safety officer", text)
        self.assertRegex(text, r"with Halfturn +[0-9.]+")
        self.assertIn("drive red", text.lower())
        with open(night / "fits.csv", newline="") as file:
            self.assertGreater(len(list(csv.DictReader(file))), 10)
        self.assertEqual(program("drift", "--log", night / "nights.db").returncode, 0)
        self.assertEqual(daemons(self.folder), [])

    def test_stay_leaves_the_daemon_and_says_how_to_stop_it(self):
        status, text = self.run_night("--hours", "0.2", "--stay")
        self.assertEqual(status, 0, text)
        pid, endpoint = re.search(r"process (\d+) and takes requests at (\S+)\.", text).groups()
        self.assertEqual(daemons(self.folder), [int(pid)])
        self.assertEqual(program("status", "--endpoint", endpoint).returncode, 0)
        os.kill(int(pid), signal.SIGTERM)
        self.wait_until(lambda: not daemons(self.folder))

    def test_a_stop_in_the_night_stops_the_daemon(self):
        process = self.start("--hours", "5000")  # far longer than this test
        self.wait_until(lambda: list(self.folder.glob("*/nights.db")) and daemons(self.folder))
        process.send_signal(signal.SIGTERM)
        process.communicate(timeout=PATIENCE_S)
        self.assertEqual(process.returncode, 143)
        self.assertEqual(daemons(self.folder), [])

    def test_bad_usage(self):
        for arguments in (["--nights"], ["--hours"], ["--hours", "long"]):
            with self.subTest(arguments):
                self.assertEqual(self.run_night(*arguments)[0], 2)
        self.assertEqual(list(self.folder.iterdir()), [])


if __name__ == "__main__":
    unittest.main()
