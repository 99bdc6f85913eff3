"""Capacitive voltage transformer as a linear equivalent that rings when the primary collapses.

Thévenin equivalent of the divider (C1 + C2), compensating reactor with its losses, and the intermediate
transformer's magnetising inductance in parallel with the burden: third order. A ferroresonance suppressor is
left out; a damped one acts like more burden.

References
----------
This equivalent is usual in the protection literature (capacitor voltage transformer transients and distance
relays), from memory; tuning and scaling below are our own derivation.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.checks import need_positive
from analyzer.forge.instruments.linear import ModalSystem, Tones, run_linear

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class CapacitiveVT:
    """A capacitive voltage transformer; impedances on its intermediate voltage side.

    Parameters
    ----------
    capacitance_f : float
        Sum of the divider's two capacitances. [F]
    loss_ohm : float
        Of reactor and intermediate transformer. [ohm]
    magnetising_h : float
        Of the intermediate transformer. [H]
    burden_ohm : float
        Resistive. [ohm]
    tuned_freq_hz : float
        Power frequency at which reactor and ratio are set so that the output equals the input. [Hz]

    Raises
    ------
    ForgeError
        If a value is not positive.
    """

    capacitance_f: float
    loss_ohm: float
    magnetising_h: float
    burden_ohm: float
    tuned_freq_hz: float

    def __post_init__(self) -> None:
        need_positive(
            capacitance_f=self.capacitance_f,
            loss_ohm=self.loss_ohm,
            magnetising_h=self.magnetising_h,
            burden_ohm=self.burden_ohm,
            tuned_freq_hz=self.tuned_freq_hz,
        )

    @classmethod
    def from_rating(
        cls,
        *,
        capacitance_f: float,
        intermediate_voltage_v: float,
        burden_va: float,
        tuned_freq_hz: float,
        loss_share: float = 0.02,
        magnetising_share: float = 0.1,
    ) -> CapacitiveVT:
        """Build from nameplate values.

        Parameters
        ----------
        intermediate_voltage_v : float
            RMS voltage of the tap without load. [V]
        burden_va : float
            Resistive burden at that voltage. [VA]
        loss_share, magnetising_share : float
            Losses' resistance over the burden's; magnetising over burden current. Our choice of order.
        """
        need_positive(
            intermediate_voltage_v=intermediate_voltage_v,
            burden_va=burden_va,
            loss_share=loss_share,
            magnetising_share=magnetising_share,
            tuned_freq_hz=tuned_freq_hz,
        )
        burden = intermediate_voltage_v**2 / burden_va
        return cls(
            capacitance_f=capacitance_f,
            loss_ohm=loss_share * burden,
            magnetising_h=burden / magnetising_share / (2 * math.pi * tuned_freq_hz),
            burden_ohm=burden,
            tuned_freq_hz=tuned_freq_hz,
        )

    @property
    def reactor_h(self) -> float:
        """Inductance that leaves no phase displacement at the tuned frequency. [H]"""
        omega = 2 * math.pi * self.tuned_freq_hz
        load = 1 / (1 / self.burden_ohm + 1 / (1j * omega * self.magnetising_h))
        # (R + jX)/load is real where the series branch has the load's angle.
        reactance = self.loss_ohm * load.imag / load.real
        return (reactance + 1 / (omega * self.capacitance_f)) / omega

    def system(self) -> ModalSystem:
        """Transfer function from primary voltage to secondary voltage referred to the primary.

        Raises
        ------
        ForgeError
            If two modes coincide.
        """
        c, reactor, lm = self.capacitance_f, self.reactor_h, self.magnetising_h
        rb, rl = self.burden_ohm, self.loss_ohm
        # States: capacitor voltage, reactor current, magnetising current, each in volts through a resistance
        # of the burden's size so that the matrix is balanced.
        a = np.array(
            [
                [0.0, 1 / (rb * c), 0.0],
                [-rb / reactor, -(rl + rb) / reactor, rb / reactor],
                [0.0, rb / lm, -rb / lm],
            ]
        )
        b = np.array([0.0, rb / reactor, 0.0])
        out = np.array([0.0, 1.0, -1.0])
        plain = ModalSystem.from_state_space(a, b, out, 0.0)
        gain = abs(complex(plain.response(self.tuned_freq_hz)))
        return ModalSystem(poles=plain.poles, residues=plain.residues / gain, direct=0.0)


def transform_voltage(primary_v: Real, vt: CapacitiveVT, *, sample_rate_hz: float, tones: Tones) -> Real:
    """Pass primary voltages through capacitive voltage transformers, one per row.

    Parameters
    ----------
    primary_v : ndarray, shape (phases, n)
    vt : CapacitiveVT
    sample_rate_hz : float
    tones : Tones
        The steady state before the first sample.

    Returns
    -------
    ndarray, shape (phases, n)
        Secondary voltages referred to the primary. [V]
    """
    if sample_rate_hz < 20 * vt.tuned_freq_hz:
        raise ForgeError("bad-value", "too slow for the transformer's transient", where="sample_rate_hz")
    return run_linear(vt.system(), primary_v, sample_rate_hz=sample_rate_hz, tones=tones)
