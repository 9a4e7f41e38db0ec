"""What is believed of any sine shaper before the first turn.

Common practice and simulated networks agree on a few facts: a trim moves crest parts and hardly any
skew part; its effect falls with the order; one hundredth of the travel moves the second order by some
5e-4 and the third by some 3e-4; the response bends so that a straight line is wrong by a tenth of the
way after a tenth to a quarter of the travel. Which way a trim works is not known, so the columns have
mean zero. Nothing here ties the two columns together: the mirror (an upside-down wave has its crests
swapped) only says how far the second trim's first turn should go, and a coupled pair may ignore it.
"""

from __future__ import annotations

from typing import Final

import numpy as np

from trimmer.guidance.field import FEATURES, Array, FieldBelief

COLUMN_C2: Final = 0.054
"""Size of a trim's effect on the second order, per travel."""
DECAY: Final = 1.5
"""Power by which the effect falls with the order."""
SKEW_SHARE: Final = 0.1
"""Size of the effect on skew parts over that on crest parts (small unless the symmetry is far off)."""
VALUE: Final = 0.2
"""Size of a part before anything is known (a bare triangle has 0.11)."""
BEND: Final = 1.2
"""Relative change of a column's third-order part per travel."""
BEND_GROWS: Final = 0.6
"""Power by which that grows with the order: higher orders wind up faster."""
CROSS: Final = 0.25
"""The same for a column as the other trim moves, over `BEND`."""
TYPICAL: Final = 0.067
"""Length of a column with the sizes above, parts per travel."""


def column_scale(orders: int) -> Array:
    """Give the size of a column's parts per travel, crest and skew by turns; shape (2(orders-1),)."""
    k = np.arange(2, orders + 1)
    crest = COLUMN_C2 * (2.0 / k) ** DECAY
    return np.column_stack((crest, SKEW_SHARE * crest)).ravel()


def general_belief(orders: int, gain: float = 1.0) -> FieldBelief:
    """Give the belief about the field of a unit of which nothing is known.

    Parameters
    ----------
    orders
        Highest order K.
    gain
        Length of the columns over the typical one: larger columns bend more per travel.
    """
    sigma = general_sigma(orders, gain)
    mean = np.zeros_like(sigma)
    return FieldBelief(np.zeros(2), mean, sigma[:, :, None] ** 2 * np.eye(FEATURES))


def general_sigma(orders: int, gain: float = 1.0) -> Array:
    """Give the size of each weight of a unit of which nothing is known; shape (2(orders-1), 10)."""
    scale = column_scale(orders)
    bend = gain * _bend(orders)
    sigma = np.empty((scale.size, FEATURES))
    sigma[:, 0] = VALUE
    sigma[:, 1:3] = (1.5 * gain * scale)[:, None]
    sigma[:, 3:6] = np.outer(gain * scale * bend, (1.0, CROSS, 1.0))
    sigma[:, 6:] = np.outer(1.5 * gain * scale * bend**2, (1.0, CROSS, CROSS, 1.0))
    return sigma


def beyond_third(orders: int, distance: Array) -> Array:
    """Give the size of what a field of third degree leaves out at distances from its anchor.

    Parameters
    ----------
    orders
        Highest order K.
    distance
        Shape (n,), shares of the travel.

    Returns
    -------
    Array
        Shape (n, 2(orders-1)): the fourth-degree term, the column bending on as it began.
    """
    return np.outer(distance**4 / 24.0, 1.5 * column_scale(orders) * _bend(orders) ** 3)


def _bend(orders: int) -> Array:
    return np.asarray(BEND * (np.repeat(np.arange(2, orders + 1), 2) / 3.0) ** BEND_GROWS)
