"""Signs of names."""

from __future__ import annotations

import pytest

from dossier.report.equations import typeset
from dossier.report.notation import notation, sign_of


@pytest.mark.parametrize(
    ("name", "sign"),
    [
        ("e", "e"),
        ("k1", "k_{1}"),
        ("tau", r"\tau"),
        ("phi2", r"\varphi_{2}"),
        ("Omega", r"\Omega"),
        ("Kp", "K_{p}"),
        ("Fmax", r"F_{\mathrm{max}}"),
        ("grip", r"\mathrm{grip}"),
        ("theta_ref", r"\theta_{\mathrm{ref}}"),
        ("x_1_2", "x_{1,2}"),
        ("omega_n", r"\omega_{n}"),
    ],
)
def test_a_name_gets_the_sign_an_engineer_would_write(name: str, sign: str) -> None:
    assert sign_of(name) == sign


@pytest.mark.parametrize(
    "name", ["torque_command_per_inertia", "g_over_length", "x__y", "_", "a1b2", "T_s1", "Lambda_x"]
)
def test_every_name_typesets(name: str) -> None:
    assert typeset(sign_of(name)).drawing.placed


def test_two_names_never_share_a_sign() -> None:
    names = ("k1", "k_1", "Kp", "K_p", "tau")
    signs = notation(names)
    assert len({signs.latex(n) for n in names}) == len(names)
    assert signs.latex("tau") == r"\tau"
    for name in names:
        assert typeset(signs.latex(name)).drawing.placed
