"""How long a campaign of whole records takes: network, instruments, truth and files."""

from __future__ import annotations

import sys
import time
from pathlib import Path

import pytest

from analyzer.forge import forge_campaign, parse_scenario
from analyzer.records import read

SCENARIO = """
[record]
samples_per_cycle = 96
duration_s = 0.25
channels = ["va", "vb", "vc", "vn", "ia", "ib", "ic", "in"]

[network]
frequency_hz = 50
source = { voltage_rms_v = 11660, z1 = { x_ohm = 1.9, x_over_r = { uniform = [5, 30] } }, \
z0 = { x_ohm = 1.6, x_over_r = 12 } }
line = { z1 = { r_ohm = 0.6, x_ohm = 2.9 }, z0 = { r_ohm = 1.5, x_ohm = 8.8 } }
loads = [{ z = { magnitude_ohm = 105, angle_deg = 20 } }]

[[events]]
do = "fault"
type = { choice = ["AG", "BC", "CAG", "ABC"] }
fraction = { uniform = [0.05, 0.95] }
angle_deg = { uniform = [-180, 180] }
not_before_s = 0.06

[[events]]
do = "open"
after_s = 0.1

[instruments]
ct_class = { name = "5P" }
vt_class = { name = "3P" }
anti_alias = { order = 2, cutoff_hz = 1500 }
noise = { current_rms_a = 1, voltage_rms_v = 4 }
converter = { bits = 16, current_range_a = 20000, voltage_range_v = 40000 }
"""


@pytest.mark.bench
def test_two_hundred_records_on_two_cores_take_less_than_twenty_seconds(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    scenario = parse_scenario(SCENARIO)
    start = time.perf_counter()
    records = forge_campaign(scenario, tmp_path, count=200, seed=7, workers=2)
    elapsed_s = time.perf_counter() - start
    with capsys.disabled():
        sys.stdout.write(f"\n200 records of 0.25 s, 8 channels, 2 processes: {elapsed_s:.1f} s\n")
    assert len(records) == 200
    for record in (records[0], records[-1]):
        read_back = read(record.files[0])
        assert (len(read_back.analog), read_back.n_samples) == (8, 1200)
    assert elapsed_s < 20.0
