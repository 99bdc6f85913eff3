"""Impedances from the change at inception, on phasors of a circuit solved phase by phase."""

from __future__ import annotations

import numpy as np
import pytest

from analyzer.estimate.impedance import Impedances, estimate_impedances, x_over_r
from analyzer.estimate.phases import fit_channel
from analyzer.estimate.rlfit import fit_loop
from analyzer.theory.modes import FAULT_TYPES, PHASES, is_ground_fault, loop_impedance, loops_of
from analyzer.waveform.phasors import Phasor
from analyzer.waveform.prefault import fit_prefault

OMEGA, RATE_HZ, INCEPTION_S = 2 * np.pi * 50.0, 3200.0, 0.1
SOURCE = {"z1": 0.5 + 4.0j, "z0": 0.8 + 7.0j}
LINE = {"z1": 0.3 + 2.0j, "z0": 0.9 + 6.5j}
EMF = 11.5e3 * np.exp(0.4j) * np.exp(-2j * np.pi / 3 * np.arange(3))


def matrix(z: dict[str, complex]) -> np.ndarray:
    return (z["z0"] - z["z1"]) / 3 * np.ones((3, 3)) + z["z1"] * np.eye(3)


def solved(fault_type: str) -> tuple[np.ndarray, np.ndarray]:
    """Currents and voltages at the bus of a bolted fault at the line's end, without load."""
    on = [PHASES.index(p) for p in PHASES if p in fault_type]
    z = (matrix(SOURCE) + matrix(LINE))[np.ix_(on, on)]
    current = np.zeros(3, dtype=complex)
    if is_ground_fault(fault_type):
        current[on] = np.linalg.solve(z, EMF[on])
    else:
        n = len(on)
        bordered = np.block([[z, np.ones((n, 1))], [np.ones((1, n)), np.zeros((1, 1))]])
        current[on] = np.linalg.solve(bordered, np.append(EMF[on], 0))[:n]
    return current, EMF - matrix(SOURCE) @ current


def estimated(
    fault_type: str,
    *,
    load_a: complex = 0j,
    reverse: bool = False,
    noise: float = 1e-7,
    seed: int = 0,
    shrink: float = 1.0,
) -> Impedances:
    """Impedances from waves of the solved phasors; a load that the fault does not change flows on."""
    sign = -1.0 if reverse else 1.0
    load = load_a * EMF / abs(EMF[0])
    drop = SOURCE["z1"] * load
    fault, voltage = solved(fault_type)
    before = np.concatenate([sign * load, EMF - drop])
    change = np.concatenate([sign * fault, voltage - EMF])
    during = before + shrink * change
    rng = np.random.default_rng(seed)
    # Per unit of a hundredth: the noise is a share of the voltage's and of the fault current's peak.
    size = np.repeat([abs(fault).max(), abs(EMF[0])], 3)[:, None] * noise

    def waves(phasors: np.ndarray, times_s: np.ndarray) -> np.ndarray:
        wave = np.sqrt(2) * (phasors[:, None] * np.exp(1j * OMEGA * (times_s - INCEPTION_S))).real
        return wave + size * rng.normal(size=wave.shape)

    ahead, after = np.arange(0.0, 0.098, 1 / RATE_HZ), np.arange(0.101, 0.18, 1 / RATE_HZ)
    prefault = fit_prefault(ahead, waves(before, ahead), t_ref_s=INCEPTION_S, frequency_hz=50.0)
    signals = waves(during, after)
    loop = loops_of(fault_type)[0]
    loop_fit = fit_loop(
        after,
        loop.of(signals[:3]),
        omega_rad_per_s=prefault.omega_rad_per_s,
        omega_std_rad_per_s=prefault.omega_std_rad_per_s,
        noise_rms=np.sqrt(np.array(loop.weights) ** 2 @ prefault.noise_rms[:3] ** 2),
        t_ref_s=INCEPTION_S,
    )
    fits = tuple(
        fit_channel(
            after,
            signals[k],
            t_ref_s=INCEPTION_S,
            omega_rad_per_s=prefault.omega_rad_per_s,
            omega_std_rad_per_s=prefault.omega_std_rad_per_s,
            rates_per_s=np.array([20.0]),
            rate_stds_per_s=np.zeros(1),
            noise_rms=float(prefault.noise_rms[k]),
            in_band_rms=float(prefault.noise_rms[k]),
        )
        for k in range(6)
    )
    return estimate_impedances(fault_type, prefault, fits, loop_fit, inception_s=INCEPTION_S)


@pytest.mark.parametrize("load_a", [0j, 150.0 - 40.0j])
@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_every_fault_type_shows_the_source_behind_and_the_line_ahead(fault_type, load_a):
    found = estimated(fault_type, load_a=load_a)
    assert found.direction == "forward"
    assert found.z1.value == pytest.approx(SOURCE["z1"], rel=1e-5)
    if fault_type == "ABC":
        assert found.z2 is None
    else:
        assert found.z2.value == pytest.approx(SOURCE["z1"], rel=1e-5)
    if is_ground_fault(fault_type):
        assert found.z0.value == pytest.approx(SOURCE["z0"], rel=1e-5)
    else:
        assert found.z0 is None
    total = {name: SOURCE[name] + LINE[name] for name in ("z1", "z0")}
    loop = loops_of(fault_type)[0].name
    expected = loop_impedance(fault_type, loop, z1_ohm=total["z1"], z0_ohm=total["z0"])
    ahead = loop_impedance(fault_type, loop, z1_ohm=LINE["z1"], z0_ohm=LINE["z0"])
    if load_a == 0:
        assert found.total.value == pytest.approx(expected, rel=1e-5)
        assert found.driven.value == pytest.approx(expected, rel=1e-5)
        assert found.faulted_loop.value == pytest.approx(ahead, rel=1e-5)
    else:
        # The load's share of the loop current is in them; its drop behind the terminal is not in `driven`.
        weights = np.array(loops_of(fault_type)[0].weights[0])
        weights = (
            np.array([1, np.exp(2j * np.pi / 3), np.exp(-2j * np.pi / 3)]) / 3
            if fault_type == "ABC"
            else weights
        )
        current = weights @ (solved(fault_type)[0] + load_a * EMF / abs(EMF[0]))
        assert found.driven.value == pytest.approx(weights @ EMF / current, rel=1e-5)
    if len(fault_type) == 2 and fault_type.endswith("G"):
        assert found.faulted is None  # a ground fault of one phase needs the line's own zero sequence
    elif load_a == 0:
        assert found.faulted.value == pytest.approx(LINE["z1"], rel=1e-5)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_a_current_the_other_way_is_a_fault_behind(fault_type):
    found = estimated(fault_type, reverse=True)
    assert found.direction == "reverse"
    assert (found.z1, found.z2, found.z0) == (None, None, None)


def test_a_change_within_the_noise_tells_no_direction_and_no_impedance():
    found = estimated("AG", load_a=150.0 - 40.0j, noise=0.02, shrink=1e-4)
    assert found.direction == "undetermined"
    assert found.z1 is None


def test_uncertainties_are_those_of_repeated_records():
    truth, n = SOURCE["z1"], 120
    pulls = []
    for seed in range(n):
        z1 = estimated("CAG", noise=0.003, seed=seed, load_a=100.0 + 0j).z1
        apart = z1.value - truth
        pulls.append(np.array([apart.real, apart.imag]) / np.sqrt(np.diag(z1.covariance)))
    # A standard deviation of n normal values is known to 1 in sqrt(2 n).
    np.testing.assert_allclose(np.std(pulls, axis=0), 1.0, atol=3 / np.sqrt(2 * n))
    assert np.abs(np.mean(pulls, axis=0)).max() < 3 / np.sqrt(n)


def test_x_over_r_and_its_uncertainty():
    covariance = np.array([[0.004, 0.001], [0.001, 0.009]])
    impedance = Phasor(1.5 + 12.0j, covariance)
    ratio, std = x_over_r(impedance)
    assert ratio == pytest.approx(8.0)
    draws = np.random.default_rng(7).multivariate_normal([1.5, 12.0], covariance, size=100_000)
    assert std == pytest.approx(np.std(draws[:, 1] / draws[:, 0]), rel=0.02)


@pytest.mark.parametrize("value", [0j, -1 + 5j, 5j, 2 - 3j, -1 - 1j])
def test_there_is_no_x_over_r_without_a_resistance_and_a_reactance(value):
    assert x_over_r(Phasor(value, np.eye(2))) is None
    assert x_over_r(None) is None
