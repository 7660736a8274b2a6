"""`python -m adjust` is `brasscap`."""

from adjust.cli import run

run()
