# SPDX-License-Identifier: Apache-2.0
"""Messages to bytes and back, and what can go wrong."""
import datetime
import uuid

import msgpack


class HalfturnError(Exception):
    """What this package raises."""


class NoAnswer(HalfturnError, TimeoutError):
    """No reply came in time. `id` is the request's: repeating it with that id is safe."""

    def __init__(self, message, id=None):
        super().__init__(message)
        self.id = id


class RequestFault(HalfturnError):
    """The daemon found a fault in a request: `code`, `where` (such as "scan.counts[3]"), `message`, and `retry_after_s` for
    the code "busy"."""

    def __init__(self, reply):
        self.code = reply.get("code", "internal")
        self.where = reply.get("where", "")
        self.message = reply.get("message", "")
        self.retry_after_s = reply.get("retry_after_s")
        super().__init__(": ".join(part for part in (self.code, self.where, self.message) if part))


def new_id():
    return str(uuid.uuid4())


def now():
    return datetime.datetime.now(datetime.timezone.utc)


def time_text(when):
    """RFC 3339 of a datetime that knows its zone, or a text as it is."""
    if isinstance(when, str):
        return when
    if not isinstance(when, datetime.datetime) or when.tzinfo is None:
        raise TypeError(f"found {when!r}, expected a datetime with a time zone, such as datetime.now(timezone.utc)")
    return when.astimezone(datetime.timezone.utc).isoformat().replace("+00:00", "Z")


def plain(value):
    """The value with arrays and array scalars (anything with `tolist`) as lists and numbers, and times as text."""
    if hasattr(value, "tolist"):
        return plain(value.tolist())
    if isinstance(value, datetime.datetime):
        return time_text(value)
    if isinstance(value, dict):
        return {key: plain(entry) for key, entry in value.items()}
    if isinstance(value, (list, tuple, range)):
        return [plain(entry) for entry in value]
    return value


def without_none(fields):
    return {key: value for key, value in fields.items() if value is not None}


def pack(message):
    return msgpack.packb(plain(message), use_bin_type=True)


def unpack(frame):
    """The map in a frame, or None where it holds none."""
    try:
        message = msgpack.unpackb(frame, raw=False, timestamp=3)
    except Exception:  # whatever the bytes are, they are no message
        return None
    return message if isinstance(message, dict) else None
