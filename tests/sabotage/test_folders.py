"""A folder that is not as a build left it is refused, whatever was put into it; never with a traceback."""

import json
import os
import random
import shutil
from pathlib import Path

import pytest
from altered import make_manifest_true, rechecked, refusals
from small_dossier import read

from dossier.evidence.store import MANIFEST, manifest_text
from dossier.exits import REFUSED
from dossier.model.text import canonical

JSON_FILES = ("record.json", "model.json", "certificates/rest.P-C1.json")
READ_FILES = (*JSON_FILES, "project/project.yaml")
"""Every kind of file that recheck reads."""


def test_a_missing_manifest_is_refused(damaged, capsys):
    folder = damaged("rest")
    (folder / MANIFEST).unlink()
    assert f"manifest: {MANIFEST}: cannot be read (FileNotFoundError)" in refusals(folder, capsys)


def test_a_manifest_that_is_no_text_is_refused(damaged, capsys):
    folder = damaged("rest")
    (folder / MANIFEST).write_bytes(b"\xff\xfe\x00")
    assert f"manifest: {MANIFEST}: cannot be read (UnicodeDecodeError)" in refusals(folder, capsys)


@pytest.mark.parametrize("name", READ_FILES)
def test_a_changed_file_is_refused_by_the_manifest(name, damaged, capsys):
    folder = damaged("rest")
    (folder / name).write_bytes((folder / name).read_bytes() + b"\n")
    assert f"manifest: {name}: content differs from the manifest" in refusals(folder, capsys)


def test_a_file_the_manifest_lists_but_is_not_there_is_refused(damaged, capsys):
    folder = damaged("rest")
    (folder / "dossier.html").unlink()
    lines = refusals(folder, capsys)
    assert "manifest: dossier.html: listed in the manifest but missing" in lines
    assert "dossier.html: missing" in lines


@pytest.mark.parametrize("name", ["notes.txt", "certificates/run.json", "project/MANIFEST.sha256", "figures/a.png"])
def test_a_file_no_build_writes_is_refused_with_and_without_the_manifest(name, damaged, capsys):
    folder = damaged("rest")
    (folder / name).parent.mkdir(exist_ok=True)
    (folder / name).write_text("approved", encoding="utf-8")
    assert f"manifest: {name}: not listed in the manifest" in refusals(folder, capsys)
    make_manifest_true_for_all(folder)
    assert f"{name}: belongs to no part of this dossier" in refusals(folder, capsys)


def make_manifest_true_for_all(folder: Path) -> None:
    """Also for names that only the manifest and the run log at the top may bear."""
    files = {p.relative_to(folder).as_posix(): p.read_bytes() for p in folder.rglob("*") if p.is_file()}
    top = (MANIFEST, "run.json")
    (folder / MANIFEST).write_bytes(manifest_text({n: c for n, c in files.items() if n not in top}))


def test_a_manifest_with_a_line_more_is_refused(damaged, capsys):
    folder = damaged("rest")
    lines = (folder / MANIFEST).read_text(encoding="utf-8").splitlines(keepends=True)
    (folder / MANIFEST).write_text("".join([lines[0], *lines]), encoding="utf-8")
    assert f"manifest: {MANIFEST}: not one line per file in the order of their names" in refusals(folder, capsys)


@pytest.mark.parametrize("name", JSON_FILES)
@pytest.mark.parametrize("share", [0, 0.3, 0.99])
def test_truncated_json_is_refused_by_name(name, share, damaged, capsys):
    folder = damaged("rest")
    content = (folder / name).read_bytes()
    (folder / name).write_bytes(content[: int(share * len(content))])
    make_manifest_true(folder)
    assert any(line.startswith(f"{name}: cannot be read (JSONDecodeError") for line in refusals(folder, capsys))


@pytest.mark.parametrize("name", JSON_FILES)
@pytest.mark.parametrize(
    "text",
    ["[" * 100_000, '{"a":' * 100_000, "[" * 100_000 + "]" * 100_000, "1e999999999", "NaN", "1" * 5000, "null\n"],
)
def test_json_that_would_exhaust_a_reader_is_refused_by_name(name, text, damaged, capsys):
    folder = damaged("rest")
    (folder / name).write_text(text, encoding="utf-8")
    make_manifest_true(folder)
    assert any(line.startswith(f"{name}: ") for line in refusals(folder, capsys))


@pytest.mark.parametrize("number", ["1e999999999", "9" * 5000, "1/0", "0.5", "inf", "+1", " 1", "1_0", "٣"])
def test_a_number_that_is_no_plain_fraction_is_refused_at_once(number, damaged, capsys):
    folder = damaged("rest")
    data = read(folder, "certificates/rest.P-C1.json")
    data["claim"]["level"] = number
    (folder / "certificates/rest.P-C1.json").write_text(canonical(data), encoding="utf-8")
    make_manifest_true(folder)
    expected = "certificates/rest.P-C1.json: claim.level: expected a fraction"
    assert any(line.startswith(expected) for line in refusals(folder, capsys))


@pytest.mark.parametrize("name", READ_FILES)
def test_binary_garbage_is_refused_by_name(name, damaged, capsys):
    folder = damaged("rest")
    (folder / name).write_bytes(random.Random(1).randbytes(3000))
    make_manifest_true(folder)
    assert any(line.startswith(name) for line in refusals(folder, capsys))


@pytest.mark.parametrize("name", [*READ_FILES, "dossier.html", MANIFEST])
def test_a_file_that_is_a_folder_is_refused(name, damaged, capsys):
    folder = damaged("rest")
    (folder / name).unlink()
    (folder / name).mkdir()
    assert any(name in line for line in refusals(folder, capsys))


@pytest.mark.parametrize("name", [*READ_FILES, "dossier.html", MANIFEST])
def test_a_link_is_refused_by_name_even_to_the_very_same_content(name, damaged, capsys):
    folder = damaged("rest")
    elsewhere = folder.parent / "elsewhere"
    (folder / name).rename(elsewhere)
    (folder / name).symlink_to(elsewhere)
    assert refusals(folder, capsys) == [f"manifest: {name}: is a link or no plain file"]


def test_a_folder_that_is_a_link_is_refused_by_name(damaged, capsys):
    folder = damaged("rest")
    (folder / "certificates").rename(folder.parent / "elsewhere")
    (folder / "certificates").symlink_to(folder.parent / "elsewhere", target_is_directory=True)
    assert refusals(folder, capsys) == ["manifest: certificates: is a link or no plain file"]


def test_a_pipe_is_refused_and_not_waited_for(damaged, capsys):
    folder = damaged("rest")
    (folder / "certificates/rest.P-C1.json").unlink()
    os.mkfifo(folder / "certificates/rest.P-C1.json")
    assert refusals(folder, capsys) == ["manifest: certificates/rest.P-C1.json: is a link or no plain file"]


def test_an_empty_folder_and_none_at_all_are_refused(tmp_path, capsys):
    assert rechecked(tmp_path, capsys)[0] == REFUSED
    assert rechecked(tmp_path / "nowhere", capsys)[0] == REFUSED


def what_is_verified(text: bytes) -> object:
    """The content but for what searches and simulations report, which recheck says it does not repeat."""
    try:
        data = json.loads(text)
        if canonical(data).encode() != text:
            return text
        for point in data.get("operating_points", {}).values():
            for part in ("attempts", "campaign"):
                point.pop(part)
    except (ValueError, AttributeError, KeyError):
        return text
    return data


@pytest.mark.parametrize("seed", range(4))
def test_no_random_change_of_a_few_characters_passes_or_breaks_the_recheck(seed, damaged, capsys):
    """Characters of one file are replaced by others of the same file, so that many changes are still JSON."""
    chance = random.Random(seed)
    sound = damaged("rest")
    names = sorted(p.relative_to(sound).as_posix() for p in sound.rglob("*") if p.is_file())
    names = [n for n in names if n not in (MANIFEST, "run.json", "dossier.html")]
    for name in names:
        folder = Path(shutil.copytree(sound, sound.parent / f"{seed}-{Path(name).name}"))
        text = bytearray((folder / name).read_bytes())
        for _ in range(chance.choice((1, 1, 2, 5))):
            place = chance.randrange(len(text))
            text[place] = text[chance.randrange(len(text))]
        if what_is_verified(bytes(text)) != what_is_verified((sound / name).read_bytes()):
            (folder / name).write_bytes(text)
            make_manifest_true(folder)
            refusals(folder, capsys)
