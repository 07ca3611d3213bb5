"""Names as they stand in ids, and which names could not be told apart there."""

import re
from collections.abc import Iterable


def slug(name: str) -> str:
    """Lower case, with every run of other characters than letters and digits as one hyphen."""
    return re.sub(r"[\W_]+", "-", name.lower()).strip("-") or "x"


def alike(names: Iterable[str]) -> list[tuple[str, str]]:
    """(earlier, later) for each name that gives the same id as an earlier one."""
    seen: dict[str, str] = {}
    found = []
    for name in names:
        if slug(name) in seen:
            found.append((seen[slug(name)], name))
        seen.setdefault(slug(name), name)
    return found
