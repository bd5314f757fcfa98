# SPDX-License-Identifier: Apache-2.0
"""What is installed, and that it fits together."""

import os
import re
import subprocess
import unittest

from apparatus import ROOT, InFolder, program

BUILD = os.environ.get("HALFTURN_BUILD", str(ROOT / "build"))


class Install(InFolder):
    def test_the_program_its_unit_manual_and_completion(self):
        subprocess.run(["cmake", "--install", BUILD, "--prefix", str(self.folder)], check=True, capture_output=True, timeout=120)
        installed = self.folder / "bin/halfturn"
        self.assertEqual(subprocess.run([installed, "--version"], capture_output=True, timeout=60).returncode, 0)
        unit = (self.folder / "lib/systemd/system/halfturn.service").read_text()
        self.assertIn(f"ExecStart={installed} serve --config", unit)
        self.assertNotIn("@", unit.replace("@system-service", "").replace("@privileged", ""))
        self.assertTrue((self.folder / "share/man/man1/halfturn.1").exists())
        self.assertTrue((self.folder / "share/bash-completion/completions/halfturn").exists())


class Agreement(unittest.TestCase):
    """Help, manual and completion name the same commands and options."""

    def commands(self):
        return re.findall(r"^  (\w+) ", program("--help").stdout.split("Subcommands:")[1], re.M)

    def test_every_command_and_option_is_in_the_completion_and_every_command_in_the_manual(self):
        completion = (ROOT / "plugin/package/halfturn.bash").read_text()
        manual = (ROOT / "plugin/package/halfturn.1").read_text()
        listed = re.search(r'words="([a-z ]+) --help --version"', completion).group(1).split()
        self.assertEqual(listed, self.commands())
        for command in listed:
            self.assertIn(f".B {command}\n", manual)
            words = re.search(rf'^ +{command}\)\s+words="([^"]*)"', completion, re.M).group(1).split()
            help_text = program(command, "--help").stdout
            options = re.findall(r"^  (?:-h,)?(--[a-z0-9-]+)", help_text, re.M)
            self.assertEqual(sorted(words), sorted(options), command)


if __name__ == "__main__":
    unittest.main()
