"""Scenario texts that the tests share."""

from __future__ import annotations

PLAIN = """\
title = "A plain fault."

[record]
station = "Invented"
samples_per_cycle = 32
duration_s = 0.2

[network]
frequency_hz = 50
source = { voltage_rms_v = 11000, z1 = { r_ohm = 0.3, x_ohm = 4.0 }, z0 = { r_ohm = 0.5, x_ohm = 6.0 } }
line = { z1 = { r_ohm = 0.5, x_ohm = 3.0 }, z0 = { r_ohm = 1.2, x_ohm = 9.0 } }

[[events]]
do = "fault"
type = "AG"
fraction = 0.5
angle_deg = 30
not_before_s = 0.06

[instruments]
noise = { current_rms_a = 0.5, voltage_rms_v = 2.0 }
converter = { bits = 16, current_range_a = 10000, voltage_range_v = 30000 }
"""

VARIED = PLAIN.replace("fraction = 0.5", "fraction = { uniform = [0.1, 0.9] }").replace(
    "angle_deg = 30", "angle_deg = { uniform = [-180, 180] }"
)


def changed(old: str, new: str, *, text: str = PLAIN) -> str:
    assert old in text
    return text.replace(old, new, 1)


def with_event(event: str, *, text: str = PLAIN) -> str:
    return changed("[instruments]", f"[[events]]\n{event}\n\n[instruments]", text=text)
