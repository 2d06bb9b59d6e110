"""`python -m olefinlp` is the same as `olefinlp`."""

from olefinlp.cli import start

start()
