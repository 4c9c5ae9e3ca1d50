"""A job: its files bound, its materials found, everything checked against everything else with line numbers."""

from __future__ import annotations

from stackmill.jobs.exact import taken_as_exact
from stackmill.jobs.job import Job, bare_job, load_job, overrides

__all__ = ["Job", "bare_job", "load_job", "overrides", "taken_as_exact"]
