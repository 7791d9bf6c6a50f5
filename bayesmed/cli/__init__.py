"""The command line: ``bayesmed report`` and ``bayesmed check``."""

from bayesmed.cli.command import main

__all__ = ["main"]
