"""From a capture to a reading: harmonics in the crest frame with their uncertainties. Pure."""

from trimmer.measurement.measure import measure
from trimmer.measurement.reading import (
    Crests,
    Digitiser,
    Flag,
    Interval,
    MeasurementError,
    Reading,
)

__all__ = [
    "Crests",
    "Digitiser",
    "Flag",
    "Interval",
    "MeasurementError",
    "Reading",
    "measure",
]
