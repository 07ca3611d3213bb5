"""What the workbench's tests share."""

from pathlib import Path

ROOT = Path(__file__).parents[2]
MISSION_FILE = ROOT / "missions" / "marshlight.toml"
HIGH, LOW = "K high rate", "S low rate"


def without_markup(html: str) -> str:
    """The words of a page."""
    import re
    from html import unescape

    return " ".join(unescape(re.sub(r"<[^>]+>", " ", html)).split())
