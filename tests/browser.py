"""The browser that tests look at pages with."""

import os
import shutil

import pytest

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
HOW_TO_GET_IT = "no chromium to look with: apt-get install chromium"


def require_chromium() -> str:
    """Path of the browser. Without one the test is skipped, or fails where CI=true says that it must run."""
    if CHROMIUM is None:
        (pytest.fail if os.environ.get("CI") == "true" else pytest.skip)(HOW_TO_GET_IT)
    return CHROMIUM
