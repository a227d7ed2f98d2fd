"""Certificates in cells: what holds on every cell holds on the box, and every gap between cells is seen."""

from dataclasses import replace
from fractions import Fraction

import pytest
from builders import make_case

from dossier.checks.assess import assess
from dossier.checks.cells import check_cells
from dossier.checks.lyapunov import set_premises
from dossier.judgement.points import judge_point
from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, TOLERANCES, Case, Criterion, Quantity
from dossier.model.claim import CellsClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval
from dossier.search.cells import seek_cells
from dossier.search.effort import EFFORTS
from dossier.search.goal import Goal

ORIGIN = Equilibrium("point.E1", (Ball(Fraction(0)), Ball(Fraction(0))), True, True, "stable", (), fixed_for_all=True)


def arm(*, varies: bool = False) -> Case:
    """th'' + 0.6 th' + k sin th = 0 with k from 2 to 6: stable for every constant k, with no common quadratic V."""
    case = make_case(
        {"th": "w", "w": "-k*sin(th) - 0.6*w"}, {"k": "4"}, search={"th": (-1, 1), "w": (-1, 1)},
        region={"th": ("-0.2", "0.2"), "w": ("-0.3", "0.3")}, fixed=(0, 0), spread={"k": (2, 6)},
    )  # fmt: skip
    parameters = tuple(replace(p, varies=varies) for p in case.model.parameters)
    return replace(case, model=replace(case.model, parameters=parameters))


def sought(case: Case) -> CellsClaim | None:
    def verify(claim) -> bool:
        return all(p.result == "proved" for p in set_premises(case, ORIGIN, claim, of_cell=True))

    return seek_cells(
        case, ORIGIN, lambda _: ORIGIN, lambda *_: Goal(case.region, ()), EFFORTS["quick"], "V2-cells", verify
    )[1]


@pytest.fixture(scope="module")
def found() -> tuple[Case, CellsClaim]:
    case = arm()
    claim = sought(case)
    assert claim is not None
    return case, claim


def test_cells_that_cover_the_box_are_proved(found):
    case, claim = found
    finding = check_cells(case, ORIGIN, claim)
    assert (finding.result, finding.strength, finding.over) == ("proved", "enclosed", TOLERANCES)
    assert len(claim.cells) > 1
    assert {"cells", "kept", "fixed", "e"} <= {p.label for p in finding.premises}


def moved(claim: CellsClaim, place: int, lower, upper) -> CellsClaim:
    side = Interval(Fraction(lower), Fraction(upper))
    cells = list(claim.cells)
    cells[place] = replace(cells[place], parameters=Box(("k",), (side,)))
    return replace(claim, cells=tuple(cells))


DAMAGE = {
    "a cell is missing": lambda c: replace(c, cells=c.cells[:-1]),
    "no cell is left": lambda c: replace(c, cells=()),
    "a gap": lambda c: moved(
        c, 0, *(c.cells[0].parameters["k"].bounds[0] + 1 / Fraction(10**6), c.cells[0].parameters["k"].bounds[1])
    ),
    "a cell beyond the box": lambda c: moved(c, 0, 2, 7),
    "a cell of V for another": lambda c: replace(
        c, cells=tuple(replace(d, function=c.cells[-1].function, level=c.cells[-1].level) for d in c.cells)
    ),
    "a larger set": lambda c: replace(c, cells=tuple(replace(d, level=100 * d.level) for d in c.cells)),
    "another loop": lambda c: replace(c, model_hash="0" * 64),
    "a cell of another loop": lambda c: replace(c, cells=(replace(c.cells[0], model_hash="0" * 64), *c.cells[1:])),
    "a cell at nominal": lambda c: replace(c, cells=(replace(c.cells[0], over=NOMINAL), *c.cells[1:])),
    "a cell around another point": lambda c: replace(
        c, cells=(replace(c.cells[0], equilibrium="point.E2"), *c.cells[1:])
    ),
    "cells out of order": lambda c: replace(c, cells=c.cells[::-1]),
    "the scope": lambda c: replace(c, over=NOMINAL),
    "another order of expansion": lambda c: replace(c, cells=tuple(replace(d, expansion=3) for d in c.cells)),
    "an identity less": lambda c: replace(
        c, cells=(replace(c.cells[0], decrease=c.cells[0].decrease[:-1]), *c.cells[1:])
    ),
}


@pytest.mark.parametrize("damage", DAMAGE.values(), ids=DAMAGE)
def test_damaged_cells_prove_nothing(damage, found):
    case, claim = found
    assert check_cells(case, ORIGIN, damage(claim)).result != "proved"


def test_a_parameter_that_varies_during_a_motion_must_not_be_cut(found):
    _, claim = found
    varying = arm(varies=True)
    assert sought(varying) is None
    again = replace(claim, model_hash=model_hash(varying))
    again = replace(again, cells=tuple(replace(c, model_hash=again.model_hash) for c in again.cells))
    finding = check_cells(varying, ORIGIN, again)
    assert finding.result != "proved"
    assert next(p for p in finding.premises if p.label == "kept").result != "proved"


def bound(value: str) -> Quantity:
    return Quantity(Fraction(value), 0, "rad", value)


WIDE = Box(("th", "w"), (Interval(Fraction(-1), Fraction(1)),) * 2)


@pytest.mark.parametrize(
    ("criterion", "expected"),
    [
        (Criterion("C1", "attraction", TOLERANCES), "proved"),
        (Criterion("C1", "attraction", NOMINAL), "proved"),
        (Criterion("C1", "asymptotic_stability", TOLERANCES), "proved"),
        (Criterion("C1", "limits_kept", TOLERANCES), "proved"),
        (Criterion("C1", "attraction", TOLERANCES, region=WIDE), "not established"),
    ],
)
def test_criteria_rest_on_all_cells(criterion, expected, found):
    case, claim = found
    case = replace(case, criteria=(criterion,), limits=Box(("th", "w"), (Interval(Fraction(-9, 10), Fraction(9, 10)),
                                                                        Interval(None, None))))  # fmt: skip
    renamed = replace(claim, model_hash=model_hash(case))
    renamed = replace(renamed, cells=tuple(replace(c, model_hash=renamed.model_hash) for c in renamed.cells))
    found_now = assess(case, (renamed,), 1000)
    assert judge_point(case, found_now.about_criteria, (), None)[0].verdict == expected
