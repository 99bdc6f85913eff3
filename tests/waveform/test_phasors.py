"""Phasors' uncertainty: against Monte Carlo, and against the worked example of the GUM, annex H.2."""

from __future__ import annotations

import csv
import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.waveform.phasors import Phasor, combine, degrees_of, wrapped_deg

quiet = settings(deadline=None, derandomize=True, max_examples=60)
part = st.floats(-1e3, 1e3)
number = st.builds(complex, part, part)


def phasor(value: complex, *, std: float = 0.01, drift: complex = 0j) -> Phasor:
    covariance = std**2 * np.array([[1.0, 0.4], [0.4, 2.0]])
    return Phasor(value, covariance, drift)


def drawn(one: Phasor, rng: np.random.Generator, n: int, frequency: np.ndarray) -> np.ndarray:
    own = rng.multivariate_normal([0.0, 0.0], one.own_covariance, size=n)
    return one.value + own[:, 0] + 1j * own[:, 1] + one.drift * frequency


def covariance_of(values: np.ndarray) -> np.ndarray:
    return np.cov(values.real, values.imag)


def test_magnitude_angle_sum_and_quotient_spread_as_drawn_values_do():
    n = 200_000
    rng = np.random.default_rng(42)
    frequency = rng.normal(size=n)  # one draw of the frequency's error for all phasors of an event
    first = phasor(80.0 - 60.0j, std=0.3, drift=0.5 + 0.2j)
    second = phasor(-3.0 + 8.0j, std=0.05, drift=0.02 - 0.04j)
    one, other = (drawn(p, rng, n, frequency) for p in (first, second))
    assert first.magnitude_std == pytest.approx(np.abs(one).std(), rel=0.01)
    assert first.angle_std_deg == pytest.approx(np.degrees(np.angle(one)).std(), rel=0.01)
    mixed = combine([2.0, 1 - 1j], [first, second])
    np.testing.assert_allclose(mixed.covariance, covariance_of(2 * one + (1 - 1j) * other), rtol=0.03)
    quotient = first.over(second)
    assert quotient.value == pytest.approx(first.value / second.value)
    np.testing.assert_allclose(quotient.covariance, covariance_of(one / other), rtol=0.03, atol=1e-4)


def gum_rows(folder) -> dict[str, dict[str, str]]:
    with (folder / "reference" / "check_values.csv").open(encoding="utf-8", newline="") as file:
        return {row["quantity"]: row for row in csv.DictReader(file) if row["topic"] == "gum"}


def test_resistance_and_reactance_of_the_worked_example(shared_folder):
    """JCGM 100:2008, annex H.2: R, X and Z of an element from five readings of V, I and the angle.

    The readings are from memory, the results recomputed from them and equal to the printed ones.
    """
    rows = gum_rows(shared_folder)
    readings = json.loads(rows["GUM H.2 R"]["inputs"])
    v, i, phi = (np.array(readings[key]) for key in ("V", "I_mA", "phi"))
    i = i * 1e-3
    # Means of five simultaneous readings, with their covariance.
    means = np.array([v.mean(), i.mean(), phi.mean()])
    spread = np.cov([v, i, phi]) / 5
    # The readings are correlated; V/I at the angle phi is a phasor whose covariance has it all.
    z, angle = means[0] / means[1], means[2]
    value = z * np.exp(1j * angle)
    jacobian = np.array(
        [
            [np.cos(angle) / means[1], -z * np.cos(angle) / means[1], -z * np.sin(angle)],
            [np.sin(angle) / means[1], -z * np.sin(angle) / means[1], z * np.cos(angle)],
        ]
    )
    impedance = Phasor(complex(value), jacobian @ spread @ jacobian.T)
    covariance = impedance.covariance
    u_r, u_x = np.sqrt(np.diag(covariance))
    toward = np.array([value.real, value.imag]) / abs(value)
    found = {
        "R": impedance.value.real,
        "X": impedance.value.imag,
        "Z": impedance.magnitude,
        "u(R)": u_r,
        "u(X)": u_x,
        "u(Z)": impedance.magnitude_std,
        "r(R,X)": covariance[0, 1] / (u_r * u_x),
        "r(R,Z)": (covariance @ toward)[0] / (u_r * impedance.magnitude_std),
        "r(X,Z)": (covariance @ toward)[1] / (u_x * impedance.magnitude_std),
    }
    for name, number_ in found.items():
        assert number_ == pytest.approx(float(rows[f"GUM H.2 {name}"]["expected"]), rel=1e-6), name
    assert impedance.angle_std_deg == pytest.approx(np.degrees(np.sqrt(spread[2, 2])), rel=1e-9)


def test_a_quotient_of_independent_phasors_is_the_example_without_its_correlations(shared_folder):
    readings = json.loads(gum_rows(shared_folder)["GUM H.2 R"]["inputs"])
    v, i, phi = (np.array(readings[key]) for key in ("V", "I_mA", "phi"))
    u_v, u_i, u_phi = (np.std(x, ddof=1) / np.sqrt(5) for x in (v, i, phi))
    voltage = Phasor(
        complex(v.mean() * np.exp(1j * phi.mean())),
        turned(np.diag([u_v**2, (v.mean() * u_phi) ** 2]), phi.mean()),
    )
    current = Phasor(complex(i.mean()), np.diag([u_i**2, 0.0]))
    impedance = voltage.over(current)
    z = v.mean() / i.mean()
    assert impedance.magnitude == pytest.approx(z)
    # A quotient's relative variances add; the angle has the voltage's alone.
    assert impedance.magnitude_std == pytest.approx(z * np.hypot(u_v / v.mean(), u_i / i.mean()))
    assert impedance.angle_std_deg == pytest.approx(np.degrees(u_phi))


def turned(covariance: np.ndarray, angle: float) -> np.ndarray:
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    return turn @ covariance @ turn.T


def test_parts_are_those_of_the_wave():
    omega, cos, sin = 314.0, 30.0, -40.0
    times_s = np.linspace(0.0, 0.02, 7)
    one = Phasor.from_parts(cos, sin, np.diag([4.0, 9.0]), (1.0, 2.0))
    wave = np.sqrt(2) * np.real(one.value * np.exp(1j * omega * times_s))
    np.testing.assert_allclose(wave, cos * np.cos(omega * times_s) + sin * np.sin(omega * times_s))
    assert one.magnitude == pytest.approx(50.0 / np.sqrt(2))  # a root-mean-square value
    np.testing.assert_allclose(one.own_covariance, np.diag([2.0, 4.5]))
    assert one.drift == pytest.approx(complex(1.0, -2.0) / np.sqrt(2))


def test_a_shared_drift_cancels_in_a_difference_and_adds_in_a_sum():
    first, second = phasor(5 + 1j, std=0.0, drift=0.3j), phasor(2 - 1j, std=0.0, drift=0.3j)
    np.testing.assert_allclose(combine([1, -1], [first, second]).covariance, np.zeros((2, 2)), atol=1e-15)
    assert combine([1, 1], [first, second]).covariance[1, 1] == pytest.approx(0.36)


@quiet
@given(value=number, factor=number)
def test_a_factor_turns_and_stretches_value_and_uncertainty(value, factor):
    one = phasor(value, std=0.5, drift=0.1 - 0.3j)
    other = combine([factor], [one])
    assert other.value == pytest.approx(factor * value)
    # The area of the uncertainty grows with the square of the stretch, whatever the turn.
    area = np.linalg.det(other.covariance)
    assert area == pytest.approx(abs(factor) ** 4 * np.linalg.det(one.covariance), rel=1e-6, abs=1e-12)
    if abs(value) > 1e-3 and abs(factor) > 1e-3:
        assert other.angle_std_deg == pytest.approx(one.angle_std_deg, rel=1e-6)
        assert other.magnitude_std == pytest.approx(abs(factor) * one.magnitude_std, rel=1e-6)


@quiet
@given(first=number, second=number)
def test_a_quotient_times_its_divisor_is_the_dividend(first, second):
    if abs(second) < 1e-3:
        return
    exact = Phasor(second, np.zeros((2, 2)))
    quotient = phasor(first).over(exact)
    back = combine([second], [quotient])
    assert back.value == pytest.approx(first, rel=1e-9, abs=1e-9)
    np.testing.assert_allclose(back.covariance, phasor(first).covariance, rtol=1e-9)


@quiet
@given(angle_deg=st.floats(-1e5, 1e5), turns=st.integers(-50, 50))
def test_angles_are_brought_into_one_turn(angle_deg, turns):
    wrapped = wrapped_deg(angle_deg)
    assert -180.0 < wrapped <= 180.0
    assert np.cos(np.radians(wrapped - angle_deg)) == pytest.approx(1.0)
    assert wrapped_deg(angle_deg + 360.0 * turns) == pytest.approx(wrapped, abs=1e-8) or (
        abs(abs(wrapped) - 180.0) < 1e-8
    )


def test_the_edges_of_the_turn():
    assert degrees_of(-1 + 0j) == 180.0
    assert degrees_of(complex(-1.0, -0.0)) == 180.0
    assert wrapped_deg(-180.0) == 180.0
    assert wrapped_deg(540.0) == 180.0
    assert wrapped_deg(181.0) == -179.0
    assert degrees_of(0j) == 0.0


def test_nothing_has_an_angle_that_is_not_known():
    nothing = Phasor(0j, np.diag([1.0, 1.0]))
    assert nothing.magnitude_std == 1.0
    assert nothing.angle_std_deg == 180.0
    assert not nothing.is_significant(0.1)


def test_significance_is_against_the_uncertainty():
    one = Phasor(3 + 4j, np.diag([1.0, 1.0]))
    assert one.is_significant(4.9)
    assert not one.is_significant(5.1)
    drifting = Phasor(3 + 4j, np.diag([1.0, 1.0]), 7j)
    assert not drifting.is_significant(4.9)
