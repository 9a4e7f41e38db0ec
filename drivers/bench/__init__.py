"""The simulated unit, its hand and its digitiser, reached through a socket that speaks SCPI."""
