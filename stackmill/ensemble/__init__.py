"""Many dies and mills that may be true, and what share of them succeeds."""
