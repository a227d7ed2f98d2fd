"""The start-up self-test passes here, and notices a machine that computes otherwise."""

from dossier.checks import elementary, self_test
from dossier.checks.intervals import Span
from dossier.checks.self_test import _entry


def test_this_machine_computes_as_the_proofs_assume():
    assert [name for name, _, _, passed in self_test.self_test() if not passed] == []


def test_a_wrong_function_is_noticed(monkeypatch):
    right = elementary.sin
    monkeypatch.setattr(elementary, "sin", lambda a: Span(right(a).lo + 1e-12, right(a).hi + 1e-12))
    assert {name for name, _, _, passed in self_test.self_test() if not passed} == {"sin"}


def test_a_flushed_subnormal_would_fail():
    assert _entry("half", 2.0**-1023, 0.0)[3] is False
