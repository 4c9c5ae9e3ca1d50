"""`python -m stackmill`."""

from stackmill.cli.main import run

run()
