"""From the names in a project to mathematical signs: ``k1`` to k with index 1, ``tau`` to the Greek letter.

Two names of one model never get the same sign: where they would, both are set as written, upright.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

GREEK: Final = (
    "alpha", "beta", "gamma", "delta", "epsilon", "zeta", "eta", "theta", "iota", "kappa", "lambda", "mu", "nu", "xi",
    "pi", "rho", "sigma", "tau", "upsilon", "phi", "chi", "psi", "omega",
)  # fmt: skip
CAPITAL_GREEK: Final = ("Gamma", "Delta", "Theta", "Lambda", "Xi", "Pi", "Sigma", "Upsilon", "Phi", "Psi", "Omega")
_VARIANTS: Final = {"epsilon": r"\varepsilon", "phi": r"\varphi"}

WORD_SPACE: Final = r"\ "
"""Between the words of a long index."""

_STEM: Final = re.compile(r"^([A-Za-z]+?)(\d*)$")
_CAPITAL_INDEX: Final = re.compile(r"^([A-Z])([a-z]{1,3})$")
"""``Kp``, ``Ts``, ``Fmax``: a capital letter with a lower-case index, as control engineers write gains."""


@dataclass(frozen=True, slots=True)
class Notation:
    """LaTeX and spoken form of every name of one model."""

    signs: Mapping[str, str]

    def latex(self, name: str) -> str:
        """The sign of `name`; a name unknown to the model is set as if it stood alone."""
        return self.signs.get(name) or sign_of(name)


def notation(names: Iterable[str]) -> Notation:
    """Signs for `names`, all different."""
    ordered = tuple(dict.fromkeys(names))
    signs = {n: sign_of(n) for n in ordered}
    taken = Counter(signs.values())
    return Notation(MappingProxyType({n: s if taken[s] == 1 else upright(n) for n, s in signs.items()}))


def sign_of(name: str) -> str:
    """The sign of one name, on its own."""
    head, *rest = [part for part in name.split("_") if part] or [name]
    sign, index = _stem(head)
    subscripts = [index] if index else []
    if all(len(part) == 1 or part.isdigit() or part in GREEK for part in rest):
        subscripts.extend(_subscript(part) for part in rest)
    else:
        subscripts.append(rf"\mathrm{{{WORD_SPACE.join(rest)}}}")
    return sign if not subscripts else f"{sign}_{{{','.join(subscripts)}}}"


def _stem(head: str) -> tuple[str, str]:
    """Sign and index of the part of a name before the first underscore."""
    match = _STEM.match(head)
    if match is None:
        return upright(head), ""
    letters, digits = match.groups()
    if letters in GREEK:
        return _VARIANTS.get(letters, f"\\{letters}"), digits
    if letters in CAPITAL_GREEK:
        return rf"\{letters}", digits
    if len(letters) == 1:
        return letters, digits
    capital = _CAPITAL_INDEX.match(letters)
    if capital and not digits:
        return capital[1], _subscript(capital[2])
    return upright(letters), digits


def _subscript(part: str) -> str:
    if part in GREEK or part in CAPITAL_GREEK:
        return _VARIANTS.get(part, f"\\{part}")
    return part if len(part) == 1 or part.isdigit() else upright(part)


def upright(name: str) -> str:
    """`name` in upright letters, as written."""
    return rf"\mathrm{{{name.replace('_', chr(92) + '_')}}}"


def spoken(name: str) -> str:
    """`name` as a screen reader should say it."""
    return " ".join(re.findall(r"[A-Za-z]+|\d+", name)) or name
