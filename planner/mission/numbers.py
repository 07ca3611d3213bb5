"""Numbers as data files write them: ASCII digits, a decimal point, perhaps a power of ten."""

import re

NUMBER = re.compile(r"[-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][-+]?[0-9]+)?")


def number(text: str) -> float:
    """The number that a text is; ValueError for all else, also what Python alone takes (1_000, nan, other digits)."""
    if not NUMBER.fullmatch(text.strip()):
        raise ValueError("must be a number")
    return float(text)
