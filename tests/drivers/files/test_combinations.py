"""Every way of writing a part of a file, combined at random: a right reading or a refusal."""

from __future__ import annotations

import numpy as np
import pytest

from tests.drivers.files.combinations import at_random, judge, written


@pytest.mark.parametrize("seed", range(8))
def test_any_combination_is_read_right_or_refused(seed):
    rng = np.random.default_rng(seed)
    for _ in range(50):
        plan = at_random(rng)
        assert not (wrong := judge(plan)), f"{wrong}\n{plan}\n{written(plan)[:300]!r}"
