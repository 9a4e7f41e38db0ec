"""Instruments over VISA: links, IEEE 488.2 blocks, dialects as data."""
