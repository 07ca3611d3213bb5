"""The small week as files, and missions made smaller still."""

import pytest
from small_missions import write_tables


@pytest.fixture(scope="session")
def written_week(two_day_plan, tmp_path_factory):
    """The two-day week's tables in a folder."""
    return write_tables(two_day_plan, tmp_path_factory.mktemp("week") / "out")
