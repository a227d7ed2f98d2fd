"""A conic solver in a process of its own: programs in by standard input, endings out by standard output.

Run as a script.  It loads the solver only, limits its own memory, and ends when its input does.  A message is a length
in eight bytes, that much JSON, and the arrays that it announces, as bytes of known type and size.  The other end is
`dossier.search.conic`, which is also what stops a solver that hangs.
"""

from __future__ import annotations

import json
import resource
import signal
import struct
import sys
from typing import Any, Final, Protocol

import numpy as np
import scipy.sparse

LENGTH: Final = struct.Struct(">Q")

MEMORY: Final = 6 * 2**30
"""Bytes of address space: far above what programs of this size take, below what makes a machine swap."""

LONGEST: Final = 2**28
"""Bytes of one part of a message: thirty million numbers, far beyond any program here."""

TYPES: Final = {"f": np.float64, "i": np.int32}
"""Types of the arrays by letter."""

Message = dict[str, Any]
"""JSON values and one-dimensional arrays by name."""


class Readable(Protocol):
    """What messages are read from."""

    def read(self, size: int, /) -> bytes:
        """Up to `size` bytes, fewer only at the end."""
        ...


def receive(stream: Readable) -> Message:
    """The next message.  Raises EOFError where the stream has ended, ValueError for what is no message."""
    head = json.loads(_exactly(stream, LENGTH.unpack(_exactly(stream, LENGTH.size))[0]))
    if not isinstance(head, dict) or not isinstance(head.get("values"), dict):
        raise ValueError("not a message")
    values: Message = head["values"]
    for name, letter, size in head.get("arrays", ()):
        kind = np.dtype(TYPES[letter])
        values[name] = np.frombuffer(_exactly(stream, size * kind.itemsize), kind).copy()
    return values


def _exactly(stream: Readable, size: int) -> bytes:
    if not 0 <= size <= LONGEST:
        raise ValueError("no message has this length")
    found = stream.read(size)
    if len(found) < size:
        raise EOFError
    return found


class Writable(Protocol):
    """What messages are written to."""

    def write(self, data: bytes, /) -> Any:
        """Write all of `data`."""
        ...

    def flush(self) -> None:
        """Pass it on."""
        ...


def send(stream: Writable, message: Message) -> None:
    """Write one message."""
    arrays = {n: v for n, v in message.items() if isinstance(v, np.ndarray)}
    letters = {n: "i" if v.dtype.kind == "i" else "f" for n, v in arrays.items()}
    head = {
        "values": {n: v for n, v in message.items() if n not in arrays},
        "arrays": [[n, letters[n], int(v.size)] for n, v in arrays.items()],
    }
    text = json.dumps(head).encode()
    parts = [np.ascontiguousarray(v, TYPES[letters[n]]).tobytes() for n, v in arrays.items()]
    stream.write(b"".join((LENGTH.pack(len(text)), text, *parts)))
    stream.flush()


def packed(name: str, matrix: scipy.sparse.csc_matrix) -> Message:
    """A sparse matrix as parts of a message."""
    return {
        f"{name} values": matrix.data, f"{name} rows": matrix.indices, f"{name} starts": matrix.indptr,
        f"{name} shape": [int(n) for n in matrix.get_shape()],
    }  # fmt: skip


def _unpacked(name: str, request: Message) -> scipy.sparse.csc_matrix:
    parts = (request[f"{name} values"], request[f"{name} rows"], request[f"{name} starts"])
    return scipy.sparse.csc_matrix(parts, shape=tuple(request[f"{name} shape"]))


def answer(request: Message) -> Message:
    """Solve one program.  A panic of the solver is an exception outside the usual hierarchy; it is an ending too."""
    try:
        return _SOLVERS[request["solver"]](request)
    except BaseException as error:
        return {"failed": type(error).__name__}


def _clarabel(request: Message) -> Message:
    import clarabel as library  # noqa: PLC0415 - only the solver that is asked for is loaded

    clarabel: Any = library

    kinds = {
        "zero": clarabel.ZeroConeT,
        "nonnegative": clarabel.NonnegativeConeT,
        "second order": clarabel.SecondOrderConeT,
        "semidefinite": clarabel.PSDTriangleConeT,
    }
    cones: list[Any] = []
    for kind, size in request["cones"]:
        cones += [clarabel.ExponentialConeT() for _ in range(size)] if kind == "exponential" else [kinds[kind](size)]
    settings = clarabel.DefaultSettings()
    settings.verbose = False
    for name, value in request["options"].items():
        setattr(settings, name, value)
    solution = clarabel.DefaultSolver(
        _unpacked("P", request), request["q"], _unpacked("A", request), request["b"], cones, settings
    ).solve()  # fmt: skip
    return {
        "status": str(solution.status),
        "x": np.array(solution.x, float),
        "z": np.array(solution.z, float),
        "obj_val": solution.obj_val,
        "solve_time": solution.solve_time,
        "iterations": solution.iterations,
    }


def _scs(request: Message) -> Message:
    import scs  # noqa: PLC0415

    data = {"A": _unpacked("A", request), "b": request["b"], "c": request["q"], "P": _unpacked("P", request)}
    letters = {"zero": "z", "nonnegative": "l", "exponential": "ep"}
    cone: dict[str, Any] = {"q": [], "s": []}
    for kind, size in request["cones"]:
        if kind in letters:
            cone[letters[kind]] = size
        else:
            cone["q" if kind == "second order" else "s"].append(size)
    found = scs.SCS(data, cone, verbose=False, **request["options"]).solve()
    known = ("status", "status_val", "iter", "pobj", "solve_time", "setup_time")
    return {"x": found["x"], "y": found["y"], "s": found["s"], "info": {k: found["info"][k] for k in known}}


_SOLVERS: Final = {"CLARABEL": _clarabel, "SCS": _scs}


def main() -> None:
    """Answer programs until the input ends.  An interruption from the keyboard is for the other process to handle."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
    source, target = sys.stdin.buffer, sys.stdout.buffer
    while True:
        try:
            request = receive(source)
        except (EOFError, ValueError):
            return
        send(target, answer(request))


if __name__ == "__main__":
    main()
