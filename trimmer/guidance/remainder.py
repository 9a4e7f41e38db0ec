"""What is left when the trims are done, by cause."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

import numpy as np

from trimmer.guidance.advice import Cause
from trimmer.guidance.field import Array
from trimmer.guidance.firsts import slewing_in
from trimmer.measurement.diagnose import REMEDIES, diagnose
from trimmer.measurement.reading import Reading

FORM: Final = 0.1
"""The closed form of slewing is trusted to this share of itself."""


def remainder(reading: Reading | None, basis: Array | None) -> tuple[Cause, ...]:
    """Name the causes of what the trims do not reach, largest first.

    Slewing is told from bandwidth first, since one reading shows both at once; the rest is diagnosed
    without it.

    Parameters
    ----------
    reading
        The last reading; None where there is none at hand.
    basis
        Shape (m, r), orthonormal basis of what the trims reach; None where it is not known.
    """
    if reading is None:
        return ()
    causes: list[Cause] = []
    slewed = slewing_in(reading)
    if slewed is not None:
        thd = float(np.linalg.norm(slewed))
        causes.append(Cause("slewing", thd, REMEDIES["slewing"], FORM * thd))
        reading = replace(reading, parts=reading.parts - slewed)
    items = diagnose([reading], reach=basis)
    causes += [Cause(i.cause, i.thd, i.remedy, i.thd_sigma) for i in items]
    return tuple(sorted(causes, key=lambda cause: -cause.thd))
