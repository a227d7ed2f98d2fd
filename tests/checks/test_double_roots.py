"""Equilibria that nearly meet, meet, or just miss each other: counted right, or left undecided, never wrong."""

from fractions import Fraction

import pytest
from builders import make_case

from dossier.checks.equilibria import check_roots, enclose_equilibria
from dossier.search.effort import EFFORTS
from dossier.search.equilibria import seed_equilibria

F = Fraction
BOXES = 200_000


def listed(gap: str):
    """x' = (x - 1/3)^2 - gap, y' = x - y: rests at x = 1/3 -+ sqrt(gap) (elementary)."""
    case = make_case(
        {"x": f"(x - 1/3)^2 - ({gap})", "y": "x - y"}, {}, {"x": (-2, 2), "y": (-2, 2)}, near=[0, 0]
    )  # fmt: skip
    claim = enclose_equilibria(case, seed_equilibria(case, EFFORTS["quick"]), BOXES)
    return case, claim


@pytest.mark.parametrize("separation", ["1/10", "1/1000", "1/1000000"])
def test_two_equilibria_that_nearly_meet_are_told_apart(separation):
    half = F(separation) / 2
    case, claim = listed(str(half**2))
    assert claim.complete and len(claim.solutions) == 2
    assert check_roots(case, claim, BOXES).result == "proved"
    for solution, root in zip(claim.solutions, (F(1, 3) - half, F(1, 3) + half), strict=True):
        assert all(b.lower <= root <= b.upper and b.radius < half / 1000 for b in solution.enclosure)


def test_two_equilibria_that_meet_are_left_undecided():
    case, claim = listed("0")
    assert not claim.complete and claim.undecided
    assert check_roots(case, claim, BOXES).result != "proved"
    assert any(box["x"].lower <= F(1, 3) <= box["x"].upper and box["x"].width < F(1, 10**5) for box in claim.undecided)


@pytest.mark.parametrize("gap", ["-1/100", "-1/1000000", "-1/1000000000000"])
def test_two_equilibria_that_just_miss_each_other_are_none(gap):
    case, claim = listed(gap)
    finding = check_roots(case, claim, BOXES)
    assert not claim.solutions
    if claim.complete:
        assert finding.result == "proved" and finding.facts["equilibria found"].upper == 0
    else:
        assert finding.result != "proved"
    assert claim.complete or F(gap) > F(-1, 10**9)
