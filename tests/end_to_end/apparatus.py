# SPDX-License-Identifier: Apache-2.0
"""What the end-to-end tests share: the program as a process, peers, and scans of a drive whose truth is known."""

import json
import math
import os
import pathlib
import random
import re
import shutil
import signal
import subprocess
import tempfile
import threading
import time
import unittest
import uuid

import msgpack
import zmq

ROOT = pathlib.Path(__file__).resolve().parents[2]
PROGRAM = os.environ.get("HALFTURN", str(ROOT / "build/bin/halfturn"))
PATIENCE_S = 30

RABI_HZ = 123_456.0
DEAD_TIME_S = 12e-9
DECAY_PER_S = 2 * math.pi * 7.48e3  # the natural linewidth of strontium's line at 689 nm, which drive `red` is known to have


def excited(length_s, rabi_hz, decay_per_s=DECAY_PER_S):
    """Resonance with radiative decay from the ground state (Torrey, Phys. Rev. 76, 1059 (1949)): with L^2 = W^2 - G^2/16,
    W^2/(2 W^2 + G^2) [1 - exp(-3 G t/4) (cos L t + 3 G/(4 L) sin L t)]."""
    rabi, decay, t = 2 * math.pi * rabi_hz, decay_per_s, max(0.0, length_s)
    root = math.sqrt(rabi**2 - decay**2 / 16)
    damped = math.exp(-0.75 * decay * t) * (math.cos(root * t) + 0.75 * decay / root * math.sin(root * t))
    return rabi**2 / (2 * rabi**2 + decay**2) * (1 - damped)


def program(*arguments, **more):
    """Runs the program to its end."""
    environment = dict(os.environ, **more.pop("environment", {}))
    return subprocess.run([PROGRAM, *map(str, arguments)], capture_output=True, text=True, timeout=120, env=environment, **more)


def flop(drive="red", seed=1, points=41, shots=200, rabi_hz=RABI_HZ, span_s=16e-6, taken_at=None, flat=False):
    """A scan of the pulse length on resonance: counts drawn from 0.02 + 0.93 times the excited population."""
    draw = random.Random(seed)
    axis = [span_s * (i + 1) / points for i in range(points)]
    counts = []
    for length in axis:
        bright = 0.02 + (0.0 if flat else 0.93 * excited(length - DEAD_TIME_S, rabi_hz))
        counts.append(sum(draw.random() < bright for _ in range(shots)))
    scan = {"scan_name": f"flop-{seed}", "drive": drive, "duration_s": axis, "counts": counts, "shots": shots}
    if taken_at:
        scan["taken_at"] = taken_at
    return scan


def csv_of(scan, metadata=("drive",)):
    lines = [f"# {key}: {scan[key]}" for key in metadata]
    lines.append("duration_s,counts,shots")
    lines += [f"{t!r},{c},{scan['shots']}" for t, c in zip(scan["duration_s"], scan["counts"])]
    return "\n".join(lines) + "\n"


class Peer:
    """A DEALER that matches replies by id."""

    def __init__(self, endpoint):
        self.context = zmq.Context()
        self.socket = self.context.socket(zmq.DEALER)
        self.socket.linger = 0
        self.socket.connect(endpoint)
        self.early = {}

    def send(self, kind, body=None, id=None, encode=msgpack.packb):
        request = {"proto": 1, "kind": kind, "id": id or str(uuid.uuid4()), **(body or {})}
        self.socket.send(encode(request))
        return request["id"]

    def receive(self, id, patience_s=PATIENCE_S):
        until = time.monotonic() + patience_s
        while id not in self.early:
            left = until - time.monotonic()
            if left <= 0 or not self.socket.poll(1000 * left):
                raise TimeoutError(f"no reply to {id}")
            message = self.socket.recv_multipart()[-1]
            reply = json.loads(message) if message[:1] == b"{" else msgpack.unpackb(message, timestamp=3)
            self.early[reply["id"]] = reply
        return self.early.pop(id)

    def ask(self, kind, body=None, id=None, **more):
        return self.receive(self.send(kind, body, id, **more))

    def close(self):
        self.socket.close()
        self.context.term()


class Daemon:
    """`halfturn serve` on ports that the system chooses, in a folder of its own."""

    def __init__(self, folder, configuration="first-night.yaml", arguments=()):
        self.folder = pathlib.Path(folder)
        text = (ROOT / "examples" / configuration).read_text()
        text = re.sub(r'tcp://127\.0\.0\.1:74\d\d', "tcp://127.0.0.1:0", text)
        text = text.replace("127.0.0.1:7480", "127.0.0.1:0")
        self.config = self.folder / "lab.yaml"
        if not self.config.exists():
            self.config.write_text(text)
        self.arguments = arguments
        self.start()

    def start(self):
        self.lines = []
        self.heard = threading.Condition()
        self.process = subprocess.Popen(
            [PROGRAM, "serve", "--config", str(self.config), *self.arguments], stderr=subprocess.PIPE, stdout=subprocess.DEVNULL, text=True)
        self.reader = threading.Thread(target=self._read, daemon=True)
        self.reader.start()
        line = self.line_with("listening")
        self.requests, self.feed, self.results = re.search(r"requests (\S+), feed (\S+), results (\S+)", line).groups()

    def _read(self):
        for line in self.process.stderr:
            with self.heard:
                self.lines.append(line.rstrip("\n"))
                self.heard.notify_all()
        with self.heard:
            self.lines.append("(end)")
            self.heard.notify_all()

    def line_with(self, text):
        """The first line on standard error that holds the text; waits for it."""
        until = time.monotonic() + PATIENCE_S
        with self.heard:
            while True:
                for line in self.lines:
                    if text in line:
                        return line
                if "(end)" in self.lines or not self.heard.wait(until - time.monotonic()):
                    raise AssertionError(f"no line with {text!r} in:\n" + "\n".join(self.lines))

    def peer(self):
        return Peer(self.requests)

    def signal(self, number):
        os.kill(self.process.pid, number)

    def wait(self):
        status = self.process.wait(PATIENCE_S)
        self.reader.join(PATIENCE_S)
        self.process.stderr.close()
        return status

    def stop(self):
        if self.process.poll() is None:
            self.signal(signal.SIGTERM)
        return self.wait()

    def kill(self):
        self.signal(signal.SIGKILL)
        return self.wait()


class InFolder(unittest.TestCase):
    """A test with a folder of its own, gone afterwards."""

    def setUp(self):
        self.folder = pathlib.Path(tempfile.mkdtemp(prefix="halfturn-test-"))
        self.addCleanup(shutil.rmtree, self.folder)

    def daemon(self, **more):
        daemon = Daemon(self.folder, **more)
        self.addCleanup(lambda: daemon.process.poll() is None and daemon.kill())
        return daemon

    def peer(self, daemon):
        peer = daemon.peer()
        self.addCleanup(peer.close)
        return peer

    def write(self, name, text):
        path = self.folder / name
        path.write_text(text)
        return path
