"""Margins against published or closed-form values, and against dense floating-point computations.

Sources are named beside the numbers; where a book's value was read off a plot the exact one is required.
"""

from fractions import Fraction
from math import asin, atan, degrees, log10, pi, radians, sqrt

import mpmath
import numpy as np
import pytest
from loop_cases import equilibrium_at, loop_case, transfer_loop

from dossier.checks.frequency import check_margins
from dossier.model.ball import Ball
from dossier.search.frequency import seek_crossings


def measure(case, equilibrium=None):
    """Finding and margins of loop u."""
    place = equilibrium or equilibrium_at(*[0] * len(case.model.states))
    _, claim = seek_crossings(case, place, "u")
    return check_margins(case, place, claim)


def holds(enclosure, value, tolerance):
    """The enclosure is far tighter than `tolerance` and agrees with `value` to `tolerance`."""
    assert enclosure.upper - enclosure.lower < Fraction(tolerance) / 1000
    return abs(float(enclosure.lower) - value) <= tolerance


def has_no_finite_value(enclosure):
    return enclosure is not None and enclosure.lower is None and enclosure.upper is None


def test_three_equal_lags_have_the_gain_margin_eight_thirds_and_the_modulus_margin_five_elevenths():
    # Astrom and Murray, Feedback Systems, ch. 9, L = 3/(s+1)^3 (from memory); the printed modulus margin
    # 0.464 is off: exactly 5/11 at w^2 = 7/4.
    finding, margins = measure(transfer_loop([3], [1, 3, 3, 1]))
    assert finding.result == "proved"
    assert holds(margins.gain_up, 20 * log10(8 / 3), 1e-9)
    assert holds(margins.gain_up_at, sqrt(3), 1e-12)
    assert has_no_finite_value(margins.gain_down)
    assert holds(margins.phase, radians(41.69032613), 1e-10)
    assert holds(margins.phase_at, 1.03927081, 1e-8)
    assert holds(margins.delay, 0.70013845, 1e-8)
    assert margins.peak_sensitivity.lower <= Fraction(11, 5) <= margins.peak_sensitivity.upper
    assert margins.peak_sensitivity.upper - margins.peak_sensitivity.lower < Fraction(1, 10**16)
    assert holds(margins.peak_sensitivity_at, sqrt(7) / 2, 1e-12)


def test_a_type_one_loop_has_the_exact_margins_not_those_read_off_a_bode_plot():
    # Ogata, Modern Control Engineering, L = 10/(s(s+1)(s+5)) (from memory): printed 8 dB and 21 deg are
    # graphical readings; a(jw) gives crossover gain 30 exactly.
    _, margins = measure(transfer_loop([10], [1, 6, 5, 0]))
    assert holds(margins.gain_up, 20 * log10(3), 1e-9)
    assert holds(margins.gain_up, 9.5424250944, 1e-9)
    assert holds(margins.phase, radians(25.38982326), 1e-9)
    assert abs(float(margins.gain_up.lower) - 8) > 1
    assert abs(degrees(float(margins.phase.lower)) - 21) > 4


def test_the_same_loop_at_ten_times_the_gain_is_unstable_and_has_no_margins():
    finding, margins = measure(transfer_loop([100], [1, 6, 5, 0]))
    assert finding.result == "refuted"
    assert finding.premises[0].label == "stable"
    assert finding.premises[0].result == "refuted"
    assert margins is None


def test_a_stabilised_unstable_pole_has_a_downward_gain_margin_of_one_half():
    # closed form: a + k c = s - 1 + 2 k; |L| = 1 at w = sqrt 3, arg(-L) = 60 deg
    finding, margins = measure(transfer_loop([2], [1, -1]))
    assert finding.result == "proved"
    assert holds(margins.gain_down, -20 * log10(2), 1e-12)
    assert margins.gain_down_at.lower == margins.gain_down_at.upper == 0
    assert has_no_finite_value(margins.gain_up)
    assert holds(margins.phase, pi / 3, 1e-12)
    assert holds(margins.delay, pi / 3 / sqrt(3), 1e-12)


def test_a_pure_integrator_tolerates_a_delay_of_a_quarter_turn():
    # x' = -k x(t - tau) is stable exactly for 0 < k tau < pi/2 (Hale and Verduyn Lunel 1993, from memory)
    _, margins = measure(transfer_loop([5], [1, 0]))
    assert holds(margins.delay, pi / 10, 1e-12)
    assert holds(margins.phase, pi / 2, 1e-12)
    assert has_no_finite_value(margins.gain_up)
    assert has_no_finite_value(margins.gain_down)


def test_an_optimal_regulator_with_an_observer_has_nearly_no_margin():
    # J. C. Doyle, IEEE Trans. Automatic Control 23 (1978), q = sigma = 60: gains f = d = 10 (from memory);
    # the constant coefficient 1 + (1 - m) d f vanishes at the loop gain m = 1.01 exactly.
    case = loop_case(
        {"x": "x + y", "y": "y + u", "p": "p + q + 10*(x - p)", "q": "q + u0 + 10*(x - p)"},
        {"u0": "-10*p - 10*q", "u": "-10*p - 10*q"},
    )
    finding, margins = measure(case)
    assert finding.result == "proved"
    assert holds(margins.gain_up, 20 * log10(1.01), 1e-12)
    boundary = 10 ** (float(margins.gain_down.upper) / 20)
    assert 0.9 < boundary < 1
    assert (
        spectral_abscissa_of_observer_loop(boundary * 1.0001)
        < 0
        < spectral_abscissa_of_observer_loop(boundary * 0.9999)
    )


def spectral_abscissa_of_observer_loop(gain):
    matrix = np.array([[1, 1, 0, 0], [0, 1, -10 * gain, -10 * gain], [10, 0, -9, 1], [10, 0, -20, -9]], dtype=float)
    return np.linalg.eigvals(matrix).real.max()


def press():
    return loop_case(
        {"e": "v", "v": "(F - c*v - k1*e - k3*e^3)/m", "q": "e", "F": "(u - F)/tau"},
        {"u": "-Kp*e - Kd*v - Ki*q"},
        {"m": "1200", "c": "9000", "k1": "4.0e6", "k3": "2.0e12", "tau": "0.0015",
         "Kp": "1.6e7", "Kd": "240000", "Ki": "2.0e8"},
    )  # fmt: skip


def test_the_press_loop_has_its_independently_computed_margins():
    # constructed machine; values from a separate prototype with other root isolation
    finding, margins = measure(press())
    assert finding.result == "proved"
    assert finding.check == "exact"
    assert has_no_finite_value(margins.gain_up)
    assert has_no_finite_value(margins.gain_down)
    assert holds(margins.phase, radians(56.781777), 1e-8)
    assert holds(margins.delay, 4.674509e-3, 1e-9)
    assert holds(margins.peak_sensitivity, 1.255549, 1e-6)


def test_the_bearing_loop_has_its_independently_computed_margins():
    case = loop_case(
        {"x": "v", "v": "k*(((i0 + i)/(g0 - x))^2 - ((i0 - i)/(g0 + x))^2)/m", "i": "(u - i)/tau"},
        {"u": "-Kp*x - Kd*v"},
        {"m": "8", "k": "3e-06", "i0": "2.5", "g0": "0.0004", "tau": "0.00015", "Kp": "15000", "Kd": "28"},
    )
    _, margins = measure(case)
    assert has_no_finite_value(margins.gain_up)
    # at w = 0 the factor is (i0/g0)/Kp: the negative stiffness over the position gain
    assert holds(margins.gain_down, 20 * log10(2.5 / 0.0004 / 15000), 1e-9)
    assert holds(margins.phase, radians(44.078541), 1e-8)
    assert holds(margins.delay, 1.228996e-3, 1e-9)
    assert holds(margins.peak_sensitivity, 1.334702, 1e-6)


def test_the_crane_loop_has_its_independently_computed_margins():
    rate = "(u - b*v + mL*sin(th)*(L*w^2 + g*cos(th)) + mL*d*w*cos(th))/(M + mL*sin(th)^2)"
    case = loop_case(
        {"x": "v", "v": rate, "th": "w", "w": f"-(g*sin(th) + d*w + cos(th)*{rate})/L"},
        {"u": "-Kx*x - Kv*v - Ka*th - Kw*w"},
        {"M": "850", "mL": "600", "L": "6", "b": "220", "d": "0.06", "g": "9.81",
         "Kx": "900", "Kv": "2300", "Ka": "-5200", "Kw": "-1500"},
    )  # fmt: skip
    _, margins = measure(case)
    assert has_no_finite_value(margins.gain_up)
    assert has_no_finite_value(margins.gain_down)
    assert holds(margins.phase, radians(83.064672), 1e-8)
    assert holds(margins.delay, 0.416037, 1e-6)
    assert margins.peak_sensitivity.lower == margins.peak_sensitivity.upper == 1
    assert margins.peak_sensitivity_at.upper is None


def test_the_transporter_loop_is_linear_inside_its_traction_limit():
    mass = "((Mw+mb)*(Ib+mb*l^2) - (mb*l*cos(th))^2)"
    push, tilt = "(u - b*v + mb*l*sin(th)*w^2)", "(mb*g*l*sin(th) - r*u)"
    case = loop_case(
        {
            "th": "w",
            "w": f"((Mw+mb)*{tilt} - mb*l*cos(th)*{push})/{mass}",
            "v": f"((Ib+mb*l^2)*{push} - mb*l*cos(th)*{tilt})/{mass}",
        },
        {"u": "sat(K1*th + K2*w + K3*v, -Um, Um)"},
        {"Mw": "18", "mb": "48", "l": "0.45", "Ib": "3", "r": "0.1", "b": "8", "g": "9.81", "Um": "300",
         "K1": "1500", "K2": "420", "K3": "190"},
    )  # fmt: skip
    finding, margins = measure(case)
    assert finding.check == "exact"
    assert has_no_finite_value(margins.gain_up)
    assert holds(margins.gain_down, -8.810911, 1e-6)
    assert holds(margins.phase, radians(78.859708), 1e-8)
    assert holds(margins.delay, 60.2694e-3, 1e-7)


REACTOR = {"tr": "600", "cin": "3500", "Tin": "315", "k0": "4.268e9", "Er": "10000", "dT": "0.04286", "th": "700",
           "tj": "25", "Tcw": "293", "Kc": "9", "Tsp": "350", "Tjb": "303.33", "Thw": "340"}  # fmt: skip


def reactor():
    return loop_case(
        {
            "c": "(cin - c)/tr - k0*exp(-Er/T)*c",
            "T": "(Tin - T)/tr + dT*k0*exp(-Er/T)*c + (Tj - T)/th",
            "Tj": "(u - Tj)/tj",
        },
        {"u": "sat(Tjb - Kc*(T - Tsp), Tcw, Thw)"},
        REACTOR,
    )


def reactor_equilibrium(radius):
    """The middle steady state: every temperature fixes c, and the heat balance is solved with 60 digits."""
    with mpmath.workdps(60):
        p = {k: mpmath.mpf(Fraction(v).numerator) / Fraction(v).denominator for k, v in REACTOR.items()}

        def state(temperature):
            rate = p["k0"] * mpmath.exp(-p["Er"] / temperature)
            return p["cin"] / (1 + p["tr"] * rate), rate, p["Tjb"] - p["Kc"] * (temperature - p["Tsp"])

        def heat(temperature):
            c, rate, jacket = state(temperature)
            return (p["Tin"] - temperature) / p["tr"] + p["dT"] * rate * c + (jacket - temperature) / p["th"]

        temperature = mpmath.findroot(heat, 350)
        values = (state(temperature)[0], temperature, state(temperature)[2])
        return equilibrium_at(*(Ball(Fraction(mpmath.nstr(v, 50)), radius) for v in values))


def test_the_reactor_loop_has_its_margins_at_an_irrational_equilibrium():
    # constructed machine; values from a separate prototype with certified ball roots
    finding, margins = measure(reactor(), reactor_equilibrium(Fraction(1, 10**30)))
    assert finding.result == "proved"
    assert finding.check == "interval"
    assert has_no_finite_value(margins.gain_up)
    assert holds(margins.gain_down, -9.844366, 1e-6)
    assert holds(margins.phase, radians(40.682364), 1e-8)
    assert holds(margins.delay, 60.72811, 1e-5)


def test_a_wider_enclosure_of_the_equilibrium_gives_wider_margins_that_hold_the_tight_ones():
    _, tight = measure(reactor(), reactor_equilibrium(Fraction(1, 10**30)))
    _, wide = measure(reactor(), reactor_equilibrium(Fraction(1, 10**9)))
    for name in ("gain_down", "phase", "delay", "peak_sensitivity"):
        inner, outer = getattr(tight, name), getattr(wide, name)
        assert outer.lower < inner.lower <= inner.upper < outer.upper


def gantry(interval):
    return loop_case(
        {
            "p": "p + (m/b)*(1 - exp(-b*Ts/m))*v + (Ts - (m/b)*(1 - exp(-b*Ts/m)))*uo/b",
            "v": "exp(-b*Ts/m)*v + (1 - exp(-b*Ts/m))*uo/b",
            "uo": "u",
        },
        {"u": "sat(-Kp*p - Kd*v, -Um, Um)"},
        {"m": "320", "b": "260", "Ts": interval, "Um": "4500", "Kp": "3.2e6", "Kd": "52000"},
        sample_interval="Ts",
    )


def test_the_sampled_gantry_loop_has_its_margins_and_tolerates_five_whole_samples():
    # constructed machine; a separate prototype gives 15.488622 dB, 55.858536 deg and 5.645926 samples
    finding, margins = measure(gantry("0.001"))
    assert finding.result == "proved"
    assert holds(margins.gain_up, 15.488622, 1e-6)
    assert has_no_finite_value(margins.gain_down)
    assert holds(margins.phase, radians(55.858536), 1e-8)
    assert holds(margins.delay, 0.005, 1e-12)
    assert float(margins.gain_up_at.upper) < pi / 0.001


def test_the_gantry_on_a_slow_bus_has_no_margins_because_it_is_unstable():
    finding, margins = measure(gantry("0.005"))
    assert finding.result == "refuted"
    assert margins is None


def test_a_sampled_servo_becomes_unstable_at_the_published_gain():
    # Ogata, Discrete-Time Control Systems ch. 4, 1/(s(s+1)) with hold and T = 1 (from memory): the exact
    # limit is (1 - e^-1)/(1 - 2 e^-1) = 2.3922111912, the printed 2.3925 comes from four-digit coefficients.
    case = loop_case(
        {"y": "y + (1 - exp(-T))*v + (T - 1 + exp(-T))*u", "v": "exp(-T)*v + (1 - exp(-T))*u"},
        {"u": "-y"},
        {"T": "1"},
        sample_interval="T",
    )
    _, margins = measure(case)
    assert holds(margins.gain_up, 20 * log10(2.392211191177), 1e-10)
    assert holds(margins.gain_up_at, 1.324393456, 1e-8)


@pytest.mark.parametrize(("peak", "gain", "phase"), [(2, 2.0, 28.95502437), (3, 1.5, 19.18813645)])
def test_peak_sensitivity_bounds_gain_and_phase_margin(peak, gain, phase):
    # GM >= Ms/(Ms - 1), PM >= 2 asin(1/(2 Ms)) (Skogestad and Postlethwaite, sec. 2.4, from memory)
    assert abs(peak / (peak - 1) - gain) < 1e-12
    assert abs(degrees(2 * asin(1 / (2 * peak))) - phase) < 1e-8
    loops = [transfer_loop([k], [1, 3, 3, 1]) for k in (1, 3, 5, 7)] + [press(), gantry("0.001")]
    for case in loops:
        _, margins = measure(case)
        ms = float(margins.peak_sensitivity.upper)
        if margins.gain_up.upper is not None:
            assert 10 ** (float(margins.gain_up.upper) / 20) >= ms / (ms - 1) * (1 - 1e-12)
        if margins.phase.upper is not None:
            assert float(margins.phase.upper) >= 2 * asin(1 / (2 * ms)) * (1 - 1e-12)


def test_a_resonance_that_only_touches_gain_one_limits_the_phase():
    # closed form: a = s^2 + 3/2 s + 17/8, c = 15/8: |a|^2 - |c|^2 = (W - 1)^2, -L(j) at pi - atan(4/3)
    finding, margins = measure(transfer_loop([Fraction(15, 8)], [1, Fraction(3, 2), Fraction(17, 8)]))
    assert finding.result == "proved"
    assert holds(margins.phase, pi - atan(4 / 3), 1e-12)
    assert holds(margins.phase_at, 1, 1e-12)
    assert holds(margins.delay, pi - atan(4 / 3), 1e-12)


@pytest.mark.parametrize(
    ("numerator", "denominator"),
    [
        ([2, 1], [1, 2, 3, 1, 0]),
        ([12, 6, 4], [1, 4, 7, 6, 1]),
        ([1, 1, 20], [1, 2, 21, 20, 5]),
        ([30, 40], [1, 3, -4, 8]),
        ([6, 11, 12], [1, 1, 1, -3]),
        ([-0.5], [1, 0.2, 1]),
    ],
)
def test_margins_agree_with_a_dense_frequency_grid(numerator, denominator):
    # numpy on 400 000 frequencies, crossings at sign changes
    finding, margins = measure(transfer_loop(numerator, denominator))
    assert finding.result == "proved"
    w = np.geomspace(1e-4, 1e4, 400_000)
    loop = np.polyval(numerator, 1j * w) / np.polyval(denominator, 1j * w)
    assert holds(margins.peak_sensitivity, max(1.0, np.abs(1 / (1 + loop)).max()), 1e-6)
    gains = -1 / loop.real[np.flatnonzero(np.diff(np.sign(loop.imag)))]
    zero = -denominator[-1] / numerator[-1]
    gains = np.append(gains[np.isfinite(gains)], zero)
    for enclosure, found in (
        (margins.gain_up, gains[gains > 1]),
        (margins.gain_down, 1 / gains[(gains > 0) & (gains < 1)]),
    ):
        if found.size:
            assert abs(abs(float(enclosure.lower)) - 20 * log10(found.min())) < 1e-2
        else:
            assert has_no_finite_value(enclosure)
    crossings = np.flatnonzero(np.diff(np.sign(np.abs(loop) - 1)))
    angles = np.angle(-loop[crossings])
    if crossings.size:
        assert holds(margins.phase, np.abs(angles).min(), 1e-3)
        assert holds(margins.delay, ((angles % (2 * pi)) / w[crossings]).min(), 1e-3)
    else:
        assert has_no_finite_value(margins.phase)
        assert has_no_finite_value(margins.delay)
