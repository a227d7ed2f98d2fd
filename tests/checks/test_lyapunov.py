"""The quadratic certificate check, on certificates derived by hand and on damaged ones."""

from dataclasses import replace
from fractions import Fraction

import pytest
from loop_cases import formula, loop_case

from dossier.checks.lyapunov import check_lyapunov, ellipsoid
from dossier.checks.sets import bound_over_set, covered_scale, covers
from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.claim import DecreaseWitness, Gram, LyapunovClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

F = Fraction
NOTHING = Box((), ())


def origin(case: Case) -> Equilibrium:
    size = len(case.model.states)
    return Equilibrium("point.E1", (Ball(F(0)),) * size, True, True, "stable", (), True)


def diagonal(basis, *values) -> Gram:
    size = len(values)
    return Gram(basis, tuple(tuple(F(values[i]) if i == j else F(0) for j in range(size)) for i in range(size)))


def claim_about(case: Case, function, level, *witnesses: DecreaseWitness, over="nominal", box=NOTHING) -> LyapunovClaim:
    theorem = "T3" if case.model.time == "sampled" else "T2"
    return LyapunovClaim(
        "point.V2", model_hash(case), over, theorem, "point.E1", "quadratic", function, F(level), box, 0, witnesses
    )


def cubic_claim(case: Case, level) -> LyapunovClaim:
    """x' = -x + x^3, V = x^2: 2x^2 - 2x^4 = (2 - s c) x^2 + (s - 2) x^4 + s x^2 (c - x^2), s between 2 and 2/c."""
    level = F(level)
    s = (2 + 2 / level) / 2 if level < 1 else F(2)
    main = diagonal(((1,), (2,)), 2 - s * level, s - 2)
    return claim_about(case, {(2,): F(1)}, level, DecreaseWitness((), main, diagonal(((1,),), s)))


def cubic() -> Case:
    return loop_case({"x": "-x + x^3"}, {})


@pytest.mark.parametrize("level", ["1/2", "999999/1000000"])
def test_every_level_below_one_is_proved_for_the_scalar_cubic(level):
    """Check value A02: the basin of x' = -x + x^3 is exactly (-1, 1) (elementary; e.g. Strogatz, chapter 2)."""
    finding = check_lyapunov(cubic(), origin(cubic()), cubic_claim(cubic(), level))
    assert (finding.result, finding.strength) == ("proved", "exact")
    assert [p.label for p in finding.premises] == ["d", "scope", "b", "c", "polynomial", "e"]


@pytest.mark.parametrize("level", ["1", "1000001/1000000", "2"])
def test_level_one_and_above_is_refused_for_the_scalar_cubic(level):
    assert check_lyapunov(cubic(), origin(cubic()), cubic_claim(cubic(), level)).result == "undecided"


def disc(level) -> tuple[Case, LyapunovClaim]:
    """A04: V = x^2 + y^2 has V' = 2 V (V - 2); 4V - 2V^2 = (4 - s c) V + (s - 2) V^2 + s V (c - V)."""
    case = loop_case({"x": "x*(x^2 + y^2 - 2) - 4*x*y^2", "y": "4*x^2*y + y*(x^2 + y^2 - 2)"}, {})
    level = F(level)
    s = (2 + 4 / level) / 2
    basis = ((1, 0), (0, 1), (2, 0), (1, 1), (0, 2))
    main = diagonal(basis, 4 - s * level, 4 - s * level, s - 2, 2 * (s - 2), s - 2)
    witness = DecreaseWitness((), main, diagonal(((1, 0), (0, 1)), s, s))
    return case, claim_about(case, {(2, 0): F(1), (0, 2): F(1)}, level, witness)


def test_the_disc_is_proved_up_to_its_radius_and_not_beyond():
    """Check value A04: basin is the open disc of radius sqrt 2 (Slotine and Li, sec. 3.4; from memory)."""
    case, below = disc("1.999999")
    assert check_lyapunov(case, origin(case), below).result == "proved"
    case, above = disc("2.000001")
    assert check_lyapunov(case, origin(case), above).result == "undecided"


def test_an_unstable_system_is_never_proved():
    """x' = +x with V = x^2: the linear-in-level search form holds for every level, the decrease for none."""
    case = loop_case({"x": "x"}, {})
    for s in (F(0), F(1), F(-2)):
        witness = DecreaseWitness((), diagonal(((1,),), 1), diagonal(((1,),), s))
        assert check_lyapunov(case, origin(case), claim_about(case, {(2,): F(1)}, 1, witness)).result == "undecided"


def test_a_critical_point_without_linear_part_is_decided_by_v():
    """Check value G01: x' = -x^3 is asymptotically stable, x' = +x^3 is not (Khalil, sec. 4.3; from memory)."""
    for equation, result in (("-x^3", "proved"), ("x^3", "undecided")):
        case = loop_case({"x": equation}, {})
        witness = DecreaseWitness((), diagonal(((2,),), 2), Gram((), ()))
        assert check_lyapunov(case, origin(case), claim_about(case, {(2,): F(1)}, 1, witness)).result == result


def test_a_sampled_model_is_judged_by_its_step():
    """A07 M1: x+ = x/2 + x^3, V = x^2 (constructed): V - V(x+) = 3/4 x^2 - x^4 - x^6, positive for x^2 < 1/2."""
    case = loop_case({"x": "x/2 + x^3"}, {}, sample_interval="1")
    main = diagonal(((1,), (2,), (3,)), F(3, 4) - F(9, 5) * F(2, 5), F(9, 5) - 1 - F(9, 4) * F(2, 5), F(9, 4) - 1)
    multiplier = diagonal(((1,), (2,)), F(9, 5), F(9, 4))
    witness = DecreaseWitness((), main, multiplier)
    finding = check_lyapunov(case, origin(case), claim_about(case, {(2,): F(1)}, F(2, 5), witness))
    assert finding.theorem == "T3"
    assert finding.result == "undecided"  # 9/5 - 1 - 9/10 < 0: this split is not positive
    gentler = DecreaseWitness(
        (), diagonal(((1,), (2,), (3,)), F(3, 4) - F(8, 5) * F(2, 5), F(8, 5) - 1 - F(7, 5) * F(2, 5), F(7, 5) - 1),
        diagonal(((1,), (2,)), F(8, 5), F(7, 5)),
    )  # fmt: skip
    assert check_lyapunov(case, origin(case), claim_about(case, {(2,): F(1)}, F(2, 5), gentler)).result == "proved"


def spread_case(lower, upper) -> Case:
    """x' = -k x with k in a range."""
    case = loop_case({"x": "-k*x"}, {}, {"k": "1"})
    parameter = replace(case.model.parameters[0], spread=Interval(F(lower), F(upper)), kind="range")
    return replace(case, model=replace(case.model, parameters=(parameter,)))


def spread_claim(case: Case, box: Box) -> LyapunovClaim:
    witnesses = [
        DecreaseWitness((i,), diagonal(((1,),), 2 * k), Gram((), ())) for i, k in enumerate(box.intervals[0].bounds)
    ]
    return claim_about(case, {(2,): F(1)}, 1, *witnesses, over="tolerances", box=box)


def test_all_vertices_of_the_parameter_box_are_needed_and_only_the_whole_box_counts():
    case = spread_case("1/2", "3")
    box = Box(("k",), (Interval(F(1, 2), F(3)),))
    whole = spread_claim(case, box)
    assert check_lyapunov(case, origin(case), whole).result == "proved"
    assert check_lyapunov(case, origin(case), replace(whole, decrease=whole.decrease[:1])).result == "undecided"
    part = spread_claim(case, Box(("k",), (Interval(F(1), F(3)),)))
    assert check_lyapunov(case, origin(case), part).result == "undecided"
    crossing = spread_case("-1/10", "3")
    claim = spread_claim(crossing, Box(("k",), (Interval(F(-1, 10), F(3)),)))
    assert check_lyapunov(crossing, origin(crossing), claim).result == "undecided"


def test_an_equilibrium_that_moves_with_the_parameters_is_refused_over_tolerances():
    case = loop_case({"x": "k - x"}, {}, {"k": "1"})
    parameter = replace(case.model.parameters[0], spread=Interval(F(1, 2), F(2)), kind="range")
    case = replace(case, model=replace(case.model, parameters=(parameter,)))
    place = replace(origin(case), state=(Ball(F(1)),))
    witness = DecreaseWitness((), diagonal(((1,),), 2), Gram((), ()))
    box = Box(("k",), (parameter.spread,))
    claim = claim_about(case, {(2,): F(1)}, 1, witness, over="tolerances", box=box)
    assert check_lyapunov(case, place, claim).result == "undecided"


def test_a_set_that_touches_the_domain_or_a_pole_is_refused():
    case = cubic()
    narrow = replace(case, model=replace(case.model, domain=Box(("x",), (Interval(F(-1, 2), F(1, 2)),))))
    claim = replace(cubic_claim(case, F(1, 4)), model_hash=model_hash(narrow))
    assert check_lyapunov(narrow, origin(narrow), claim).result == "undecided"
    smaller = replace(cubic_claim(case, F(24, 100)), model_hash=model_hash(narrow))
    assert check_lyapunov(narrow, origin(narrow), smaller).result == "proved"
    pole = loop_case({"x": "-x*(1 - x)/(1 - x)"}, {})
    witness = DecreaseWitness((), diagonal(((1,),), 2), Gram((), ()))
    for level, result in ((F(99, 100), "proved"), (F(1), "undecided"), (F(4), "undecided")):
        about = claim_about(pole, {(2,): F(1)}, level, witness)
        assert check_lyapunov(pole, origin(pole), about).result == result


def test_every_damage_to_a_good_certificate_is_refused():
    case, good = cubic(), cubic_claim(cubic(), F(1, 2))
    witness = good.decrease[0]
    negative = diagonal(witness.multiplier.basis, -1)
    damaged = [
        replace(good, model_hash="0" * 64),
        replace(good, equilibrium="point.E2"),
        replace(good, level=F(2)),
        replace(good, level=F(-1)),
        replace(good, function={(2,): F(-1)}),
        replace(good, function={(2,): F(1), (4,): F(1)}),
        replace(good, function={(1,): F(1)}),
        replace(good, decrease=()),
        replace(good, decrease=(witness, witness)),
        replace(good, decrease=(replace(witness, index=(1,)),)),
        replace(good, decrease=(replace(witness, multiplier=negative),)),
        replace(good, decrease=(replace(witness, main=diagonal(((0,), (1,)), 1, 1)),)),
        replace(good, decrease=(replace(witness, main=Gram(((1,), (1,)), witness.main.matrix)),)),
    ]
    for claim in damaged:
        assert check_lyapunov(case, origin(case), claim).result == "undecided"


def test_the_support_of_an_ellipsoid_bounds_affine_quantities_exactly():
    """max of 3x - 4y on x^2 + y^2 <= 1/4 is 5/2 (closed form)."""
    case = loop_case({"x": "-x", "y": "-y"}, {})
    witness = DecreaseWitness((), diagonal(((1, 0), (0, 1)), 2, 2), Gram((), ()))
    claim = claim_about(case, {(2, 0): F(1), (0, 2): F(1)}, F(1, 4), witness)
    shape = ellipsoid(claim, 2)
    bound = bound_over_set(case, origin(case), shape, formula("1 + 3*x - 4*y"), "nominal")
    assert bound.exact
    assert bound.over_set.lower == F(-3, 2)
    assert bound.over_set.upper == F(7, 2)
    assert bound.at_equilibrium == Ball(F(1))


def test_a_non_linear_quantity_is_enclosed_over_the_set():
    """sin x on |x| <= 1/2 lies within sin(1/2) = 0.479425538604203 (any table)."""
    case = cubic()
    shape = ellipsoid(cubic_claim(case, F(1, 4)), 1)
    bound = bound_over_set(case, origin(case), shape, formula("sin(x)"), "nominal")
    assert not bound.exact
    assert F("0.479425538604203") <= bound.over_set.upper < F("0.4796")


def test_regions_fit_exactly_when_all_their_corners_do():
    _, claim = disc(1)
    shape = ellipsoid(claim, 2)
    inside = Box(("x", "y"), (Interval(F(-3, 5), F(3, 5)), Interval(F(-4, 5), F(4, 5))))
    outside = Box(("x", "y"), (Interval(F(-3, 5), F(3, 5)), Interval(F(-4, 5), F(81, 100))))
    assert covers(shape, inside)
    assert not covers(shape, outside)
    assert covered_scale(shape, inside) == 1
    assert F(99, 100) < covered_scale(shape, outside) < 1
