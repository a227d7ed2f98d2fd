"""Faulty project files: each fault is told with file, line, column, offending text, what was expected and a hint.

All files are constructed from `sound.yaml` by one slip, `ten_faults.yaml` by ten.
"""

from pathlib import Path
from typing import NamedTuple

import pytest

from dossier.project.faults import GENERAL_HINT
from dossier.project.includes import LARGEST_FILE
from dossier.project.reader import Faults, Project, read_project

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
    "include_that_is_not_there": Told(
        2,
        11,
        "springs.yaml",
        "the file cannot be read: no such file",
        "a file in the folder of the project, or in a folder below it",
        "did you mean empty_range.yaml?",
    ),
    "include_from_elsewhere": Told(
        2,
        11,
        "../springs.yaml",
        "../springs.yaml does not lie in the folder of the project",
        "a file in the folder of the project, or in a folder below it",
        "write the path from the project file on, with / between fold",
    ),
    "candidate_with_a_parameter": Told(
        25, 28, "k", "k may not be used here", "one of x, v", "V is a function of the states"
    ),
    "candidate_not_zero_at_rest": Told(
        25,
        28,
        "1 + x^2 + v^2",
        "the function is not zero at the equilibrium",
        "V = 0 where all offsets are 0",
        "the states stand for offsets from the equilibrium; subtract ",
    ),
    "candidate_without_a_positive_level": Told(
        25,
        47,
        "0",
        "the level is not positive",
        "a positive number",
        "the set is where V is at most the level, around the equilibr",
    ),
    "set_of_no_parameter": Told(
        22,
        11,
        "mass",
        "mass is not a parameter of cart",
        "one of m, k, b",
        "no known name is close: check the spelling, or declare it",
    ),
    "equilibrium_stated_twice": Told(
        20,
        3,
        "rest",
        "the equilibrium is stated by at and near",
        "one of at, near, none_expected: true",
        "equilibrium: {near: {state: value}}",
    ),
    "equilibrium_without_a_state": Told(
        22, 26, "x", "near gives no value for v", "a value for every state: x, v", "add v"
    ),
    "no_equilibrium_stated": Told(
        20,
        3,
        "rest",
        "which equilibrium is meant is not stated",
        "one of at, near, none_expected: true",
        "equilibrium: {near: {state: value}}",
    ),
    "region_of_no_state": Told(
        23,
        30,
        "w",
        "w is no state, so it has no region",
        "a state: x, v",
        "only states have one: write a state of the model",
    ),
    "two_bounds_where_one_is_meant": Told(
        26,
        68,
        "1",
        "at_least and at_most are given together",
        "one of between or at_least or at_most",
        "write both bounds as between: [lower, upper]",
    ),
    "bound_missing": Told(26, 19, "decay_rate", "decay_rate needs a bound", "at_least", "add at_least"),
    "field_of_another_claim": Told(
        26, 37, "u", "attraction takes no loop", "region", "remove loop, or choose another claim"
    ),
    "claim_misspelt": Told(
        26,
        19,
        "atraction",
        "this word is not allowed here",
        "one of existence, equilibria_listed, equilibrium_value, asym",
        "did you mean attraction?",
    ),
    "contraction_of_a_continuous_model": Told(
        26,
        19,
        "contraction",
        "contraction is a claim about sampled models",
        "a claim about continuous models",
        "ask for decay_rate",
    ),
    "global_claim_in_a_domain": Told(
        26,
        19,
        "global_attraction",
        "global_attraction is about the whole state space, but the model has a domain",
        "attraction of a region, or a model without a domain",
        "ask for attraction",
    ),
    "decibel_of_a_rate": Told(
        26, 43, "dB", "the unit dB does not fit", "a quantity in 1/s", "dB is for gain margins only"
    ),
    "percentage_of_a_length": Told(
        26,
        49,
        "%",
        "a percentage is a ratio",
        "a quantity in m",
        "write it in m, or give a reserve a criterion of its own",
    ),
    "margin_without_decibel": Told(
        26, 51, "6", "a number without a unit", "a quantity in dB", "write it with its unit, such as 6 dB"
    ),
    "bounds_in_the_wrong_order": Told(
        26, 47, "[0.5, -0.5]", "the range is empty", "the smaller bound first", "write [-0.5, 0.5]"
    ),
    "one_bound_in_brackets": Told(
        26, 46, "between", "two bounds are expected here", "[lower, upper]", "write two values in brackets"
    ),
    "no_criterion": Told(
        20,
        3,
        "rest",
        "no criterion is asked for",
        "at least one criterion",
        "add one, such as criteria: {C1: {claim: asymptotic_stability",
    ),
    "disturbance_without_zero": Told(
        18,
        28,
        "[1, 2]",
        "0 lies outside the range of the disturbance w",
        "a range that holds 0",
        "put the constant part into a parameter",
    ),
    "disturbances_that_are_not_there": Told(
        26,
        56,
        "disturbances",
        "the model has no disturbances",
        "a model with disturbances",
        "declare them in the model",
    ),
    "assumption_about_nothing": Told(
        4,
        36,
        "carts",
        "carts is nothing an assumption can cover",
        "a model, an operating point or a criterion",
        "did you mean cart?",
    ),
    "date_in_words": Told(2, 55, "30 November", "this is not a date", "year-month-day", "such as 2026-11-30"),
    "tolerance_of_another_kind": Told(
        12, 44, "mm", "the unit mm does not fit", "a quantity in kg", "mm measures m, kg measures kg"
    ),
    "tolerance_and_range": Told(
        12,
        42,
        "5 %",
        "a tolerance and a range for one parameter",
        "one of the two",
        "tolerance is the spread in production, range the spread in u",
    ),
    "value_outside_its_range": Told(
        12, 18, "2", "the value lies outside its range", "a value within [3, 4]", "correct the value or the range"
    ),
    "varies_without_a_range": Told(
        12, 39, "true", "m varies but has no range", "range: [lower, upper]", "state the range within which it changes"
    ),
    "function_with_too_many_arguments": Told(16, 19, "sin", "sin takes 1 argument, not 2", "sin(x)", "write sin(x)"),
    "function_that_is_not_known": Told(
        16,
        19,
        "sgn",
        "sgn is not a function",
        "one of sin, cos, tan, asin, acos, atan, exp, log, sqrt, abs,",
        "did you mean sin?",
    ),
    "function_of_a_length": Told(
        16,
        23,
        "x",
        "the argument of sin has the dimension m",
        "a dimensionless argument",
        "divide it by a parameter of the same dimension",
    ),
    "exponent_that_is_no_number": Told(
        16,
        21,
        "v",
        "the exponent is not a number",
        "a rational number, as in x^2, x^-2 or x^(1/2)",
        "write exp(y*log(x)) for x to the power y",
    ),
    "power_with_two_stars": Told(16, 21, "*", "* is not expected here", "a number, a name or (", "write ^ for a power"),
    "bracket_not_closed": Told(16, 19, "(", "the bracket is not closed", ")", "add the closing bracket"),
    "equation_of_no_state": Told(
        17,
        43,
        "z",
        "z is not a state, so it has no equation",
        "one of x, v",
        "no known name is close: check the spelling, or declare it",
    ),
    "equation_missing": Told(
        9, 7, "x", "the state x has no equation", "equations: {x: ...}", "add the rate of change of x"
    ),
    "equation_of_the_wrong_dimension": Told(
        17,
        21,
        "x",
        "the formula has the dimension m",
        "m/s, the unit of x over s",
        "check each factor against its unit",
    ),
    "one_name_for_two_things": Told(
        15, 7, "x", "x is the name of a state already", "a name of its own", "the first is on line 9"
    ),
    "logarithm_always_undefined": Told(
        17,
        45,
        "-1 - x^2/x^2",
        "-1 - x^2/x^2 becomes 0 or negative in the domain or search box",
        "a positive value",
        "correct the formula, the values or the domain",
    ),
    "sampling_interval_of_a_continuous_model": Told(
        8,
        22,
        "m",
        "a continuous model has no sample_interval",
        "time: sampled, or no sample_interval",
        "remove the field or change time",
    ),
    "role_misspelt": Told(
        16,
        38,
        "comand",
        "this word is not allowed here",
        "one of command, measurement, internal",
        "did you mean command?",
    ),
    "table_where_a_value_is_meant": Told(
        5,
        12,
        "title",
        "a table or list stands where one value is expected",
        "one value",
        "write it on one line, in quotes where it holds a colon or br",
    ),
    "model_that_is_not_there": Told(
        21, 12, "kart", "kart is not a model of this project", "one of cart", "did you mean cart?"
    ),
    "format_of_the_future": Told(
        1,
        10,
        "2",
        "this word is not allowed here",
        "dossier: 1",
        "this version reads this format only; a later format needs a ",
    ),
    "number_with_a_thousands_sign": Told(
        14, 19, "1 000", "1 000 is not one number", "a number", "write the digits without spaces between them"
    ),
    "signal_used_as_a_state": Told(
        23,
        14,
        "u",
        "u is no state, so it has no region",
        "a state: x, v",
        "only states have one: write a state of the model",
    ),
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


_SHOWN_OTHERWISE = {
    "custom_tag", "empty_range", "region_without_zero", "not_yaml", "one_bound_in_brackets",
    "bounds_in_the_wrong_order", "disturbance_without_zero", "table_where_a_value_is_meant",
}  # fmt: skip
"""Faults that show the key, or the value in another form than it stands."""


def test_the_place_is_where_the_offending_text_stands() -> None:
    for name in ONE_FAULT.keys() - _SHOWN_OTHERWISE:
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


def test_there_are_forty_faulty_files_and_each_kind_has_a_sentence_of_its_own() -> None:
    assert len(ONE_FAULT) >= 40
    told = [faults_of(name).faults[0] for name in ONE_FAULT]
    assert all(f.message and f.expected and f.hint != GENERAL_HINT for f in told)
    assert len({f.message for f in told}) > 0.9 * len(told)


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
