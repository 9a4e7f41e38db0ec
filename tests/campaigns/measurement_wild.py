"""Ten thousand inputs that nobody sane would measure: a reading or a typed refusal, never a warning.

Run ``python -m tests.campaigns.measurement_wild [inputs] [seed]``.
"""

from __future__ import annotations

import collections
import sys
import warnings

import numpy as np

from tests.measurement.wild import attempt, wild_call

if __name__ == "__main__":
    inputs = int(sys.argv[1]) if len(sys.argv) > 1 else 10_000
    rng = np.random.default_rng(int(sys.argv[2]) if len(sys.argv) > 2 else 2024)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        outcomes = collections.Counter(attempt(wild_call(rng)) for _ in range(inputs))
    for outcome, count in outcomes.most_common():
        print(f"{outcome:16s} {count:6d}")
    print(f"{inputs} inputs, no other exception, no warning")
