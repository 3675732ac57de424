"""The command `slackwater`."""

from pyharness.cli.main import main

__all__ = ["main"]
