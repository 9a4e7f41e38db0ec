"""From a capture to a reading: harmonics in the crest frame with their uncertainties. Pure."""
