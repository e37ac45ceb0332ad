"""Running commands as a person would: their words, output and exit code, without the cost of a process each."""

import io
import json
import sys
from contextlib import redirect_stderr, redirect_stdout
from dataclasses import dataclass
from pathlib import Path

import pytest

from hub.cli import main

INVENTORY = """
[[site]]
name = "ridge"
latitude = 51.2
longitude = -1.9
altitude_m = 210
timezone = "Europe/London"

[[node]]
name = "ridge-east"
site = "ridge"
interval_s = 60

[[pack]]
label = "R-07"
designation = "HR6"
cells_in_series = 8
rated_capacity_ah = 2.4

[[fitting]]
pack = "R-07"
node = "ridge-east"
start = 2026-03-01T09:00:00Z
"""


@dataclass
class Ran:
    code: int
    out: str
    err: str

    @property
    def document(self):
        return json.loads(self.out)


class Packfold:
    """The command on one data folder."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.data = folder / "data"

    def __call__(self, *arguments, text="", code=0, **environment):
        out, err = (io.TextIOWrapper(io.BytesIO(), encoding="utf-8", write_through=True) for _ in range(2))
        with pytest.MonkeyPatch.context() as patch, redirect_stdout(out), redirect_stderr(err):
            patch.chdir(self.folder)
            patch.setattr(sys, "argv", ["packfold", "--data", str(self.data), *map(str, arguments)])
            patch.setattr(sys, "stdin", io.StringIO(text))
            patch.setenv("COLUMNS", "100")
            for name, value in environment.items():
                patch.setenv(name, value)
            with pytest.raises(SystemExit) as ended:
                main()
        done = Ran(ended.value.code, *(stream.buffer.getvalue().decode() for stream in (out, err)))
        assert done.code == code, done.err + done.out
        return done

    def write(self, name, content):
        path = self.folder / name
        path.write_text(content, encoding="utf-8")
        return path

    def stocked(self):
        self("inventory", "load", self.write("inventory.toml", INVENTORY))
        return self


@pytest.fixture
def packfold(tmp_path):
    return Packfold(tmp_path)
