"""The command line: ``dec VERB ...``."""

from dec.cli.run import main

__all__ = ["main"]
