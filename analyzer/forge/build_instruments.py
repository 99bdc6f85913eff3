"""From the instruments of a drawn scenario to the chain that they are."""

from __future__ import annotations

from typing import Any

from analyzer.forge.amounts import settled
from analyzer.forge.build import numbers, under
from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.background import Component, harmonic
from analyzer.forge.instruments.chain_spec import Errors, InstrumentChain
from analyzer.forge.instruments.class_errors import ErrorsByClass, TransformerError
from analyzer.forge.instruments.converter import Converter, Noise
from analyzer.forge.instruments.ct import CurrentTransformer, KneePoint
from analyzer.forge.instruments.filters import AntiAlias, RelayFilter
from analyzer.forge.instruments.vt import CapacitiveVT
from analyzer.forge.instruments.wiring import Wiring
from analyzer.forge.scenario import Scenario
from analyzer.forge.scenario_instruments import ClassSection, ErrorSection

_ALL = "instruments"
_LOWEST_CORNER = 0.1  # of the power frequency; our choice, far below any recorder's


def build_chain(scenario: Scenario) -> InstrumentChain:
    """Return the instrument chain of a drawn scenario.

    Parameters
    ----------
    scenario : Scenario
        Without distributions.

    Raises
    ------
    ForgeError
        If a value is out of range; `where` is the scenario's key.
    """
    section = scenario.instruments
    relay_filter = _relay_filter(scenario)
    keep = 1 if relay_filter is None else relay_filter.keep_every
    anti_alias = converter = noise = wiring = None
    if section.anti_alias is not None:
        with under(f"{_ALL}.anti_alias"):
            if settled(section.anti_alias.cutoff_hz) < _LOWEST_CORNER * scenario.network.frequency_hz:
                raise ForgeError(
                    "bad-value", "is so low that little of the power frequency passes", where="cutoff_hz"
                )
            anti_alias = AntiAlias(
                kind=section.anti_alias.kind,
                order=section.anti_alias.order,
                cutoff_hz=settled(section.anti_alias.cutoff_hz),
            )
    if section.converter is not None:
        with under(f"{_ALL}.converter"):
            converter = Converter(
                bits=section.converter.bits,
                **numbers(section.converter, "current_range_a", "voltage_range_v"),
            )
    if section.noise is not None:
        with under(f"{_ALL}.noise"):
            noise = Noise(**numbers(section.noise, "current_rms_a", "voltage_rms_v", "lag1_autocorrelation"))
    if section.wiring is not None:
        with under(f"{_ALL}.wiring"):
            wiring = Wiring(
                reversed_polarity=section.wiring.reversed,
                exchanged=section.wiring.exchanged,
                wrong_scale=tuple((c, settled(v)) for c, v in section.wiring.wrong_scale.items()),
            )
    # Transformers first: what is wrong with one of them is said under its own key.
    parts: dict[str, Any] = {
        "ct": _ct(scenario),
        "vt": _vt(scenario),
        "ct_errors": _errors(section.ct_class, section.ct_errors, "ct"),
        "vt_errors": _errors(section.vt_class, section.vt_errors, "vt"),
        "background": _background(scenario),
    }
    with under(_ALL, channels="record.channels", sample_rate_hz="record.sample_rate_hz"):
        return InstrumentChain(
            sample_rate_hz=scenario.sample_rate_hz * keep,
            nominal_freq_hz=scenario.network.frequency_hz,
            channels=scenario.record.channels,
            wiring=wiring,
            anti_alias=anti_alias,
            skew_s=tuple((channel, settled(late)) for channel, late in section.skew_s.items()),
            noise=noise,
            converter=converter,
            relay_filter=relay_filter,
            **parts,
        )


def _ct(scenario: Scenario) -> CurrentTransformer | None:
    section, key = scenario.instruments.ct, f"{_ALL}.ct"
    if section is None:
        return None
    if scenario.record.current_ratio is None:
        raise ForgeError("bad-scenario", "is needed by instruments.ct", where="record.current_ratio")
    knee = None
    if section.knee is not None:
        frequency = section.knee.frequency_hz
        with under(f"{key}.knee", freq_hz="frequency_hz"):
            knee = KneePoint(
                freq_hz=scenario.network.frequency_hz if frequency is None else settled(frequency),
                **numbers(section.knee, "voltage_v", "exciting_current_a", "exponent"),
            )
    sides = scenario.record.current_ratio
    common = numbers(section, "winding_ohm", "burden_ohm", "burden_h", "core", "remanence_pu")
    inductance = numbers(section, "magnetising_h", "time_constant_s")
    by_time = "time_constant_s" in inductance
    with under(key, magnetising_h="time_constant_s" if by_time else "magnetising_h"):
        build = CurrentTransformer.with_time_constant if by_time else CurrentTransformer
        return build(ratio=sides.primary / sides.secondary, knee=knee, **common, **inductance)


def _vt(scenario: Scenario) -> CapacitiveVT | None:
    section = scenario.instruments.capacitive_vt
    if section is None:
        return None
    names = ("capacitance_f", "intermediate_voltage_v", "burden_va", "loss_share", "magnetising_share")
    with under(f"{_ALL}.capacitive_vt"):
        return CapacitiveVT.from_rating(
            tuned_freq_hz=scenario.network.frequency_hz, **numbers(section, *names)
        )


def _errors(by_class: ClassSection | None, stated: tuple[ErrorSection, ...] | None, kind: Any) -> Errors:
    if by_class is not None:
        with under(f"{_ALL}.{kind}_class", class_name="name"):
            return ErrorsByClass(
                class_name=by_class.name, kind=kind, percent_of_rated=settled(by_class.percent_of_rated)
            )
    if stated is None:
        return None
    errors = []
    for k, error in enumerate(stated):
        with under(f"{_ALL}.{kind}_errors[{k}]", ratio_pu="ratio_percent"):
            errors.append(
                TransformerError(
                    ratio_pu=settled(error.ratio_percent) / 100.0, phase_minutes=settled(error.phase_minutes)
                )
            )
    return tuple(errors)


def _background(scenario: Scenario) -> tuple[Component, ...]:
    parts = []
    for k, section in enumerate(scenario.instruments.background):
        with under(f"{_ALL}.background[{k}]", freq_hz="frequency_hz"):
            common = numbers(section, "rms", "angle_deg")
            if section.harmonic is not None:
                hertz = scenario.network.frequency_hz
                parts.append(harmonic(section.harmonic, on=section.on, fundamental_hz=hertz, **common))
            else:
                more = numbers(section, "sequence", "drift_hz_per_s")
                freq_hz = numbers(section, "frequency_hz")["frequency_hz"]
                parts.append(Component(on=section.on, freq_hz=freq_hz, **common, **more))
    return tuple(parts)


def _relay_filter(scenario: Scenario) -> RelayFilter | None:
    section = scenario.instruments.relay_filter
    if section is None:
        return None
    with under(f"{_ALL}.relay_filter"):
        return RelayFilter(
            kind=section.kind,
            mimic_time_constant_s=settled(section.mimic_time_constant_s),
            keep_every=section.keep_every,
            applies_to=section.applies_to,
        )
