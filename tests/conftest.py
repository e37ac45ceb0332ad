"""What every test may use."""

import os
from pathlib import Path

import pytest

MEASURED = (
    Path(os.environ["PACKFOLD_MEASURED"])
    if "PACKFOLD_MEASURED" in os.environ
    else Path(__file__).parents[2] / "shared" / "data"
)


@pytest.fixture(scope="session")
def measured() -> Path:
    """Folder of measured series that the project does not ship; each test names the origin it uses."""
    if not MEASURED.is_dir():
        pytest.skip("the measured series are not on this machine; set PACKFOLD_MEASURED to their folder")
    return MEASURED
