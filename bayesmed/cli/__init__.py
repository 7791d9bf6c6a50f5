"""The command line: ``bayesmed report``, ``compare``, ``check`` and ``example``."""

from bayesmed.cli.command import main

__all__ = ["main"]
