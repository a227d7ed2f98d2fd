"""A certificate altered in any of eight ways is refused, whichever hashes are made true again."""

from fractions import Fraction

import pytest
from alterations import ALTERATIONS
from altered import (
    make_everything_true_but_the_verdicts,
    make_links_true,
    make_manifest_true,
    rechecked,
    refusals,
    rewrite,
)
from small_dossier import FOLDER, built, read, written

from dossier.exits import PROVED

KINDS = {
    "roots": ("rest", "R1"),
    "routh": ("rest", "L1"),
    "matrix": ("rest", "P-C1"),
    "combination": ("rest", "W-C1"),
    "gram": ("hold", "V2"),
    "sturm": ("rest", "M-u"),
    "cover": ("capped", "V2-nominal-boxes"),
    "cells": ("swing", "V2-cells"),
    "branch": ("loaded", "B1"),
    "absence": ("overloaded", "N1"),
    "end": ("overloaded", "N2"),
    "candidate": ("given", "V-given"),
}
"""One certificate of every kind: its operating point and its own name there."""

NOT_APPLICABLE = {
    *(("widened_region", k) for k in ("routh", "cover", "combination")),
    *(("level", k) for k in ("combination", "cells", "branch", "end")),
    *(("reordered_monomials", k) for k in ("combination", "branch", "candidate", "end")),
}
"""Certificates that state no region of their own; a combination has no level and no monomials either."""


def file_of(kind: str) -> tuple[str, str]:
    point, suffix = KINDS[kind]
    return point, f"certificates/{point}.{suffix}.json"


def replaced(folder, name, data):
    def change(current: dict) -> None:
        current.clear()
        current.update(data)

    rewrite(folder, name, change)


@pytest.mark.parametrize("kind", KINDS)
def test_the_small_project_holds_a_certificate_of_the_kind_that_recheck_accepts(kind, damaged, capsys):
    point, name = file_of(kind)
    folder = damaged(point)
    assert read(folder, name)["claim"]["kind"] == kind
    assert rechecked(folder, capsys) == (PROVED, [])


WITNESSES = {
    "roots": {"solutions", "boxes"},
    "routh": set(),
    "matrix": {"cells"},
    "combination": set(),
    "gram": {"decrease"},
    "sturm": {"gain_crossings", "phase_crossings", "peak_candidates"},
    "cover": {"boxes"},
    "cells": {"cells"},
    "branch": {"cells"},
    "absence": {"boxes"},
    "end": {"around", "share"},
    "candidate": {"around"},
}
"""Parts of a claim that only help to prove it: another uniqueness box, Gram matrix or interval may prove the same."""


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("alteration", ALTERATIONS)
def test_an_altered_certificate_is_refused_though_all_hashes_are_true(alteration, kind, damaged, capsys):
    point, name = file_of(kind)
    folder = damaged(point)
    sound, record = read(folder, name), read(folder, "record.json")
    variants = list(ALTERATIONS[alteration](sound))
    assert bool(variants) is ((alteration, kind) not in NOT_APPLICABLE)
    for variant in variants:
        replaced(folder, name, variant)
        make_links_true(folder)
        _, lines = rechecked(folder, capsys)
        if not lines:  # then it must be another proof of the very same statement
            assert {k for k, v in variant["claim"].items() if v != sound["claim"][k]} <= WITNESSES[kind]
            assert variant["checks"] == sound["checks"]
            replaced(folder, "record.json", record)
            assert f"{name}: not the file that the record names" in refusals(folder, capsys)
        else:
            assert any(line.startswith((name, "record.json: ")) for line in lines)
        replaced(folder, "record.json", record)


def forged(folder, point, suffixes, change):
    """Claims changed, and everything that follows from them derived anew, but not the verdicts."""
    for suffix in suffixes.split():
        rewrite(folder, f"certificates/{point}.{suffix}.json", lambda data: change(data["claim"]))
    return make_everything_true_but_the_verdicts(folder, point)


def scaled(field, factor):
    return lambda claim: claim.update({field: str(Fraction(claim[field]) * Fraction(factor))})


FORGERIES = {
    "a faster decay than the loop has": ("rest", "P-C1 P-C1-wide", scaled("level", 2), "C1"),
    "a set far larger than the proved one": ("hold", "V2 V2-tight", scaled("level", 100), "C1"),
    "a set beyond the next equilibrium": ("lean", "V2-nominal V2-nominal-tight", scaled("level", 50), "C1"),
    "a combination within every bound": (
        "rest", "W-C1", lambda c: c.update(values={"k1": "1000", "m": "10"}), "C4",
    ),
    "a combination outside of the tolerances": (
        "rest", "W-C1", lambda c: c.update(values={"k1": "1000", "m": "1"}), "C4",
    ),
    "a list that leaves the nearest equilibrium out": (
        "upright", "R1", lambda c: c.update(solutions=[], complete=False), "C1",
    ),
    "a cell of the branch left out": ("loaded", "B1", lambda c: c["cells"].clear(), "C1"),
    "another equilibrium followed": (
        "loaded", "B1", lambda c: [cell["middle"].__setitem__(0, "13/5") for cell in c["cells"]], "C1",
    ),
    "the end of the branch before it ends": (
        "overloaded", "N2", lambda c: c.update(values={"t": "7/2"}), "C2",
    ),
    "a box about the end that holds nothing of it": (
        "overloaded", "N2", lambda c: c["around"]["sides"].__setitem__(0, ["-1", "-1/2"]), "C2",
    ),
    "an absence at another combination": ("overloaded", "N1", lambda c: c.update(values={"t": "1"}), "C1"),
    "a cell left out": ("swing", "V2-cells", lambda c: c["cells"].pop(), "C1"),
    "a cell that reaches less far": (
        "swing", "V2-cells", lambda c: c["cells"][0]["parameters"]["sides"][0].__setitem__(1, "21/4"), "C1",
    ),
    "a coarser expansion of the sine": ("swing", "V2-cells", lambda c: c["cells"][0].update(expansion=3), "C1"),
    "a set of one cell far larger": (
        "swing", "V2-cells", lambda c: c["cells"][0].update(level=str(100 * Fraction(c["cells"][0]["level"]))), "C1",
    ),
    "a list of no equilibria": ("rest", "R1", lambda c: c.update(solutions=[]), "C3"),
    "a list that hides an undecided box": ("rest", "R1", lambda c: c.update(undecided=[c["search"]]), "C3"),
    "an unstable point called stable": (
        "upright", "L1", lambda c: c.update(inside=2, outside=0, theorem="T1"), "C1",
    ),
    "a crossing of the unit circle left out": ("rest", "M-u", lambda c: c.update(phase_crossings=[]), "C2"),
    "an inequality for half of the parameter box": (
        "rest", "P-C1 P-C1-wide", lambda c: c["cells"][0]["parameters"]["sides"][0].__setitem__(1, "10"), "C1",
    ),
}  # fmt: skip


@pytest.mark.parametrize("forgery", FORGERIES)
def test_a_forged_certificate_carries_no_verdict_however_consistent_the_dossier_is(forgery, damaged, capsys):
    point, suffix, change, criterion = FORGERIES[forgery]
    folder = damaged(point)
    stated = read(folder, "record.json")["operating_points"][point]["criteria"][criterion]["verdict"]
    honest = forged(folder, point, suffix, change)
    assert honest[criterion]["verdict"] == "not established"
    lines = refusals(folder, capsys)
    expected = f"record.json: {point}.{criterion}: says '{stated}', the certificates give 'not established'"
    assert expected in lines


def test_a_set_proved_at_nominal_is_no_evidence_over_tolerances(damaged, capsys):
    """The interval witness proves a somewhat larger set, but at the nominal combination only."""
    folder = damaged("hold")
    rewrite(folder, "certificates/hold.V2-tight.json", lambda d: d["claim"].update(level="1/1000000"))
    honest = forged(folder, "hold", "V2", scaled("level", "5/4"))
    entries = read(folder, "record.json")["operating_points"]["hold"]["certificates"]
    checked = next(e["checked"] for e in entries if e["id"] == "hold.V2")
    assert checked == {"exact": "undecided", "interval": "proved"}
    assert honest["C1"]["verdict"] == "not established"
    assert any(line.startswith("record.json: hold.C1: says 'proved'") for line in refusals(folder, capsys))


def test_a_nominal_set_relabelled_as_one_over_tolerances_is_refused(damaged, capsys):
    folder = damaged("capped")
    rewrite(folder, "certificates/capped.V2-nominal-boxes.json", lambda d: d["claim"].update(over="tolerances"))
    honest = make_everything_true_but_the_verdicts(folder, "capped")
    assert honest["C1"]["verdict"] == "not established"
    assert any("capped.C1" in line for line in refusals(folder, capsys))


def test_a_certificate_that_bears_the_name_of_the_list_of_equilibria_is_no_list(damaged, capsys):
    """A proved matrix inequality, named as the list would be, must not prove that the list is complete."""
    folder = damaged("rest")
    matrix = read(folder, "certificates/rest.P-C1.json")
    matrix["claim"]["identifier"] = "rest.R1"
    replaced(folder, "certificates/rest.R1.json", matrix)
    (folder / "certificates/rest.P-C1.json").unlink()

    def without(record):
        entries = record["operating_points"]["rest"]["certificates"]
        entries[:] = [e for e in entries if e["id"] != "rest.P-C1"]

    rewrite(folder, "record.json", without)
    honest = make_everything_true_but_the_verdicts(folder, "rest")
    assert honest["C3"]["verdict"] != "proved"
    assert any(line.startswith("record.json: rest.C3: says 'proved'") for line in refusals(folder, capsys))


def test_certificates_of_another_build_are_refused(damaged, small_dossiers, capsys):
    """The same loop with a heavier mass: its certificates are sound, for another model."""
    folder = damaged("hold")
    other = folder.parent / "other"
    other.mkdir()
    text = (FOLDER / "project.yaml").read_text(encoding="utf-8").replace("value: 10, unit: kg", "value: 11, unit: kg")
    (other / "project.yaml").write_text(text, encoding="utf-8")
    dossier = written(*built(other / "project.yaml"), other / "out")
    for path in (folder / "certificates").iterdir():
        path.write_bytes((dossier / "certificates" / path.name).read_bytes())
    make_manifest_true(folder)
    lines = refusals(folder, capsys)
    for suffix in ("R1", "L1", "V2", "V2-tight"):
        assert any(line.startswith(f"certificates/hold.{suffix}.json: ") for line in lines)
    assert any(line.startswith("record.json: hold.C1: says 'proved'") for line in lines)


@pytest.mark.parametrize(
    ("kind", "named", "expected"), [("gram", "T3", "T2"), ("roots", "T2", "E"), ("matrix", "E", "T1")]
)
def test_a_certificate_that_names_another_theorem_is_refused(kind, named, expected, damaged, capsys):
    point, name = file_of(kind)
    folder = damaged(point)
    rewrite(folder, name, lambda d: d["claim"].update(theorem=named))
    make_everything_true_but_the_verdicts(folder, point)
    assert f"{name}: names theorem '{named}' where '{expected}' is checked" in refusals(folder, capsys)


@pytest.mark.parametrize("kind", KINDS)
def test_a_missing_certificate_is_refused_by_name(kind, damaged, capsys):
    point, name = file_of(kind)
    folder = damaged(point)
    (folder / name).unlink()
    make_manifest_true(folder)
    assert f"{name}: missing" in refusals(folder, capsys)


@pytest.mark.parametrize("kind", KINDS)
def test_a_certificate_that_is_kept_twice_is_refused_by_name(kind, damaged, capsys):
    point, name = file_of(kind)
    folder = damaged(point)
    second = name.replace(".json", "-2.json")
    (folder / second).write_bytes((folder / name).read_bytes())
    make_manifest_true(folder)
    assert f"{second}: belongs to no part of this dossier" in refusals(folder, capsys)


@pytest.mark.parametrize("kind", KINDS)
def test_a_certificate_renamed_to_another_operating_point_is_refused_by_both_names(kind, damaged, capsys):
    point, name = file_of(kind)
    folder = damaged(point)
    elsewhere = name.replace(f"{point}.", "elsewhere.")
    (folder / name).rename(folder / elsewhere)
    make_manifest_true(folder)
    lines = refusals(folder, capsys)
    assert f"{name}: missing" in lines
    assert f"{elsewhere}: belongs to no part of this dossier" in lines


def test_a_certificate_under_the_name_of_another_is_refused(damaged, capsys):
    folder = damaged("hold")
    first, second = (folder / f"certificates/hold.{n}.json" for n in ("V2", "V2-tight"))
    content = first.read_bytes()
    first.write_bytes(second.read_bytes())
    second.write_bytes(content)
    make_links_true(folder)
    assert "certificates/hold.V2.json: holds the claim hold.V2-tight" in refusals(folder, capsys)
