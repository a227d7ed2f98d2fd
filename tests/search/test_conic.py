"""Every ending of a conic solver is a value."""

import cvxpy
import numpy as np
import pytest

from dossier.search import conic
from dossier.search.conic import solve


def test_the_largest_eigenvalue_is_found_by_a_semidefinite_program():
    """min t with t I - A >= 0 is the largest eigenvalue: 3 for [[2, 1], [1, 2]] (closed form)."""
    t = cvxpy.Variable()
    problem = cvxpy.Problem(cvxpy.Minimize(t), [t * np.eye(2) - np.array([[2.0, 1.0], [1.0, 2.0]]) >> 0])
    solved = solve(problem)
    assert solved.status == "optimal"
    assert solved.has_values
    assert t.value == pytest.approx(3.0, abs=1e-6)


def test_two_solvers_agree():
    for solver in ("CLARABEL", "SCS"):
        x = cvxpy.Variable(2)
        problem = cvxpy.Problem(cvxpy.Minimize(cvxpy.norm(x - np.array([3.0, 4.0]))), [cvxpy.norm(x) <= 1])
        assert solve(problem, solver).has_values
        assert x.value == pytest.approx([0.6, 0.8], abs=1e-4)


def test_an_infeasible_program_says_so_and_leaves_no_values():
    x = cvxpy.Variable()
    solved = solve(cvxpy.Problem(cvxpy.Minimize(x), [x >= 1, x <= 0]))
    assert solved.status == "infeasible"
    assert not solved.has_values


def test_an_unbounded_program_has_no_values():
    x = cvxpy.Variable()
    assert not solve(cvxpy.Problem(cvxpy.Minimize(x), [x <= 0])).has_values


class _Panic(BaseException):
    """What a panicking solver raises: outside the Exception hierarchy."""


class _Program:
    solver_stats = None
    status = None

    def __init__(self, error: BaseException) -> None:
        self.error = error

    def solve(self, **options: object) -> None:
        raise self.error


@pytest.mark.parametrize("error", [_Panic("index out of bounds"), ValueError("bad"), MemoryError()])
def test_a_panicking_solver_does_not_take_the_run_down(error):
    solved = solve(_Program(error))
    assert solved.status == "failed"
    assert type(error).__name__ in solved.remark


@pytest.mark.parametrize("error", [KeyboardInterrupt, SystemExit])
def test_only_the_user_may_interrupt(error):
    with pytest.raises(error):
        solve(_Program(error()))


def test_the_meter_counts_programs_and_seconds():
    before = conic.meter.programs, conic.meter.seconds
    x = cvxpy.Variable()
    solve(cvxpy.Problem(cvxpy.Minimize(x), [x >= 1]))
    assert conic.meter.programs == before[0] + 1
    assert conic.meter.seconds > before[1]
