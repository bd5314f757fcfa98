#!/usr/bin/env python3
# SPDX-License-Identifier: Apache-2.0
"""The table of rooms, and what holds the source files to it.

    tests/rooms/rooms.py [ROOT]

prints every `#include` line of model/ and plugin/ that the table does not allow, and every file that lies in no known room;
exits 1 where there is one. What the table says in words stands in DEVELOPERS.md, "The house".
"""
import pathlib
import re
import sys

# From the top to the bottom: a room may include itself and the rooms below it in its half, less where its row below says.
MODEL = ["recalibrate", "drift", "infer", "atom", "dynamics", "quantity"]
PLUGIN = ["cli", "rehearse", "client", "daemon", "display", "service", "log", "config", "wire", "package"]
TOP_FILES = {
    "model/CMakeLists.txt", "plugin/CMakeLists.txt", "plugin/embed.cmake", "plugin/embed_files.cmake",
    "plugin/main.cpp",      # start-up: above every room
    "plugin/embedded.hpp",  # the texts of schemas/ inside the program: below every room of plugin/
}

ALL_MODEL = [f"model/{room}" for room in MODEL]
NUMBERS = ["model/quantity"]
EMBEDDED = ["plugin/embedded.hpp"]

# What a room may include of the project besides what lies in it. A name that ends in .hpp is that file alone.
MAY_INCLUDE = {
    **{f"model/{room}": [f"model/{below}" for below in MODEL[place + 1:]] for place, room in enumerate(MODEL)},
    "plugin/main.cpp": ["plugin/cli"],
    "plugin/cli": ALL_MODEL + EMBEDDED + [f"plugin/{room}" for room in PLUGIN if room not in ("cli", "package")],
    "plugin/rehearse": NUMBERS + ["plugin/client", "plugin/wire"],  # an outside judge: none of the physics it judges
    "plugin/client": NUMBERS + ["plugin/wire"],
    "plugin/daemon": NUMBERS + ["plugin/service", "plugin/log/log.hpp", "plugin/config", "plugin/wire"],
    "plugin/display": NUMBERS + EMBEDDED + ["plugin/service", "plugin/config", "plugin/wire"],
    "plugin/service": ALL_MODEL + ["plugin/log/log.hpp", "plugin/config", "plugin/wire"],
    "plugin/log": NUMBERS + EMBEDDED,
    "plugin/config": ALL_MODEL + EMBEDDED + ["plugin/wire"],
    "plugin/wire": NUMBERS,
    "plugin/embedded.hpp": [],
}

# Files that keep apart inside a room: what begins so may not include these.
APART = {
    "model/infer/solver.": ["model/dynamics", "model/atom", "model/infer/scan", "model/infer/candidate", "model/infer/likelihood",
                            "model/infer/fit"],                                      # an objective and no physical name
    "model/infer/likelihood.": ["model/dynamics", "model/atom", "model/infer/scan"],  # counts and probabilities
}

LIBRARY_OF = [  # the first that fits; what fits none is the standard library, the system, or a fault
    (r"(unsupported/)?Eigen/", "Eigen"), (r"tl/", "tl-expected"), (r"zmq", "ZeroMQ"), (r"msgpack", "msgpack"),
    (r"nlohmann/", "JSON"), (r"yaml-cpp/", "yaml-cpp"), (r"sqlite3", "SQLite"), (r"CLI/", "CLI11"), (r"spdlog/", "spdlog"),
    (r"fmt/", "fmt"), (r"microhttpd", "libmicrohttpd"),
]
LIBRARIES = {
    **{f"model/{room}": ["Eigen"] for room in MODEL},
    "model/quantity": ["Eigen", "tl-expected"],
    "plugin/main.cpp": [],
    "plugin/cli": ["CLI11", "spdlog", "fmt", "JSON"],
    "plugin/rehearse": ["Eigen", "JSON"],
    "plugin/client": ["ZeroMQ", "JSON"],
    "plugin/daemon": ["ZeroMQ", "spdlog", "fmt"],
    "plugin/display": ["libmicrohttpd", "JSON"],
    "plugin/service": [],
    "plugin/log": ["SQLite"],
    "plugin/config": ["yaml-cpp"],
    "plugin/wire": ["msgpack", "JSON"],
    "plugin/embedded.hpp": [],
}
SOURCES_ALONE = ["SQLite", "yaml-cpp", "msgpack", "CLI11"]  # never in a header, where others would see them

# Parts of the standard library that reach outside: model/ computes, service/ is handed its clock and its executor.
OUTSIDE = set("""fstream filesystem cstdio iostream syncstream thread mutex shared_mutex atomic future condition_variable semaphore
    latch barrier stop_token chrono ctime csignal""".split())
NO_OUTSIDE = {**{f"model/{room}": OUTSIDE for room in MODEL}, "plugin/service": OUTSIDE - {"mutex"}}
SYSTEM = re.compile(r"(sys/|netinet/|arpa/)|(unistd|fcntl|signal|pthread|poll|termios|errno|time)\.h$")
NO_SYSTEM = set(NO_OUTSIDE) | {"plugin/main.cpp", "plugin/wire", "plugin/config"}

STANDARD = set("""algorithm any array atomic barrier bit bitset cassert ccomplex cctype cerrno cfenv cfloat charconv chrono cinttypes
    climits clocale cmath codecvt compare complex concepts condition_variable coroutine csetjmp csignal cstdarg cstddef cstdint
    cstdio cstdlib cstring ctime cuchar cwchar cwctype deque exception execution filesystem forward_list fstream functional future
    initializer_list iomanip ios iosfwd iostream istream iterator latch limits list locale map memory memory_resource mutex new
    numbers numeric optional ostream queue random ratio regex scoped_allocator semaphore set shared_mutex source_location span
    sstream stack stdexcept stop_token streambuf string string_view strstream syncstream system_error thread tuple type_traits
    typeindex typeinfo unordered_map unordered_set utility valarray variant vector version""".split())

DIRECTIVE = re.compile(r"^\s*#\s*(?:include|include_next|import)\b\s*(.*?)\s*$")
COMMENT = re.compile(r"/\*.*?\*/", re.DOTALL)
SOURCE_ENDINGS = {".cpp", ".hpp", ".h", ".hh", ".cc", ".cxx", ".hxx", ".inl", ".ipp", ".c"}


def room_of(path):
    """`model/infer` for model/infer/fit.hpp; the file itself for the few at the top of a half; None in no known room."""
    if path in TOP_FILES:
        return path
    half, *rest = path.split("/")
    rooms = {"model": MODEL, "plugin": PLUGIN}.get(half, [])
    return f"{half}/{rest[0]}" if len(rest) > 1 and rest[0] in rooms else None


def includes_of(text):
    """The includes of a source, each as (line, what stands behind `#include`), comments aside."""
    text = COMMENT.sub(lambda comment: " " + "\n" * comment.group().count("\n"), text.replace("\\\n", " \n"))
    for number, line in enumerate(text.split("\n"), 1):
        if found := DIRECTIVE.match(line.split("//")[0]):
            yield number, found.group(1)


def library_of(header):
    return next((name for pattern, name in LIBRARY_OF if re.match(pattern, header)), None)


def own_fault(path, room, header, known):
    """What is wrong with `#include "header"`, or None."""
    target = room_of(header)
    if target is None or header not in known:
        return "is no file of a known room; includes go by the path from the top of the repository"
    for begins, others in APART.items():
        if path.startswith(begins) and any(header.startswith(other) for other in others):
            return f"is kept apart from {begins[:-1]}"
    allowed = MAY_INCLUDE.get(room, [])
    if target == room or target in allowed or header in allowed:
        return None
    return f"is not for {room}, which may include {', '.join(allowed) or 'nothing'} besides itself"


def library_fault(path, room, header):
    """What is wrong with `#include <header>`, or None."""
    if header.startswith(("model/", "plugin/")):
        return "is the project's own: write it in double quotes"
    library = library_of(header)
    if library is not None:
        if library not in LIBRARIES.get(room, []):
            return f"is {library}, which is not for {room}"
        return f"is {library}, which stays in .cpp files" if library in SOURCES_ALONE and not path.endswith(".cpp") else None
    if header in STANDARD:
        return f"reaches outside, which {room} does not" if header in NO_OUTSIDE.get(room, ()) else None
    if SYSTEM.match(header):
        return f"is the operating system, which is not for {room}" if room in NO_SYSTEM else None
    return "is in no row of the table (tests/rooms/rooms.py)"


def include_fault(path, room, target, known):
    if found := re.fullmatch(r'"([^"]+)"', target):
        return own_fault(path, room, found.group(1), known)
    if found := re.fullmatch(r"<([^>]+)>", target):
        return library_fault(path, room, found.group(1))
    return "names no file"


def faults(root):
    """Every fault of the tree below `root`, a line each, in the order of the files; and how many includes were held."""
    root = pathlib.Path(root)
    paths = sorted(file.relative_to(root).as_posix() for half in ("model", "plugin") for file in (root / half).rglob("*")
                   if file.is_file() and "__pycache__" not in file.parts)
    known, found, held = set(paths), [], 0
    for path in paths:
        room = room_of(path)
        if room is None:
            found.append(f"{path}: lies in no known room")
            continue
        if pathlib.PurePosixPath(path).suffix not in SOURCE_ENDINGS:
            continue
        for number, target in includes_of((root / path).read_text(encoding="utf-8")):
            held += 1
            if fault := include_fault(path, room, target, known):
                found.append(f"{path}:{number}: {target} {fault}")
    return found, held


def main():
    root = pathlib.Path(sys.argv[1] if len(sys.argv) > 1 else pathlib.Path(__file__).resolve().parents[2])
    found, held = faults(root)
    print(*found, f"{held} includes held against the table of rooms, {len(found)} faults", sep="\n")
    return 1 if found or held == 0 else 0


if __name__ == "__main__":
    sys.exit(main())
