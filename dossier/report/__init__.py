"""Says what was found; computes nothing."""
