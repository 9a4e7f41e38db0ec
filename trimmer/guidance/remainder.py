"""What is left when the trims are done, by cause."""

from __future__ import annotations

from trimmer.guidance.advice import Cause
from trimmer.guidance.field import Array
from trimmer.measurement.diagnose import diagnose
from trimmer.measurement.reading import Reading


def remainder(reading: Reading | None, basis: Array | None) -> tuple[Cause, ...]:
    """Name the causes of what the trims do not reach, largest first.

    Parameters
    ----------
    reading
        The last reading; None where there is none at hand.
    basis
        Shape (m, r), orthonormal basis of what the trims reach; None where it is not known.
    """
    if reading is None:
        return ()
    items = diagnose([reading], reach=basis)
    return tuple(Cause(i.cause, i.thd, i.remedy, i.thd_sigma) for i in items)
