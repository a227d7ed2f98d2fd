"""Every ending of a conic solver is a value."""

import sys

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


@pytest.mark.parametrize("solver", ["CLARABEL", "SCS"])
def test_programs_with_every_kind_of_cone_are_understood(solver):
    """max log det X with X <= A has X = A; the least norm on a line; both closed form."""
    a = np.array([[2.0, 1.0], [1.0, 2.0]])
    x, y = cvxpy.Variable((2, 2), symmetric=True), cvxpy.Variable(2)
    goal = cvxpy.log_det(x) - cvxpy.norm(y)
    assert solve(cvxpy.Problem(cvxpy.Maximize(goal), [x << a, cvxpy.sum(y) == 2]), solver).has_values
    assert x.value == pytest.approx(a, abs=1e-3)
    assert y.value == pytest.approx([1, 1], abs=1e-3)


def test_an_infeasible_program_says_so_and_leaves_no_values():
    x = cvxpy.Variable()
    solved = solve(cvxpy.Problem(cvxpy.Minimize(x), [x >= 1, x <= 0]))
    assert solved.status == "infeasible"
    assert not solved.has_values


def test_an_unbounded_program_has_no_values():
    x = cvxpy.Variable()
    assert not solve(cvxpy.Problem(cvxpy.Minimize(x), [x <= 0])).has_values


FAKE = """
import os, sys, time
import numpy as np
from dossier.search.solver_process import receive, send
while True:
    try:
        request = receive(sys.stdin.buffer)
    except EOFError:
        break
    {deed}
"""
"""A solver's process that does something else than solve."""

DEEDS = {
    "panics": "send(sys.stdout.buffer, {'failed': 'PanicException'})",
    "crashes": "os.abort()",
    "hangs": "time.sleep(60)",
    "ends": "sys.exit(3)",
    "says no table": "sys.stdout.buffer.write(bytes(7) + bytes([2]) + b'42'); sys.stdout.buffer.flush()",
    "says nothing of use": "send(sys.stdout.buffer, {})",
    "answers with nan": "send(sys.stdout.buffer, dict(status='Solved', x=np.full(len(request['q']), np.nan), "
    "z=np.ones(1), obj_val=0.0, solve_time=0.0, iterations=1))",
    "answers with a point of another size": "send(sys.stdout.buffer, dict(status='Solved', x=np.ones(99), "
    "z=np.ones(1), obj_val=0.0, solve_time=0.0, iterations=1))",
    "begins an answer and hangs": "sys.stdout.buffer.write(bytes(7) + b'9half'); sys.stdout.buffer.flush(); "
    "time.sleep(60)",
    "goes on printing noise": "sys.stdout.buffer.write(b'noise' * 40); sys.stdout.buffer.flush(); time.sleep(60)",
    "prints noise": "sys.stdout.buffer.write(b'noise' * 40); sys.stdout.buffer.flush(); sys.exit()",
}


@pytest.fixture
def fake_solver(monkeypatch):
    """Put one of `DEEDS` in the solver's place."""

    def put(deed: str) -> None:
        conic.worker.stop(counted=False)
        monkeypatch.setattr(conic, "WORKER", [sys.executable, "-c", FAKE.replace("{deed}", DEEDS[deed])])
        monkeypatch.setattr(conic, "PATIENCE", 0.7)
        monkeypatch.setattr(conic.worker, "stops", 0)

    yield put
    conic.worker.stop(counted=False)
    monkeypatch.undo()


def _problem() -> cvxpy.Problem:
    x = cvxpy.Variable(2)
    return cvxpy.Problem(cvxpy.Minimize(cvxpy.sum(x)), [x >= 1])


@pytest.mark.parametrize("deed", DEEDS)
def test_whatever_a_solver_does_is_a_value(fake_solver, deed):
    fake_solver(deed)
    solved = solve(_problem())
    assert solved.status == "failed"
    assert not solved.has_values
    assert solved.remark.startswith("CLARABEL: ")


def test_a_solver_that_had_to_be_stopped_is_replaced(fake_solver, monkeypatch):
    fake_solver("hangs")
    assert "stopped" in solve(_problem()).remark
    monkeypatch.undo()
    assert solve(_problem()).status == "optimal"


def test_after_some_stops_no_program_is_solved_so_that_a_build_ends(fake_solver):
    fake_solver("crashes")
    remarks = [solve(_problem()).remark for _ in range(conic.MOST_STOPS + 1)]
    assert "not solved" in remarks[-1]
    assert not any("not solved" in r for r in remarks[:-1])


def test_an_impossible_program_fails_alone():
    request = {"solver": "CLARABEL", "options": {}, "cones": [("zero", -1)]}
    assert "failed" in conic.worker.ask(request)
    assert solve(_problem()).status == "optimal"


@pytest.mark.parametrize("error", [KeyboardInterrupt, SystemExit])
def test_only_the_user_may_interrupt(monkeypatch, error):
    def interrupted(*_arguments):
        raise error

    monkeypatch.setattr(conic, "receive", interrupted)
    with pytest.raises(error):
        solve(_problem())
    monkeypatch.undo()
    assert solve(_problem()).status == "optimal"


def test_the_meter_counts_programs_and_seconds():
    before = conic.meter.programs, conic.meter.seconds
    x = cvxpy.Variable()
    solve(cvxpy.Problem(cvxpy.Minimize(x), [x >= 1]))
    assert conic.meter.programs == before[0] + 1
    assert conic.meter.seconds > before[1]
