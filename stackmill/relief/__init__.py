"""Across: how the surface moves where neighbours fall at different speeds, and what is left standing."""
