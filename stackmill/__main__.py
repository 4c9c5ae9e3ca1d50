"""`python -m stackmill`."""

from stackmill.cli.start import run

run()
