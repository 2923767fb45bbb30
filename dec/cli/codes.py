"""Exit codes, and the error for words that make no question."""

__all__ = [
    "FINDING", "INTERRUPTED", "NOT_WRITTEN", "OK", "UNSOLVABLE", "UNUSABLE", "USAGE", "UsageError",
]  # fmt: skip

OK, FINDING, USAGE, UNUSABLE, UNSOLVABLE, NOT_WRITTEN, INTERRUPTED = 0, 1, 2, 3, 4, 5, 130


class UsageError(Exception):
    """Words on the command line that do not make a question."""
