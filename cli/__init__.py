"""The command ``reweight``: parses, calls public names, prints.  No computation."""

from reweight.cli.application import main

__all__ = ["main"]
