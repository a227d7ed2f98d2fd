"""The scaled floating-point loop against the equations it was made from."""

from fractions import Fraction

import numpy as np
import pytest
from loop_cases import equilibrium_at
from quadratic_cases import bounded_case, direct_current_bus, press_slide

from dossier.model.case import NOMINAL, TOLERANCES
from dossier.model.polynomial import NotRational
from dossier.search.offsets import scaled_loop

GENERATOR = np.random.default_rng(5)


def test_the_press_slide_in_scaled_offsets_is_its_equations():
    case, place = press_slide()
    loop = scaled_loop(case, place, TOLERANCES, case.region)
    assert loop.spread.names == ("m", "c", "k1", "k3", "tau")
    assert len(loop.vertices) == 32
    points = GENERATOR.standard_normal((50, 4))
    parameters = loop.draw(50, GENERATOR)
    m, c, k1, k3, tau = parameters.T
    scales = np.array([float(s) for s in loop.scales])
    e, v, q, force = (points * scales).T
    direct = np.stack(
        [v, (force - c * v - k1 * e - k3 * e**3) / m, e, (-1.6e7 * e - 2.4e5 * v - 2e8 * q - force) / tau], axis=1
    )
    assert loop.image(points, parameters) * loop.rate * scales == pytest.approx(direct, rel=1e-12, abs=1e-9)


def test_scales_are_powers_of_two_near_the_region():
    case, place = press_slide()
    loop = scaled_loop(case, place, NOMINAL, case.region)
    for scale, side in zip(loop.scales, case.region.intervals, strict=True):
        assert Fraction(1, 2) < scale / (side.width / 2) < 2
        assert scale.numerator == 1 or scale.denominator == 1


def test_the_slowest_decay_of_a_linear_loop_is_its_slowest_eigenvalue_over_the_fastest():
    """x'' + 11 x' + 10 x = 0 has eigenvalues -1 and -10."""
    case = bounded_case({"x": "y", "y": "-10*x - 11*y"}, {"x": ("-1", "1"), "y": ("-1", "1")})
    loop = scaled_loop(case, equilibrium_at(0, 0), NOMINAL, case.region)
    assert loop.rate == pytest.approx(10.0)
    assert loop.decay == pytest.approx(0.1)
    assert loop.is_settling


def test_a_sampled_loop_settles_by_its_spectral_radius():
    case = bounded_case({"x": "x/2"}, {"x": ("-1", "1")}, sample_interval="1")
    loop = scaled_loop(case, equilibrium_at(0), NOMINAL, case.region)
    assert loop.decay == pytest.approx(0.75)
    critical = bounded_case({"x": "x - x^3"}, {"x": ("-1", "1")}, sample_interval="1")
    assert not scaled_loop(critical, equilibrium_at(0), NOMINAL, critical.region).is_settling


def test_the_slope_of_a_quadratic_form_is_its_derivative_over_its_value():
    """x' = -x + x^3, V = x^2: V'/V = -2 + 2 x^2; undefined values count as rising."""
    case = bounded_case({"x": "-x + x^3"}, {"x": ("-1", "1")})
    loop = scaled_loop(case, equilibrium_at(0), NOMINAL, case.region)
    points = np.array([[0.5], [2.0]])
    nothing = np.zeros((2, 0))
    assert loop.slope(np.eye(1), points, nothing) == pytest.approx([-1.5, 6.0])
    assert loop.slope(np.eye(1), points, nothing, share=0.5) == pytest.approx([-0.5, 7.0])
    pole = bounded_case({"x": "-x/(1 - x)"}, {"x": ("-1", "1")})
    at_pole = scaled_loop(pole, equilibrium_at(0), NOMINAL, pole.region)
    assert np.isinf(at_pole.slope(np.eye(1), np.array([[1.0]]), np.zeros((1, 0)))).all()


def test_an_irrational_equilibrium_gives_offsets_that_vanish_there():
    case, place = direct_current_bus("15000", "0.00047")
    loop = scaled_loop(case, place, NOMINAL, case.region)
    assert loop.image(np.zeros((1, 2)), np.zeros((1, 0))) == pytest.approx(np.zeros((1, 2)), abs=1e-12)


def test_elementary_functions_are_read_from_the_equations_with_their_slopes():
    """Pendulum: linear part [[0, 1], [-1, -1/2]] (closed form)."""
    case = bounded_case({"th": "w", "w": "-sin(th) - 0.5*w"}, {"th": ("-1", "1"), "w": ("-1", "1")})
    loop = scaled_loop(case, equilibrium_at(0, 0), NOMINAL, case.region)
    assert isinstance(loop.field, NotRational)
    assert loop.linear[0] * loop.rate == pytest.approx(np.array([[0.0, 1.0], [-1.0, -0.5]]), abs=1e-8)
    points = GENERATOR.standard_normal((20, 2))
    direct = np.stack([points[:, 1], -np.sin(points[:, 0]) - 0.5 * points[:, 1]], axis=1)
    assert loop.image(points, np.zeros((20, 0))) * loop.rate == pytest.approx(direct)


def test_every_elementary_function_is_evaluated_as_its_name_says():
    names = {"cos": np.cos, "tan": np.tan, "asin": np.arcsin, "acos": np.arccos, "atan": np.arctan, "exp": np.exp}
    names |= {"abs": np.abs, "tanh": np.tanh}
    points = np.linspace(-0.9, 0.9, 7)[:, None]
    for name, function in names.items():
        case = bounded_case({"x": f"{name}(x) - x"}, {"x": ("-1", "1")})
        loop = scaled_loop(case, equilibrium_at(0), NOMINAL, case.region)
        direct = function(points) - points - function(0.0)
        assert loop.evaluate(points, np.zeros((7, 0))) == pytest.approx(direct), name
    clipped = bounded_case({"x": "sat(2*x, -1, 1) - sqrt(x + 1) - log(x + 1)"}, {"x": ("-1", "1")})
    loop = scaled_loop(clipped, equilibrium_at(0), NOMINAL, clipped.region)
    direct = np.clip(2 * points, -1, 1) - np.sqrt(points + 1) + 1 - np.log(points + 1)
    assert loop.evaluate(points, np.zeros((7, 0))) == pytest.approx(direct)
