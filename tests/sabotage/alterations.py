"""The eight systematic alterations of a certificate file, each as a list of damaged copies of its data."""

import re
from collections.abc import Callable, Iterator
from copy import deepcopy
from fractions import Fraction

NUMBER = re.compile(r"-?[0-9]+(/[0-9]+)?")
NAMES = ("identifier", "model_hash", "over", "theorem", "kind", "equilibrium", "loop", "method", "region", "names")
"""Fields of a claim that hold no numbers."""

Path = tuple
Data = dict


def numbers(data, path: Path = ()) -> Iterator[Path]:
    """Paths to every number of a claim that is written as text."""
    if isinstance(data, str) and NUMBER.fullmatch(data):
        yield path
    children = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    for key, value in children:
        if key not in NAMES:
            yield from numbers(value, (*path, key))


def at(data, path: Path):
    """The part of `data` at `path`."""
    for key in path:
        data = data[key]
    return data


def put(data, path: Path, value) -> None:
    """Replace the part of `data` at `path`."""
    at(data, path[:-1])[path[-1]] = value


def some(paths: list[Path]) -> list[Path]:
    """The first and the last."""
    return [paths[0], paths[-1]]


def _edited(file: Data, paths: list[Path], change: Callable[[str], str]) -> Iterator[Data]:
    for path in paths:
        copy = deepcopy(file)
        put(copy["claim"], path, change(at(copy["claim"], path)))
        yield copy


def _other_digit(text: str) -> str:
    top, _, bottom = text.partition("/")
    changed = top[:-1] + str((int(top[-1]) + 1) % 10)
    return str(Fraction(f"{changed}/{bottom}" if bottom else changed))


def _negated(text: str) -> str:
    return str(-Fraction(text))


def _wider(side: list) -> list:
    return [str(2 * Fraction(side[0]) - Fraction(side[1])), side[1]]


def digit(file: Data) -> Iterator[Data]:
    """The last digit of a numerator."""
    yield from _edited(file, some(list(numbers(file["claim"]))), _other_digit)


def sign(file: Data) -> Iterator[Data]:
    """The sign of a number that is not zero."""
    paths = [p for p in numbers(file["claim"]) if Fraction(at(file["claim"], p))]
    yield from _edited(file, some(paths), _negated)


def level(file: Data) -> Iterator[Data]:
    """How much is claimed: the level of a set or of an inequality, the count of a list."""
    claim = file["claim"]
    if "level" in claim:
        yield from _edited(file, [("level",)], lambda text: str(Fraction(text) * Fraction(1001, 1000)))
    for field in ("inside", "outside", "boundary", "boxes"):
        if field in claim:
            copy = deepcopy(file)
            copy["claim"][field] += 1
            yield copy
    for field in ("solutions", "gain_crossings", "phase_crossings", "peak_candidates"):
        if field in claim:
            copy = deepcopy(file)
            copy["claim"][field].pop()
            yield copy


def dropped_premise(file: Data) -> Iterator[Data]:
    """One premise less in each check, one check less."""
    for check in range(len(file["checks"])):
        copy = deepcopy(file)
        copy["checks"][check]["premises"].pop()
        yield copy
    copy = deepcopy(file)
    copy["checks"].pop()
    yield copy


def swapped_model(file: Data) -> Iterator[Data]:
    """The hash of another closed loop."""
    copy = deepcopy(file)
    copy["claim"]["model_hash"] = copy["claim"]["model_hash"][::-1]
    yield copy


def widened_region(file: Data) -> Iterator[Data]:
    """Search box, uniqueness box, parameter box, isolating interval: one side further out."""
    claim = file["claim"]
    paths = [("search", "sides", 0), ("solutions", 0, "uniqueness", "sides", 0), ("cells", 0, "parameters", "sides", 0)]
    if claim.get("around"):
        paths.append(("around", "sides", 0))
    if claim.get("parameters", {}).get("sides"):
        paths.append(("parameters", "sides", 0))
    for path in paths:
        if path[0] in claim:
            copy = deepcopy(file)
            put(copy["claim"], path, _wider(at(claim, path)))
            yield copy
    for field in ("gain_crossings", "phase_crossings", "peak_candidates"):
        if claim.get(field):
            copy = deepcopy(file)
            crossing = copy["claim"][field][0]
            crossing["upper"] = str(2 * Fraction(crossing["upper"]))
            yield copy


def changed_parameter(file: Data) -> Iterator[Data]:
    """A parameter box that leaves combinations out, another scope, another equilibrium, another loop."""
    claim = file["claim"]
    for path in (("parameters", "sides", 0), ("cells", 0, "parameters", "sides", 0)):
        if path[0] in claim and at(claim, path[:2]) not in ([], {}) and at(claim, path[:-1]):
            copy = deepcopy(file)
            lower, upper = map(Fraction, at(claim, path))
            put(copy["claim"], path, [str(lower), str((lower + upper) / 2)])
            yield copy
    other = {"nominal": "tolerances", "tolerances": "nominal"}[claim["over"]]
    yield {**deepcopy(file), "claim": {**deepcopy(claim), "over": other}}
    for field in ("equilibrium", "loop"):
        if field in claim:
            yield {**deepcopy(file), "claim": {**deepcopy(claim), field: claim[field] + "2"}}


def reordered_monomials(file: Data) -> Iterator[Data]:
    """Coefficients, monomials, rows or states in another order."""
    claim = file["claim"]
    paths = [("function",), ("polynomial",), ("open_loop",), ("closed_loop",), ("array",), ("cells", 0, "matrix")]
    paths += [("decrease", 0, "main", "basis"), ("decrease",), ("search", "sides"), ("cells", 0, "decrease")]
    for path in paths:
        found = at(claim, path) if path[0] in claim and path[-1] in at(claim, path[:-1]) else []
        if found != found[::-1]:
            copy = deepcopy(file)
            put(copy["claim"], path, found[::-1])
            yield copy
    if "function" in claim:
        copy = deepcopy(file)
        copy["claim"]["function"] = sorted([e[::-1], c] for e, c in claim["function"])
        yield copy


ALTERATIONS = {
    f.__name__: f
    for f in (
        digit, sign, level, dropped_premise, swapped_model, widened_region, changed_parameter, reordered_monomials,
    )
}  # fmt: skip
