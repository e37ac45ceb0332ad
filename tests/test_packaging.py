"""The wheel, not the checkout: everything is in it, and it works where there is nothing else of the project."""

import subprocess
import sys
import zipfile
from email.parser import Parser
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]

pytestmark = pytest.mark.wheel


@pytest.fixture(scope="module")
def wheel(tmp_path_factory):
    """The built wheel."""
    folder = tmp_path_factory.mktemp("wheel")
    built = subprocess.run(
        [sys.executable, "-m", "build", "--no-isolation", "--wheel", "--outdir", str(folder), str(ROOT)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert built.returncode == 0, built.stdout + built.stderr
    (found,) = folder.glob("*.whl")
    return found


@pytest.fixture(scope="module")
def installed(wheel, tmp_path_factory):
    """A folder with the wheel installed, without what it depends on."""
    folder = tmp_path_factory.mktemp("installed")
    options = ["--no-deps", "--no-index", "--no-compile", "--disable-pip-version-check", "--quiet"]
    subprocess.run([sys.executable, "-m", "pip", "install", *options, "--target", str(folder), str(wheel)], check=True)
    return folder


@pytest.fixture
def run(installed, tmp_path):
    """Runs Python where the installed wheel is found first, and the checkout not at all."""

    def python(*arguments):
        found = subprocess.run(
            [sys.executable, *arguments],
            cwd=tmp_path,
            env={"PYTHONPATH": str(installed), "PATH": "", "HOME": str(tmp_path)},
            capture_output=True,
            text=True,
            check=False,
        )
        assert found.returncode == 0, found.stdout + found.stderr
        return found.stdout

    return python


def files(folder, place):
    return {
        f"{place}/{path.relative_to(folder)}"
        for path in folder.rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    }


def test_the_wheel_has_every_file_of_the_source_and_no_other(wheel):
    with zipfile.ZipFile(wheel) as archive:
        inside = {name for name in archive.namelist() if ".dist-info/" not in name}
    assert inside == files(ROOT / "hub", "hub") | files(ROOT / "migrations", "hub/migrations")
    assert {"hub/migrations/env.py", "hub/migrations/versions/0001_first.py"} <= inside
    assert any(name.startswith("hub/web/templates/") for name in inside)
    assert any(name.startswith("hub/web/static/") for name in inside)


def test_the_wheel_names_the_command_and_what_it_needs(wheel):
    with zipfile.ZipFile(wheel) as archive:
        text = {
            name.rpartition("/")[2]: archive.read(name).decode() for name in archive.namelist() if ".dist-info/" in name
        }
    assert "packfold = hub.cli:main" in text["entry_points.txt"]
    metadata = Parser().parsestr(text["METADATA"])
    assert metadata["Name"] == "packfold"
    assert metadata["Requires-Python"] == ">=3.11"
    needed = {
        line.partition(">")[0].partition("<")[0] for line in metadata.get_all("Requires-Dist") if "extra ==" not in line
    }
    assert {"sqlalchemy", "alembic", "msgspec", "tzdata"} <= needed


def test_the_installed_hub_finds_its_migrations_and_makes_a_database(run, installed, tmp_path):
    code = (
        "import hub, pathlib\n"
        "from hub.store import schema\n"
        "from hub.store.engine import Database\n"
        "database = Database(pathlib.Path('data'))\n"
        "schema.prepare(database)\n"
        "with database.read() as connection: print(hub.__file__, schema.head_revision(), schema.revision_of(connection))\n"
    )
    place, head, made = run("-c", code).split()
    assert Path(place).is_relative_to(installed)
    assert head == made
    assert (tmp_path / "data" / "packfold.db").exists()


def test_every_module_of_the_installed_hub_can_be_imported(run):
    code = (
        "import importlib, pkgutil, hub\n"
        "names = [m.name for m in pkgutil.walk_packages(hub.__path__, 'hub.') if not m.name.endswith('__main__')]\n"
        "[importlib.import_module(name) for name in names if not name.startswith('hub.migrations')]\n"
        "print(len(names))\n"
    )
    assert int(run("-c", code)) > 50


def test_the_installed_command_answers(run, installed):
    assert "Usage" in run("-m", "hub", "--help")
    assert "Usage" in run(str(installed / "bin" / "packfold"), "--help")
