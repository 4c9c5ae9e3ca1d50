"""One region's relief, for the tests of tables and pictures."""

from __future__ import annotations

from stackmill.planning.relief import How, relief_tables


def relief_table(job, *, when=None, region=None, **how):
    """One region's relief: the named one's, or the first."""
    return relief_tables(job, when=when, region=region, how=How(**how))[0]
