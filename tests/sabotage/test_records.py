"""A record that says more, less or something else than its certificates give is refused, place by place."""

import hashlib
import json
from fractions import Fraction

import pytest
from altered import make_manifest_true, refusals, rewrite
from small_dossier import FOLDER, read

from dossier.cli import main
from dossier.recheck import recheck


def edited(folder, point, *keys, to):
    """Replace one entry of the point's record; `to` is the new value or a function of the old one."""

    def change(record: dict) -> None:
        part = record["operating_points"][point]
        for key in keys[:-1]:
            part = part[key]
        part[keys[-1]] = to(part[keys[-1]]) if callable(to) else to

    rewrite(folder, "record.json", change)


def one_digit_better(text: str) -> str:
    """A lower end raised in its last digit."""
    return str(Fraction(text) + Fraction(1, 10 ** len(text.partition(".")[2])))


ALTERED = {
    "a verdict improved": ("rest", ("criteria", "C4", "verdict"), "proved", "rest.C4: says 'proved'"),
    "a verdict set aside": ("rest", ("criteria", "C4", "verdict"), "not applicable", "rest.C4: says 'not applicable'"),
    "a verdict supported by nothing": ("rest", ("criteria", "C4", "verdict"), "supported", "rest.C4: says 'supported'"),
    "a refutation withdrawn": ("upright", ("criteria", "C1", "verdict"), "not established", "upright.C1: says"),
    "a proof withdrawn": ("rest", ("criteria", "C1", "verdict"), "not established", "rest.C1: says"),
    "a verdict that is none": ("rest", ("criteria", "C1", "verdict"), "certain", "rest.C1: says 'certain'"),
    "a verdict that is no text": ("rest", ("criteria", "C1", "verdict"), ["proved"], "rest.C1: says"),
    "a better value": ("rest", ("criteria", "C2", "value", "lower"), one_digit_better, "rest.C2.value.lower: says"),
    "a weaker requirement": ("rest", ("criteria", "C1", "bound", "lower"), "7", "rest.C1.bound.lower: says"),
    "a weaker requirement not met": ("rest", ("criteria", "C4", "bound", "lower"), "7", "rest.C4.bound.lower: says"),
    "a larger reserve": ("hold", ("criteria", "C2", "reserve", "lower"), "0.9", "hold.C2.reserve.lower: says"),
    "a wider scope": ("rest", ("criteria", "C2", "over"), "tolerances", "rest.C2.over: says"),
    "another claim": ("rest", ("criteria", "C1", "claim"), "damping_ratio", "rest.C1.claim: says"),
    "a stronger strength": ("rest", ("criteria", "C1", "strength"), "sampled", "rest.C1.strength: says"),
    "another reason": ("hold", ("criteria", "C1", "because"), "It always comes back.", "hold.C1.because: says"),
    "another theorem": ("hold", ("criteria", "C1", "theorem"), "T4", "hold.C1.theorem: says"),
    "other evidence": ("hold", ("criteria", "C1", "evidence", 0), "hold.V3", "hold.C1.evidence[0]: says"),
    "another counter-example": (
        "upright", ("criteria", "C1", "counter_example", "combination"), "m = 11 kg",
        "upright.C1.counter_example.combination: says",
    ),
    "a contradiction made up": ("hold", ("criteria", "C1", "contradiction"), True, "hold.C1.contradiction"),
    "a criterion left out": (
        "rest", ("criteria",), lambda c: {k: v for k, v in c.items() if k != "C4"}, "rest.C4: the criteria are not",
    ),
    "a criterion added": (
        "rest", ("criteria",), lambda c: {**c, "C5": c["C1"]}, "rest.C5: the criteria are not",
    ),
    "another class": ("upright", ("equilibria", "found", 0, "class"), "stable", "upright.equilibria.found[0].class"),
    "another place": (
        "lean", ("equilibria", "found", 0, "state", "th", "radius"), "0", "lean.equilibria.found[0].state.th.radius",
    ),
    "another chosen one": ("lean", ("equilibria", "found", 0, "chosen"), False, "lean.equilibria.found[0].chosen"),
    "an equilibrium left out": ("rest", ("equilibria", "found"), [], "rest.equilibria.found: 0 entries"),
    "an eigenvalue moved": (
        "rest", ("equilibria", "found", 0, "eigenvalues", 0, "re"), "-99", "rest.equilibria.found[0].eigenvalues[0].re",
    ),
    "a list called complete": ("lean", ("equilibria", "complete"), "yes", "lean.equilibria.complete"),
    "a larger margin": ("rest", ("margins", "u", "phase", "lower"), "1.5", "rest.margins.u.phase.lower: says"),
    "another model": ("rest", ("model_sha256",), "0" * 64, "rest.model_sha256: says"),
    "states in another order": ("rest", ("states",), ["v", "e"], "rest.states[0]: says"),
    "sampled called continuous": ("rest", ("time",), "sampled", "rest.time: says"),
    "a set at another level": ("hold", ("certificates", 2, "level"), "99", "hold.certificates[2].level: says"),
    "a check that was not made": (
        "hold", ("certificates", 0, "checked", "exact"), "proved", "hold.certificates[0].checked.exact: nothing",
    ),
    "certificates in another order": ("rest", ("certificates",), lambda c: c[::-1], "rest.findings["),
    "a premise dropped from a finding": (
        "hold", ("findings", 0, "premises"), lambda p: p[1:], "hold.findings[0].premises: 1 entries",
    ),
    "a finding turned into a simulation": ("hold", ("findings", 0, "check"), "simulation", "hold.findings: "),
    "an unknown part": ("rest", ("criteria", "C1", "signed"), "yes", "rest.C1.signed: nothing of that name"),
}  # fmt: skip


@pytest.mark.parametrize("what", ALTERED)
def test_an_altered_record_is_refused_at_its_place(what, damaged, capsys):
    point, keys, to, expected = ALTERED[what]
    folder = damaged(point)
    edited(folder, point, *keys, to=to)
    assert any(line.startswith(f"record.json: {expected}") for line in refusals(folder, capsys))


def changed(data: dict, *keys, to) -> None:
    for key in keys[:-1]:
        data = data[key]
    data[keys[-1]] = to


WHOLE = {
    "a number of the document": (("document", "number"), "SD-9999", "record.json: document.number: says"),
    "counts that flatter": (("conclusion", "refuted"), 0, "record.json: conclusion.refuted: says"),
    "another project": (("project_sha256",), "0" * 64, "record.json: project_sha256: made from another file"),
    "another format": (("record",), 2, "record.json: format 2"),
    "another effort": (("effort",), "heroic", "record.json: effort: expected one of quick"),
    "a project file elsewhere": (("project_file",), "../../project.yaml", "record.json: project_file: expected"),
    "a project file that is missing": (("project_file",), "other.yaml", "project/other.yaml:1:1: the file cannot"),
    "no operating points": (("operating_points",), {}, "record.json: operating_points: expected"),
    "operating points as text": (("operating_points",), "rest", "record.json: operating_points: expected"),
    "an operating point as text": (("operating_points", "rest"), "sound", "record.json: rest: not an object"),
    "an unknown operating point": (("operating_points", "peak"), None, "record.json: peak: not an object"),
    "certificates as text": (("operating_points", "rest", "certificates"), "all", "record.json: rest: certificates: "),
    "a certificate elsewhere": (
        ("operating_points", "rest", "certificates", 0, "id"), "../rest.R1", "record.json: rest: certificates: ",
    ),
    "criteria as a list": (("operating_points", "rest", "criteria"), [1], "record.json: rest: criteria: expected"),
}  # fmt: skip


@pytest.mark.parametrize("what", WHOLE)
def test_a_record_that_is_damaged_as_a_whole_is_refused_at_its_place(what, damaged, capsys):
    keys, to, expected = WHOLE[what]
    folder = damaged("rest")
    rewrite(folder, "record.json", lambda record: changed(record, *keys, to=to))
    assert any(line.startswith(expected) for line in refusals(folder, capsys))


def test_an_operating_point_the_project_does_not_have_is_refused(damaged, capsys):
    folder = damaged("rest")
    rewrite(folder, "record.json", lambda r: r["operating_points"].update(peak=r["operating_points"]["rest"]))
    assert "peak: the project has no such operating point" in refusals(folder, capsys)


def test_an_operating_point_left_out_of_a_dossier_is_remarked_on(damaged, capsys):
    """As ``--only`` leaves them out; who reads the result must see it."""
    assert main(["recheck", str(damaged("rest"))]) == 0
    out = capsys.readouterr().out
    assert "remark    not in this dossier: the operating point upright of the project" in out


MODELS = {
    "a parameter": (("loop", "parameters", "m", "nominal", "middle"), "9", "loop.parameters.m.nominal.middle: says"),
    "a tolerance": (("loop", "parameters", "m", "spread", 0), "1", "loop.parameters.m.spread[0]: says"),
    "the domain": (("loop", "domain", "e", 1), "1", "loop.domain.e[1]: says"),
    "the region": (("loop", "region", "e", 0), "-1", "loop.region.e[0]: says"),
    "the limits": (("loop", "limits", "e", 0), "-1", "loop.limits.e[0]: says"),
    "the hash": (("sha256",), "0" * 64, "sha256: says"),
    "the equations": (("loop", "equations"), [], "loop.equations: 0 entries"),
}


@pytest.mark.parametrize("what", MODELS)
def test_an_altered_model_is_refused_at_its_place(what, damaged, capsys):
    keys, to, expected = MODELS[what]
    folder = damaged("hold")
    rewrite(folder, "model.json", lambda models: changed(models, "hold", *keys, to=to))
    assert any(line.startswith(f"model.json: hold.{expected}") for line in refusals(folder, capsys))


def test_a_model_without_its_operating_point_is_refused(damaged, capsys):
    folder = damaged("hold")
    rewrite(folder, "model.json", lambda models: models.update(peak=models.pop("hold")))
    lines = refusals(folder, capsys)
    assert "model.json: peak: the record has no such operating point" in lines
    assert any(line.startswith("model.json: hold: says null") for line in lines)


PROJECT = {
    "a parameter": ("value: 10, unit: kg", "value: 9, unit: kg"),
    "a tolerance": ("tolerance: 20 %", "tolerance: 25 %"),
    "an equation": ("k3*e^3)/m", "k3*e^5)/m"),
    "the region": ("region: {e: [-0.005, 0.005]", "region: {e: [-0.009, 0.009]"),
    "a requirement": ("between: [-0.02, 0.02]", "between: [-0.001, 0.001]"),
    "a criterion": ("C1: {claim: attraction, over: tolerances}", "C1: {claim: limits_kept, over: tolerances}"),
    "a title": ("number: SD-0001", "number: SD-0002"),
    "a comment": ("dossier: 1", "dossier: 1  # reviewed"),
}


@pytest.mark.parametrize("what", PROJECT)
@pytest.mark.parametrize("hash_is_true", [False, True])
def test_a_project_changed_after_the_build_is_refused(what, hash_is_true, damaged, capsys):
    folder = damaged("hold")
    text = (FOLDER / "project.yaml").read_text(encoding="utf-8")
    assert text.count(PROJECT[what][0]) >= 1
    content = text.replace(*PROJECT[what]).encode()
    (folder / "project/project.yaml").write_bytes(content)
    digest = hashlib.sha256(content).hexdigest()
    old = read(folder, "record.json")["project_sha256"]
    rewrite(folder, "record.json", lambda r: r.update(project_sha256=digest if hash_is_true else old))
    if what == "a comment" and hash_is_true:  # the same project in every respect that is analysed
        assert not recheck(folder).refusals
    else:
        assert refusals(folder, capsys)


def test_repeated_keys_are_refused_whichever_of_them_is_true(damaged, capsys):
    """Readers of JSON differ in which of two equal keys they take."""
    folder = damaged("rest")
    text = (folder / "record.json").read_text(encoding="utf-8")
    honest = '"verdict": "refuted"'
    assert honest in text
    (folder / "record.json").write_text(
        text.replace(honest, f'"verdict": "proved",\n     {honest}', 1), encoding="utf-8"
    )
    make_manifest_true(folder)
    assert any(line.startswith("record.json: not in canonical form") for line in refusals(folder, capsys))


def test_what_a_damaged_file_says_cannot_steer_the_terminal(damaged, capsys):
    folder = damaged("rest")
    rewrite(folder, "record.json", lambda r: changed(r, "document", "nu\x1b[2Kmber", to="\x1b[2J"))
    lines = refusals(folder, capsys)
    assert "\x1b" not in json.dumps(lines, ensure_ascii=False)
    assert any("nu?[2Kmber" in line for line in lines)
