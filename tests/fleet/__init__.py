"""Units, hands and trials shared by tests, benchmarks and campaigns of the guidance."""
