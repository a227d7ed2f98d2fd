"""The only module that sees the conic solvers: states a program, has it solved, and reports how it ended as a value.

A solver may panic, crash, hang, eat the memory, answer nonsense or give up.  It therefore runs in a process of its own
(`dossier.search.solver_process`) that is stopped and replaced where needed; every ending is a `Solved`, and nothing
it says is believed.
"""

from __future__ import annotations

import atexit
import os
import select
import subprocess
import sys
import time
import warnings
from contextlib import suppress
from dataclasses import dataclass, field
from types import SimpleNamespace
from typing import Any, Final, Literal

import cvxpy
import numpy as np
import scipy.sparse

from dossier.search.solver_process import Message, packed, receive, send

ITERATIONS: Final = 100
"""Interior-point iterations; well-scaled programs of this size need 10 to 30."""

OPTIONS: Final[dict[str, dict[str, Any]]] = {
    "CLARABEL": {"max_iter": ITERATIONS, "max_threads": 1},
    "SCS": {"max_iters": 20_000, "eps_abs": 1e-7, "eps_rel": 1e-7},
}
"""Work limits per solver, never time limits."""

PATIENCE: Final = 120.0
"""Seconds after which a solver counts as hanging.  Programs of this size take milliseconds, the largest some seconds,
so that no answer depends on the speed of a machine."""

MOST_STOPS: Final = 3
"""Solvers that may have to be stopped in one run: after that no program is solved, so that a build still ends."""

WORKER: list[str] = [sys.executable, "-m", "dossier.search.solver_process"]
"""Command of the solver's process."""


@dataclass(frozen=True, slots=True)
class Solved:
    """`status`: ``optimal`` and ``inaccurate`` leave values in the variables, the others do not.

    `iterations` counts the work, 0 where the solver did not say.
    """

    status: Literal["optimal", "inaccurate", "infeasible", "failed"]
    remark: str
    iterations: int = 0

    @property
    def has_values(self) -> bool:
        """The variables hold a candidate."""
        return self.status in ("optimal", "inaccurate")


@dataclass
class Meter:
    """Programs solved and seconds inside the solvers, of this process; for benchmarks, run log and work budgets."""

    programs: int = 0
    seconds: float = 0.0
    solver_seconds: float = field(default=0.0)


meter: Final = Meter()


class _FailedError(Exception):
    """Why a program has no answer; never leaves this module."""


class _Patient:
    """Reads a pipe until a deadline.  Raises _FailedError when it is over."""

    def __init__(self, descriptor: int) -> None:
        self.descriptor = descriptor
        self.until = time.monotonic() + PATIENCE

    def read(self, size: int) -> bytes:
        """`size` bytes, fewer only where the pipe has ended."""
        parts = b""
        while len(parts) < size:
            left = self.until - time.monotonic()
            if left <= 0 or not select.select([self.descriptor], [], [], left)[0]:
                raise _FailedError(f"no answer in {PATIENCE:g} s; the solver was stopped")
            part = os.read(self.descriptor, size - len(parts))
            if not part:
                break
            parts += part
        return parts


class _Worker:
    """The solver's process: begun when first needed, replaced after it had to be stopped."""

    def __init__(self) -> None:
        self.process: subprocess.Popen[bytes] | None = None
        self.stops = 0

    def ask(self, request: Message) -> Message:
        """The answer to one program.  Raises _FailedError where there is none."""
        if self.stops >= MOST_STOPS:
            raise _FailedError(f"not solved: the solver had to be stopped {self.stops} times")
        process = self.process or self._begin()
        assert process.stdin is not None
        assert process.stdout is not None
        try:
            send(process.stdin, request)
            reply = receive(_Patient(process.stdout.fileno()))
        except _FailedError:
            self.stop()
            raise
        except (EOFError, OSError, ValueError, KeyError, TypeError) as error:
            self.stop()
            raise _FailedError(f"the solver's process ended ({type(error).__name__})") from error
        except BaseException:
            self.stop(counted=False)
            raise
        return reply

    def _begin(self) -> subprocess.Popen[bytes]:
        environment = {**os.environ, "OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
        self.process = subprocess.Popen(
            WORKER, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, env=environment
        )  # fmt: skip
        return self.process

    def stop(self, *, counted: bool = True) -> None:
        """End the process; the next program begins another."""
        process, self.process = self.process, None
        self.stops += counted
        if process is not None:
            with suppress(OSError):
                process.kill()
            for stream in (process.stdin, process.stdout):
                if stream is not None:
                    with suppress(OSError):
                        stream.close()
            process.wait()


worker: Final = _Worker()
atexit.register(worker.stop, counted=False)


def solve(problem: cvxpy.Problem, solver: str = "CLARABEL") -> Solved:
    """Have `solver` solve `problem`; never raises except for an interruption by the user."""
    begin = time.perf_counter()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            _solve(problem, solver)
        solved = _ending(problem)
    except (KeyboardInterrupt, SystemExit):
        raise
    except _FailedError as failure:
        solved = Solved("failed", f"{solver}: {failure}")
    except BaseException as error:
        solved = Solved("failed", f"{solver}: {type(error).__name__}")
    meter.programs += 1
    meter.seconds += time.perf_counter() - begin
    stats = problem.solver_stats
    if stats is not None and stats.solve_time is not None:
        meter.solver_seconds += float(stats.solve_time)
    return solved


def _solve(problem: cvxpy.Problem, solver: str) -> None:
    data, chain, inverse_data = problem.get_problem_data(solver, ignore_dpp=False, solver_opts={})
    quadratic = data.get("P")
    size = len(data["c"])
    p = scipy.sparse.csc_matrix((size, size)) if quadratic is None else scipy.sparse.triu(quadratic)
    request = {
        "solver": solver,
        "options": OPTIONS[solver],
        "q": np.asarray(data["c"], float),
        "b": np.asarray(data["b"], float),
        "cones": _cones(data["dims"]),
        **packed("P", scipy.sparse.csc_matrix(p)),
        **packed("A", scipy.sparse.csc_matrix(data["A"])),
    }
    reply = worker.ask(request)
    if "failed" in reply:
        raise _FailedError(str(reply["failed"]))
    point = reply.get("x")
    if chain is None:
        raise _FailedError("the program has no form that the solver reads")
    if not isinstance(point, np.ndarray) or point.size != size or not np.isfinite(point).all():
        raise _FailedError("the solver's answer is not a point")
    problem.unpack_results(reply if solver == "SCS" else SimpleNamespace(**reply), chain, inverse_data)


def _cones(dims: Any) -> list[tuple[str, int]]:
    """The cones in the order of the rows.  Raises _FailedError for one that no program here needs."""
    if dims.p3d or getattr(dims, "pnd", None):
        raise _FailedError("a program with power cones")
    cones = [("zero", dims.zero)] if dims.zero else []
    cones += [("nonnegative", dims.nonneg)] if dims.nonneg else []
    cones += [("second order", n) for n in dims.soc]
    cones += [("semidefinite", n) for n in dims.psd]
    return [*cones, *([("exponential", dims.exp)] if dims.exp else [])]


def _ending(problem: cvxpy.Problem) -> Solved:
    status = str(problem.status)
    stats = problem.solver_stats
    iterations = 0 if stats is None else int(stats.num_iters or 0)
    if status == cvxpy.OPTIMAL:
        return Solved("optimal", "optimal", iterations)
    if status == cvxpy.OPTIMAL_INACCURATE:
        return Solved("inaccurate", "optimal within reduced accuracy", iterations)
    if status in (cvxpy.INFEASIBLE, cvxpy.INFEASIBLE_INACCURATE):
        return Solved("infeasible", "reported infeasible", iterations)
    return Solved("failed", status.replace("_", " "), iterations)
