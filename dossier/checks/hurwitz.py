"""Whether all roots of one polynomial lie strictly in the left half-plane: Routh's array over numbers or balls."""

from __future__ import annotations

from collections.abc import Sequence

from dossier.model.linear_part import Number, sign_of


def is_hurwitz(polynomial: Sequence[Number]) -> bool | None:
    """True or False where proved, None where the balls do not decide; highest power first, of full degree.

    All roots lie strictly left of the imaginary axis exactly when every entry of the first column has the
    sign of the leading coefficient (E. J. Routh 1877, A. Hurwitz 1895); the first entry that has not ends
    the array, so no zero is ever divided by.  A leading coefficient of zero counts as a root at infinity.
    """
    lead = sign_of(polynomial[0])
    if lead is None:
        return None
    if lead == 0:
        return False
    upper, lower = list(polynomial[0::2]), list(polynomial[1::2])
    while lower:
        sign = sign_of(lower[0])
        if sign is None:
            return None
        if sign != lead:
            return False
        ratio = upper[0] / lower[0]
        following = [
            upper[i + 1] - ratio * lower[i + 1] if i + 1 < len(lower) else upper[i + 1] for i in range(len(upper) - 1)
        ]
        upper, lower = lower, following
    return True
