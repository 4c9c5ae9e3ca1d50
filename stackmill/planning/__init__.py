"""When to stop, and what the answer rests on."""
