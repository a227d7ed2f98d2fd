"""What a dossier says: sentences, units, roundings and links, before any layout."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields, is_dataclass, replace
from fractions import Fraction
from typing import Any

from dossier.model.case import Quantity
from dossier.model.dossier import Evidence
from dossier.report.blocks import Card, Gauge, Paper, Paragraph, SignField, Table
from dossier.report.content import paper_of, quantities
from dossier.report.content.argument import deciding_finding
from dossier.report.content.context import read_context
from dossier.report.content.quantities import obtained, required, reserve, unit_of
from dossier.report.content.verdicts import criterion_of, issue_sentence
from dossier.report.layout import places
from dossier.report.rich import Link, plain
from dossier.report.units import PrintedUnit


def parts(value: Any) -> Iterator[Any]:
    """Every value inside a paper."""
    yield value
    if is_dataclass(value):
        for field in fields(value):
            yield from parts(getattr(value, field.name))
    elif isinstance(value, tuple):
        for item in value:
            yield from parts(item)


def sentence(evidence: Evidence, identifier: str) -> str:
    point = next(p for p in evidence.points if identifier.startswith(p.case.name + "."))
    outcome = next(o for o in point.outcomes if o.identifier == identifier)
    return plain(issue_sentence(read_context(evidence), point, outcome))


def printed(evidence: Evidence, identifier: str) -> tuple[str, str, Gauge | None]:
    point = next(p for p in evidence.points if identifier.startswith(p.case.name + "."))
    outcome = next(o for o in point.outcomes if o.identifier == identifier)
    criterion = criterion_of(point, outcome)
    return required(criterion), obtained(outcome, criterion, point.case), reserve(outcome)


def test_a_proved_verdict_names_model_scope_region_checker_and_evidence(evidence: Evidence) -> None:
    text = sentence(evidence, "bottom_hold.C2")
    for words in ("the model slide (fingerprint ", "interior included", "every start in the region of bottom_hold",
                  "exact rational arithmetic", "does not rely on the search", "bottom_hold.V2",
                  "A1, A2, A3"):  # fmt: skip
        assert words in text


def test_each_verdict_uses_its_own_words(evidence: Evidence) -> None:
    expected = {
        "bottom_hold.C6": "it is false that",
        "bottom_hold.C8": "This is not a proof",
        "bottom_hold.C10": "Outside this issue",
        "hold_under_load.C1": "Nothing may be concluded",
        "hold_under_load.C3": "It is not enclosed, so this is no refutation",
        "hold_under_load.C5": "It has no meaning here",
        "arm_parked.C2": "has no equilibrium",
    }
    for identifier, words in expected.items():
        assert words in sentence(evidence, identifier)


def test_only_proved_criteria_speak_of_every_start(evidence: Evidence) -> None:
    for point in evidence.points:
        for outcome in point.outcomes:
            if outcome.verdict != "proved":
                assert "every start in the region" not in sentence(evidence, outcome.identifier)


def test_values_are_printed_in_the_unit_of_the_bound_and_rounded_to_the_worse_side(evidence: Evidence) -> None:
    assert printed(evidence, "bottom_hold.C3")[:2] == ("−1.6 … 1.6\u00a0mm", "−1.382 … 1.382\u00a0mm")
    assert printed(evidence, "bottom_hold.C4")[:2] == ("≥\u00a05\u00a01/s", "≥\u00a013.68\u00a01/s")
    assert printed(evidence, "bottom_hold.C7")[:2] == ("≥\u00a01.5\u00a0ms", "≥\u00a01.712\u00a0ms")


def test_a_quantity_bounded_by_zero_is_printed_in_the_unit_of_its_state(evidence: Evidence) -> None:
    point = evidence.points[0]
    zero = Quantity(Fraction(0), 0, "rad", "0 deg")
    criterion = replace(point.case.criteria[2], between=None, at_least=zero, of_written="theta")
    assert unit_of(criterion, evidence.points[2].case).name == "deg"
    formula = replace(criterion, of_written="theta + 1", claim="excursion")
    assert unit_of(formula, evidence.points[2].case) == PrintedUnit("rad")


def test_a_refuted_angle_is_printed_in_degrees(evidence: Evidence) -> None:
    """0.58214471 rad times 180/pi is 33.3544..., by a pocket calculator."""
    assert printed(evidence, "bottom_hold.C6")[1] == "33.3544…°"


def test_a_margin_without_end_is_no_infinity(evidence: Evidence) -> None:
    assert printed(evidence, "bottom_hold.C5")[1] == "no finite value in this model"


def test_a_reserve_is_rounded_down(evidence: Evidence) -> None:
    gauge = printed(evidence, "bottom_hold.C3")[2]
    assert gauge is not None
    assert gauge.text == "13.6\u202f%"
    assert gauge.permille == 136
    assert Gauge(Fraction(5), "").permille == 1000
    assert Gauge(Fraction(-1), "").permille == 0


def test_every_link_leads_somewhere(paper: Paper) -> None:
    known = set(places(paper))
    targets = {p.target for p in parts(paper) if isinstance(p, Link)}
    assert targets
    assert targets <= known


def test_every_criterion_has_a_card_and_a_row_in_summary_and_matrix(paper: Paper, evidence: Evidence) -> None:
    wanted = {o.identifier for p in evidence.points for o in p.outcomes}
    assert {c.anchor for c in parts(paper) if isinstance(c, Card)} == wanted
    for anchor in ("summary", "trace"):
        section = next(s for s in paper.sections if s.anchor == anchor)
        assert wanted <= {p.target for p in parts(section) if isinstance(p, Link)}


def test_every_certificate_has_a_place(paper: Paper, evidence: Evidence) -> None:
    assert {c.identifier for p in evidence.points for c in p.claims} <= set(places(paper))


def test_decisions_dates_and_signatures_have_no_field_to_fill(paper: Paper) -> None:
    rows = [p for p in parts(paper) if isinstance(p, SignField)]
    assert [r.role for r in rows] == ["prepared", "checked", "independently reviewed", "approved"]
    assert {f.name for f in fields(SignField)} == {"key", "role", "name", "duty", "statement"}


def test_an_internal_contradiction_is_said_first(evidence: Evidence) -> None:
    point = evidence.points[0]
    clash = replace(point.outcomes[0], contradiction=True)
    changed = replace(evidence, points=(replace(point, outcomes=(clash, *point.outcomes[1:])),))
    summary = paper_of(changed, {}).sections[0]
    words = [plain(b.text) for b in summary.blocks if isinstance(b, Paragraph)]
    assert any(w.startswith("Internal contradiction") for w in words)


def test_the_argument_takes_the_finding_that_decided(evidence: Evidence) -> None:
    point = evidence.points[0]
    decided = {o.identifier: deciding_finding(point, o) for o in point.outcomes}
    finding = decided["bottom_hold.C2"]
    assert finding is not None
    assert (finding.subject, finding.result) == ("bottom_hold.C2", "proved")
    open_one = decided["bottom_hold.C8"]
    assert open_one is not None
    assert open_one.result == "undecided"


def test_a_dossier_without_anything_in_it_still_has_all_its_sections(evidence: Evidence) -> None:
    document = replace(evidence.document, date="soon", sign_off=(), standards=())
    empty = replace(evidence, points=(), assumptions=(), project_files=(), document=document)
    paper = paper_of(empty, {})
    assert [s.anchor for s in paper.sections] == ["summary", "scope", "assumptions", "models", "argument", "trace",
                                                  "record", "cautions", "sign-off", "files", "guide"]  # fmt: skip
    assert paper.issued == "2000-01-01"


def test_a_row_has_one_cell_per_column(paper: Paper) -> None:
    for table in parts(paper):
        if isinstance(table, Table):
            for row in table.rows:
                assert len(row.cells) == (1 if row.spanning else len(table.columns)), table.title


def test_a_nominal_value_under_a_claim_over_tolerances_says_so(evidence: Evidence) -> None:
    """Beside the bound it could be read as met for every combination."""
    point = evidence.points[0]
    pairs = list(zip(point.outcomes, point.case.criteria, strict=True))
    outcome, criterion = next((o, c) for o, c in pairs if o.value is not None)
    aside = replace(outcome, verdict="not attempted")
    over, nominal = replace(criterion, over="tolerances"), replace(criterion, over="nominal")
    assert quantities.obtained(aside, over, point.case).startswith("nominal only: ")
    assert "nominal" not in quantities.obtained(aside, nominal, point.case)
    assert "nominal" not in quantities.obtained(replace(outcome, verdict="proved"), over, point.case)
