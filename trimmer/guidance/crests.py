"""Crests and the trims named after them."""

from __future__ import annotations

import numpy as np

from trimmer.guidance.field import Array

CLEARLY = 2.0
"""How much more of a trim's effect must be on the other crest for its label to be called swapped."""


def crest_weights(orders: int) -> tuple[Array, Array]:
    """Give the weights of crest parts in the pointedness of the upper and of the lower crest.

    A crest's pointedness is its height over a sine's, less that an eighth of a period away:
    ``sum c_k (1 - cos(k pi / 4))`` for the upper, with the mirror's signs for the lower.
    """
    k = np.arange(2, orders + 1)
    upper = 1.0 - np.cos(k * np.pi / 4.0)
    return upper, upper * np.where(k % 2 == 0, -1.0, 1.0)


def worse_crest(parts: Array) -> int:
    """Tell which crest is further from a sine's: 0 upper, 1 lower."""
    upper, lower = crest_weights(parts.size // 2 + 1)
    return 0 if abs(upper @ parts[0::2]) >= abs(lower @ parts[0::2]) else 1


def are_swapped(columns: Array) -> bool:
    """Tell whether each trim clearly shapes the crest that the other is named after.

    Parameters
    ----------
    columns
        Shape (2, m), of the trims called upper and lower.
    """
    upper, lower = crest_weights(columns.shape[1] // 2 + 1)
    on_upper = np.abs(columns[:, 0::2] @ upper)
    on_lower = np.abs(columns[:, 0::2] @ lower)
    return bool(on_lower[0] > CLEARLY * on_upper[0] and on_upper[1] > CLEARLY * on_lower[1])
