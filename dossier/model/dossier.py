"""The whole evidence of one build: what the report says and the record keeps.

Frozen values only; everything printed is taken from here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from dossier.model.attempt import Attempt
from dossier.model.case import Assumption, Case
from dossier.model.claim import Claim
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Finding
from dossier.model.outcome import LoopMargins, Outcome


@dataclass(frozen=True, slots=True)
class SignOffRole:
    """One row of the sign-off block; decision, date and signature are never filled by the program."""

    role: str
    name: str
    duty: str


@dataclass(frozen=True, slots=True)
class Document:
    """Title-block data (field names after ISO 7200 where they fit), as stated by the engineer."""

    number: str
    title: str
    revision: str
    date: str
    machine: str
    organisation: str
    scope: str
    standards: tuple[str, ...]
    sign_off: tuple[SignOffRole, ...]


@dataclass(frozen=True, slots=True)
class Trajectory:
    """A floating-point motion for a figure: times in s (sample index x interval) and offsets per state."""

    times: tuple[float, ...]
    offsets: tuple[tuple[float, ...], ...]


@dataclass(frozen=True, slots=True)
class Campaign:
    """A simulation campaign that tried to refute: plan, counts and extremes; it never proves anything."""

    identifier: str
    method: str
    plan: str
    seed: int
    motions: int
    violations: int
    inconclusive: int
    horizon: str
    confidence: str
    extremes: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    worst: str = ""


@dataclass(frozen=True, slots=True)
class FigureData:
    """Floating-point data of one figure of an operating point; for looking at, never evidence.

    `plane` are the two state names drawn; `flow` samples (x, y, dx, dy) in offsets;
    the proved set is drawn from the claim itself.  `responses` holds, per loop, the open loop as
    (angular frequency in rad/s, real part, imaginary part).
    """

    plane: tuple[str, str]
    trajectories: tuple[Trajectory, ...]
    flow: tuple[tuple[float, float, float, float], ...]
    responses: tuple[tuple[str, tuple[tuple[float, float, float], ...]], ...] = ()


@dataclass(frozen=True, slots=True)
class PointEvidence:
    """Everything established about one operating point."""

    case: Case
    model_hash: str
    equilibria: tuple[Equilibrium, ...]
    equilibria_complete: bool
    clusters: tuple[str, ...]
    claims: tuple[Claim, ...]
    findings: tuple[Finding, ...]
    attempts: tuple[Attempt, ...]
    outcomes: tuple[Outcome, ...]
    margins: tuple[LoopMargins, ...]
    campaign: Campaign | None
    figure: FigureData | None
    warnings: tuple[str, ...] = ()

    @property
    def chosen(self) -> Equilibrium | None:
        """The equilibrium the operating point stands for."""
        return next((e for e in self.equilibria if e.chosen), None)


@dataclass(frozen=True, slots=True)
class Component:
    """One program part or library: version, role, and (for the trusted core) size in lines and hash."""

    name: str
    version: str
    role: str
    lines: int = 0
    sha256: str = ""


@dataclass(frozen=True, slots=True)
class Provenance:
    """How to reproduce the build; no clock, host or path enters the hashed output."""

    program_version: str
    project_sha256: str
    command: str
    effort: str
    components: tuple[Component, ...]
    self_tests: tuple[tuple[str, str, str, bool], ...] = ()


@dataclass(frozen=True, slots=True)
class Evidence:
    """One build of one project."""

    document: Document
    assumptions: tuple[Assumption, ...]
    points: tuple[PointEvidence, ...]
    provenance: Provenance
    project_files: tuple[tuple[str, str], ...] = ()
    """Relative name and SHA-256 of the project file and its includes."""
    warnings: tuple[str, ...] = ()
    """What the reading of the project file remarked, with file, line and column."""
