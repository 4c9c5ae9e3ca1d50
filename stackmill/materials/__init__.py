"""The materials library: what is known of each material, how well, and who says so."""
