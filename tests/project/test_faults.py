"""Faulty project files: each fault is told with file, line, column, offending text, what was expected and a hint.

All files are constructed from `sound.yaml` by one slip, `ten_faults.yaml` by ten.
"""

from pathlib import Path
from typing import NamedTuple

import pytest

from dossier.project.reader import LARGEST_FILE, Faults, Project, read_project

FOLDER = Path(__file__).parent.parent / "faults"


class Told(NamedTuple):
    line: int
    column: int
    text: str
    message: str
    expected: str
    hint: str


ONE_FAULT = {
    "undefined_symbol": Told(17, 36, "vel", "vel is not defined", "one of x, v, m, k, b, u", ""),
    "unknown_key": Told(22, 5, "equilibrum", "not a field", "equilibrium", "did you mean equilibrium?"),
    "duplicate_key": Told(24, 5, "region", "given twice", "each key once", "the first is on line 23"),
    "dimension_in_a_term": Told(17, 32, "- b*x", "different dimensions", "N, as in u", "the unit of b*x does not fit"),
    "literal_with_a_missing_unit": Told(
        16, 23, "3", "different dimensions", "N, as in -k*x", "declare a parameter in N"
    ),
    "unit_hertz": Told(26, 43, "Hz", "unknown unit Hz", "a known unit", "rates take 1/s"),
    "unit_of_another_kind": Told(13, 20, "kN*m", "does not fit", "a quantity in N/m", "kN*m measures N*m"),
    "empty_range": Told(12, 39, "[3, 1]", "the range is empty", "the smaller bound first", "write [1, 3]"),
    "point_outside_the_domain": Told(22, 29, "1.2", "outside the domain", "[-1, 1]", "correct the operating point"),
    "region_without_zero": Told(23, 18, "[0.05, 0.1]", "does not hold 0", "both sides of 0", "offsets, not absolute"),
    "signals_in_a_circle": Told(16, 16, "-k*x + w", "in a circle: u, w", "earlier signals", "algebraic loop"),
    "bad_number": Told(14, 19, "40,5", "not a number", "a number", "the decimal sign is a point"),
    "missing_sample_interval": Told(7, 11, "sampled", "needs its sample_interval", "sample_interval: Ts", "in s"),
    "denominator_always_zero": Told(17, 40, "m*(1 - cos(0*x))", "becomes 0", "other than 0", "correct"),
    "loop_is_no_command": Told(26, 38, "x", "not a signal", "role: command, such as u", ""),
    "custom_tag": Told(5, 12, "tag:yaml.org,2002:python/name:os.system", "tags are not", "plain", "remove the tag"),
    "unused_parameter": Told(14, 7, "c", "is not used", "a formula that uses it", "remove it"),
    "formula_syntax": Told(17, 36, "v", "not expected here", "an operator", "write * between two factors"),
    "missing_field": Told(4, 3, "cart", "the field basis is missing", "where the equations come from", "add basis"),
    "celsius_difference": Told(24, 23, "degC", "absolute temperatures", "K", "offsets and tolerances take K"),
    "not_yaml": Told(18, 23, "domain: {x: [-1, 1}", "not YAML", "YAML", "brackets"),
}


def faults_of(name: str) -> Faults:
    result = read_project(FOLDER / f"{name}.yaml")
    assert isinstance(result, Faults)
    return result


def test_the_file_all_others_are_made_from_is_sound() -> None:
    result = read_project(FOLDER / "sound.yaml")
    assert isinstance(result, Project)
    assert all("no scope" in w or "no meaning" in w for w in result.warnings)


@pytest.mark.parametrize("name", ONE_FAULT)
def test_one_slip_is_told_once_with_its_place_and_what_to_do(name: str) -> None:
    (fault,) = faults_of(name).faults
    told = ONE_FAULT[name]
    assert (fault.file, fault.line, fault.column, fault.text) == (f"{name}.yaml", told.line, told.column, told.text)
    assert told.message in fault.message
    assert told.expected in fault.expected
    assert told.hint in fault.hint


def test_the_place_is_where_the_offending_text_stands() -> None:
    for name in ONE_FAULT.keys() - {"custom_tag", "empty_range", "region_without_zero", "not_yaml"}:
        (fault,) = faults_of(name).faults
        line = (FOLDER / f"{name}.yaml").read_text().splitlines()[fault.line - 1]
        quoted = line[fault.column - 1] in "\"'"
        assert line[fault.column - 1 + quoted :].startswith(fault.text)


def test_ten_faults_are_told_together_in_order() -> None:
    faults = faults_of("ten_faults").faults
    assert [(f.line, f.column, f.text) for f in faults] == [
        (2, 55, "30.11.2026"),
        (5, 5, "titel"),
        (10, 17, "mps"),
        (12, 42, "-5 %"),
        (13, 24, "kN/m2"),
        (16, 38, "comand"),
        (17, 21, "vv"),
        (23, 14, "z"),
        (24, 18, "[0.5, -0.5]"),
        (26, 52, "40"),
    ]
    assert all(f.message and f.expected for f in faults)


def test_fields_of_later_versions_are_refused_by_name() -> None:
    include, candidate = faults_of("reserved_fields").faults
    assert (include.line, include.column, include.text) == (1, 1, "include")
    assert candidate.text == "candidate"
    assert all("not supported by this version" in f.message for f in (include, candidate))


def test_a_missing_file_is_a_fault_not_an_exception(tmp_path: Path) -> None:
    result = read_project(tmp_path / "nowhere.yaml")
    assert isinstance(result, Faults)
    assert "cannot be read" in result.faults[0].message


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "no table"),
        (b"- 1\n- 2\n", "no table"),
        (b"dossier: \xff\n", "not UTF-8"),
        (b"a: \x00b\n", "character"),
        (b"#" * (LARGEST_FILE + 1), "bytes"),
        (b"a: " + b"[" * 5000 + b"]" * 5000, "nested too deeply"),
        (b"a: &a [x, *a]\n", "aliases expand without bound"),
        (b"\n".join([b"l0: &l0 [x, x]"] + [b"l%d: &l%d [%s]" % (i, i, b",".join([b"*l%d" % (i - 1)] * 9)) for i in
                    range(1, 9)]), "aliases expand without bound"),
        (b"a: *nowhere\n", "not YAML"),
        (b"a: 1\n\tb: 2\n", "not YAML"),
        (b"? [1, 2]\n: 3\n", "a key must be one word"),
        (b"--- 1\n--- 2\n", "not YAML"),
    ],
)  # fmt: skip
def test_hostile_or_broken_files_end_in_a_fault(tmp_path: Path, content: bytes, message: str) -> None:
    path = tmp_path / "project.yaml"
    path.write_bytes(content)
    result = read_project(path)
    assert isinstance(result, Faults)
    assert any(message in f.message for f in result.faults)
