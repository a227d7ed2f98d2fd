"""Published and constructed values of linear parts; each source is named as far as it is known."""

from fractions import Fraction as F

import pytest
from linear_cases import affine, matrix_case, polynomial_case, square_root, with_spread
from loop_cases import equilibrium_at, loop_case

from dossier.checks.linear import check_routh, classify, routh_claim
from dossier.checks.spectral import cell_holds, check_matrix
from dossier.checks.spectrum import eigenvalue_discs, spectral_values
from dossier.model.claim import RouthClaim
from dossier.search.effort import EFFORTS
from dossier.search.linearisation import seek_matrix
from dossier.search.lyapunov_equation import solve_exactly

TINY = F(1, 10**30)


def counts(case, equilibrium):
    claim = routh_claim(case, equilibrium)
    assert isinstance(claim, RouthClaim), claim
    assert check_routh(case, equilibrium, claim).result == "proved"
    return claim.inside, claim.boundary, claim.outside


def stability(case, equilibrium):
    return classify(routh_claim(case, equilibrium))


def spectrum(case, equilibrium):
    discs = eigenvalue_discs(case, equilibrium)
    return [complex(float(d.real), float(d.imaginary)) for d in discs for _ in range(d.multiplicity)]


def same(found, expected, tolerance):
    """The same multiset of complex numbers within `tolerance`."""
    left = list(found)
    for value in expected:
        nearest = min(left, key=lambda z: abs(z - value))
        assert abs(nearest - value) < tolerance, (nearest, value)
        left.remove(nearest)
    return not left


# Khalil, Nonlinear Systems, 3rd ed. 2002, Example 4.13 (P1, from memory); Ogata, Modern Control Engineering (P2)
@pytest.mark.parametrize("sign", [1, -1])
def test_lyapunovs_equation_has_the_textbook_solution_exactly(sign):
    a = [[F(0), F(-sign)], [F(sign), F(-1)]]
    off = F(-sign, 2)
    assert solve_exactly(a, "half-plane", F(0)) == ((F(3, 2), off), (off, F(1)))


# Ogata, Modern Control Engineering, G = K/(s(s^2+s+1)(s+2)) (from memory): stable iff 0 < K < 14/9
def test_ogatas_quartic_is_on_the_boundary_exactly_at_fourteen_ninths():
    limit = F(14, 9)
    assert counts(*polynomial_case([1, 3, 3, 2, limit - TINY])) == (4, 0, 0)
    assert counts(*polynomial_case([1, 3, 3, 2, limit])) == (2, 2, 0)
    assert counts(*polynomial_case([1, 3, 3, 2, limit + TINY])) == (2, 0, 2)
    assert counts(*polynomial_case([1, 3, 3, 2, 0])) == (3, 1, 0)
    frequency = max(z.imag for z in spectrum(*polynomial_case([1, 3, 3, 2, limit])))
    assert abs(frequency - 0.816496580928) < 1e-12


# N. Nise, Control Systems Engineering, Example 6.9 (from memory): stable iff 0 < K < 1386, crossing at sqrt 77
def test_nises_cubic_is_on_the_boundary_exactly_at_1386():
    assert counts(*polynomial_case([1, 18, 77, 1386 - TINY])) == (3, 0, 0)
    assert counts(*polynomial_case([1, 18, 77, 1386])) == (1, 2, 0)
    assert counts(*polynomial_case([1, 18, 77, 1386 + TINY])) == (1, 0, 2)
    assert same(spectrum(*polynomial_case([1, 18, 77, 1386])), [-18, 8.774964387392j, -8.774964387392j], 1e-11)


# Franklin, Powell, Emami-Naeini, Feedback Control of Dynamic Systems, ch. 3 (from memory): stable iff K > 7.5
def test_the_gain_of_franklin_powell_and_emami_naeini_must_exceed_seven_and_a_half():
    for gain, expected in ((F(15, 2) + TINY, (3, 0, 0)), (F(15, 2), (1, 2, 0)), (F(15, 2) - TINY, (1, 0, 2))):
        assert counts(*polynomial_case([1, 5, gain - 6, gain])) == expected


# Qiu, Bernhardsson, Rantzer, Davison, Young, Doyle, Automatica 31 (1995) 879-890, example (from memory)
def test_the_example_of_the_real_stability_radius_has_its_published_spectrum():
    rows = [[79, 20, -30, -20], [-41, -12, 17, 13], [167, 40, -60, -38], ["67/2", 9, "-29/2", -11]]
    assert same(spectrum(*matrix_case(rows)), [-1 + 10j, -1 - 10j, -1 + 1j, -1 - 1j], 1e-13)
    assert counts(*matrix_case(rows)) == (4, 0, 0)


def frank(size):
    """W. L. Frank 1958: f_ij = size - max(i, j) from zero, and the entries next below the diagonal."""
    return [[size - max(i, j) if j >= i - 1 else 0 for j in range(size)] for i in range(size)]


# Frank 1958; N. Higham 2022 (det 1, reciprocal pairs); the extremes as in Gregory and Karney 1969 (from memory)
def test_the_ill_conditioned_eigenvalues_of_franks_matrix_come_out_right():
    found = spectrum(*matrix_case(frank(12)))
    assert abs(max(z.real for z in found) - 32.228891501572164) < 1e-12
    assert abs(min(z.real for z in found) - 0.031028060644010015) < 1e-14
    assert same(found, [1 / z for z in found], 1e-10)
    assert counts(*matrix_case([[-v for v in row] for row in frank(12)])) == (12, 0, 0)


def wilkinson():
    """prod (s + k), k = 1..20, plus 2^-23 s^19."""
    coefficients = [F(1)]
    for k in range(1, 21):
        coefficients = [a + k * b for a, b in zip([*coefficients, F(0)], [F(0), *coefficients], strict=True)]
    coefficients[1] += F(1, 2**23)
    return coefficients


# J. H. Wilkinson 1959/1963, left half-plane version; nine decimals as printed but for 2.518830070, certified here
def test_wilkinsons_perturbed_polynomial_is_stable_with_ten_complex_roots():
    case, equilibrium = polynomial_case(wilkinson())
    assert counts(case, equilibrium) == (20, 0, 0)
    found = spectrum(case, equilibrium)
    assert sum(z.imag != 0 for z in found) == 10
    printed = [-20.846908101, -19.502439400 + 1.940330347j, -16.730737466 + 2.812624894j, -13.992358137 + 2.518830070j]
    printed += [-11.793633881 + 1.652329728j, -10.095266145 + 0.643500904j, -8.917250249, -8.007267603, -6.999697234]
    for value in printed:
        assert min(abs(z - value) for z in found) < 1e-9


# constructed: 0.1 * 3 = 0.3 in decimals, so the roots are -0.1 and +-j sqrt 3; binary doubles call it stable
def test_a_marginal_polynomial_in_decimals_is_not_called_stable():
    case, equilibrium = polynomial_case([1, F("0.1"), 3, F("0.3")])
    assert counts(case, equilibrium) == (1, 2, 0)
    assert stability(case, equilibrium) == "undecided"
    assert spectral_values(case, equilibrium)["decay rate"].lower <= 0
    assert seek_matrix(case, equilibrium, "nominal", "half-plane", F(0), EFFORTS["quick"], "L1", cell_holds)[1] is None


# B. R. Barmish, New Tools for Robustness of Linear Systems, 1994 (coefficients from memory): robustly stable;
# the worst Kharitonov polynomial 1.25 + 0.75 s + 2.75 s^2 + 1.25 s^3 has the abscissa -0.030938
def test_the_interval_polynomial_of_barmish_is_proved_stable_on_its_whole_box():
    equations = {"x": "y", "y": "z", "z": "-(a*x + b*y + c*z)/d"}
    case = loop_case(equations, {}, {"a": "3/4", "b": "1", "c": "3", "d": "3/4"})
    ranges = {"a": ("1/4", "5/4"), "b": ("3/4", "5/4"), "c": ("11/4", "13/4"), "d": ("1/4", "5/4")}
    spread, equilibrium = with_spread(case, **ranges), equilibrium_at(0, 0, 0)
    found = seek_matrix(spread, equilibrium, "tolerances", "half-plane", F(0), EFFORTS["thorough"], "L1", cell_holds)
    assert found[1] is not None, found[0]
    assert check_matrix(spread, equilibrium, found[1]).result == "proved"
    worst = spectral_values(*polynomial_case(["5/4", "11/4", "3/4", "5/4"]))["decay rate"]
    assert abs(float(worst.lower) - 0.030938) < 1e-6


# P. Kundur, Power System Stability and Control, 1994, Example 12.2 (from memory); w0 = 2 pi 60 is not rational
@pytest.mark.parametrize(
    ("damping", "expected", "eigenvalues"),
    [
        (0, (0, 2, 0), [6.385052596853j, -6.385052596853j]),
        (10, (2, 0, 0), [-0.7142857143 + 6.3449738j, -0.7142857143 - 6.3449738j]),
        (-10, (0, 0, 2), [0.7142857143 + 6.3449738j, 0.7142857143 - 6.3449738j]),
    ],
)
def test_kundurs_machine_swings_as_printed(damping, expected, eigenvalues):
    case = loop_case({"w": f"-({damping})/7*w - 757/7000*d", "d": "120*pi*w"}, {})
    equilibrium = equilibrium_at(0, 0)
    assert counts(case, equilibrium) == expected
    assert same(spectrum(case, equilibrium), eigenvalues, 1e-6)


def henon(a, b, sign):
    """The map x+ = 1 - a x^2 + y, y+ = b x at its fixed point x = (b - 1 +- sqrt((1 - b)^2 + 4 a))/(2 a)."""
    a, b = F(a), F(b)
    x = affine(square_root((1 - b) ** 2 + 4 * a), sign / (2 * a), (b - 1) / (2 * a))
    return loop_case({"x": f"1 - {a}*x^2 + y", "y": f"{b}*x"}, {}, sample_interval="1"), equilibrium_at(x, affine(x, b))


# M. Henon, Comm. Math. Phys. 50 (1976) 69-77; multipliers read at people.nnov.ru/fractal/Chaos
def test_henons_fixed_points_are_saddles_with_the_published_multipliers():
    first, second = henon("1.4", "0.3", 1), henon("1.4", "0.3", -1)
    assert same(spectrum(*first), [-1.9237388581534, 0.1559463223028], 1e-12)
    assert same(spectrum(*second), [3.2598220978915, -0.0920295620408], 1e-12)
    assert counts(*first) == counts(*second) == (1, 0, 1)


# University of Southampton EdShare 2289: x+ = a - x^2 + 0.4 y has a sink for -0.09 < a < 0.27
@pytest.mark.parametrize(("a", "expected"), [("0.2699", "stable"), ("0.27", "undecided"), ("0.2701", "unstable")])
def test_the_sink_of_the_quadratic_map_flips_exactly_at_027(a, expected):
    root = square_root(F(36, 100) + 4 * F(a)) if a != "0.27" else equilibrium_at(F(6, 5)).state[0]
    x = affine(root, F(1, 2), F(-3, 10))
    case = loop_case({"x": f"{a} - x^2 + 2/5*y", "y": "x"}, {}, sample_interval="1")
    assert stability(case, equilibrium_at(x, x)) == expected


def sampled_servo(gain):
    """K/(s(s + 1)) behind a hold, T = 1: K (0.3679 z + 0.2642)/((z - 1)(z - 0.3679)) with e^-1 kept as it is."""
    equations = {
        "x": "(1 + exp(-1))*x - exp(-1)*y + u",
        "y": "x",
    }
    case = loop_case(equations, {"u": f"-({gain})*(exp(-1)*x + (1 - 2*exp(-1))*y)"}, sample_interval="1")
    return case, equilibrium_at(0, 0)


# NPTEL 108103008 module 3 prints 0 < K < 2.39 (read); Ogata, Discrete-Time Control Systems, prints 2.3925 (memory);
# exact limit (1 - e^-1)/(1 - 2 e^-1) = 2.392211191177
def test_the_sampled_servo_is_unstable_at_the_gain_printed_from_rounded_coefficients():
    assert stability(*sampled_servo("2.392")) == "stable"
    assert stability(*sampled_servo("2.392211191")) == "stable"
    assert stability(*sampled_servo("2.392211192")) == "unstable"
    assert stability(*sampled_servo("2.3925")) == "unstable"
    assert abs(float(spectral_values(*sampled_servo("2.3925"))["contraction"].upper) - 1.0000382) < 1e-7


# constructed; standard numerical analysis: discretisation changes the verdict
def test_euler_steps_change_the_verdict_as_computed():
    explicit = matrix_case([[1, "1/50"], ["-1/50", "1 - 1/50*1/100"]], "1/50")
    assert stability(*explicit) == "unstable"
    assert abs(float(spectral_values(*explicit)["contraction"].lower) - 1.000099995) < 1e-10
    # implicit step h = 1/20 of x'' - x'/100 + x = 0: (I - h A)^-1 with determinant 1 - h/100 + h^2
    d = F(1) - F(1, 2000) + F(1, 400)
    implicit = matrix_case([[(1 - F(1, 2000)) / d, F(1, 20) / d], [-F(1, 20) / d, 1 / d]], "1/20")
    assert stability(*implicit) == "stable"
    assert abs(float(spectral_values(*implicit)["contraction"].lower) - 0.9990014975) < 1e-10


def lorenz(rho):
    """The equilibrium C+ = (sqrt(b (rho - 1)), same, rho - 1) of the Lorenz system, sigma 10, b 8/3."""
    root = square_root(F(8, 3) * (F(rho) - 1))
    case = loop_case({"x": "10*(y - x)", "y": f"{rho}*x - y - x*z", "z": "x*y - 8/3*z"}, {})
    return case, equilibrium_at(root, root, F(rho) - 1)


# E. N. Lorenz 1963; C. Sparrow, The Lorenz Equations, 1982 (from memory): rho_H = 470/19 = 24.7368421...
def test_the_lorenz_equilibria_lose_stability_at_470_nineteenths():
    assert stability(*lorenz("24.7368")) == "stable"
    assert stability(*lorenz("24.74")) == "unstable"
    assert stability(*lorenz(str(F(470, 19) - F(1, 10**15)))) == "stable"
    assert stability(*lorenz(str(F(470, 19)))) != "stable"
    assert same(spectrum(*lorenz("28")), [-13.854578, 0.0939556 + 10.1945052j, 0.0939556 - 10.1945052j], 1e-6)


# after E. J. Davison and E. M. Kurak, Automatica 7 (1971) 627-636 (from memory); eigenvalues recomputed
def test_the_three_state_chain_is_stable_with_two_per_cent_damping():
    case = loop_case({"x": "-y", "y": "-z", "z": "-0.915*x + (1 - 0.915*x^2)*y - z"}, {})
    equilibrium = equilibrium_at(0, 0, 0)
    pair = -0.02221509 + 0.97828950j
    assert same(spectrum(case, equilibrium), [-0.95556981, pair, pair.conjugate()], 1e-8)
    assert counts(case, equilibrium) == (3, 0, 0)
    damping = float(spectral_values(case, equilibrium)["damping ratio"].lower)
    assert abs(damping - 0.02221509 / abs(pair)) < 1e-8


# W. L. Garrard and J. M. Jordan, Automatica 13 (1977) 497-505 (coefficients and gain from memory)
def test_the_flight_control_loop_of_garrard_and_jordan_has_its_three_real_poles():
    first = "-0.877*x + z - 0.088*x*z + 0.47*x^2 - 0.019*y^2 - x^2*z + 3.846*x^3"
    third = "-4.208*x - 0.396*z - 0.47*x^2 - 3.564*x^3"
    equations = {
        "x": f"{first} - 0.215*u + 0.28*x^2*u + 0.47*x*u^2 + 0.63*u^3",
        "y": "z",
        "z": f"{third} - 20.967*u + 6.265*x^2*u + 46*x*u^2 + 61.4*u^3",
    }
    case = loop_case(equations, {"u": "-0.053*x + 0.5*y + 0.521*z"})
    equilibrium = equilibrium_at(0, 0, 0)
    assert counts(case, equilibrium) == (3, 0, 0)
    assert same(spectrum(case, equilibrium), [-9.9613973, -1.7111782, -0.5128364], 5e-3)
    assert spectral_values(case, equilibrium)["damping ratio"].lower == 1


# D. Hinrichsen and A. J. Pritchard, Syst. Control Lett. 8 (1986) 105-113 (from memory): the real stability radius of
# the stiffness is 1, so every delta > -1 is stable although no common P serves a wide range
def test_the_oscillator_stays_stable_for_every_stiffness_change_below_one():
    case = loop_case({"x": "v", "v": "-1/5*v - (1 + d)*x"}, {}, {"d": "0"})
    equilibrium = equilibrium_at(0, 0)
    spread = with_spread(case, d=("-99/100", 2))
    _, claim = seek_matrix(spread, equilibrium, "tolerances", "half-plane", F(0), EFFORTS["standard"], "L1", cell_holds)
    assert claim is not None and len(claim.cells) > 1
    assert check_matrix(spread, equilibrium, claim).result == "proved"
    wide = with_spread(case, d=("-1", 2))
    assert (
        seek_matrix(wide, equilibrium, "tolerances", "half-plane", F(0), EFFORTS["quick"], "L1", cell_holds)[1] is None
    )
