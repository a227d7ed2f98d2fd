"""What the source tells: every module, class and public function says what it is, and nothing of how it was made."""

import ast
import re
import shutil
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
MODULES = sorted((ROOT / "dossier").rglob("*.py"))
LONGEST = 450
"""Lines of a module that can still be read in one go."""

FORBIDDEN = [
    re.compile(pattern, re.IGNORECASE)
    for pattern in (
        "/wor" + r"k\b",
        r"\bsess" + r"ions?\b",
        r"\bhelp" + r"ers?\b",
        "transc" + "ript",
        r"\blect" + r"ures?\b",
    )
]
"""Words about the making of the program, which is no business of its readers (written here in two halves)."""

ALLOWED = 'scope="sess' + 'ion"'
"""How a test library names the life of a fixture."""


def tracked() -> list[Path]:
    """The files under version control; without one, all that is not generated."""
    if git := shutil.which("git"):
        done = subprocess.run([git, "ls-files", "-z"], cwd=ROOT, capture_output=True, check=False)
        if done.returncode == 0 and done.stdout:
            return [ROOT / name for name in done.stdout.decode().split("\0") if name and (ROOT / name).is_file()]
    generated = {".git", ".venv", "__pycache__", "out", "build", "dist", ".hypothesis", ".pytest_cache", ".ruff_cache"}
    return [p for p in ROOT.rglob("*") if p.is_file() and not generated & set(p.relative_to(ROOT).parts)]


def test_no_file_speaks_of_how_it_was_made():
    files = tracked()
    assert len(files) > len(MODULES)
    for path in files:
        try:
            text = path.read_text(encoding="utf-8").replace(ALLOWED, "")
        except UnicodeDecodeError:
            continue  # fonts
        found = [m.group() for pattern in FORBIDDEN for m in pattern.finditer(f"{path.name}\n{text}")]
        assert found == [], path


def test_the_forbidden_words_are_found_where_they_stand():
    samples = ["see /wor" + "k/x", "a Sess" + "ion", "help" + "ers", "Transc" + "ripts", "the lect" + "ure"]
    assert [any(p.search(s) for p in FORBIDDEN) for s in samples] == [True] * len(samples)
    assert not any(p.search("a framework, helpful, a selection") for p in FORBIDDEN)


@pytest.mark.parametrize("path", MODULES, ids=lambda p: p.relative_to(ROOT).as_posix())
def test_a_module_and_its_public_parts_say_what_they_are(path):
    source = path.read_text(encoding="utf-8")
    tree = ast.parse(source)
    assert source.count("\n") <= LONGEST
    assert ast.get_docstring(tree), "the module"
    for node in ast.walk(tree):
        if isinstance(node, ast.ClassDef | ast.FunctionDef) and not node.name.startswith("_") and is_public(tree, node):
            assert ast.get_docstring(node), node.name


def is_public(tree: ast.Module, node: ast.AST) -> bool:
    """At the top of the module, or in a public class there."""
    classes = [c for c in tree.body if isinstance(c, ast.ClassDef) and not c.name.startswith("_")]
    return any(node in holder.body for holder in (tree, *classes))
