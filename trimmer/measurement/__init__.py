"""From a capture to a reading: harmonics in the crest frame with their uncertainties. Pure."""

from trimmer.measurement.combine import combine, cut_to, frames_needed
from trimmer.measurement.diagnose import Remainder, diagnose
from trimmer.measurement.figures import effective_bits, sinad_db, thd_of_total
from trimmer.measurement.measure import measure
from trimmer.measurement.packing import document, from_document
from trimmer.measurement.picture import fold, shape_of
from trimmer.measurement.reading import (
    Crests,
    Digitiser,
    Flag,
    Interval,
    MeasurementError,
    Reading,
)
from trimmer.measurement.reference import Reference, apply_reference
from trimmer.measurement.screening import digest

__all__ = [
    "Crests",
    "Digitiser",
    "Flag",
    "Interval",
    "MeasurementError",
    "Reading",
    "Reference",
    "Remainder",
    "apply_reference",
    "combine",
    "cut_to",
    "diagnose",
    "digest",
    "document",
    "effective_bits",
    "fold",
    "frames_needed",
    "from_document",
    "measure",
    "shape_of",
    "sinad_db",
    "thd_of_total",
]
