"""What all tests share: repeatable random cases, and where larger data may lie."""

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile(
    "structmap",
    derandomize=True,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.load_profile("structmap")


def folder_named_by(variable: str) -> Path:
    """Return the folder that an environment variable names, or skip the test."""
    named = os.environ.get(variable, "")
    if not named:
        pytest.skip(f"{variable} is not set; these data are not part of the project")
    folder = Path(named)
    if not folder.is_dir():
        pytest.fail(f"{variable} names {folder}, which is not a folder")
    return folder


@pytest.fixture(scope="session")
def data_folder() -> Path:
    """Folder of open coordinate and value files, larger than what is committed."""
    return folder_named_by("STRUCTMAP_DATA")


@pytest.fixture(scope="session")
def planted_folder() -> Path:
    """Folder of the script that makes problems with a known answer."""
    return folder_named_by("STRUCTMAP_PLANTED")


@pytest.fixture(scope="session")
def repository() -> Path:
    """Root of the checkout."""
    return Path(__file__).resolve().parent.parent


@pytest.fixture(scope="session")
def chromium() -> str:
    """Path of a Chromium; without one the test is skipped, or fails where asked to."""
    names = ("chromium", "chromium-browser", "google-chrome")
    found = next(filter(None, map(shutil.which, names)), None)
    driver = [sys.executable, "-m", "playwright", "--version"]
    if not found:
        lacking = "no Chromium on the PATH; on Debian: apt-get install chromium"
    elif subprocess.run(driver, capture_output=True, check=False).returncode != 0:
        lacking = "playwright does not start; on Debian: apt-get install libatomic1"
    else:
        return found
    if os.environ.get("STRUCTMAP_REQUIRE_BROWSER") == "1":
        pytest.fail(f"{lacking} (STRUCTMAP_REQUIRE_BROWSER is 1)")
    pytest.skip(lacking)
