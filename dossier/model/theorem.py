"""The theorems a verdict may rest on: premises, conclusion, published source.

Sources: A. M. Lyapunov, The General Problem of the Stability of Motion (1892); E. A. Barbashin and
N. N. Krasovskii (1952); J. P. LaSalle (1960); H. K. Khalil, Nonlinear Systems, 3rd ed. 2002, chapters
3, 4 and 8 (chapter numbers from memory); A. Hurwitz (1895); I. Schur (1918), A. Cohn (1922).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final


@dataclass(frozen=True, slots=True)
class Theorem:
    """`premises` maps a premise's letter to what must be shown."""

    name: str
    title: str
    premises: tuple[tuple[str, str], ...]
    conclusion: str
    source: str


_LYAPUNOV_PREMISES = (
    ("a", "every start of the region lies in the set {V <= c}"),
    ("b", "{V <= c} is compact and lies inside the domain, where every denominator, root and logarithm is regular"),
    ("c", "the right-hand side is locally Lipschitz near {V <= c}"),
    ("d", "V is zero at the equilibrium and positive elsewhere in the set"),
)

THEOREMS: Final[dict[str, Theorem]] = {
    t.name: t
    for t in (
        Theorem(
            "E",
            "Existence and uniqueness by an interval Newton operator",
            (
                ("cover", "every part of the search box is excluded or lies in a uniqueness box"),
                ("unique", "the Krawczyk operator maps each uniqueness box into its own interior"),
            ),
            "the listed boxes hold exactly one equilibrium each and there is no other in the search box",
            "R. Krawczyk 1969; A. Neumaier, Interval Methods for Systems of Equations, 1990",
        ),
        Theorem(
            "T1",
            "Stability by the linear part",
            (
                ("smooth", "the right-hand side is continuously differentiable near the equilibrium"),
                ("equilibrium", "the point is an equilibrium"),
                ("spectrum", "every eigenvalue lies strictly inside the stated region of the complex plane"),
            ),
            "the equilibrium is locally exponentially stable, with the stated rate, damping or contraction",
            "Lyapunov 1892 (indirect method); Khalil, Nonlinear Systems, chapter 4",
        ),
        Theorem(
            "T2",
            "Attraction, continuous time",
            (*_LYAPUNOV_PREMISES, ("e", "the derivative of V along motions is negative elsewhere in the set")),
            "motions from the region exist for all time, stay in the set and converge to the equilibrium",
            "Lyapunov 1892; Barbashin and Krasovskii 1952; Khalil, Nonlinear Systems, chapters 4 and 8",
        ),
        Theorem(
            "T3",
            "Attraction, sampled",
            (*_LYAPUNOV_PREMISES, ("e", "V falls from every sample to the next elsewhere in the set")),
            "motions from the region stay in the set at all sampling instants and converge to the equilibrium",
            "Lyapunov's direct method for difference equations; Khalil, Nonlinear Systems, chapter 4 exercises",
        ),
        Theorem(
            "T7",
            "Vertices of the parameter box",
            (
                ("fixed", "the equilibrium is the same for every parameter combination"),
                ("polynomial", "after multiplication by denominators proved positive the inequality is polynomial"),
                ("vertices", "the inequality holds for every Bernstein coefficient over the parameter box"),
            ),
            "the inequality holds for every combination in the box, interior included",
            "S. N. Bernstein 1912; for multi-affine dependence the coefficients are the vertex values",
        ),
        Theorem(
            "T8",
            "Instability by the linear part",
            (
                ("equilibrium", "the point is an equilibrium"),
                ("spectrum", "an eigenvalue lies strictly outside the closed stability region"),
            ),
            "the equilibrium is unstable",
            "Lyapunov 1892; Khalil, Nonlinear Systems, chapter 4",
        ),
        Theorem(
            "T9",
            "Bounds along motions",
            (
                ("set", "a set is proved invariant and contains the region"),
                ("bound", "the quantity is bounded over that set"),
            ),
            "the bound holds along every motion from the region",
            "invariant set argument; Khalil, Nonlinear Systems, chapter 4",
        ),
        Theorem(
            "T11",
            "Margins of a loop",
            (
                ("stable", "the closed loop is proved stable"),
                ("crossings", "every crossing of the loop's path to the boundary is enclosed and none is missed"),
            ),
            "the loop stays stable for every change smaller than the first crossing",
            "H. Nyquist 1932; continuity of the roots of a polynomial in its coefficients",
        ),
    )
}
