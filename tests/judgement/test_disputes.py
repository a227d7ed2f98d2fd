"""Two checks that disagree: nothing that rests on the disputed evidence is called proved."""

from dataclasses import replace

from builders import make_case

from dossier.judgement.points import judge_point
from dossier.model.case import NOMINAL, Criterion
from dossier.model.finding import Finding

CASE = replace(
    make_case({"x": "-x"}, search={"x": (-1, 1)}, region={"x": (-1, 1)}, fixed=[0]),
    criteria=(Criterion("C1", "attraction", NOMINAL), Criterion("C2", "limits_kept", NOMINAL)),
)
SET = "point.V1"


def proof(name: str, *evidence: str) -> Finding:
    return Finding(f"point.{name}", "exact", "proved", "exact", NOMINAL, "T2", "shown", evidence=evidence)


def against(subject: str, strength="floating") -> Finding:
    check = "simulation" if strength == "floating" else "interval"
    return Finding(subject, check, "refuted", strength, NOMINAL, "", "V rises", evidence=("point.M1",))


def verdicts(*findings: Finding) -> list[tuple[str, bool]]:
    return [(o.verdict, o.contradiction) for o in judge_point(CASE, findings, (), None)]


def test_proofs_alone_are_proofs():
    found = (proof("C1", SET), proof("C2", "point.V2"), replace(proof("C1"), subject=SET))
    assert verdicts(*found) == [("proved", False), ("proved", False)]


def test_a_disputed_set_takes_every_criterion_with_it_that_rests_on_it_and_no_other():
    for strength in ("floating", "enclosed"):
        found = (
            proof("C1", SET), proof("C2", "point.V2"), replace(proof("C1"), subject=SET), against(SET, strength),
        )  # fmt: skip
        assert verdicts(*found) == [("contradicted", True), ("proved", False)]


def test_a_simulated_violation_against_a_proof_leaves_no_proof():
    outcome = judge_point(CASE, (proof("C1", SET), against("point.C1")), (), None)[0]
    assert (outcome.verdict, outcome.contradiction) == ("contradicted", True)
    assert "V rises" in outcome.because and "shown" in outcome.because
    assert outcome.evidence == (SET, "point.M1")


def test_a_rigorous_counter_example_against_a_proof_is_a_refutation_and_a_contradiction():
    assert verdicts(proof("C1", SET), against("point.C1", "enclosed"))[0] == ("refuted", True)


def test_an_undisputed_refutation_of_a_certificate_is_no_contradiction():
    assert verdicts(proof("C1", "point.V2"), against(SET))[0] == ("proved", False)
