"""The record: whole, linked, exact, and the same bytes for the same evidence."""

import hashlib
import json
import os
import re
from pathlib import Path

import pytest
from small_dossier import dossiers, read

from dossier.evidence.store import MANIFEST, RUN_LOG, NotADossierError, verify_manifest, write_dossier
from dossier.model.outcome import VERDICTS

NUMBER = re.compile(r"-?[0-9]+(\.[0-9]+)?([eE][-+]?[0-9]+)?")


@pytest.fixture(scope="module")
def folders(tmp_path_factory) -> dict[str, Path]:
    return dossiers(tmp_path_factory.mktemp("evidence"))


def leaves(data, path=()):
    """Every value that is no container, with its path."""
    children = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else None
    if children is None:
        yield path, data
        return
    for key, value in children:
        yield from leaves(value, (*path, key))


def json_files(folder: Path) -> list[str]:
    return sorted(p.relative_to(folder).as_posix() for p in folder.rglob("*.json") if p.name != RUN_LOG)


def test_no_file_holds_a_floating_point_number(folders):
    """Numbers are exact fractions or decimals in text, so that no reader rounds them."""
    for folder in folders.values():
        for name in json_files(folder):
            assert [p for p, v in leaves(read(folder, name)) if isinstance(v, float)] == [], name


def test_every_file_is_in_canonical_form(folders):
    for folder in folders.values():
        for name in json_files(folder):
            text = (folder / name).read_text(encoding="utf-8")
            assert list(json.loads(text)) == sorted(json.loads(text))
            assert text.endswith("\n")
            assert "/tmp" not in text and str(Path.home()) not in text


def test_every_hash_is_that_of_its_file(folders):
    for folder in folders.values():
        assert verify_manifest(folder) == ()
        listed = dict(reversed(line.split("  ")) for line in (folder / MANIFEST).read_text().splitlines())
        present = {p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file()}
        assert listed.keys() == present - {MANIFEST, RUN_LOG}
        for point in read(folder, "record.json")["operating_points"].values():
            for entry in point["certificates"]:
                content = (folder / entry["file"]).read_bytes()
                assert hashlib.sha256(content).hexdigest() == entry["sha256"] == listed[entry["file"]]
        project = (folder / "project" / "project.yaml").read_bytes()
        assert hashlib.sha256(project).hexdigest() == read(folder, "record.json")["project_sha256"]


def test_every_piece_of_evidence_a_verdict_names_exists_and_every_rigorous_verdict_names_one(folders):
    for folder in folders.values():
        for name, point in read(folder, "record.json")["operating_points"].items():
            known = {c["id"] for c in point["certificates"]} | {e["id"] for e in point["equilibria"]["found"]}
            known |= {f"{name}.M1"} if point["campaign"] else set()
            for criterion in point["criteria"].values():
                assert set(criterion["evidence"]) <= known
                if criterion["verdict"] in ("proved", "refuted"):
                    assert criterion["evidence"] and criterion["strength"] in ("exact", "enclosed")
            for finding in point["findings"]:
                assert set(finding["evidence"]) <= known


def test_the_conclusion_counts_the_verdicts(folders):
    for folder in folders.values():
        record = read(folder, "record.json")
        found = [c["verdict"] for p in record["operating_points"].values() for c in p["criteria"].values()]
        assert record["conclusion"] == {v: found.count(v) for v in VERDICTS}


def test_printed_values_are_decimals_that_enclose(folders):
    seen = 0
    for folder in folders.values():
        for point in read(folder, "record.json")["operating_points"].values():
            for criterion in point["criteria"].values():
                if criterion["value"] is not None:
                    ends = [criterion["value"][side] for side in ("lower", "upper")]
                    assert all(e == "none" or NUMBER.fullmatch(e) for e in ends)
                    if "none" not in ends:
                        assert float(ends[0]) <= float(ends[1])
                    seen += 1
    assert seen


def test_a_dossier_replaces_an_earlier_one_whole(tmp_path):
    folder = tmp_path / "out"
    write_dossier(folder, {"record.json": b"{}\n", "figures/old.svg": b"<svg/>"}, {"seconds": 1})
    write_dossier(folder, {"record.json": b"{ }\n"}, {"seconds": 2})
    assert sorted(p.name for p in folder.rglob("*")) == sorted([MANIFEST, RUN_LOG, "record.json"])
    assert (folder / "record.json").read_bytes() == b"{ }\n"
    assert [p.name for p in tmp_path.iterdir()] == ["out"]


def test_a_write_that_fails_leaves_the_earlier_dossier(tmp_path, monkeypatch):
    folder = tmp_path / "out"
    write_dossier(folder, {"record.json": b"{}\n"}, {})
    write = Path.write_bytes

    def refuse(self, data):
        if self.name == MANIFEST:
            raise OSError(28, "No space left on device")
        return write(self, data)

    monkeypatch.setattr(Path, "write_bytes", refuse)
    with pytest.raises(OSError, match="No space"):
        write_dossier(folder, {"record.json": b"changed"}, {})
    assert (folder / "record.json").read_bytes() == b"{}\n"
    assert [p.name for p in tmp_path.iterdir()] == ["out"]


def test_the_only_copy_of_a_dossier_is_kept_where_it_cannot_be_put_back(tmp_path, monkeypatch):
    folder = tmp_path / "out"
    write_dossier(folder, {"record.json": b"{}\n"}, {})
    replace = os.replace
    calls = []

    def refuse(source, target):
        calls.append(target)
        if len(calls) > 1:
            raise OSError(5, "Input/output error")
        replace(source, target)

    monkeypatch.setattr(os, "replace", refuse)
    with pytest.raises(OSError, match="Input/output"):
        write_dossier(folder, {"record.json": b"changed"}, {})
    kept = [p.read_bytes() for p in tmp_path.rglob("record.json")]
    assert kept == [b"{}\n"]


@pytest.mark.parametrize("change", ["altered", "added", "link"])
def test_what_a_person_changed_is_not_overwritten(change, tmp_path):
    folder = tmp_path / "out"
    write_dossier(folder, {"record.json": b"{}\n"}, {})
    if change == "altered":
        (folder / "record.json").write_bytes(b"mine")
    elif change == "added":
        (folder / "signed.pdf").write_bytes(b"mine")
    else:
        (folder / "signed.pdf").symlink_to(folder / "record.json")
    with pytest.raises(NotADossierError, match="choose another"):
        write_dossier(folder, {"record.json": b"theirs"}, {})
