"""Down: when the surface of each column gets to each level, and how long that can be trusted."""
