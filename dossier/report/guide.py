"""The reading guide and glossary for readers who are not specialists: fixed text."""

from __future__ import annotations

from typing import Final

READING_GUIDE: Final = (
    "A control loop is described by a model: equations that say how each quantity changes from moment to moment.",
    "An equilibrium is a state in which nothing changes. The operating point is the "
    "equilibrium the machine is meant to hold.",
    "The loop is stable there if small disturbances stay small, and asymptotically stable if they also die out.",
    "A linear analysis answers this for very small disturbances: every eigenvalue must lie on the safe side.",
    "For disturbances of a stated size one needs more: a function V of the state, like an "
    "energy, zero at the operating point.",
    "If V falls along every motion inside the set where V is at most a level c, no motion can ever leave that set.",
    "And if V falls everywhere in it but at the operating point, every motion in it ends "
    "there. V is called a certificate.",
    "A computer searches for V with rounded numbers; such a V is only a guess, and this "
    "dossier never relies on the search.",
    "The guess is then turned into exact fractions, and a separate program checks every "
    "inequality without any rounding.",
    "A margin says how much the loop’s gain, phase or delay could change before a linear "
    "analysis would call it unstable.",
    "Simulation looks for violations. Finding one counts against the claim; finding none proves nothing.",
    "“Proved” speaks of the model as written. Whether the model describes the machine is for "
    "the engineer and the reviewer to judge.",
)

GLOSSARY: Final = (
    ("ball", "a number known up to a proved radius"),
    ("box", "one interval per quantity, all combinations of them"),
    ("certificate", "the evidence file of a claim: exact numbers anyone can check without the search that found them"),
    ("criterion", "what the engineer asks for, with its limit; the verdict answers it"),
    ("domain", "where the model is valid; nothing is claimed outside it"),
    ("enclosure", "two numbers between which the true value is proved to lie"),
    ("equilibrium", "a state at which the equations stand still"),
    ("excursion", "how far a quantity moves along the motions from the region of starts"),
    ("fingerprint", "the SHA-256 hash of a text: any change of the text changes it"),
    ("Gram matrix",
     "a symmetric matrix that writes a polynomial as a sum of products; if positive definite, "
     "the polynomial is positive"),
    ("level", "the value c that bounds the proved set: all states with V at most c"),
    ("linear part", "the matrix of slopes of the equations at an equilibrium"),
    ("proved scale", "how many times the region of starts fits into the proved set; 1 is just enough"),
    ("range", "a parameter’s spread in use: load, radius, speed, season"),
    ("region of starts", "the deviations from the operating point for which a claim is made"),
    ("reserve", "what is left of the way to the limit; 0 % is at the limit"),
    ("tolerance", "a parameter’s spread in production"),
)  # fmt: skip

READING_NUMBERS: Final = (
    "A proved bound is rounded to its less favourable side. Digits followed by … are the first digits of a value known "
    "more closely; ≈ marks a rounded figure or an estimate. Inputs are printed as written in the project file. Every "
    "printed number that is not an input stands beside the id of the evidence it comes from."
)
