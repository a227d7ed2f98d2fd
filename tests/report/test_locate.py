"""Templates are found in a wheel and in a source tree."""

from __future__ import annotations

from pathlib import Path

import pytest

from dossier.report import locate


def test_the_first_folder_that_has_the_entry_template_is_taken(tmp_path: Path) -> None:
    wheel, source = tmp_path / "_templates", tmp_path / "templates"
    source.mkdir()
    (source / locate.ENTRY).touch()
    assert locate.templates((wheel, source)) == source
    wheel.mkdir()
    (wheel / locate.ENTRY).touch()
    assert locate.templates((wheel, source)) == wheel


def test_missing_templates_are_an_error_that_names_both_places(tmp_path: Path) -> None:
    with pytest.raises(FileNotFoundError, match=r"_templates and .*templates"):
        locate.templates((tmp_path / "_templates", tmp_path / "templates"))
