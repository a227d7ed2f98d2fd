"""Models from other files of the project's folder, and nothing from anywhere else."""

import os

import pytest

from dossier.project.includes import LARGEST_FILE, MOST_FILES
from dossier.project.reader import Faults, Project, read_project

MODEL = """\
  {name}:
    title: One lag
    basis: Invented
    time: continuous
    states: {{x: {{unit: m, meaning: position}}}}
    parameters: {{r: {{value: 2, unit: 1/s, meaning: rate}}}}
    equations: {{x: "-r*x"}}
"""
PROJECT = """\
include: [{include}]
dossier: 1
document: {{number: SD-1, title: t, revision: A, date: 2026-12-01, machine: m, organisation: Tarn Lane Automation,
           scope: s}}
operating_points:
  rest:
    model: {model}
    meaning: at rest
    equilibrium: {{at: {{x: 0}}}}
    criteria: {{C1: {{claim: asymptotic_stability}}}}
"""
OTHER = "dossier: 1\nmodels:\n" + MODEL.format(name="lag")


def write(folder, include="other.yaml", model="lag", **files):
    (folder / "project.yaml").write_text(PROJECT.format(include=include, model=model), encoding="utf-8")
    for name, text in files.items():
        path = folder / name.replace("__", "/")
        path = path.with_name(path.name + ".yaml")
        path.parent.mkdir(exist_ok=True)
        path.write_text(text, encoding="utf-8")
    return read_project(folder / "project.yaml")


def messages(found) -> list[str]:
    assert isinstance(found, Faults), found
    return [f"{f.file}:{f.line}:{f.column}: {f.message}" for f in found.faults]


def test_a_model_of_an_included_file_is_used_and_the_file_belongs_to_the_project(tmp_path):
    found = write(tmp_path, other=OTHER)
    assert isinstance(found, Project), found
    assert [n for n, _ in found.files] == ["project.yaml", "other.yaml"]
    assert found.cases[0].model.name == "lag"
    before = found.sha256
    assert write(tmp_path, other=OTHER.replace("value: 2", "value: 3")).sha256 != before


def test_files_in_folders_below_and_several_files(tmp_path):
    found = write(
        tmp_path, "parts/other.yaml, more.yaml", "second", parts__other=OTHER,
        more="dossier: 1\nmodels:\n" + MODEL.format(name="second"),
    )  # fmt: skip
    assert isinstance(found, Project), found
    assert [n for n, _ in found.files][1:] == ["parts/other.yaml", "more.yaml"]


@pytest.mark.parametrize(
    ("path", "message"),
    [
        ("../other.yaml", "does not lie in the folder"),
        ("parts/../../other.yaml", "does not lie in the folder"),
        ("/etc/hostname", "does not lie in the folder"),
        ("'C:\\other.yaml'", "does not lie in the folder"),
        ("absent.yaml", "no such file"),
        (".", "does not lie in the folder"),
        ("parts", "not a file"),
        ("project.yaml", "includes itself"),
        ("'other.yaml', 'other.yaml'", "included twice"),
    ],
)
def test_nothing_is_read_from_elsewhere(tmp_path, path, message):
    folder = tmp_path / "inner"
    (folder / "parts").mkdir(parents=True)
    (tmp_path / "other.yaml").write_text(OTHER, encoding="utf-8")
    found = messages(write(folder, path, other=OTHER))
    assert any(message in m for m in found), found


def test_a_link_out_of_the_folder_is_refused(tmp_path):
    folder = tmp_path / "inner"
    folder.mkdir()
    (tmp_path / "secret.yaml").write_text(OTHER, encoding="utf-8")
    os.symlink(tmp_path / "secret.yaml", folder / "other.yaml")
    assert any("link out of the folder" in m for m in messages(write(folder)))
    os.symlink(folder / "loop.yaml", folder / "loop.yaml")
    assert any("nowhere" in m or "no such file" in m for m in messages(write(folder, "loop.yaml")))


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (OTHER.replace("-r*x", "-r*y"), "other.yaml:9:24: y is not defined"),
        (OTHER.replace("unit: 1/s", "unit: m/s"), "other.yaml:9:21: the formula has the dimension"),
        (OTHER.replace("dossier: 1\n", ""), "other.yaml:1:1: the field dossier is missing"),
        (OTHER.replace("dossier: 1", "dossier: 2"), "other.yaml:1:1: this format is not known"),
        (OTHER + "include: [project.yaml]\n", "other.yaml:10:1: an included file includes no other"),
        (OTHER + "document: {}\n", "other.yaml:10:1: document does not belong here"),
        ("dossier: 1\nmodels: none\n", "other.yaml:2:1: the file holds no table of models"),
        ("dossier: 1\n", "other.yaml:1:1: the file holds no table of models"),
        ("[1, 2]\n", "other.yaml:1:1: the file holds no table"),
        ("a: [\n", "other.yaml:2:1: not YAML"),
        (OTHER.replace("title: One lag", "title: !x One lag"), "other.yaml:4:12: tags are not allowed"),
        (OTHER.replace("    basis: Invented\n", ""), "other.yaml:3:3: the field basis is missing"),
        (OTHER.replace("basis:", "bases:"), "other.yaml:5:5: bases is not a field here"),
    ],
)
def test_a_fault_is_told_in_the_file_where_it_stands(tmp_path, text, expected):
    found = messages(write(tmp_path, other=text))
    assert any(m.startswith(expected) for m in found), found


def test_a_file_that_is_no_text_is_refused(tmp_path):
    write(tmp_path)
    (tmp_path / "other.yaml").write_bytes(b"dossier: 1\nmodels: \xff\n")
    found = messages(read_project(tmp_path / "project.yaml"))
    assert any(m.startswith("other.yaml:2:9: the file is not UTF-8 text") for m in found)


def test_a_model_that_is_defined_twice_is_a_fault(tmp_path):
    found = write(tmp_path, "other.yaml, more.yaml", other=OTHER, more=OTHER)
    assert any("more.yaml:3:3: the model lag is defined twice" in m for m in messages(found))


def test_sizes_and_numbers_are_limited(tmp_path):
    big = "#" * (LARGEST_FILE // 2) + "\n" + OTHER
    found = write(tmp_path, "other.yaml, more.yaml", other=big, more=big.replace("lag", "second"))
    assert any("bytes together" in m for m in messages(found))
    names = [f"m{k}" for k in range(MOST_FILES + 1)]
    many = {n: "dossier: 1\nmodels:\n" + MODEL.format(name=n) for n in names}
    found = write(tmp_path, ", ".join(f"{n}.yaml" for n in names), "m0", **many)
    assert any(f"more than {MOST_FILES} files" in m for m in messages(found))


@pytest.mark.parametrize("value", ["other.yaml", "{a: b}", "[[other.yaml]]"])
def test_an_include_of_another_shape_is_a_fault(tmp_path, value):
    (tmp_path / "project.yaml").write_text(
        PROJECT.format(include="X", model="lag").replace("[X]", value), encoding="utf-8"
    )
    (tmp_path / "other.yaml").write_text(OTHER, encoding="utf-8")
    assert any("is expected" in m or "stands where" in m for m in messages(read_project(tmp_path / "project.yaml")))
