# SPDX-License-Identifier: Apache-2.0
"""The sockets."""
import time

import zmq

from ._fitted import Fitted
from ._wire import NoAnswer, RequestFault, new_id, now, pack, time_text, unpack, without_none

_OPTIONS = ("store", "overlay_points", "dynamics", "level")


def _fit_body(drive, scan_name, taken_at, fields):
    """The `scan` and `options` of a fit from keyword arguments."""
    options = {key: fields.pop(key) for key in _OPTIONS if key in fields}
    scan = {"scan_name": scan_name, "drive": drive, "taken_at": time_text(now() if taken_at is None else taken_at), **fields}
    return without_none({"scan": without_none(scan), "options": without_none(options) or None})


def _applied_body(drive, pulses, carrier_hz, applied_at):
    when = time_text(now() if applied_at is None else applied_at)
    return without_none({"drive": drive, "pulses": pulses, "carrier_hz": carrier_hz, "applied_at": when})


class _Socket:
    """What the sockets share: their own context, and closing."""

    def __init__(self):
        self._context = zmq.Context()
        self._socket = None

    def close(self):
        """Closes the socket; what was not sent by now may be lost, unless the object says otherwise."""
        if self._socket is not None:
            self._socket.close()
            self._socket = None
        self._context.term()

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.close()


class Client(_Socket):
    """Requests with replies.

    A request that is not answered within `timeout_s` is sent again with the same id on a new connection, `attempts` times in
    all; the daemon answers a repeat with the reply that it stored, so nothing is counted twice. Then NoAnswer is raised. A fault
    in a request raises RequestFault.
    """

    def __init__(self, endpoint="tcp://127.0.0.1:7411", timeout_s=5.0, attempts=3):
        super().__init__()
        self.endpoint = endpoint
        self.timeout_s = timeout_s
        self.attempts = attempts

    def fit(self, *, drive, scan_name=None, taken_at=None, id=None, **fields):
        """Sends a scan and returns its Fitted.

        One axis: `duration_s`, `detuning_hz` or `amplitude`. One readout: `counts` and `shots`, `signal` and `sigma`, or
        `photons` and `exposures`. Further: `pulse_s` (needed for detuning and amplitude scans), `drive_amplitude`, `carrier_hz`,
        `references`, `prepared`, `at_s`, `ambient`, `sites`. Options: `store` (False fits the scan on its own), `overlay_points`,
        `dynamics`, `level`. `taken_at` is a datetime with a time zone or an RFC 3339 text; without it, now.
        """
        return Fitted(self.request("fit", id=id, **_fit_body(drive, scan_name, taken_at, fields)))

    def fit_together(self, scans, *, id=None, **options):
        """Fits several scans of one drive jointly; each a dict with the fields of `fit`."""
        bodies = [_fit_body(s["drive"], s.get("scan_name"), s.get("taken_at"),
                            {k: v for k, v in s.items() if k not in ("drive", "scan_name", "taken_at")}) for s in scans]
        return Fitted(self.request("fit", id=id, **without_none({"scans": [b["scan"] for b in bodies], "options": options or None})))

    def applied(self, drive, pulses=None, carrier_hz=None, applied_at=None, id=None):
        """Tells the daemon what the experiment now uses: `pulses` as {name: s} (of a pulse adjusted in amplitude that amplitude), its
        carrier in Hz, or both."""
        return self.request("applied", id=id, **_applied_body(drive, pulses, carrier_hz, applied_at))

    def history(self, drive, since=None, until=None, limit=None):
        """Fits with since <= taken_at < until, oldest first: a list of Fitted without overlay. The list's attribute `next` is the
        `since` to go on from, None at the end."""
        reply = self.request("history", **without_none({
            "drive": drive, "since": since and time_text(since), "until": until and time_text(until), "limit": limit}))
        return Rows(reply)

    def status(self):
        """The state of the daemon, a dict."""
        return self.request("status")

    def next(self, drive, shots):
        """The points that teach most for so many shots, a dict."""
        return self.request("next", drive=drive, shots=shots)

    def hold(self, drive, by, why):
        """Keeps every verdict of a drive at "keep" until it is released."""
        return self.request("hold", drive=drive, by=by, why=why)

    def release(self, drive, by, why=None):
        """Ends a hold."""
        return self.request("release", **without_none({"drive": drive, "by": by, "why": why}))

    def request(self, kind, id=None, **body):
        """Sends any request and returns its reply, a dict. `id` is for repeating a request of before; without it a new one."""
        id = id or new_id()
        frame = pack({"proto": 1, "kind": kind, "id": id, **body})
        for _ in range(self.attempts):
            reply = self._ask(frame, id)
            if reply is None:
                self._disconnect()
            elif reply.get("kind") == "error":
                raise RequestFault(reply)
            else:
                return reply
        raise NoAnswer(
            f"found no answer from {self.endpoint} in {self.attempts} attempts of {self.timeout_s} s. Is the daemon running there? "
            f"`halfturn status` says so, `halfturn serve` starts it. The request may have arrived: repeating it with id={id!r} is "
            "safe", id)

    def _ask(self, frame, id):
        """One attempt: the reply of that id, or None. Replies to earlier requests are dropped."""
        if self._socket is None:
            self._socket = self._context.socket(zmq.DEALER)
            self._socket.setsockopt(zmq.LINGER, 0)
            self._socket.connect(self.endpoint)
        end = time.monotonic() + self.timeout_s
        if not self._socket.poll(1000 * self.timeout_s, zmq.POLLOUT):
            return None
        self._socket.send(frame)
        while (left := end - time.monotonic()) > 0 and self._socket.poll(max(1, 1000 * left)):
            reply = unpack(self._socket.recv_multipart()[-1])
            if reply is not None and reply.get("id") == id:
                return reply
        return None

    def _disconnect(self):
        self._socket.close()
        self._socket = None


class Rows(list):
    """A list of Fitted with `next`, the `since` to go on from."""

    def __init__(self, reply):
        super().__init__(Fitted(row) for row in reply.get("rows", []))
        self.next = reply.get("next")


class Feed(_Socket):
    """Scans without reply, for programs that must not wait: results are published (see Results), faults under `rejected/`.

    A message is queued while the daemon is away, up to `queue` of them; past that NoAnswer is raised at once. `close` waits up
    to `linger_s` for the queue to empty.
    """

    def __init__(self, endpoint="tcp://127.0.0.1:7412", queue=1000, linger_s=1.0):
        super().__init__()
        self.endpoint = endpoint
        self._socket = self._context.socket(zmq.PUSH)
        self._socket.setsockopt(zmq.SNDHWM, queue)
        self._socket.setsockopt(zmq.LINGER, int(1000 * linger_s))
        self._socket.connect(endpoint)

    def fit(self, *, drive, scan_name=None, taken_at=None, **fields):
        """Sends a scan as Client.fit does; returns the id of the request."""
        return self.send("fit", **_fit_body(drive, scan_name, taken_at, fields))

    def begin(self, *, drive, scan_name, taken_at=None, **fields):
        """Begins a scan in progress, whose points follow."""
        return self.send("begin", **_fit_body(drive, scan_name, taken_at, fields))

    def points(self, scan_name, **data):
        """A batch of points of a scan in progress: axis and readout."""
        return self.send("points", scan_name=scan_name, **data)

    def end(self, scan_name):
        """Ends a scan in progress; it is fitted then."""
        return self.send("end", scan_name=scan_name)

    def applied(self, drive, pulses=None, carrier_hz=None, applied_at=None):
        """Tells the daemon what the experiment now uses."""
        return self.send("applied", **_applied_body(drive, pulses, carrier_hz, applied_at))

    def send(self, kind, **body):
        """Sends any message of the feed without waiting; returns its id."""
        id = new_id()
        try:
            self._socket.send(pack({"proto": 1, "kind": kind, "id": id, **body}), zmq.DONTWAIT)
        except zmq.Again:
            raise NoAnswer(f"the queue to {self.endpoint} is full: is the daemon running there? "
                           "`halfturn status` says so", id) from None
        return id


class Results(_Socket):
    """What the daemon publishes. `lost` counts the messages that were lost, by topic."""

    def __init__(self, endpoint="tcp://127.0.0.1:7413"):
        super().__init__()
        self.endpoint = endpoint
        self.lost = {}
        self._seen = {}

    def subscribe(self, drive=None, topics=None, timeout_s=None):
        """Yields (topic, message) for ever, or until nothing came for `timeout_s`.

        With `drive`, what concerns that drive (`live/`, `fitted/`, `drift/`) and `rejected/`; without, everything; `topics` says
        the prefixes itself. A message that was seen before is left out; a gap in the sequence adds to `lost`. A new start of the
        daemon (`boot`) is no loss. "fitted/..." messages are Fitted.
        """
        if topics is None:
            topics = [""] if drive is None else [f"live/{drive}/", f"fitted/{drive}/", f"drift/{drive}/", "rejected/"]
        self._open(topics)
        return self._messages(timeout_s)

    def _open(self, topics):
        if self._socket is not None:
            self._socket.close()
        self._socket = self._context.socket(zmq.SUB)
        self._socket.setsockopt(zmq.LINGER, 0)
        for topic in topics:
            self._socket.setsockopt(zmq.SUBSCRIBE, topic.encode())
        self._socket.connect(self.endpoint)

    def _messages(self, timeout_s):
        while self._socket.poll(None if timeout_s is None else 1000 * timeout_s):
            frames = self._socket.recv_multipart()
            message = unpack(frames[-1])
            topic = frames[0].decode("utf-8", "replace")
            if message is not None and self._is_new(topic, message):
                yield topic, Fitted(message) if message.get("kind") == "fitted" else message

    def _is_new(self, topic, message):
        boot, sequence = message.get("boot"), message.get("sequence", 0)
        last_boot, last = self._seen.get(topic, (None, 0))
        if boot == last_boot:
            if sequence <= last:
                return False
            self.lost[topic] = self.lost.get(topic, 0) + sequence - last - 1
        self._seen[topic] = (boot, sequence)
        return True
