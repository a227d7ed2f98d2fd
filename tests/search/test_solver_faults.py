"""A build whose conic solver panics, hangs or answers nonsense ends with honest verdicts."""

import sys

import pytest
from small_dossier import FOLDER

from dossier.evidence.provenance import Stopwatch
from dossier.pipeline import build_evidence
from dossier.project.reader import Project, read_project
from dossier.search import conic

WORKER = """
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

DEEDS = {
    "panics": "send(sys.stdout.buffer, {'failed': 'PanicException'})",
    "hangs": "time.sleep(600)",
    "dies": "os.kill(os.getpid(), 9)",
    "answers at random": "size = len(request['q']); send(sys.stdout.buffer, dict(status='Solved', "
    "x=np.random.default_rng(1).standard_normal(size), z=np.random.default_rng(2).standard_normal(len(request['b'])), "
    "obj_val=0.0, solve_time=0.0, iterations=3))",
    "answers with zeros": "send(sys.stdout.buffer, dict(status='Solved', x=np.zeros(len(request['q'])), "
    "z=np.zeros(len(request['b'])), obj_val=0.0, solve_time=0.0, iterations=3))",
    "calls everything infeasible": "send(sys.stdout.buffer, dict(status='PrimalInfeasible', "
    "x=np.zeros(len(request['q'])), z=np.zeros(len(request['b'])), obj_val=0.0, solve_time=0.0, iterations=3))",
}

TRUE = {"hold.C1": "proved", "hold.C2": "proved", "rest.C1": "proved", "rest.C2": "proved", "rest.C3": "proved",
        "rest.C4": "refuted", "lean.C1": "proved", "lean.C2": "proved", "upright.C1": "refuted"}  # fmt: skip
"""Verdicts of the small project with a sound solver."""

WITHOUT_A_SOLVER = ("rest.C2", "rest.C3", "rest.C4", "lean.C2", "upright.C1")
"""Criteria that no conic program serves."""


@pytest.mark.parametrize("deed", DEEDS)
def test_a_build_ends_with_honest_verdicts_whatever_the_solver_does(deed, monkeypatch):
    project = read_project(FOLDER / "project.yaml")
    assert isinstance(project, Project)
    cases = tuple(c for c in project.cases if c.name in ("hold", "rest", "lean", "upright"))
    conic.worker.stop(counted=False)
    monkeypatch.setattr(conic, "WORKER", [sys.executable, "-c", WORKER.replace("{deed}", DEEDS[deed])])
    monkeypatch.setattr(conic, "PATIENCE", 1.0)
    monkeypatch.setattr(conic.worker, "stops", 0)
    try:
        evidence = build_evidence(project, cases, "quick", "", lambda *_: None, Stopwatch())
    finally:
        conic.worker.stop(counted=False)
    found = {o.identifier: o.verdict for p in evidence.points for o in p.outcomes}
    assert found.keys() == TRUE.keys()
    for name, verdict in found.items():
        assert verdict == TRUE[name] or verdict in ("not established", "supported"), (name, verdict)
    assert all(found[name] == TRUE[name] for name in WITHOUT_A_SOLVER)
