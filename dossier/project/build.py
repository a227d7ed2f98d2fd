"""From the entries of a project file to the document, the assumption register and the cases."""

from __future__ import annotations

import datetime
from collections.abc import Mapping

from dossier.model.case import Assumption, Case
from dossier.model.dossier import Document, SignOffRole
from dossier.project.faults import Ledger, suggestion
from dossier.project.located import Table, Text
from dossier.project.models import read_model
from dossier.project.names import check_names
from dossier.project.points import read_point
from dossier.project.schema import SIGNATURES, AssumptionEntry, DocumentEntry, ProjectEntry


def build_project(entry: ProjectEntry, ledger: Ledger) -> tuple[Document, tuple[Assumption, ...], tuple[Case, ...]]:
    """Everything a project states; what has a fault is left out and reported in `ledger`."""
    document = _document(entry.document, ledger)
    check_names([(n, "model") for n in entry.models], ledger, in_formulas=False)
    check_names([(n, "operating point") for n in entry.operating_points], ledger, in_formulas=False)
    check_names([(n, "assumption") for n in entry.assumptions or {}], ledger, in_formulas=False)
    _check_used(entry, ledger)
    models = Table({n: read_model(n, m, ledger) for n, m in entry.models.items()})
    models.is_absent = isinstance(entry.models, Table) and entry.models.is_absent
    assumptions = tuple(_assumption(n, a, entry, ledger) for n, a in (entry.assumptions or {}).items())
    cases = [
        read_point(n, p, models, _covering(str(n), p.model, p.criteria, assumptions), ledger)
        for n, p in entry.operating_points.items()
    ]
    return document, assumptions, tuple(c for c in cases if c is not None)


def _document(entry: DocumentEntry, ledger: Ledger) -> Document:
    try:
        if not entry.date.is_absent:
            datetime.date.fromisoformat(entry.date)
    except ValueError:
        ledger.fault(entry.date, "this is not a date", expected="year-month-day", hint="such as 2026-11-30")
    if not entry.scope:
        ledger.warn(entry.number, "the document has no scope: say what the dossier covers, and what it does not")
    roles = []
    for name in SIGNATURES:
        row = None if entry.sign_off is None else getattr(entry.sign_off, name)
        if row is not None:
            roles.append(SignOffRole(name, str(row.name or ""), str(row.role or "")))
    return Document(
        str(entry.number), str(entry.title), str(entry.revision), str(entry.date), str(entry.machine),
        str(entry.organisation), str(entry.scope or ""), tuple(str(s) for s in entry.standards or ()), tuple(roles),
    )  # fmt: skip


def _check_used(entry: ProjectEntry, ledger: Ledger) -> None:
    for table, what in ((entry.models, "model"), (entry.operating_points, "operating point")):
        if not table and not (isinstance(table, Table) and table.is_absent):
            ledger.fault(entry.dossier, f"the project has no {what}", text="", expected=f"at least one {what}")
    used = {str(p.model) for p in entry.operating_points.values()}
    for name in entry.models:
        if (
            name not in used
            and entry.operating_points
            and not any(p.model.is_absent or p.model not in entry.models for p in entry.operating_points.values())
        ):
            ledger.warn(name, f"the model {name} has no operating point")


def _assumption(name: Text, entry: AssumptionEntry, project: ProjectEntry, ledger: Ledger) -> Assumption:
    known = {*project.models, *project.operating_points}
    known |= {f"{p}.{c}" for p, e in project.operating_points.items() for c in e.criteria}
    for covered in entry.covers:
        if covered not in known and not covered.is_absent:
            ledger.fault(
                covered, f"{covered} is nothing an assumption can cover",
                expected="a model, an operating point or a criterion", hint=suggestion(covered, known),
            )  # fmt: skip
    optional = (str(v or "") for v in (entry.kind, entry.owner, entry.state, entry.kept_by))
    return Assumption(
        str(name), str(entry.text), str(entry.basis), tuple(str(c) for c in entry.covers), *optional
    )  # fmt: skip


def _covering(
    point: str, model: Text, criteria: Mapping[Text, object], assumptions: tuple[Assumption, ...]
) -> tuple[str, ...]:
    """Names of the assumptions about this operating point, its model or one of its criteria."""
    about = {point, str(model), *(f"{point}.{c}" for c in criteria)}
    return tuple(a.name for a in assumptions if about & set(a.covers))
