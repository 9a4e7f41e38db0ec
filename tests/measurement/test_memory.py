"""A reading needs little beside the samples themselves."""

from __future__ import annotations

import subprocess
import sys
import tracemalloc

import numpy as np
import pytest

from tests.measurement.waves import Wave, parts_of
from trimmer.measurement import measure


@pytest.mark.parametrize("count", [150_000, 1_000_000])
def test_at_most_24_bytes_a_sample_beyond_the_input(count):
    rng = np.random.default_rng(0)
    samples = Wave(parts_of(k2=0.01), 0.00631).samples(count) + 0.01 * rng.standard_normal(count)
    measure(samples[:5000], 1.0)
    tracemalloc.start()
    measure(samples, 1.0)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 24 * count


def test_the_package_starts_without_the_heavy_libraries():
    script = (
        "import sys, trimmer.measurement\n"
        "print([m for m in ('scipy', 'drivers', 'textual', 'matplotlib') if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stdout.strip() == "[]"
