"""Errors a person can act on: whose fault, what was found, where, and what to do.

Every class carries one paragraph for the person at the keyboard. Commands print it to stderr and leave with exit code 2.
"""


class PbmError(Exception):
    """One paragraph: what was found, where (file, line, field), and what to do."""


class InputError(PbmError):
    """A file or an argument that the person gave cannot be used as it is."""


class LabError(InputError):
    """`lab.toml` holds mistakes; the text lists all of them."""


class PlanError(InputError):
    """`plan.toml` is missing, malformed, or does not fit the history."""


class FeedError(PbmError):
    """The live feed or its store cannot go on; nothing that was acknowledged is lost."""


class StoreWaits(FeedError):  # noqa: N818  named for what it does, which passes
    """The store cannot take anything now (its disk is full, or it is locked); the same may be tried again when that has passed."""


def one_line(error: Exception) -> str:
    """The text of a library's error on one line, to stand inside a paragraph."""
    return " ".join(str(error).split())
