"""`python -m opacity` is the command `opacity`."""

from opacity.cli.main import run

run()
