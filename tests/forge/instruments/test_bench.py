"""How long a chain takes for a quarter of a second, eight channels at 96 samples per cycle."""

import time

import pytest

from tests.forge.instruments.test_chain import FULL, chain, record


def fastest(spec):
    times = []
    for _ in range(7):
        start = time.perf_counter()
        record(spec)
        times.append(time.perf_counter() - start)
    return min(times)


@pytest.mark.bench
def test_time_of_a_chain():
    unsaturated = chain(**{**FULL, "ct": None})
    assert fastest(unsaturated) < 0.050
    assert fastest(chain(**FULL)) < 0.100
