"""Imports flow one way, a library is seen where it is needed, and what proves loads nothing that searches."""

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from importlinter.cli import lint_imports

ROOT = Path(__file__).parents[2]
PACKAGE = ROOT / "dossier"
MODULES = {p.relative_to(ROOT).as_posix(): p for p in sorted(PACKAGE.rglob("*.py"))}

SEEN_BY = {
    "cvxpy": ("dossier/search/",),
    "clarabel": ("dossier/search/solver_process.py",),
    "scs": ("dossier/search/solver_process.py",),
    "scipy": ("dossier/search/",),
    "sympy": (),
    "weasyprint": ("dossier/report/pdf.py",),
    "pikepdf": ("dossier/report/",),
    "pyhanko": (),
    "contourpy": ("dossier/report/plots/",),
    "fontTools": ("dossier/report/",),
    "uharfbuzz": ("dossier/report/",),
    "jinja2": ("dossier/report/",),
    "markupsafe": ("dossier/report/",),
    "pydyf": ("dossier/report/",),
    "mathra": ("dossier/report/",),
    "yaml": ("dossier/project/",),
    "pint": ("dossier/project/",),
    "pydantic": ("dossier/project/",),
    "pydantic_core": ("dossier/project/",),
    "flint": ("dossier/model/", "dossier/checks/", "dossier/search/", "dossier/project/"),
    "numpy": ("dossier/checks/", "dossier/search/", "dossier/report/plots/"),
    "rich": ("dossier/terminal.py",),
    "tempfile": ("dossier/evidence/store.py",),
    "shutil": ("dossier/evidence/store.py",),
    "time": ("dossier/evidence/provenance.py", "dossier/search/conic.py"),
}
"""Libraries and where they may be imported; `time` in `conic` fills the run log and tells a solver that hangs."""

NOWHERE = ("importlib.import_module", "__import__", "eval", "exec", "pickle", "random", "socket", "urllib.request")
"""What would hide an import, run text as code, depend on chance or reach for a network."""


def imported(path: Path) -> Iterator[str]:
    """Full names of everything a module imports, at any depth."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (a.name for a in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield from (f"{node.module}.{a.name}" for a in node.names)


def called(path: Path) -> Iterator[str]:
    """Dotted names of everything a module calls."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Call):
            yield ast.unparse(node.func)


@pytest.mark.parametrize("library", SEEN_BY)
def test_a_library_is_imported_only_where_it_belongs(library):
    users = [n for n, p in MODULES.items() if any(i.partition(".")[0] == library for i in imported(p))]
    assert [u for u in users if not u.startswith(SEEN_BY[library] or "nowhere")] == []


def test_every_library_that_is_imported_has_its_place():
    known = {*SEEN_BY, *sys.stdlib_module_names, "dossier"}
    unknown = {i.partition(".")[0] for p in MODULES.values() for i in imported(p)} - known
    assert unknown == set()


def test_nothing_hides_an_import_or_runs_text_as_code():
    for name, path in MODULES.items():
        modules = {i for i in imported(path) if i in NOWHERE or i.partition(".")[0] in NOWHERE}
        assert modules | {c for c in called(path) if c in NOWHERE} == set(), name


def test_only_the_store_writes_files():
    writing = ("write_text", "write_bytes", "mkdir", "unlink", "rename", "replace_file", "touch", "symlink_to", "rmdir")
    for name, path in MODULES.items():
        found = {c for c in called(path) if c.rpartition(".")[2] in writing or c in ("open", "os.replace", "os.remove")}
        assert found == set() or name == "dossier/evidence/store.py", (name, found)


def test_no_module_asks_for_the_date():
    asking = ("now", "today", "utcnow")
    for name, path in MODULES.items():
        assert [c for c in called(path) if c.rpartition(".")[2] in asking] == [], name


def test_the_import_contracts_of_the_project_hold(monkeypatch, capsys):
    monkeypatch.chdir(ROOT)
    monkeypatch.setattr(sys, "path", [str(ROOT), *sys.path])
    code = lint_imports(no_cache=True, no_logo=True)
    assert code == 0, capsys.readouterr().out


def loaded(statement: str) -> set[str]:
    """Names of the modules that a fresh interpreter holds after `statement`."""
    program = f"{statement}\nimport sys\nprint(*(n for n, m in sys.modules.items() if m is not None))"
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True, cwd=ROOT)
    return set(done.stdout.split())


def test_the_package_itself_loads_nothing():
    assert {n for n in loaded("import dossier") if n.startswith("dossier")} == {"dossier"}


def test_the_exact_checker_and_the_model_load_no_numerics_and_no_solver():
    model = [n.removesuffix(".py").replace("/", ".") for n in MODULES if n.startswith("dossier/model/")]
    names = loaded("import dossier.checks.exact, " + ", ".join(m.removesuffix(".__init__") for m in model))
    assert "flint" in names and "dossier.checks.exact" in names and "dossier.model.polynomial" in names
    tops = {n.partition(".")[0] for n in names}
    assert tops & {"numpy", "scipy", "cvxpy", "clarabel", "scs", "sympy", "weasyprint", "yaml", "pint"} == set()
    assert {n for n in names if n.startswith("dossier.")} <= {
        "dossier.checks", "dossier.checks.exact", "dossier.model", *model,
    }  # fmt: skip


def test_recheck_runs_without_any_search_solver_or_paper(small_dossiers):
    """Not even by way of a library that would use scipy if it could."""
    folder = str(small_dossiers["hold"])
    names = loaded(
        f"import os; from dossier.cli import main; code = main(['recheck', {folder!r}]); os.close(1) if code else None"
    )
    assert {"dossier.recheck", "dossier.checks.assess", "pint"} <= names
    assert {n.partition(".")[0] for n in names} & {"cvxpy", "clarabel", "scs", "scipy", "sympy", "weasyprint"} == set()
    assert {n for n in names if n.startswith(("dossier.search", "dossier.pipeline"))} == set()


def test_what_a_recheck_keeps_out_of_reach_is_in_reach_again_afterwards(small_dossiers):
    folder = str(small_dossiers["rest"])
    names = loaded(f"from dossier.cli import main; main(['recheck', {folder!r}]); import scipy.linalg")
    assert "scipy.linalg" in names
