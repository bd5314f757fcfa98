# SPDX-License-Identifier: Apache-2.0
"""A running daemon: answers, signals, kills. What a fit holds is in the contract; what it should say is the truth
that the scans were drawn from."""

import fcntl
import json
import os
import random
import signal
import socket
import subprocess
import time
import unittest

import msgpack
import zmq

from apparatus import PROGRAM, ROOT, RABI_HZ, DEAD_TIME_S, PATIENCE_S, InFolder, Peer, flop, program


def moment(minutes):
    return time.strftime("%Y-%m-%dT%H:%M:%SZ", time.gmtime(1_770_091_200 + 60 * minutes))


class Amplitudes(InFolder):
    def test_a_scan_of_amplitudes_goes_in_an_amplitude_comes_out_and_is_remembered(self):
        # The scan of examples/amplitude.csv says above its points what is true: 310 kHz a / sqrt(1 + (a/1.6)^2), 10 ns late.
        rows = [line.split(",") for line in (ROOT / "examples/amplitude.csv").read_text().splitlines() if line[0].isdigit()]
        scan = {"scan_name": "steps", "drive": "red", "taken_at": moment(0), "pulse_s": 4e-6, "shots": 200,
                "amplitude": [float(row[0]) for row in rows], "counts": [int(row[1]) for row in rows]}
        sockets = ", ".join(f'{name}: "tcp://127.0.0.1:0"' for name in ("requests", "feed", "results"))
        self.write("lab.yaml", (ROOT / "examples/amplitude.yaml").read_text() + f'sockets: {{{sockets}, display: "127.0.0.1:0"}}\n')
        daemon = self.daemon()
        peer = self.peer(daemon)
        reply = peer.ask("fit", {"scan": scan})
        self.assertEqual((reply["kind"], reply["verdict"]), ("fitted", "apply"), reply)
        self.assertIsNone(reply["rabi_hz"]["value"])
        flip = reply["pulses"]["flip"]
        needed = 0.5 / (4e-6 - 10e-9) / 310e3
        truth = needed / (1 - (needed / 1.6) ** 2) ** 0.5
        self.assertLess(abs(flip["exact_amplitude"] - truth), 4 * flip["sigma_amplitude"])
        self.assertAlmostEqual(flip["length_amplitude"] / 0.001, flip["ticks"], places=6)
        self.assertEqual(flip["previous_amplitude"], 0.45)
        self.assertNotIn("length_s", flip)
        self.assertIn("per unit of amplitude", daemon.line_with("red steps: apply"))
        loaded = {name: pulse["length_amplitude"] for name, pulse in reply["pulses"].items()}
        self.assertEqual(peer.ask("applied", {"drive": "red", "pulses": loaded})["kind"], "noted")
        daemon.stop()
        daemon.start()
        state = self.peer(daemon).ask("status")["drives"]["red"]
        self.assertEqual((state["pulses"], state["amplitudes"]), ({}, loaded))
        self.assertAlmostEqual(state["rabi_per_amplitude_hz"], reply["rabi_per_amplitude_hz"]["value"], delta=1)
        status = program("status", "--endpoint", daemon.requests)
        self.assertIn(f"flip amplitude {loaded['flip']:.5f}", " ".join(status.stdout.split()))


class Answers(InFolder):
    def test_fit_holds_what_the_contract_says(self):
        daemon = self.daemon()
        peer = self.peer(daemon)
        scan = flop(taken_at=moment(0), seed=11)
        reply = peer.ask("fit", {"scan": scan, "options": {"overlay_points": 50}})
        self.assertEqual(reply["kind"], "fitted", reply)
        self.assertEqual((reply["drive"], reply["scan_name"]), ("red", scan["scan_name"]))
        self.assertIn(reply["verdict"], ("apply", "keep"), reply["reasons"])
        self.assertIn("first", [reason["code"] for reason in reply["reasons"]])

        rabi = reply["rabi_hz"]
        self.assertLess(rabi["low"], rabi["value"])
        self.assertLess(rabi["value"], rabi["high"])
        # Five standard errors: fails by chance once in a million seeds, and the seed is fixed.
        self.assertLess(abs(rabi["value"] - RABI_HZ), 5 * rabi["sigma"])
        self.assertLess(rabi["sigma"] / rabi["value"], 0.01)
        self.assertGreater(reply["intensity_w_m2"]["value"], 0)
        self.assertGreater(reply["power_w"]["value"], 0)

        for name, angle in (("flip", 0.5), ("split", 0.25)):
            pulse = reply["pulses"][name]
            truth = angle / RABI_HZ + DEAD_TIME_S
            self.assertLess(abs(pulse["exact_s"] - truth), 5 * pulse["sigma_s"])
            self.assertAlmostEqual(pulse["length_s"] / 8e-9, round(pulse["length_s"] / 8e-9), places=5)
            if pulse["verdict"] == "apply":
                self.assertLess(abs(pulse["length_s"] - pulse["exact_s"]), 4.001e-9)
            else:
                self.assertEqual(pulse["length_s"], pulse["previous_s"])
        self.assertEqual(len(reply["overlay"]["signal"]), 50)
        self.assertTrue(all(low <= signal <= high for low, signal, high in
                            zip(reply["overlay"]["low"], reply["overlay"]["signal"], reply["overlay"]["high"])))
        self.assertIn(reply["dynamics"]["chosen"], [c["name"] for c in reply["dynamics"]["candidates"]])
        self.assertEqual(reply["quality"]["points"], 41)
        self.assertIs(reply["stored"], True)
        self.assertRegex(daemon.line_with(scan["scan_name"]), r"red flop-11: (apply|keep), 123\.\d+\(\d+\) kHz")

    def test_a_joint_fit_is_one_reply_and_one_row_of_history(self):
        peer = self.peer(self.daemon())
        scans = [flop(taken_at=moment(0), seed=16), flop(taken_at=moment(1), seed=17, span_s=23e-6)]
        reply = peer.ask("fit", {"scans": scans})
        self.assertEqual(reply["kind"], "fitted", reply)
        self.assertNotEqual(reply["verdict"], "refuse", reply["reasons"])
        self.assertEqual([scan["scan_name"] for scan in reply["scans"]], ["flop-16", "flop-17"])
        self.assertEqual(reply["quality"]["points"], 82)
        self.assertLess(abs(reply["rabi_hz"]["value"] - RABI_HZ), 5 * reply["rabi_hz"]["sigma"])
        rows = peer.ask("history", {"drive": "red"})["rows"]
        self.assertEqual([row["scan_name"] for row in rows], ["flop-16 + flop-17"])

    def test_flat_scan_is_refused_with_reasons_and_proposes_nothing_new(self):
        peer = self.peer(self.daemon())
        reply = peer.ask("fit", {"scan": flop(flat=True, seed=12)})
        self.assertEqual(reply["verdict"], "refuse")
        self.assertTrue(reply["reasons"][0]["text"])
        for pulse in reply["pulses"].values():
            self.assertEqual(pulse["length_s"], pulse["previous_s"])

    def test_replay_and_reuse_of_an_id(self):
        peer = self.peer(self.daemon())
        scan = flop(seed=13)
        first = peer.ask("fit", {"scan": scan}, id="night/1")
        again = peer.ask("fit", {"scan": scan}, id="night/1", encode=lambda r: json.dumps(r).encode())
        self.assertIs(again["replayed"], True)
        self.assertEqual(again["pulses"], first["pulses"])
        other = peer.ask("fit", {"scan": flop(seed=14)}, id="night/1")
        self.assertEqual((other["kind"], other["code"]), ("error", "id_reused"))
        self.assertEqual(len(peer.ask("history", {"drive": "red"})["rows"]), 1)

    def test_applied_is_what_the_next_fit_compares_with(self):
        peer = self.peer(self.daemon())
        noted = peer.ask("applied", {"drive": "red", "applied_at": moment(0), "pulses": {"flip": 4.2e-6}})
        self.assertEqual(noted["kind"], "noted", noted)
        reply = peer.ask("fit", {"scan": flop(seed=15, taken_at=moment(5))})
        self.assertAlmostEqual(reply["pulses"]["flip"]["previous_s"], 4.2e-6, places=12)
        state = peer.ask("status")
        self.assertAlmostEqual(state["drives"]["red"]["pulses"]["flip"], 4.2e-6, places=12)


class Kills(InFolder):
    def test_no_answered_result_is_lost_by_a_kill_in_the_night(self):
        draw = random.Random(99)
        answered = {}
        number = 0
        daemon = self.daemon()
        for _ in range(4):
            peer = daemon.peer()
            asked = {}
            # A burst, of which the kill catches some before, some in and some after their commit.
            for _ in range(12):
                number += 1
                id = f"scan-{number}"
                asked[id] = flop(seed=100 + number, taken_at=moment(5 * number), points=25, shots=60)
                peer.send("fit", {"scan": asked[id]}, id=id)
            for id in list(asked)[:draw.randrange(1, 11)]:
                reply = peer.receive(id)
                self.assertEqual(reply["kind"], "fitted", reply)
                answered[id] = (asked[id], reply)
            daemon.kill()
            peer.close()
            daemon.start()

            peer = daemon.peer()
            rows = {row["scan_name"]: row for row in peer.ask("history", {"drive": "red"})["rows"]}
            for id, (scan, reply) in answered.items():
                self.assertIn(scan["scan_name"], rows)
                again = peer.ask("fit", {"scan": scan}, id=id)
                self.assertIs(again.get("replayed"), True, again)
                for field in ("verdict", "rabi_hz", "pulses"):
                    self.assertEqual(again[field], reply[field])
            self.assertEqual(len(peer.ask("history", {"drive": "red"})["rows"]), len(rows))
            peer.close()
        self.assertEqual(daemon.stop(), 0)
        self.assertEqual(program("drift", "--log", self.folder / "nights.db").returncode, 0)


class Signals(InFolder):
    def test_sigterm_answers_what_was_accepted_and_ends_with_0(self):
        daemon = self.daemon()
        peer = self.peer(daemon)
        ids = [peer.send("fit", {"scan": flop(seed=300 + i, points=60, taken_at=moment(i))}, id=f"n{i}") for i in range(20)]
        kinds = [peer.receive(ids[0])["kind"]]
        daemon.signal(signal.SIGTERM)
        for id in ids[1:]:
            reply = peer.receive(id)
            kinds.append(reply["kind"] if reply["kind"] == "fitted" else reply["code"])
        self.assertLessEqual(set(kinds), {"fitted", "stopping"})
        self.assertEqual(daemon.wait(), 0)

    def test_a_faulty_configuration_leaves_the_earlier_one_in_force(self):
        daemon = self.daemon()
        peer = self.peer(daemon)
        good = daemon.config.read_text()
        daemon.config.write_text(good.replace("angle: pi/2", "angel: pi/2"))
        daemon.signal(signal.SIGHUP)
        self.assertRegex(daemon.line_with("angel"), r"lab\.yaml:\d+:\d+")
        daemon.line_with("stays in force")
        state = peer.ask("status")
        self.assertTrue(any("angel" in trouble for trouble in state["troubles"]), state["troubles"])
        self.assertEqual(peer.ask("fit", {"scan": flop(seed=21)})["kind"], "fitted")
        text = program("status", "--endpoint", daemon.requests)
        self.assertEqual(text.returncode, 0)
        self.assertIn("something is wrong", text.stdout)
        self.assertIn("angel", " ".join(text.stdout.split()))

        daemon.config.write_text(good.replace("length: 4.00 us", "length: 5.00 us"))
        daemon.signal(signal.SIGHUP)
        daemon.line_with("is in force for requests from now on")
        self.assertEqual(peer.ask("status")["troubles"], [])

    def test_a_second_interrupt_ends_at_once(self):
        daemon = self.daemon()
        peer = self.peer(daemon)
        for i in range(200):
            peer.send("fit", {"scan": flop(seed=400 + i, points=100)}, id=f"n{i}")
        peer.receive("n0")
        daemon.signal(signal.SIGINT)
        daemon.line_with("stopping")
        daemon.signal(signal.SIGINT)
        self.assertIn(daemon.wait(), (0, 3))  # 0 where everything was done before the second came

    def test_a_service_manager_is_told(self):
        path = str(self.folder / "notify")
        with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as listener:
            listener.bind(path)
            listener.settimeout(PATIENCE_S)
            os.environ["NOTIFY_SOCKET"] = path
            try:
                daemon = self.daemon()
            finally:
                del os.environ["NOTIFY_SOCKET"]
            self.assertIn(b"READY=1", listener.recv(1000))
            daemon.signal(signal.SIGHUP)
            self.assertIn(b"RELOADING=1", listener.recv(1000))
            self.assertIn(b"READY=1", listener.recv(1000))
            daemon.signal(signal.SIGTERM)
            self.assertIn(b"STOPPING=1", listener.recv(1000))
            self.assertEqual(daemon.wait(), 0)


class Exclusive(InFolder):
    def test_an_endpoint_in_use_is_named_with_its_key(self):
        daemon = self.daemon()
        text = daemon.config.read_text().replace("tcp://127.0.0.1:0", daemon.requests, 1).replace("nights.db", "other.db")
        second = program("serve", "--config", self.write("second.yaml", text))
        self.assertEqual(second.returncode, 3)
        self.assertIn(daemon.requests, second.stderr)
        self.assertIn("sockets.requests", second.stderr)
        self.assertIn("in use", second.stderr)

    def test_a_log_in_use_is_said_to_be(self):
        daemon = self.daemon()
        second = program("serve", "--config", daemon.config)
        self.assertEqual(second.returncode, 3)
        self.assertIn(str(daemon.process.pid), second.stderr)

    def test_the_safety_caution_stands_first(self):
        daemon = self.daemon()
        self.assertIn("controls nothing", daemon.lines[0])
        self.assertIn("laser-safety officer", " ".join(daemon.lines))
        self.assertRegex(daemon.line_with("listening"), r"^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{3}Z info ")


class Deaf(InFolder):
    def test_a_supervisor_that_reads_no_log_lines_stops_nothing(self):
        # Standard error is a pipe of the smallest size that nobody reads; 200 scans write more lines than it holds.
        read, write = os.pipe()
        fcntl.fcntl(write, fcntl.F_SETPIPE_SZ, 4096)
        ports = self.daemon()
        config = self.write("deaf.yaml", ports.config.read_text().replace("nights.db", "deaf.db").replace(
            "tcp://127.0.0.1:0", f"ipc://{self.folder}/deaf", 1))
        process = subprocess.Popen([PROGRAM, "serve", "--config", str(config)], stderr=write)
        self.addCleanup(lambda: process.poll() is None and process.kill())
        os.close(write)
        peer = Peer(f"ipc://{self.folder}/deaf")
        self.addCleanup(peer.close)
        for i in range(200):
            self.assertEqual(peer.ask("fit", {"scan": flop(seed=i, points=20, shots=20)})["kind"], "fitted")
        process.send_signal(signal.SIGTERM)
        self.assertEqual(process.wait(PATIENCE_S), 0)
        os.close(read)


class Published(InFolder):
    def test_the_feed_is_not_answered_and_what_it_brings_is_published(self):
        daemon = self.daemon()
        with zmq.Context() as context, context.socket(zmq.PUSH) as feed, context.socket(zmq.SUB) as listener:
            feed.connect(daemon.feed)
            listener.connect(daemon.results)
            listener.subscribe(b"fitted/red/")
            feed.send(json.dumps({"proto": 1, "kind": "fit", "id": "f1", "scan": flop(seed=31)}).encode())
            self.assertTrue(listener.poll(1000 * PATIENCE_S))
            topic, message = listener.recv_multipart()
        self.assertEqual(topic, b"fitted/red/")
        self.assertEqual(msgpack.unpackb(message, timestamp=3)["scan_name"], "flop-31")


if __name__ == "__main__":
    unittest.main()
