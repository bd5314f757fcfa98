# SPDX-License-Identifier: Apache-2.0
"""The commands that need no daemon: exit status, what goes to which stream, what is printed."""

import json
import math
import os
import pty
import subprocess
import unittest

from apparatus import PROGRAM, ROOT, RABI_HZ, DEAD_TIME_S, InFolder, csv_of, flop, program

CONFIG = ROOT / "examples/first-night.yaml"


class Fit(InFolder):
    def setUp(self):
        super().setUp()
        self.good = self.write("good.csv", csv_of(flop(seed=1)))
        self.flat = self.write("flat.csv", csv_of(flop(seed=2, flat=True)))
        self.broken = self.write("broken.csv", "duration_s,counts,shots\n1e-6,5,4\n")

    def test_json_is_the_object_of_the_wire(self):
        run = program("fit", self.good, "--config", CONFIG, "--json")
        self.assertEqual(run.returncode, 0, run.stderr)
        self.assertEqual(run.stdout.count("\n"), 1)
        reply = json.loads(run.stdout)
        self.assertEqual((reply["kind"], reply["drive"], reply["scan_name"]), ("fitted", "red", "good"))
        self.assertLess(abs(reply["rabi_hz"]["value"] - RABI_HZ), 5 * reply["rabi_hz"]["sigma"])
        exact = reply["pulses"]["flip"]
        self.assertLess(abs(exact["exact_s"] - 0.5 / RABI_HZ - DEAD_TIME_S), 5 * exact["sigma_s"])
        self.assertIs(reply["stored"], False)

    def test_text_gives_the_verdict_first_and_uncertainties_in_short_form(self):
        run = program("fit", self.good, "--config", CONFIG)
        self.assertEqual(run.returncode, 0, run.stderr)
        self.assertRegex(run.stdout.splitlines()[0], r"^good: (apply|keep)")
        self.assertRegex(run.stdout, r"Rabi frequency +12\d\.\d+\(\d+\) kHz +12\d\.\d+ kHz … 12\d\.\d+ kHz")
        self.assertRegex(run.stdout, r"flip +(apply|keep) +3\.1416 rad +4\.0000 µs")
        self.assertNotIn("\033", run.stdout)
        for line in run.stdout.splitlines():
            self.assertLessEqual(len(line), 130)

    def test_without_a_configuration_nothing_is_known_and_no_pulse_proposed(self):
        run = program("fit", self.good, "--json")
        self.assertEqual(run.returncode, 0, run.stderr)
        reply = json.loads(run.stdout)
        self.assertFalse(reply.get("pulses"))
        self.assertLess(abs(reply["rabi_hz"]["value"] - RABI_HZ), 5 * reply["rabi_hz"]["sigma"])

    def test_files_are_fitted_together(self):
        longer = self.write("longer.csv", csv_of(flop(seed=3, span_s=23e-6)))
        run = program("fit", "--together", self.good, longer, "--config", CONFIG, "--json")
        self.assertEqual(run.returncode, 0, run.stderr)
        reply, alone = json.loads(run.stdout), json.loads(program("fit", self.good, "--config", CONFIG, "--json").stdout)
        self.assertEqual([scan["scan_name"] for scan in reply["scans"]], ["good", "longer"])
        self.assertEqual(reply["scan_name"], "good + longer")
        self.assertLess(abs(reply["rabi_hz"]["value"] - RABI_HZ), 5 * reply["rabi_hz"]["sigma"])
        self.assertLess(reply["rabi_hz"]["sigma"], 0.8 * alone["rabi_hz"]["sigma"])
        text = program("fit", "--together", self.good, longer, "--config", CONFIG)
        self.assertRegex(text.stdout, r"fitted together +points(.*\n)+ +good +41 .*\n +longer +41 ")
        for line in text.stdout.splitlines():
            self.assertLessEqual(len(line), 130)

    def test_what_cannot_be_fitted_together_is_said(self):
        moved = self.write("moved.csv", csv_of(flop(seed=4, rabi_hz=1.06 * RABI_HZ, span_s=23e-6)))
        run = program("fit", "--together", self.good, moved, "--config", CONFIG)
        self.assertEqual(run.returncode, 1, run.stderr)
        self.assertIn("scans_disagree", run.stdout)
        alone = program("fit", "--together", self.good, "--config", CONFIG)
        self.assertEqual((alone.returncode, alone.stdout), (2, ""))
        self.assertIn("at least two", alone.stderr)
        broken = program("fit", "--together", self.good, self.broken, "--config", CONFIG)
        self.assertEqual((broken.returncode, broken.stdout), (2, ""))
        self.assertIn("broken.csv:2:", broken.stderr)

    def test_exit_status_and_the_worst_of_several(self):
        self.assertEqual(program("fit", self.flat, "--config", CONFIG).returncode, 1)
        broken = program("fit", self.broken)
        self.assertEqual(broken.returncode, 2)
        self.assertIn("broken.csv:2:", broken.stderr)
        self.assertEqual(broken.stdout, "")
        self.assertEqual(program("fit", self.folder / "absent.csv").returncode, 2)
        run = program("fit", self.broken, self.flat, self.good, "--config", CONFIG, "--json")
        self.assertEqual(run.returncode, 2)
        self.assertEqual([json.loads(line)["scan_name"] for line in run.stdout.splitlines()], ["flat", "good"])
        self.assertEqual(program("fit", self.flat, self.good, "--config", CONFIG).returncode, 1)

    def test_the_drive_must_be_one_of_the_configuration(self):
        run = program("fit", self.good, "--config", CONFIG, "--drive", "green")
        self.assertEqual(run.returncode, 2)
        self.assertIn("green", run.stderr)
        self.assertIn("red", run.stderr)
        unnamed = self.write("unnamed.csv", csv_of(flop(seed=1), metadata=()))
        self.assertEqual(program("fit", unnamed, "--config", CONFIG).returncode, 2)
        self.assertEqual(program("fit", unnamed, "--config", CONFIG, "--drive", "red").returncode, 0)

    def test_colour_on_a_terminal_unless_unwanted(self):
        def on_terminal(**environment):
            try:
                master, slave = pty.openpty()
            except OSError as error:
                self.skipTest(f"this machine gives no pseudo-terminal: {error}")
            process = subprocess.Popen([PROGRAM, "fit", str(self.good)], stdout=slave, stderr=subprocess.DEVNULL,
                                       env={**os.environ, "TERM": "xterm", "NO_COLOR": "", **environment})
            os.close(slave)
            data = b""
            while True:
                try:
                    block = os.read(master, 65536)
                except OSError:
                    break
                if not block:
                    break
                data += block
            os.close(master)
            process.wait(60)
            return data

        self.assertIn(b"\033[", on_terminal())  # no-color.org: the variable must be set and not empty
        self.assertNotIn(b"\033", on_terminal(NO_COLOR="1"))
        self.assertNotIn(b"\033", on_terminal(TERM="dumb"))


class Intensity(InFolder):
    def test_list_gives_names_that_resolve(self):
        run = program("intensity", "--list")
        self.assertEqual(run.returncode, 0)
        names = [line.split("  ")[0] for line in run.stdout.splitlines()]
        self.assertGreater(len(names), 5)
        self.assertEqual(len(names), len(set(names)))
        usable = 0
        for name in names:
            run = program("intensity", "--transition", name, "--rabi-hz", "1e5", "--json")
            self.assertIn(run.returncode, (0, 2), name)
            usable += run.returncode == 0
        self.assertGreater(usable, 3)

    def test_rubidium_cycling_transition(self):
        # Steck, "Rubidium 87 D Line Data": at 1 mW/cm2 the closed D2 cycle has Omega/2pi = 3.32014 MHz (from its dipole,
        # 2.53444e-29 C m, by I = c eps0 E0^2 / 2); the saturation intensity is 1.66933 mW/cm2.
        name = "Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+"
        run = program("intensity", "--transition", name, "--intensity-w-m2", 10, "--waist-m", 100e-6, "--json")
        self.assertEqual(run.returncode, 0, run.stderr)
        light = json.loads(run.stdout)
        self.assertAlmostEqual(light["rabi_hz"] / 3.32014e6, 1, delta=3e-4)
        self.assertAlmostEqual(light["saturation_intensity_w_m2"] / 16.6933, 1, delta=6e-4)
        self.assertAlmostEqual(light["power_w"], 10 * math.pi * 100e-6**2 / 2, delta=1e-12)
        back = json.loads(program("intensity", "--transition", name, "--power-w", light["power_w"], "--waist-m", 100e-6, "--json").stdout)
        self.assertAlmostEqual(back["intensity_w_m2"], 10, places=9)
        text = program("intensity", "--transition", name, "--intensity-w-m2", 10).stdout
        self.assertIn("3.32", text)

    def test_bad_usage(self):
        name = "Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+"
        for arguments in ([], ["--transition", name], ["--transition", name, "--rabi-hz", "1", "--power-w", "1"],
                          ["--transition", name, "--power-w", "1"], ["--transition", name, "--rabi-hz", "-1"],
                          ["--transition", "Rb87 D3", "--rabi-hz", "1"], ["--rabi-hz", "1"]):
            run = program("intensity", *arguments)
            self.assertEqual(run.returncode, 2, arguments)
            self.assertEqual(run.stdout, "")
            self.assertTrue(run.stderr.startswith("halfturn: "), run.stderr)


class Check(InFolder):
    def test_a_good_configuration_is_in_order(self):
        run = program("check", CONFIG)
        self.assertEqual(run.returncode, 0)
        self.assertEqual(run.stdout.splitlines()[0], f"{CONFIG}: in order")
        self.assertIn("flip", run.stdout)

    def test_every_fault_has_its_line_and_column(self):
        text = CONFIG.read_text()
        line = next(i for i, each in enumerate(text.splitlines(), 1) if "carrier_uncertainty:" in each and not each.strip().startswith("#"))
        text = text.replace("carrier_uncertainty: 2 kHz", "carrier_uncertainty: 2").replace("impurity", "impurty")
        run = program("check", self.write("lab.yaml", text))
        self.assertEqual(run.returncode, 2)
        self.assertRegex(run.stdout, rf"lab\.yaml:{line}:\d+: ")
        self.assertIn("impurity", run.stdout)
        self.assertEqual(program("check", self.folder / "absent.yaml").returncode, 2)
        self.assertEqual(program("serve", "--config", self.folder / "lab.yaml").returncode, 2)


class Others(InFolder):
    def test_status_without_a_daemon_says_what_to_check(self):
        run = program("status", "--endpoint", f"ipc://{self.folder}/nobody", "--timeout-s", 0.2)
        self.assertEqual(run.returncode, 3)
        self.assertIn("no daemon answers", run.stderr)
        self.assertIn("halfturn serve", " ".join(run.stderr.split()))

    def test_drift_of_what_is_no_log(self):
        self.assertEqual(program("drift", "--log", self.folder / "absent.db").returncode, 2)
        self.assertEqual(program("drift", "--log", self.write("no.db", "no database")).returncode, 3)

    def test_a_full_disk_is_not_success(self):
        with open("/dev/full", "w") as full:
            run = subprocess.run([PROGRAM, "intensity", "--list"], stdout=full, stderr=subprocess.PIPE, text=True, timeout=60)
        self.assertEqual(run.returncode, 3)
        self.assertIn("could not be written", run.stderr)


if __name__ == "__main__":
    unittest.main()
