"""Guides the two sine-shaping trims of an analog function generator from live measurements."""

__version__ = "0.1.0"
