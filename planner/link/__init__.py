"""What a second of contact is worth: bits, and the chance that they arrive."""

from planner.link.check import check_modes
from planner.link.page import Budget, Line, link_budget
from planner.link.table import LinkOption, LinkTable, link_table

__all__ = ["Budget", "Line", "LinkOption", "LinkTable", "check_modes", "link_budget", "link_table"]
