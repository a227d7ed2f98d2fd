"""The constructed dossier and its papers, made once for all tests of the report."""

from __future__ import annotations

from dataclasses import replace

import pytest
from sample_evidence import sample_evidence

from dossier.model.dossier import Evidence
from dossier.report.blocks import Paper
from dossier.report.content import paper_of
from dossier.report.render import Rendered, render

ATTACHMENTS = (
    ("record.json", b'{"record": 1}\n', "application/json"),
    ("certificates/bottom_hold.V2.json", b'{"kind": "gram"}\n', "application/json"),
    ("project/press.yaml", b"dossier: 1\n", "application/yaml"),
)


@pytest.fixture(scope="session")
def evidence() -> Evidence:
    return sample_evidence()


@pytest.fixture(scope="session")
def paper(evidence: Evidence) -> Paper:
    return paper_of(evidence, {})


@pytest.fixture(scope="session")
def rendered(evidence: Evidence) -> Rendered:
    return render(evidence, ATTACHMENTS)


@pytest.fixture(scope="session")
def small(evidence: Evidence) -> Evidence:
    """Only the operating point that has no equilibrium: few pages."""
    return replace(evidence, points=evidence.points[2:])
