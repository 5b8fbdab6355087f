"""`pbm intake FILE...`: bring extracts into history/ and say what was taken and what was left out."""


def intake() -> None:
    """(being written)"""
