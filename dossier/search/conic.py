"""The only module that sees the conic solvers: states a program, runs it, and reports how it ended as a value.

A solver may panic (an exception that does not derive from Exception crosses Python), answer nonsense or
give up; every ending is a `Solved`, and nothing it says is believed.
"""

from __future__ import annotations

import time
import warnings
from dataclasses import dataclass, field
from typing import Any, Final, Literal

import cvxpy

ITERATIONS: Final = 100
"""Interior-point iterations; well-scaled programs of this size need 10 to 30."""

OPTIONS: Final[dict[str, dict[str, Any]]] = {
    "CLARABEL": {"max_iter": ITERATIONS, "max_threads": 1},
    "SCS": {"max_iters": 20_000, "eps": 1e-7},
}
"""Work limits per solver, never time limits."""


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


def solve(problem: cvxpy.Problem, solver: str = "CLARABEL") -> Solved:
    """Run `solver` on `problem`; never raises except for an interruption by the user."""
    begin = time.perf_counter()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            problem.solve(solver=solver, ignore_dpp=False, **OPTIONS[solver])
        solved = _ending(problem)
    except (KeyboardInterrupt, SystemExit):
        raise
    except BaseException as error:  # a panicking solver raises outside the Exception hierarchy
        solved = Solved("failed", f"{solver}: {type(error).__name__}")
    meter.programs += 1
    meter.seconds += time.perf_counter() - begin
    stats = problem.solver_stats
    if stats is not None and stats.solve_time is not None:
        meter.solver_seconds += float(stats.solve_time)
    return solved


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
