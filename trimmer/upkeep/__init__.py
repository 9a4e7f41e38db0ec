"""Around the trimming: is the unit warm, is it good over its range, does the setting still hold. Pure."""
