"""What a second of contact is worth: bits, and the chance that they arrive."""

from planner.link.table import LinkOption, LinkTable, link_table

__all__ = ["LinkOption", "LinkTable", "link_table"]
