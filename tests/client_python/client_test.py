# SPDX-License-Identifier: Apache-2.0
"""The Python client against bare sockets that play the daemon, on ephemeral ports of the loopback."""
import datetime
import json
import pathlib
import subprocess
import sys
import threading
import unittest

import jsonschema
import msgpack
import numpy
import zmq

import halfturn

WAIT_MS = 20_000  # for what must come; no test waits so long unless it fails

SCHEMA = json.loads((pathlib.Path(__file__).parents[2] / "schemas" / "messages.schema.json").read_text())
REQUEST = jsonschema.Draft202012Validator({"$ref": "#/$defs/request", "$defs": SCHEMA["$defs"]})


class Daemon:
    """A ROUTER in a thread; `answer(request)` returns the messages to send back."""

    def __init__(self, answer, count=1):
        self.context = zmq.Context()
        self.socket = self.context.socket(zmq.ROUTER)
        self.socket.setsockopt(zmq.LINGER, 0)
        self.endpoint = f"tcp://127.0.0.1:{self.socket.bind_to_random_port('tcp://127.0.0.1')}"
        self.requests, self.answer, self.count = [], answer, count
        self.thread = threading.Thread(target=self.run)
        self.thread.start()

    def run(self):
        for _ in range(self.count):
            if not self.socket.poll(WAIT_MS):
                return
            peer, frame = self.socket.recv_multipart()
            self.requests.append(msgpack.unpackb(frame))
            for reply in self.answer(self.requests[-1]):
                self.socket.send_multipart([peer, msgpack.packb(reply)])

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.thread.join()
        self.socket.close()
        self.context.term()


def fitted(request, **fields):
    return {"proto": 1, "kind": "fitted", "id": request["id"], "verdict": "apply", "reasons": [{"code": "first", "text": "the first"}],
            "pulses": {"flip": {"verdict": "apply", "length_s": 3.992e-6}, "level": {"length_amplitude": 0.7}},
            "rabi_hz": {"value": 125e3, "sigma": 100.0}, **fields}


class Requests(unittest.TestCase):
    def test_a_fit_with_arrays(self):
        with Daemon(lambda r: [fitted(r)]) as daemon, halfturn.Client(daemon.endpoint, timeout_s=20) as client:
            fit = client.fit(drive="red", duration_s=numpy.linspace(0, 2e-6, 3), counts=numpy.array([0, 60, 95]), shots=numpy.int64(100),
                             ambient={"room": numpy.float64(21.5)}, store=False, level=0.9)
        self.assertTrue(fit.applies)
        self.assertFalse(fit.refused)
        self.assertEqual(fit.length_s("flip"), 3.992e-6)
        self.assertEqual(fit.amplitude("level"), 0.7)
        self.assertEqual(fit.lengths_s(), {"flip": 3.992e-6})
        self.assertEqual(fit.amplitudes(), {"level": 0.7})
        self.assertEqual(fit.verdict, "apply")
        self.assertEqual(fit.value("rabi_hz"), 125e3)
        self.assertEqual(fit.why, "the first")
        with self.assertRaisesRegex(KeyError, "has no pulse 'flop'; it has flip, level"):
            fit.length_s("flop")
        with self.assertRaisesRegex(KeyError, "amplitude"):
            fit.length_s("level")
        with self.assertRaisesRegex(AttributeError, "no field 'verdic'"):
            fit.verdic
        request = daemon.requests[0]
        REQUEST.validate(request)
        self.assertEqual((request["proto"], request["kind"]), (1, "fit"))
        self.assertEqual(len(request["id"]), 36)
        scan = request["scan"]
        self.assertEqual(scan["duration_s"], [0, 1e-6, 2e-6])
        self.assertEqual(scan["counts"], [0, 60, 95])
        self.assertEqual(scan["shots"], 100)
        self.assertEqual(scan["ambient"], {"room": 21.5})
        self.assertNotIn("scan_name", scan)
        self.assertEqual(request["options"], {"store": False, "level": 0.9})
        taken = datetime.datetime.fromisoformat(scan["taken_at"].replace("Z", "+00:00"))
        self.assertLess(abs((datetime.datetime.now(datetime.timezone.utc) - taken).total_seconds()), 60)

    def test_a_time_without_zone_is_refused(self):
        with halfturn.Client() as client, self.assertRaisesRegex(TypeError, "time zone"):
            client.fit(drive="red", duration_s=[0], counts=[0], shots=1, taken_at=datetime.datetime(2026, 2, 3))

    def test_a_time_with_a_zone_becomes_utc(self):
        zone = datetime.timezone(datetime.timedelta(hours=1))
        with Daemon(lambda r: [fitted(r)]) as daemon, halfturn.Client(daemon.endpoint, timeout_s=20) as client:
            client.fit(drive="red", duration_s=[0], counts=[0], shots=1, taken_at=datetime.datetime(2026, 2, 3, 4, 5, 6, tzinfo=zone))
        self.assertEqual(daemon.requests[0]["scan"]["taken_at"], "2026-02-03T03:05:06Z")

    def test_a_repeat_has_the_same_id_and_stale_replies_are_dropped(self):
        replies = [[], [{"kind": "noted", "id": "somebody-else"}, "no map", {"kind": "noted", "id": None}]]

        def answer(request):
            return replies.pop(0) if len(replies) > 1 else replies[0] + [{"kind": "noted", "id": request["id"]}]

        with Daemon(answer, count=2) as daemon, halfturn.Client(daemon.endpoint, timeout_s=0.3, attempts=20) as client:
            client.applied("red", pulses={"flip": 4e-6})
        self.assertEqual(daemon.requests[0], daemon.requests[1])

    def test_nobody_there(self):
        with zmq.Context() as context, context.socket(zmq.ROUTER) as silent:
            silent.setsockopt(zmq.LINGER, 0)
            port = silent.bind_to_random_port("tcp://127.0.0.1")
            with halfturn.Client(f"tcp://127.0.0.1:{port}", timeout_s=0.05, attempts=2) as client:
                with self.assertRaises(halfturn.NoAnswer) as caught:
                    client.status()
        self.assertIn("halfturn status", str(caught.exception))
        self.assertIn("repeating it with id=", str(caught.exception))
        self.assertIsInstance(caught.exception, TimeoutError)

    def test_a_fault_is_raised(self):
        def answer(request):
            return [{"kind": "error", "id": request["id"], "code": "bad_value", "where": "scan.counts[3]", "message": "found -1"}]

        with Daemon(answer) as daemon, halfturn.Client(daemon.endpoint, timeout_s=20) as client:
            with self.assertRaises(halfturn.RequestFault) as caught:
                client.fit(drive="red", duration_s=[0], counts=[-1], shots=1)
        fault = caught.exception
        self.assertEqual((fault.code, fault.where, fault.message), ("bad_value", "scan.counts[3]", "found -1"))
        self.assertEqual(str(fault), "bad_value: scan.counts[3]: found -1")

    def test_the_other_requests(self):
        def answer(request):
            if request["kind"] == "history":
                return [{"kind": "rows", "id": request["id"], "rows": [{"verdict": "keep"}], "next": "2026-02-03T04:05:06Z"}]
            return [{"kind": "noted", "id": request["id"]}]

        since = datetime.datetime(2026, 2, 3, tzinfo=datetime.timezone.utc)
        with Daemon(answer, count=6) as daemon, halfturn.Client(daemon.endpoint, timeout_s=20) as client:
            rows = client.history("red", since=since, limit=1)
            client.hold("red", by="Ada", why="mirror")
            client.release("red", by="Ada")
            client.applied("red", carrier_hz=8e7, applied_at=since)
            client.next("red", shots=100)
            client.status()
        self.assertEqual((rows[0].verdict, rows.next), ("keep", "2026-02-03T04:05:06Z"))
        self.assertTrue(all(REQUEST.is_valid(r) for r in daemon.requests))
        sent = [{k: v for k, v in r.items() if k not in ("proto", "id")} for r in daemon.requests]
        self.assertEqual(sent, [
            {"kind": "history", "drive": "red", "since": "2026-02-03T00:00:00Z", "limit": 1},
            {"kind": "hold", "drive": "red", "by": "Ada", "why": "mirror"},
            {"kind": "release", "drive": "red", "by": "Ada"},
            {"kind": "applied", "drive": "red", "carrier_hz": 8e7, "applied_at": "2026-02-03T00:00:00Z"},
            {"kind": "next", "drive": "red", "shots": 100},
            {"kind": "status"}])

    def test_a_joint_fit(self):
        flop = {"drive": "red", "duration_s": [0, 1e-6], "counts": [0, 9], "shots": 10}
        with Daemon(lambda r: [fitted(r)]) as daemon, halfturn.Client(daemon.endpoint, timeout_s=20) as client:
            client.fit_together([flop, flop], store=False)
        REQUEST.validate(daemon.requests[0])
        self.assertEqual(len(daemon.requests[0]["scans"]), 2)
        self.assertEqual(daemon.requests[0]["options"], {"store": False})


class Feeding(unittest.TestCase):
    def test_messages_without_reply(self):
        with zmq.Context() as context, context.socket(zmq.PULL) as pull:
            port = pull.bind_to_random_port("tcp://127.0.0.1")
            with halfturn.Feed(f"tcp://127.0.0.1:{port}") as feed:
                ids = [feed.fit(drive="red", duration_s=numpy.array([0.0]), counts=[0], shots=1), feed.begin(drive="red", scan_name="s"),
                       feed.points("s", duration_s=[1e-6], counts=[1], shots=10), feed.end("s"), feed.applied("red", pulses={"flip": 4e-6})]
                got = []
                while len(got) < len(ids) and pull.poll(WAIT_MS):
                    got.append(msgpack.unpackb(pull.recv()))
        self.assertEqual([m["id"] for m in got], ids)
        self.assertEqual([m["kind"] for m in got], ["fit", "begin", "points", "end", "applied"])
        self.assertTrue(all(REQUEST.is_valid(m) for m in got))

    def test_a_full_queue_does_not_wait(self):
        with zmq.Context() as context, context.socket(zmq.PULL) as closed:
            port = closed.bind_to_random_port("tcp://127.0.0.1")
        with halfturn.Feed(f"tcp://127.0.0.1:{port}", queue=5, linger_s=0) as feed, self.assertRaises(halfturn.NoAnswer):
            for _ in range(100):
                feed.end("s")


class Publications(unittest.TestCase):
    def test_losses_and_repeats(self):
        def message(boot, sequence, kind="fitted"):
            return msgpack.packb({"proto": 1, "kind": kind, "boot": boot, "sequence": sequence, "verdict": "keep"})

        with zmq.Context() as context, context.socket(zmq.XPUB) as pub:
            pub.setsockopt(zmq.LINGER, 0)
            port = pub.bind_to_random_port("tcp://127.0.0.1")
            with halfturn.Results(f"tcp://127.0.0.1:{port}") as results:
                stream = results.subscribe(drive="red", timeout_s=WAIT_MS / 1000)
                for _ in range(4):  # ready when all subscriptions have arrived
                    self.assertTrue(pub.poll(WAIT_MS))
                    pub.recv()
                for topic, frame in ((b"fitted/red2/", message("a", 1)), (b"fitted/red/", message("a", 5)), (b"fitted/red/", message("a", 5)),
                                     (b"fitted/red/", message("a", 8)), (b"drift/red/", message("a", 3, "drift")), (b"fitted/red/", b"\xc1"),
                                     (b"fitted/red/", message("b", 1)), (b"fitted/red/", message("b", 2))):
                    pub.send_multipart([topic, frame])
                got = [next(stream) for _ in range(5)]
        self.assertEqual([(t, m["boot"], m["sequence"]) for t, m in got],
                         [("fitted/red/", "a", 5), ("fitted/red/", "a", 8), ("drift/red/", "a", 3), ("fitted/red/", "b", 1), ("fitted/red/", "b", 2)])
        self.assertEqual(results.lost["fitted/red/"], 2)
        self.assertEqual(got[0][1].verdict, "keep")


class Package(unittest.TestCase):
    def test_numpy_is_not_imported(self):
        code = "import sys, halfturn; sys.exit('numpy' in sys.modules)"
        self.assertEqual(subprocess.run([sys.executable, "-B", "-c", code], timeout=60).returncode, 0)


if __name__ == "__main__":
    unittest.main()
