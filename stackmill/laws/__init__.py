"""Published physics as pure functions on numpy arrays: keyword-only, no files, no materials."""
