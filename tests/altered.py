"""How a dossier is damaged on purpose: files rewritten, hashes made true again, and what recheck then says."""

import hashlib
import json
from collections.abc import Callable
from pathlib import Path

from dossier.checks.assess import assess
from dossier.cli import main
from dossier.evidence.record import certificate_file
from dossier.evidence.store import MANIFEST, RUN_LOG, manifest_text
from dossier.exits import PROVED, REFUSED
from dossier.model.text import canonical, claim_from_data
from dossier.project.reader import read_project
from dossier.recheck import BOXES, derive


def make_manifest_true(folder: Path) -> None:
    """A manifest that agrees with the files as they are."""
    files = {p.relative_to(folder).as_posix(): p for p in folder.rglob("*") if p.is_file()}
    content = {n: p.read_bytes() for n, p in files.items() if n not in (MANIFEST, RUN_LOG)}
    (folder / MANIFEST).write_bytes(manifest_text(content))


def rewrite(folder: Path, name: str, change: Callable[[dict], object]) -> None:
    """Apply `change` to the data of a JSON file, write it canonically and make the manifest true again."""
    data = json.loads((folder / name).read_text(encoding="utf-8"))
    change(data)
    (folder / name).write_text(canonical(data), encoding="utf-8")
    make_manifest_true(folder)


def make_links_true(folder: Path) -> None:
    """The record repeats what the certificate files now say: hash, scope, theorem, function and level."""

    def change(record: dict) -> None:
        for point in record["operating_points"].values():
            for entry in point["certificates"]:
                content = (folder / entry["file"]).read_bytes()
                entry["sha256"] = hashlib.sha256(content).hexdigest()
                claim = json.loads(content)["claim"]
                entry.update(
                    {k: claim[k] for k in ("over", "theorem", "function", "level", "kind") if k in entry and k in claim}
                )

    rewrite(folder, "record.json", change)


def make_everything_true_but_the_verdicts(folder: Path, point: str) -> dict[str, dict]:
    """All that the program would derive from the damaged certificates, under the verdicts of the sound ones.

    Returns the criteria as they would have to read.
    """
    record = json.loads((folder / "record.json").read_text(encoding="utf-8"))
    project = read_project(folder / "project" / record["project_file"])
    case = next(c for c in project.cases if c.name == point)
    entries = record["operating_points"][point]["certificates"]
    claims = tuple(
        claim_from_data(json.loads((folder / e["file"]).read_text(encoding="utf-8"))["claim"]) for e in entries
    )
    assessment = assess(case, claims, BOXES[record["effort"]])
    honest = json.loads(canonical(derive(case, assessment)))
    for claim in claims:
        text = canonical(certificate_file(claim, assessment.about_claims))
        (folder / f"certificates/{claim.identifier}.json").write_text(text, encoding="utf-8")
    stated = record["operating_points"][point]
    record["operating_points"][point] = {**honest, "criteria": stated["criteria"], "campaign": stated["campaign"]}
    (folder / "record.json").write_text(canonical(record), encoding="utf-8")
    make_manifest_true(folder)
    return honest["criteria"]


def rechecked(folder: Path, capsys) -> tuple[int, list[str]]:
    """Exit code of recheck and what it refuses, place first; never a traceback."""
    code = main(["recheck", str(folder)])
    captured = capsys.readouterr()
    lines = [line.removeprefix("refused   ") for line in captured.out.splitlines() if line.startswith("refused   ")]
    assert "Traceback" not in captured.out + captured.err
    assert code == (REFUSED if lines else PROVED), captured.out + captured.err
    assert ("Recheck refused this dossier." in captured.out) is bool(lines)
    assert all(": " in line for line in lines), captured.out
    return code, lines


def refusals(folder: Path, capsys) -> list[str]:
    """What recheck refuses; it must refuse something."""
    _, lines = rechecked(folder, capsys)
    assert lines, "nothing was refused"
    return lines
