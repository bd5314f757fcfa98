#!/usr/bin/env python3
# SPDX-License-Identifier: Apache-2.0
"""Feeds the check of rooms with right and wrong lines: a wrong one must be found, with its file and line, and alone."""
import pathlib
import subprocess
import sys
import tempfile
import unittest

import rooms

HEADERS = {f"{half}/{room}/{room}.hpp": "#pragma once\n" for half, names in (("model", rooms.MODEL), ("plugin", rooms.PLUGIN))
           for room in names}
HEADERS.update({"plugin/log/log.hpp": "#pragma once\n", "plugin/log/sqlite_log.hpp": "#pragma once\n",
                "plugin/embedded.hpp": "#pragma once\n", "model/infer/scan.hpp": "#pragma once\n"})

RIGHT = [
    ("model/infer/a.cpp", "#include <Eigen/LU>"), ("model/infer/a.cpp", '#include "model/dynamics/dynamics.hpp"'),
    ("model/recalibrate/a.hpp", '#include "model/drift/drift.hpp"  // below'), ("model/quantity/a.hpp", "#include <tl/expected.hpp>"),
    ("model/dynamics/a.cpp", '// #include "plugin/wire/wire.hpp"'), ("model/dynamics/a.cpp", "/*\n#include <thread>\n*/"),
    ("plugin/service/a.cpp", '#include "plugin/log/log.hpp"'), ("plugin/service/a.hpp", "#include <mutex>"),
    ("plugin/log/a.cpp", "#include <sqlite3.h>"), ("plugin/log/a.cpp", '#include "plugin/embedded.hpp"'),
    ("plugin/daemon/a.hpp", "#include <zmq.hpp>"), ("plugin/daemon/a.cpp", "#include <sys/eventfd.h>"),
    ("plugin/client/a.hpp", "#include <nlohmann/json.hpp>"), ("plugin/rehearse/a.cpp", '#include "model/quantity/quantity.hpp"'),
    ("plugin/cli/a.cpp", "#include <CLI/App.hpp>"), ("plugin/main.cpp", '#include "plugin/cli/cli.hpp"'),
]
WRONG = [
    # against the direction
    ("model/infer/a.cpp", '#include "plugin/wire/wire.hpp"'), ("model/dynamics/a.hpp", '#include "model/infer/infer.hpp"'),
    ("model/quantity/a.hpp", '#include "model/dynamics/dynamics.hpp"'), ("plugin/wire/a.cpp", '#include "plugin/service/service.hpp"'),
    ("plugin/config/a.cpp", '#include "plugin/log/log.hpp"'), ("plugin/service/a.cpp", '#include "plugin/daemon/daemon.hpp"'),
    ("plugin/embedded.hpp", '#include "plugin/wire/wire.hpp"'), ("plugin/cli/a.cpp", '#include "plugin/main.cpp"'),
    # against the rows
    ("plugin/rehearse/a.cpp", '#include "model/dynamics/dynamics.hpp"'), ("plugin/rehearse/a.cpp", '#include "plugin/service/service.hpp"'),
    ("plugin/wire/a.cpp", '#include "model/infer/infer.hpp"'), ("plugin/log/a.cpp", '#include "plugin/wire/wire.hpp"'),
    ("plugin/daemon/a.cpp", '#include "model/dynamics/dynamics.hpp"'), ("plugin/service/a.cpp", '#include "plugin/log/sqlite_log.hpp"'),
    ("model/infer/solver.cpp", '#include "model/dynamics/dynamics.hpp"'), ("model/infer/likelihood.hpp", '#include "model/infer/scan.hpp"'),
    # libraries
    ("model/infer/a.cpp", "#include <fstream>"), ("model/dynamics/a.cpp", "#  include <thread>"), ("model/drift/a.hpp", "#include <chrono>"),
    ("model/infer/a.cpp", "#include <tl/expected.hpp>"), ("model/infer/a.cpp", "#include <unistd.h>"),
    ("plugin/log/a.hpp", "#include <sqlite3.h>"), ("plugin/service/a.cpp", "#include <sqlite3.h>"),
    ("plugin/service/a.cpp", "#include <zmq.hpp>"), ("plugin/service/a.cpp", "#include <chrono>"),
    ("plugin/service/a.cpp", "#include <sys/socket.h>"), ("plugin/wire/a.cpp", "#include <zmq.h>"), ("plugin/cli/a.cpp", "#include <zmq.hpp>"),
    ("plugin/rehearse/a.cpp", "#include <zmq_addon.hpp>"), ("plugin/daemon/a.cpp", "#include <nlohmann/json.hpp>"),
    ("plugin/daemon/a.cpp", "#include <msgpack.hpp>"), ("plugin/cli/a.cpp", "#include <yaml-cpp/yaml.h>"),
    ("plugin/config/a.hpp", "#include <yaml-cpp/yaml.h>"), ("plugin/daemon/a.cpp", "#include <CLI/App.hpp>"),
    ("plugin/service/a.cpp", "#include <spdlog/spdlog.h>"), ("plugin/cli/a.cpp", "#include <boost/asio.hpp>"),
    # ways around
    ("model/infer/a.cpp", '#include "sqlite3.h"'), ("model/infer/a.cpp", '#include "../../plugin/wire/wire.hpp"'),
    ("model/infer/a.cpp", "#include <plugin/wire/wire.hpp>"), ("model/infer/a.cpp", "#include HEADER"),
    ("model/infer/a.cpp", "#/* */include <fstream>"), ("model/infer/a.cpp", "#include \\\n<fstream>"),
    ("model/infer/a.cpp", '#include "model/dynamics/gone.hpp"'), ("model/infer/a.cpp", '#include "infer.hpp"'),
    ("model/infer/deep/a.cpp", "#include <fstream>"), ("model/infer/a.inl", "#include <fstream>"),
]
NOWHERE = ["model/magic/a.cpp", "plugin/utils/a.hpp", "plugin/a.cpp", "model/notes.txt", "plugin/server/a.py"]


class Rooms(unittest.TestCase):
    def tree(self, files):
        folder = tempfile.TemporaryDirectory(prefix="halfturn-rooms-")
        self.addCleanup(folder.cleanup)
        for name, text in {**HEADERS, **files}.items():
            path = pathlib.Path(folder.name) / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text, encoding="utf-8")
        return folder.name

    def test_right_lines_pass(self):
        for path, line in RIGHT:
            with self.subTest(path=path, line=line):
                self.assertEqual(rooms.faults(self.tree({path: "// first\n" + line + "\n"}))[0], [])

    def test_wrong_lines_are_found_at_their_place(self):
        for path, line in WRONG:
            with self.subTest(path=path, line=line):
                found, _ = rooms.faults(self.tree({path: "// first\n\n" + line + "\nint after;\n"}))
                self.assertEqual(len(found), 1, found)
                self.assertTrue(found[0].startswith(f"{path}:3: "), found)

    def test_files_in_no_known_room_are_found(self):
        for path in NOWHERE:
            with self.subTest(path=path):
                self.assertEqual(rooms.faults(self.tree({path: "int x;\n"}))[0], [f"{path}: lies in no known room"])

    def test_every_room_has_its_rows(self):
        every = {f"model/{room}" for room in rooms.MODEL} | {f"plugin/{room}" for room in rooms.PLUGIN if room != "package"}
        self.assertLessEqual(every, set(rooms.MAY_INCLUDE))
        self.assertLessEqual(every, set(rooms.LIBRARIES))

    def test_no_row_points_upwards(self):
        order = [f"plugin/{room}" for room in rooms.PLUGIN] + ["plugin/embedded.hpp"] + [f"model/{room}" for room in rooms.MODEL]
        for room, allowed in rooms.MAY_INCLUDE.items():
            for target in allowed if room != "plugin/main.cpp" else []:
                below = target if target in order else "/".join(target.split("/")[:2])
                self.assertLess(order.index(room), order.index(below), f"{room} -> {target}")

    def test_the_program_says_so_by_its_exit_status(self):
        run = lambda folder: subprocess.run([sys.executable, rooms.__file__, folder], capture_output=True, text=True, timeout=60)
        right = run(self.tree({"model/infer/a.cpp": "#include <cmath>\n"}))
        self.assertEqual(right.returncode, 0, right.stdout)
        wrong = run(self.tree({"model/infer/a.cpp": "#include <fstream>\n"}))
        self.assertEqual(wrong.returncode, 1, wrong.stdout)
        self.assertIn("model/infer/a.cpp:1: <fstream>", wrong.stdout)
        with tempfile.TemporaryDirectory() as empty:  # nothing found to hold is no success
            self.assertEqual(run(empty).returncode, 1)


if __name__ == "__main__":
    unittest.main()
