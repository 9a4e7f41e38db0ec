"""What no turn can remove: the length of the parts at the best setting, and how well it is known.

While the best setting is still some way off, the parts expected there carry the doubt of how the
response bends on the way. A shaper at its best leaves some tenths of a per cent, spread over the
orders (common practice, and so in simulated networks), so of what is expected there the doubtful part
is shrunk towards nothing. Noise adds to a length and is taken off its square.
"""

from __future__ import annotations

from typing import Final

import numpy as np

from trimmer.guidance.field import Array, features
from trimmer.guidance.path import Found
from trimmer.guidance.seen import Seen

CREST_LEFT: Final = 0.003
"""Size of a crest part at the best setting, ratio."""
WIDER: Final = 1.15
"""The uncertainty is stated so much wider, for what a field of third degree does not know of itself."""
SKEW_LEFT: Final = 0.02
"""Size of the second order's skew part; that of higher orders falls with the square."""


def usual_left(orders: int) -> Array:
    """Give the usual size of the parts at the best setting, shape (2(orders-1),)."""
    k = np.arange(2, orders + 1)
    return np.column_stack((np.full(k.size, CREST_LEFT), SKEW_LEFT * (2.0 / k) ** 2)).ravel()


def floor_at(found: Found, best: Array, last: Seen) -> tuple[float, float]:
    """Give the THD at the best setting and its standard uncertainty, ratios.

    Only what lies outside the columns counts for the uncertainty: along them the setting is at its
    least, and an error there changes the length in second order only. The digitiser's own error is
    the same in all readings, so no number of them lowers its share.

    Parameters
    ----------
    found
        The walk and the field.
    best
        Shape (2,), the best setting.
    last
        The present reading.
    """
    belief = found.belief
    phi = features(best - belief.anchor)
    expected = belief.at(best)
    size = expected.size
    own = np.einsum("f,kfg,g->k", phi, found.given_steps, phi)
    noise = np.minimum(own, last.variance[:size])
    trust = 1.0 / (1.0 + (own - noise) / usual_left(size // 2 + 1) ** 2)
    parts = trust * expected
    noise = trust**2 * noise
    square = max(float(parts @ parts) - float(noise.sum()), 0.0)
    tangent, _ = np.linalg.qr(belief.columns(best).T)
    across = parts - tangent @ (tangent.T @ parts)
    shared = across @ np.einsum("f,kfj->kj", phi, found.through_steps)
    doubt = float(across**2 @ (trust * own + last.fixed[:size]))
    doubt += float(shared @ found.steps_covariance @ shared)
    # Of a square with noise in all its parts: 4 a'Ca + 2 tr C^2. Where the bend is not known yet, all
    # of the doubt may lie on one side: it only ever makes a length longer.
    outside = 1.0 - np.sum(tangent**2, axis=1)
    longer = float((trust * outside) @ (own - np.minimum(own, last.variance[:size])))
    variance = 4.0 * doubt + 2.0 * float(noise @ noise) + longer**2
    length = max(float(np.sqrt(square)), (2.0 * float(noise @ noise)) ** 0.25)
    return float(np.sqrt(square)), WIDER * float(np.sqrt(variance)) / (2.0 * length)
