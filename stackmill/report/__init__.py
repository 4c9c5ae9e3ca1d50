"""Results as rows for people and for machines."""
