"""`python -m olefinlp` is the same as `olefinlp`."""

from olefinlp.cli import app

app()
