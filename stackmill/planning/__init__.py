"""When to stop, which tilt, which recipe."""
