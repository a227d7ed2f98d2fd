"""Cases found by a review of the proving side, each with an answer known in closed form (constructed)."""

from dataclasses import replace
from fractions import Fraction

import pytest
from builders import make_case
from loop_cases import equilibrium_at, formula

from dossier.checks.assess import assess
from dossier.checks.equilibria import enclose_equilibria
from dossier.checks.linear import routh_claim
from dossier.checks.spectral import check_matrix
from dossier.model.affine import offset_forms, spread_box
from dossier.model.case import NOMINAL, TOLERANCES, Criterion, Quantity
from dossier.model.claim import MatrixCell, MatrixClaim, RootsClaim, RouthClaim
from dossier.model.decrease import bernstein_coefficients, bernstein_count
from dossier.model.loop import model_hash
from dossier.model.polynomial import Ring
from dossier.model.region import Box, Interval

IDENTITY = {1: ((Fraction(1),),), 2: ((Fraction(1), Fraction(0)), (Fraction(0), Fraction(1)))}


def spread_case(equations, **options):
    """`equations` with one parameter p = 2 anywhere in [1, 3], at rest at zero."""
    return make_case(equations, {"p": 2}, spread={"p": (1, 3)}, fixed=[0] * len(equations), **options)


def identity_claim(case, region, level):
    """The claim that V = |y|^2 puts every eigenvalue in `region` over the tolerances."""
    cell = MatrixCell(spread_box(case), IDENTITY[len(case.model.states)])
    return MatrixClaim(
        "point.P1", model_hash(case), TOLERANCES, "T1", "point.E1", region, Fraction(level), (cell,)
    )  # fmt: skip


@pytest.mark.parametrize(
    ("equations", "region", "level", "sampled"),
    [
        ({"x": "p*v", "v": "-p*x"}, "half-plane", 0, False),
        ({"x": "p*x - p*x"}, "half-plane", 0, False),
        ({"x": "0*p - x"}, "half-plane", 1, False),
        ({"x": "p*v", "v": "-p*x"}, "sector", 0, False),
    ],
    ids=["oscillator", "integrator", "rate exactly at the level", "oscillator without damping"],
)
def test_a_lyapunov_form_that_vanishes_identically_proves_nothing(equations, region, level, sampled):
    """Eigenvalues +-jp, 0 and -1 lie on the boundary of the region for every p, so strictness fails."""
    case = spread_case(equations, sampled=sampled)
    claim = identity_claim(case, region, level)
    finding = check_matrix(case, equilibrium_at(*[0] * len(equations)), claim)
    assert finding.result != "proved"


def test_the_zero_polynomial_has_one_bernstein_coefficient():
    ring = Ring(("x", "p"))
    zero, side = ring.constant(Fraction(0)), Box(("p",), (Interval(Fraction(1), Fraction(2)),))
    found = list(bernstein_coefficients(zero, ring, side))
    assert [(index, value.is_zero()) for index, value in found] == [((0,), True)]
    assert len(found) == bernstein_count(zero, ring, side)


def test_a_quantity_that_is_zero_has_one_form_over_tolerances():
    case = spread_case({"x": "-p*x"})
    assert offset_forms(case, equilibrium_at(0), formula("p*x - x*p"), TOLERANCES) == ({},)


@pytest.mark.parametrize(
    ("claim", "over"), [("existence", NOMINAL), ("existence", TOLERANCES), ("equilibria_listed", NOMINAL)]
)
def test_a_stated_point_outside_the_search_box_is_not_counted_in_it(claim, over):
    """x' = -p (x - 5) rests at 5 only, so the box [-1, 1] holds no equilibrium."""
    case = make_case(
        {"x": "-p*(x - 5)"}, {"p": 2}, search={"x": (-1, 1)}, region={"x": (-1, 1)}, fixed=[5], spread={"p": (1, 3)}
    )
    case = replace(case, criteria=(Criterion("C1", claim, over),))
    listed = enclose_equilibria(case, (), 1_000)
    assert isinstance(listed, RootsClaim)
    assessment = assess(case, (listed,), 1_000)
    (finding,) = assessment.about_criteria
    if claim == "existence":
        assert finding.result != "proved"
    else:
        assert "exactly 0 equilibria" in finding.statement


def test_an_eigenvalue_on_the_boundary_is_not_exponentially_stable_at_rate_zero():
    """x' = -x^3 has the eigenvalue 0: its rate 0 meets `at_least: 0`, but exponential stability asks for strictness."""
    case = make_case({"x": "-x^3"}, search={"x": (-1, 1)}, region={"x": (-1, 1)}, fixed=[0])
    rate = Quantity(Fraction(0), 0, "1/s", "0 1/s")
    case = replace(case, criteria=(Criterion("C1", "exponential_stability", NOMINAL, at_least=rate),))
    count = routh_claim(case, equilibrium_at(0))
    assert isinstance(count, RouthClaim)
    results = {f.result for f in assess(case, (count,), 1_000).about_criteria}
    assert results == {"refuted"}
