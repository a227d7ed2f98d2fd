"""Benchmarks of the searches and proofs: run ``python -m tests.benchmarks``; figures are seconds of this machine."""

from __future__ import annotations

import sys
import time
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent))

from builders import make_case
from linear_cases import with_spread
from loop_cases import equilibrium_at, loop_case

from dossier.checks.courses import alone_on, rest_family
from dossier.checks.equilibria import check_roots, enclose_equilibria
from dossier.checks.exact import is_positive_definite
from dossier.checks.spectral import cell_holds, check_matrix
from dossier.model.region import Box, Interval
from dossier.search.effort import EFFORTS
from dossier.search.equilibria import seed_equilibria
from dossier.search.linearisation import seek_matrix

F = Fraction


def chain_of_oscillators() -> str:
    """Four double-well oscillators, weakly coupled: 8 unknowns, 3^4 = 81 equilibria."""
    equations = {}
    for k in range(4):
        left = f" + 0.05*(x{k - 1} - x{k})" if k else ""
        right = f" + 0.05*(x{k + 1} - x{k})" if k < 3 else ""
        equations |= {f"x{k}": f"v{k}", f"v{k}": f"x{k} - x{k}^3 - 0.3*v{k}{left}{right}"}
    case = make_case(equations, {}, dict.fromkeys(equations, (-3, 3)), near=[0] * 8)
    begin = time.perf_counter()
    claim = enclose_equilibria(case, seed_equilibria(case, EFFORTS["standard"]), 1_000_000)
    found = time.perf_counter()
    result = check_roots(case, claim, 1_000_000).result
    end = time.perf_counter()
    return f"{len(claim.solutions)} equilibria, list {found - begin:.2f} s, proof {end - found:.2f} s ({result})"


def decay(size: int, free: int, share: str) -> str:
    """A stable chain of lags with uncertain couplings; decay over all of them."""
    random = np.random.default_rng(size)
    names = [f"x{k}" for k in range(size)]
    parameters = {f"p{k}": "1" for k in range(free)}
    equations = {}
    for k, name in enumerate(names):
        terms = [f"-{2 + k % 3}*{name}"]
        for j in range(size):
            if j != k:
                terms.append(f"({F(int(random.integers(-4, 5)), 16)})*{names[j]}")
        terms.append(f"p{k % free}*({F(int(random.integers(-6, 7)), 8)})*{names[(k + 1) % size]}")
        equations[name] = " + ".join(terms)
    case = loop_case(equations, {}, parameters)
    spread = with_spread(case, **{n: (1 - F(share), 1 + F(share)) for n in parameters})
    point = replace(equilibrium_at(*[0] * size), fixed_for_all=True)
    begin = time.perf_counter()
    _, claim = seek_matrix(
        spread, point, "tolerances", "half-plane", F(1, 4), EFFORTS["standard"], "P", cell_holds
    )  # fmt: skip
    found = time.perf_counter()
    if claim is None:
        return f"n = {size}, {free} parameters: not proved, {found - begin:.2f} s"
    result = check_matrix(spread, point, claim).result
    end = time.perf_counter()
    times = f"search {found - begin:.2f} s, proof {end - found:.2f} s"
    return f"n = {size}, {free} parameters: {len(claim.cells)} cells, {times} ({result})"


def definiteness(size: int) -> str:
    """A positive definite matrix of this size with short fractions, decided exactly."""
    random = np.random.default_rng(1)
    a = random.integers(-9, 10, (size, size))
    product = a @ a.T + size * np.eye(size, dtype=int)
    matrix = tuple(tuple(F(int(v), 1000) for v in row) for row in product)
    begin = time.perf_counter()
    result = is_positive_definite(matrix)
    return f"{size} rows: {time.perf_counter() - begin:.2f} s ({result})"


def courses() -> str:
    """Cells per second on which a moving equilibrium of four states is proved and enclosed."""
    case = make_case(
        {"x": "v", "v": "p - x - x^3 - v + q*y", "y": "w", "w": "q - 2*y - w - sin(x)/4"}, {"p": "1", "q": "1/2"},
        dict.fromkeys("xvyw", (-3, 3)), spread={"p": (0, 2), "q": (0, 1)},
    )  # fmt: skip
    family, count = rest_family(case), 0
    begin = time.perf_counter()
    for i in range(8):
        for j in range(8):
            cell = Box(("p", "q"), (Interval(F(i, 4), F(i + 1, 4)), Interval(F(j, 8), F(j + 1, 8))))
            count += alone_on(family, cell, (F(1, 2), F(0), F(1, 4), F(0))) is not None
    seconds = time.perf_counter() - begin
    return f"{count} of 64 cells proved, {64 / seconds:.0f} cells per second"


def spectral_cells() -> str:
    """Cells per second on which a given P is checked, four states and two parameters."""
    names = ("x", "v", "y", "w")
    equations = {"x": "v", "v": "-p*x - 2*v + y/4", "y": "w", "w": "-q*y - 3*w + x/5"}
    case = with_spread(loop_case(equations, {}, {"p": "2", "q": "3"}), p=(1, 3), q=(2, 4))
    point = replace(equilibrium_at(*[0] * len(names)), fixed_for_all=True)
    _, claim = seek_matrix(case, point, "tolerances", "half-plane", F(1, 10), EFFORTS["standard"], "P", cell_holds)
    assert claim is not None
    begin, rounds = time.perf_counter(), 50
    for _ in range(rounds):
        assert check_matrix(case, point, claim).result == "proved"
    seconds = time.perf_counter() - begin
    return f"{rounds * len(claim.cells) / seconds:.0f} cells per second, everything derived anew"


def main() -> None:
    """Print every figure."""
    print("equilibria of an 8-unknown chain:", chain_of_oscillators())
    print("decay over tolerances:", decay(4, 5, "0.4"))
    print("decay over tolerances:", decay(10, 3, "0.4"))
    for size in (50, 100, 200):
        print("exact definiteness,", definiteness(size))
    print("courses of a moving equilibrium:", courses())
    print("linear part:", spectral_cells())


if __name__ == "__main__":
    main()
