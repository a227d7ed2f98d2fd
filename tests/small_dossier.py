"""The small project with every kind of certificate: built once per run, one dossier per operating point."""

import json
import shutil
from dataclasses import replace
from pathlib import Path

from dossier.evidence.provenance import Stopwatch
from dossier.evidence.store import write_dossier
from dossier.model.dossier import Evidence
from dossier.pipeline import build_evidence, evidence_files
from dossier.project.reader import Project, read_project

FOLDER = Path(__file__).parent / "small"
PAPER = b"<!doctype html><title>stands for the paper, which recheck does not read</title>"


def built(path: Path, effort: str = "quick") -> tuple[Project, Evidence]:
    """The project in `path` and everything established about it, without papers."""
    project = read_project(path)
    assert isinstance(project, Project), project
    return project, build_evidence(project, project.cases, effort, "", lambda *_: None, Stopwatch())


def written(project: Project, evidence: Evidence, folder: Path) -> Path:
    """A dossier folder of `evidence` with a stand-in for the paper."""
    write_dossier(folder, {**evidence_files(project, evidence), "dossier.html": PAPER}, {})
    return folder


def dossiers(parent: Path) -> dict[str, Path]:
    """One dossier of each operating point of the small project, as ``--only`` writes them."""
    project, evidence = built(FOLDER / "project.yaml")
    return {
        p.case.name: written(project, replace(evidence, points=(p,)), parent / p.case.name) for p in evidence.points
    }


def copied(folder: Path, target: Path) -> Path:
    """A copy that a test may damage."""
    return Path(shutil.copytree(folder, target))


def read(folder: Path, name: str):
    """The data of a JSON file."""
    return json.loads((folder / name).read_text(encoding="utf-8"))
