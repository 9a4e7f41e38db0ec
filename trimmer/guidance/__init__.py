"""From readings to the next turn. Pure: no input or output, no clock, no hidden random state."""
