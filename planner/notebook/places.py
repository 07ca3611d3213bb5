"""Where a notebook finds its files."""

from pathlib import Path

UPWARDS = 3  # folders above the notebook's in which a file is looked for


def find_file(path: str | Path) -> Path:
    """The file here, or seen from a folder above: a notebook may be started from its own folder or from the root."""
    folders = [Path.cwd(), *Path.cwd().parents[:UPWARDS]]
    return next((folder / path for folder in folders if (folder / path).exists()), Path(path))
