"""Findings documents for tests: one written out by hand after the contract, and generated ones."""

from __future__ import annotations

from typing import Any

from hypothesis import strategies as st


def quantity(value: float | None, unit: str, half_width: float | None = None) -> dict[str, Any]:
    """A quantity as the contract has it, with an interval of 1.96 standard deviations each way."""
    if value is None or half_width is None:
        return {"value": value, "std": None, "low": None, "high": None, "unit": unit}
    return {
        "value": value,
        "std": half_width / 1.96,
        "low": value - half_width,
        "high": value + half_width,
        "unit": unit,
    }


def impedance(r_ohm: float | None, x_ohm: float | None, magnitude: float | None, angle: float | None) -> dict:
    return {
        "r_ohm": quantity(r_ohm, "ohm", 0.1),
        "x_ohm": quantity(x_ohm, "ohm", 0.1),
        "magnitude_ohm": quantity(magnitude, "ohm", 0.1),
        "angle_deg": quantity(angle, "deg", 0.5),
        "x_over_r": quantity(x_ohm / r_ohm if r_ohm and x_ohm else None, "1", 0.3),
        "correlation_rx": -0.4 if r_ohm else None,
    }


def full_document() -> dict[str, Any]:
    """A phase-A-to-ground fault; every field of the contract, written out."""
    unknown = impedance(None, None, None, None)
    return {
        "schema": "faultassay/findings/1",
        "software": {"name": "faultassay", "version": "0.1.0"},
        "record": {
            "path": "riverbend/feeder_4.cfg",
            "sha256": "0" * 64,
            "format": "comtrade",
            "revision": 1999,
            "encoding": "binary",
            "station": "Riverbend",
            "device": "Feeder 4",
            "start_time": "2024-05-01T12:00:00.000000",
            "trigger_time": "2024-05-01T12:00:00.100000+02:00",
            "clock": {
                "quality": "locked to a reliable source",
                "time_code": "2",
                "local_code": "2",
                "leap_second": "none",
            },
            "nominal_frequency_hz": 50.0,
            "sample_rates_hz": [4800.0],
            "n_samples": 2400,
            "duration_s": 0.49979,
            "n_analog": 8,
            "n_digital": 2,
            "problems": [
                {"code": "text-encoding", "severity": "note", "message": "read as cp1252", "where": "a.cfg"},
                {"code": "missing-samples", "severity": "warning", "message": "3 missing", "where": "VA"},
            ],
        },
        "terminals": [
            {
                "name": "Feeder 4",
                "channels": {"ia": "IA", "ib": "IB", "ic": "IC", "va": "VA", "vb": "VB", "vc": "VC"},
                "how": "by-name",
                "confidence": 0.9,
            }
        ],
        "events": [
            {
                "terminal": "Feeder 4",
                "kind": "fault",
                "fault_type": "AG",
                "direction": "forward",
                "inception": {
                    "time_s": quantity(0.1004, "s", 2e-5),
                    "voltage_angle_deg": quantity(12.4, "deg", 0.4),
                    "reference": "AG",
                },
                "clearing": {
                    "time_s": quantity(0.1823, "s", 1e-4),
                    "by_phase_s": {"A": quantity(0.1823, "s", 1e-4)},
                },
                "duration_s": quantity(0.0819, "s", 1e-4),
                "window_s": [0.1004, 0.18],
                "prefault": {
                    "frequency_hz": quantity(50.01, "Hz", 0.002),
                    "voltage_rms_v": {phase: quantity(63500.0, "V", 20.0) for phase in "ABC"},
                    "current_rms_a": {phase: quantity(310.0, "A", 1.0) for phase in "ABC"},
                },
                "phases": {
                    "A": {
                        "symmetrical_rms_a": quantity(8640.0, "A", 15.0),
                        "angle_deg": quantity(-83.1, "deg", 0.3),
                        "dc_initial_a": {**quantity(11800.0, "A", 90.0), "std_instrument": 20.0},
                        "dc_theory_a": quantity(11750.0, "A", 60.0),
                        "peak": {
                            "measured_a": 22010.0,
                            "measured_time_s": 0.1098,
                            "model_a": quantity(22000.0, "A", 80.0),
                            "model_time_s": 0.10981,
                            "ratio": quantity(1.8, "1", 0.01),
                            "worst_case_a": quantity(22400.0, "A", 90.0),
                        },
                    }
                },
                "decay": [
                    {
                        "loop": "AG",
                        "time_constant_s": {
                            "value": 0.0452, "std": 0.0007, "low": 0.0439, "high": 0.0468, "unit": "s",
                        },
                        "x_over_r": quantity(14.2, "1", 0.4),
                    }
                ],
                "x_over_r": {
                    "from_decay": quantity(14.2, "1", 0.4),
                    "from_angle": quantity(13.0, "1", 4.0),
                    "from_waveform": quantity(None, "1"),
                    "combined": quantity(14.1, "1", 0.4),
                },
                "impedance": {
                    "source": {
                        "z1": impedance(0.5, 6.8, 6.82, 85.8),
                        "z2": impedance(0.5, 6.8, 6.82, 85.8),
                        "z0": unknown,
                        "method": "incremental",
                    },
                    "faulted_loop": impedance(0.3, 2.0, 2.02, 81.5),
                    "faulted": None,
                    "total": impedance(0.8, 8.8, 8.84, 84.8),
                },
                "fit": {
                    "samples": 382,
                    "free_parameters": 4,
                    "noise_rms_a": 4.0,
                    "residual_rms_a": 4.3,
                    "reduced_chi_square": 1.15,
                    "lag1_autocorrelation": 0.2,
                    "bound_ratio": 1.05,
                },
                "comparison": [
                    {
                        "check": "offset at inception, phase A",
                        "measured": quantity(11800.0, "A", 90.0),
                        "theory": quantity(11750.0, "A", 60.0),
                        "difference": 50.0,
                        "in_sigmas": 0.9,
                        "verdict": "agrees",
                        "says": "the offset is what continuity of the current demands",
                    }
                ],
                "departures": [
                    {
                        "code": "short-window",
                        "severity": "note",
                        "time_s": None,
                        "channels": ["IA"],
                        "statistic": 4.0,
                        "threshold": 5.0,
                        "says": "four cycles of fault current",
                    }
                ],
                "verdict": "follows-theory",
            }
        ],
        "verdict": "follows-theory",
        "summary": "AG fault, forward, 8.64 kA symmetrical; RL theory explains it.",
        "elapsed_ms": 41.2,
    }  # fmt: skip


_plain = st.floats(-1e7, 1e7)
_positive = st.floats(0.0, 1e7)


@st.composite
def quantities(draw: st.DrawFn, unit: str) -> dict[str, Any]:
    limit = 180.0 if unit == "deg" else 1e7
    low, value, high = sorted(draw(st.lists(st.floats(-limit, limit), min_size=3, max_size=3)))
    if draw(st.booleans()) or (unit == "deg" and value == -180.0):
        return {"value": None, "std": None, "low": None, "high": None, "unit": unit}
    std = draw(st.none() | _positive)
    made = {
        "value": value,
        "std": std,
        "low": draw(st.sampled_from([low, None])),
        "high": draw(st.sampled_from([high, None])),
        "unit": unit,
    }
    if std is not None and draw(st.booleans()):
        made["std_instrument"] = std / 2
    return made


@st.composite
def documents(draw: st.DrawFn) -> dict[str, Any]:
    """The full document with its events repeated and its quantities, texts and choices varied."""
    document = full_document()
    verdicts = draw(st.lists(st.sampled_from(["follows-theory", "departs", "undetermined"]), max_size=3))
    documents_of_events = []
    for k, verdict in enumerate(verdicts):
        event = _varied(full_document()["events"][0], draw)
        event["verdict"] = verdict
        event["inception"]["time_s"] = quantity(float(k), "s")
        event["inception"]["reference"] = draw(st.sampled_from(["AG", "BC", "CA"]))
        event["window_s"] = sorted(draw(st.lists(_plain, min_size=2, max_size=2)))
        event["clearing"] = draw(st.sampled_from([event["clearing"], None]))
        documents_of_events.append(event)
    document["events"] = documents_of_events
    worst = [v for v in ("departs", "undetermined", "follows-theory") if v in verdicts]
    document["verdict"] = worst[0] if worst else "no-fault"
    document["record"]["station"] = draw(st.text())
    document["record"]["revision"] = draw(st.sampled_from([1991, 1999, 2013, None]))
    document["summary"] = draw(st.text(min_size=1))
    return document


def _varied(node: Any, draw: st.DrawFn) -> Any:
    if isinstance(node, dict) and "unit" in node:
        return draw(quantities(node["unit"]))
    if isinstance(node, dict):
        return {key: _varied(value, draw) for key, value in node.items()}
    if isinstance(node, list):
        return [_varied(value, draw) for value in node]
    return node
