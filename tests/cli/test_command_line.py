"""The commands as a user meets them: exit codes, messages, files written or left alone."""

import json
import os
import re
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from dossier.cli import STARTER_NAMES
from dossier.evidence.provenance import Stopwatch
from dossier.pipeline import build_evidence
from dossier.project.reader import Project, read_project
from dossier.report.locate import STARTERS, templates

ROOT = Path(__file__).parents[2]
FAULTS = ROOT / "tests" / "faults"

TINY = """\
dossier: 1
document: {number: SD-1, title: "One lag", revision: A, date: 2026-12-01, machine: bench,
           organisation: Tarn Lane Automation, scope: "the model as written"}
models:
  lag:
    title: "One lag"
    basis: "Invented"
    time: continuous
    states: {x: {unit: m, meaning: "position"}}
    parameters: {r: {value: 2, unit: 1/s, meaning: "rate"}}
    equations: {x: "-r*x"}
operating_points:
  rest:
    model: lag
    equilibrium: {at: {x: 0}}
    search: {x: [-1, 1]}
    region: {x: [-0.1, 0.1]}
    criteria:
      C1: {claim: asymptotic_stability}
"""
UNSTABLE = TINY.replace("-r*x", "r*x")
ESCAPE = "\x1b"


def dossier(*arguments, code=None, environment=None, cwd=None) -> subprocess.CompletedProcess:
    """Run the command in a process of its own, its output no terminal."""
    command = [sys.executable, "-c", code, *arguments] if code else [sys.executable, "-m", "dossier", *arguments]
    return subprocess.run(
        [str(c) for c in command], capture_output=True, text=True, check=False, cwd=cwd or ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT), **(environment or {})},
    )  # fmt: skip


def without(module: str) -> str:
    """A program that runs the command where `module` cannot be imported."""
    return f"import sys; sys.modules[{module!r}] = None; from dossier.cli import main; sys.exit(main(sys.argv[1:]))"


@pytest.fixture
def project(tmp_path):
    path = tmp_path / "project.yaml"
    path.write_text(TINY, encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def built(tmp_path_factory):
    """A finished dossier of the tiny project, and what the build said."""
    folder = tmp_path_factory.mktemp("built")
    (folder / "project.yaml").write_text(TINY, encoding="utf-8")
    return folder / "out", dossier("build", folder)


def contents(folder: Path) -> dict[str, bytes]:
    return {p.relative_to(folder).as_posix(): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


def test_everything_proved_is_exit_code_zero_with_plain_lines(built):
    folder, done = built
    assert done.returncode == 0, done.stderr
    assert ESCAPE not in done.stdout + done.stderr
    assert re.search(r"rest\.C1 +asymptotic_stability +nominal +proved +exact", done.stdout)
    assert "1 proved" in done.stdout and str(folder / "dossier.pdf") in done.stdout
    assert {"dossier.html", "dossier.pdf", "record.json", "model.json", "MANIFEST.sha256"} <= contents(folder).keys()
    assert "rest: search" in done.stderr and "Traceback" not in done.stderr


def test_something_refuted_is_exit_code_one_and_is_named(project):
    project.write_text(UNSTABLE, encoding="utf-8")
    done = dossier("build", project)
    assert done.returncode == 1
    assert "rest.C1: " in done.stdout and "1 refuted" in done.stdout


@pytest.mark.parametrize("name", sorted(p.name for p in FAULTS.glob("*.yaml") if p.name != "sound.yaml"))
def test_a_faulty_file_is_exit_code_two_and_nothing_is_written(name, tmp_path):
    shutil.copy(FAULTS / name, tmp_path / "project.yaml")
    done = dossier("build", tmp_path / "project.yaml")
    assert done.returncode == 2
    assert "Traceback" not in done.stderr and done.stdout == ""
    places = re.findall(r"^project\.yaml:[0-9]+:[0-9]+: .+$", done.stderr, re.MULTILINE)
    count = int(re.search(r"([0-9]+) faults?; nothing was written", done.stderr).group(1))
    assert len(places) == count >= (10 if name == "ten_faults.yaml" else 1)
    assert done.stderr.count("    expected  ") == done.stderr.count("    hint      ") == count
    assert [p.name for p in tmp_path.iterdir()] == ["project.yaml"]


@pytest.mark.parametrize("content", [None, b"", b"\x00\xff\xfe binary", b"[" * 100_000])
def test_what_is_no_project_file_is_exit_code_two(content, tmp_path):
    path = tmp_path / "project.yaml"
    if content is not None:
        path.write_bytes(content)
    done = dossier("build", path)
    assert done.returncode == 2
    assert "Traceback" not in done.stderr and "hint" in done.stderr
    assert not (tmp_path / "out").exists()


def test_a_guess_halfway_between_two_equilibria_is_a_fault_of_the_file(project):
    """x' = r x (x - 1)(x + 1) has the equilibria -1, 0 and 1."""
    text = TINY.replace("-r*x", "r*(x - x^3/L^2)").replace('rate"}', 'rate"}, L: {value: 1, unit: m, meaning: size}')
    text = text.replace("{at: {x: 0}}", "{near: {x: 0.5}}").replace("search: {x: [-1, 1]}", "search: {x: [-2, 2]}")
    project.write_text(text, encoding="utf-8")
    done = dossier("build", project)
    assert done.returncode == 2, done.stderr
    assert re.search(r"project\.yaml:[0-9]+:[0-9]+: near of rest is about equally far from 2 equilibria", done.stderr)
    assert "x: 0.5" in done.stderr and "x = 0; x = 1" in done.stderr and "1 fault; nothing was written" in done.stderr
    assert [p.name for p in project.parent.iterdir()] == ["project.yaml"]
    project.write_text(text.replace("{x: 0.5}", "{x: 0.6}"), encoding="utf-8")
    assert dossier("build", project).returncode == 0


def test_unknown_operating_points_are_all_named_with_those_that_exist(project):
    done = dossier("build", project, "--only", "rset", "hold")
    assert done.returncode == 2
    assert all(word in done.stderr for word in ("rset", "hold", "rest"))
    assert not (project.parent / "out").exists()


def test_one_operating_point_goes_to_a_folder_of_its_own(project):
    done = dossier("build", project, "--only", "rest")
    assert done.returncode == 0
    assert (project.parent / "out-rest" / "dossier.html").is_file() and not (project.parent / "out").exists()
    again = dossier("build", project, "--only", "rest")
    assert again.returncode == 2 and "--out" in again.stderr


@pytest.mark.parametrize(
    ("prepare", "said"),
    [
        (lambda out: (out.mkdir(), (out / "thesis.txt").write_text("mine")), "choose another --out"),
        (lambda out: out.write_text("mine"), "is a file"),
        (lambda out: (out.parent / "block").write_text("mine"), "is a file"),
    ],
    ids=["a foreign folder", "a file", "below a file"],
)
def test_an_output_that_belongs_to_somebody_else_is_left_alone(prepare, said, project):
    out = project.parent / "place"
    prepare(out)
    target = project.parent / "block" / "out" if (project.parent / "block").exists() else out
    before = contents(project.parent)
    done = dossier("build", project, "--out", target)
    assert done.returncode == 2 and said in done.stderr
    assert "search" not in done.stderr, "refused before the work, not after"
    assert contents(project.parent) == before


def test_a_dossier_that_a_person_has_added_to_is_not_overwritten(built, tmp_path):
    folder = Path(shutil.copytree(built[0], tmp_path / "out"))
    (tmp_path / "project.yaml").write_text(TINY, encoding="utf-8")
    (folder / "reviewer-notes.txt").write_text("mine")
    before = contents(folder)
    done = dossier("build", tmp_path / "project.yaml")
    assert done.returncode == 2 and "reviewer-notes.txt" in done.stderr
    assert contents(folder) == before


def test_without_the_pdf_library_the_page_is_written_and_the_packages_are_named(project):
    done = dossier("build", project, code=without("weasyprint"))
    assert done.returncode == 3
    assert "libpangoft2-1.0-0" in done.stderr and "Traceback" not in done.stderr
    assert (project.parent / "out" / "dossier.html").is_file()
    assert not (project.parent / "out" / "dossier.pdf").exists()
    assert dossier("recheck", project.parent / "out").returncode == 0


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_an_interruption_leaves_the_earlier_dossier_and_nothing_half_written(number, built, tmp_path):
    folder = Path(shutil.copytree(built[0], tmp_path / "out"))
    project = tmp_path / "project.yaml"
    project.write_text(TINY, encoding="utf-8")
    before = contents(folder)
    slow = (
        "import sys, time, dossier.pipeline as p\n"
        "p.render = lambda *a: (print('now', flush=True), time.sleep(60))\n"
        "from dossier.cli import main; sys.exit(main(sys.argv[1:]))"
    )
    running = subprocess.Popen(
        [sys.executable, "-c", slow, "build", str(project)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)}, cwd=ROOT,
    )  # fmt: skip
    assert running.stdout is not None and running.stdout.readline() == "now\n"
    began = time.monotonic()
    running.send_signal(number)
    _, said = running.communicate(timeout=30)
    assert running.returncode == 3 and "interrupted" in said and "Traceback" not in said
    assert time.monotonic() - began < 20
    assert contents(folder) == before
    assert sorted(p.name for p in tmp_path.iterdir()) == ["out", "project.yaml"]


def test_a_bug_of_the_program_is_told_from_a_fault_of_the_project(project):
    broken = (
        "import sys, dossier.pipeline as p\n"
        "p.render = lambda *a: 1/0\n"
        "from dossier.cli import main; sys.exit(main(sys.argv[1:]))"
    )
    done = dossier("build", project, code=broken)
    assert done.returncode == 3
    assert "a fault of the program, not of your project" in done.stderr and "Nothing was concluded" in done.stderr
    assert not (project.parent / "out").exists()


TWO_POINTS = TINY.replace("operating_points:\n", "operating_points:\n  other:\n    model: lag\n    meaning: again\n"
    "    equilibrium: {at: {x: 0}}\n    criteria: {C1: {claim: asymptotic_stability}}\n")  # fmt: skip


def test_a_bug_in_one_operating_point_does_not_lose_the_others(tmp_path):
    (tmp_path / "project.yaml").write_text(TWO_POINTS, encoding="utf-8")
    broken = (
        "import sys, dossier.pipeline as p\n"
        "sought = p.find_claims\n"
        "def find(case, *rest):\n"
        "    if case.name == 'other': raise IndexError('a bug')\n"
        "    return sought(case, *rest)\n"
        "p.find_claims = find\n"
        "from dossier.cli import main; sys.exit(main(sys.argv[1:]))"
    )
    done = dossier("build", tmp_path / "project.yaml", code=broken)
    assert done.returncode == 3 and "Traceback" not in done.stderr
    record = json.loads((tmp_path / "out" / "record.json").read_text(encoding="utf-8"))
    points = record["operating_points"]
    assert points["rest"]["criteria"]["C1"]["verdict"] == "proved"
    assert points["other"]["criteria"]["C1"]["verdict"] == "not established"
    assert "IndexError: a bug" in " ".join(points["other"]["warnings"])
    assert "IndexError: a bug" in (tmp_path / "out" / "dossier.html").read_text(encoding="utf-8")
    assert dossier("recheck", tmp_path / "out").returncode == 0


def test_a_full_disk_leaves_the_earlier_dossier(built, tmp_path):
    folder = Path(shutil.copytree(built[0], tmp_path / "out"))
    (tmp_path / "project.yaml").write_text(TINY, encoding="utf-8")
    before = contents(folder)
    full = (
        "import sys, pathlib\n"
        "def refuse(self, data): raise OSError(28, 'No space left on device')\n"
        "pathlib.Path.write_bytes = refuse\n"
        "from dossier.cli import main; sys.exit(main(sys.argv[1:]))"
    )
    done = dossier("build", tmp_path / "project.yaml", code=full)
    assert done.returncode == 3 and "No space left" in done.stderr and "Traceback" not in done.stderr
    assert contents(folder) == before
    assert sorted(p.name for p in tmp_path.iterdir()) == ["out", "project.yaml"]


def test_a_second_build_elsewhere_under_another_hash_seed_gives_the_same_bytes(built, tmp_path):
    (tmp_path / "deep" / "er").mkdir(parents=True)
    (tmp_path / "deep" / "er" / "project.yaml").write_text(TINY, encoding="utf-8")
    done = dossier(
        "build", tmp_path / "deep" / "er", cwd=tmp_path, environment={"PYTHONHASHSEED": "4711", "COLUMNS": "43"}
    )
    assert done.returncode == 0
    first, second = contents(built[0]), contents(tmp_path / "deep" / "er" / "out")
    assert first.keys() == second.keys()
    assert [n for n in first if first[n] != second[n]] == ["run.json"]


def test_inspect_shows_the_model_in_si_and_writes_nothing(project):
    done = dossier("inspect", project)
    assert done.returncode == 0
    assert "operating point rest" in done.stdout and "dx/dt = " in done.stdout and "r = 2" in done.stdout
    assert [p.name for p in project.parent.iterdir()] == ["project.yaml"]


def test_inspect_of_a_faulty_file_is_exit_code_two():
    done = dossier("inspect", FAULTS / "ten_faults.yaml")
    assert done.returncode == 2 and done.stdout == ""


def test_recheck_verifies_what_was_built(built):
    done = dossier("recheck", built[0])
    assert done.returncode == 0
    assert "verified  rest" in done.stdout and "was verified again" in done.stdout


@pytest.mark.parametrize("damage", ["record.json", "project/project.yaml", "MANIFEST.sha256", None])
def test_recheck_of_what_is_no_whole_dossier_is_exit_code_four(damage, built, tmp_path):
    folder = tmp_path / "out"
    if damage is not None:
        shutil.copytree(built[0], folder)
        (folder / damage).unlink()
    done = dossier("recheck", folder)
    assert done.returncode == 4
    assert "refused" in done.stdout and "Traceback" not in done.stderr


@pytest.mark.parametrize("about", STARTERS)
def test_every_starter_is_understood_and_all_it_asks_is_proved(tmp_path, about):
    assert dossier("new", tmp_path / about, "--about", about).returncode == 0
    project = read_project(tmp_path / about / "project.yaml")
    assert isinstance(project, Project) and project.warnings == ()
    evidence = build_evidence(project, project.cases, "quick", "", lambda *_: None, Stopwatch())
    verdicts = {o.identifier: o.verdict for p in evidence.points for o in p.outcomes}
    assert set(verdicts.values()) == {"proved"}, verdicts


def test_the_help_names_the_starters_there_are():
    assert STARTER_NAMES == STARTERS
    assert sorted(f"{n}.yaml" for n in STARTERS) == sorted(p.name for p in (templates() / "starters").iterdir())


def test_a_new_project_is_sound_and_proves_what_it_asks_for(tmp_path):
    folder = tmp_path / "axis"
    done = dossier("new", folder)
    assert done.returncode == 0 and str(folder / "project.yaml") in done.stdout
    inspected = dossier("inspect", folder)
    assert inspected.returncode == 0 and "warning" not in inspected.stdout
    assert dossier("build", folder, "--effort", "quick").returncode == 0
    before = (folder / "project.yaml").read_bytes()
    again = dossier("new", folder)
    assert again.returncode == 2 and "exists already" in again.stderr
    assert (folder / "project.yaml").read_bytes() == before


def test_a_new_project_is_refused_where_no_folder_can_be_made(tmp_path):
    (tmp_path / "file").write_text("mine")
    for place in (tmp_path / "file", tmp_path / "file" / "below"):
        done = dossier("new", place)
        assert done.returncode == 2 and "Traceback" not in done.stderr
    assert (tmp_path / "file").read_text() == "mine"


def test_the_schema_names_every_field_and_claim():
    """JSON Schema, draft 2020-12: https://json-schema.org/draft/2020-12/schema."""
    done = dossier("schema")
    schema = json.loads(done.stdout)
    assert done.returncode == 0 and schema["$schema"].endswith("2020-12/schema")
    assert {"dossier", "document", "models", "operating_points"} <= set(schema["required"])
    claims = schema["$defs"]["CriterionEntry"]["properties"]["claim"]["enum"]
    assert {"attraction", "decay_rate", "ultimate_bound"} <= set(claims)
    assert schema["additionalProperties"] is False


def test_a_reader_who_stops_reading_is_no_fault(project):
    program = f"{sys.executable} -m dossier inspect {project} | head -n 1"
    done = subprocess.run(
        ["bash", "-c", program], capture_output=True, text=True, check=False, cwd=ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT), "PYTHONUNBUFFERED": "1"},
    )  # fmt: skip
    assert "Traceback" not in done.stderr and "fault of the program" not in done.stderr


def test_help_and_version_say_what_the_program_is():
    said = dossier("--help")
    assert said.returncode == 0
    assert all(
        word in said.stdout for word in ("build", "inspect", "recheck", "new", "schema", "does not certify a machine")
    )
    assert re.fullmatch(r"dossier [0-9]+\.[0-9]+\S*\n", dossier("--version").stdout)
    assert dossier().returncode == dossier("prove").returncode == 2
