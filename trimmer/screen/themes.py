"""Two palettes of our own; every colour on the screen is one of their variables."""

from __future__ import annotations

from textual.theme import Theme

DARK = Theme(
    name="workshop-dark",
    primary="#e8c37a",
    secondary="#9fb8ad",
    accent="#f0efe6",
    success="#a9d18e",
    warning="#ffc24b",
    error="#ff7a66",
    foreground="#e9e6dc",
    background="#14150f",
    surface="#1d1f17",
    panel="#2a2d22",
    dark=True,
)
LIGHT = Theme(
    name="workshop-light",
    primary="#6b4a00",
    secondary="#2f5a4c",
    accent="#11120d",
    success="#2d6a1f",
    warning="#8a5200",
    error="#a81c0c",
    foreground="#1b1c16",
    background="#f6f3e8",
    surface="#ece8d9",
    panel="#dfdac8",
    dark=False,
)
