"""The scripts that install, start and test, and the help of every command."""

import os
import re
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import click
import pytest
from click.testing import CliRunner

from hub.cli import cli

ROOT = Path(__file__).parents[1]
SCRIPTS = [
    ROOT / "deploy" / "environment.sh",
    ROOT / "deploy" / "quickstart",
    ROOT / "deploy" / "test",
    ROOT / ".ci" / "run",
]
LOCK = ROOT / "deploy" / "requirements.txt"


def bash(*arguments, **more):
    return subprocess.run(["bash", *map(str, arguments)], capture_output=True, text=True, check=False, **more)


@pytest.mark.parametrize("script", SCRIPTS, ids=lambda path: path.name)
def test_a_script_can_be_read_by_bash(script):
    assert bash("-n", script).returncode == 0


@pytest.mark.parametrize("script", SCRIPTS, ids=lambda path: path.name)
def test_a_script_has_no_common_slip(script):
    program = shutil.which("shellcheck")
    if program is None:
        pytest.skip("shellcheck is not installed; as root: apt install shellcheck")
    found = subprocess.run([program, "-x", "-s", "bash", script], cwd=ROOT, capture_output=True, text=True, check=False)
    assert found.returncode == 0, found.stdout


@pytest.mark.parametrize("name", ["deploy/quickstart", "deploy/test", ".ci/run"])
def test_a_script_can_be_started_and_stops_at_the_first_failure(name):
    assert os.access(ROOT / name, os.X_OK)
    text = (ROOT / name).read_text(encoding="utf-8")
    assert text.startswith("#!/usr/bin/env bash\n")
    assert "set -euo pipefail" in text


@pytest.mark.parametrize("name", ["quickstart", "test"])
def test_a_script_says_what_it_does(name, tmp_path):
    """Asked from elsewhere, it answers and touches nothing."""
    found = bash(ROOT / "deploy" / name, "--help", cwd=tmp_path)
    assert found.returncode == 0, found.stderr
    assert f"Usage: ./deploy/{name}" in found.stdout
    assert list(tmp_path.iterdir()) == []


def test_ci_runs_the_tests_and_hands_on_their_exit_code():
    assert "exec ./deploy/test" in (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    last = (ROOT / "deploy" / "test").read_text(encoding="utf-8").strip().splitlines()[-1]
    assert last.startswith("exec ")
    assert '-m pytest "$@"' in last


# A stand-in for a Python: it answers the question for its version and its name, and cannot make an environment.
STAND_IN = """#!/bin/sh
case "$1" in
-V) echo "Python {version}" ;;
-c) exit {too_old} ;;
*) exit 1 ;;
esac
"""


def with_python(folder, version):
    """A folder of programs with a Python of a version, or with none, and what else the scripts use."""
    folder.mkdir()
    for name in ("bash", "sh", "cat", "sha256sum", "rm", "dirname", "env"):
        (folder / name).symlink_to(shutil.which(name))
    if version is not None:
        program = folder / "python3"
        too_old = int(tuple(map(int, version.split("."))) < (3, 11))
        program.write_text(STAND_IN.format(version=version, too_old=too_old), encoding="utf-8")
        program.chmod(0o755)
    return {"PATH": str(folder), "HOME": str(folder)}


@pytest.fixture
def checkout(tmp_path):
    """What the scripts need of a checkout, in an empty folder."""
    folder = tmp_path / "checkout"
    (folder / "deploy").mkdir(parents=True)
    for name in (
        "pyproject.toml",
        "deploy/environment.sh",
        "deploy/quickstart",
        "deploy/test",
        "deploy/requirements.txt",
    ):
        shutil.copy(ROOT / name, folder / name)
    return folder


@pytest.mark.parametrize("name", ["quickstart", "test"])
@pytest.mark.parametrize("version", [None, "3.10.12"])
def test_without_a_python_that_is_new_enough_it_says_which_to_install(name, version, checkout, tmp_path):
    found = bash(checkout / "deploy" / name, env=with_python(tmp_path / "programs", version))
    assert found.returncode == 1
    assert found.stderr == (
        "Packfold needs Python 3.11 or newer. On Debian 12 or later: apt install python3 python3-venv\n"
    )
    assert not (checkout / ".venv").exists()


@pytest.mark.parametrize("name", ["quickstart", "test"])
def test_without_venv_it_says_which_package_to_install(name, checkout, tmp_path):
    found = bash(checkout / "deploy" / name, env=with_python(tmp_path / "programs", "3.11.2"))
    assert found.returncode == 1
    assert found.stderr.endswith("Python cannot make an environment. On Debian: apt install python3-venv\n")


def test_a_second_quickstart_installs_nothing_and_hands_on_its_arguments(checkout):
    """An environment whose stamp fits is used as it is."""
    programs = checkout / ".venv" / "bin"
    programs.mkdir(parents=True)
    for name in ("python", "packfold"):
        (programs / name).write_text('#!/bin/sh\necho "$(basename "$0")" "$@"\n', encoding="utf-8")
        (programs / name).chmod(0o755)
    stamp = '. deploy/environment.sh; stamp "$(find_python)" "" > .venv/packfold-stamp'
    subprocess.run(["bash", "-c", stamp], cwd=checkout, check=True)
    found = bash(checkout / "deploy" / "quickstart", "--days", "7")
    assert found.returncode == 0, found.stderr
    assert "Installing" not in found.stdout
    assert found.stdout.splitlines()[-1] == "packfold demo --days 7"


@pytest.mark.parametrize("changed", ["pyproject.toml", "deploy/requirements.txt"])
def test_a_change_of_what_is_wanted_makes_another_stamp(changed, checkout):
    ask = ["bash", "-c", '. deploy/environment.sh; stamp "$(find_python)" ""']
    before = subprocess.run(ask, cwd=checkout, check=True, capture_output=True, text=True).stdout
    with (checkout / changed).open("a", encoding="utf-8") as file:
        file.write("# changed\n")
    after = subprocess.run(ask, cwd=checkout, check=True, capture_output=True, text=True).stdout
    assert before
    assert before != after


def locked():
    lines = LOCK.read_text(encoding="utf-8").splitlines()
    return dict(line.split("==") for line in lines if line and not line.startswith("#"))


def normal(name):
    return re.sub(r"[-_.]+", "-", name).lower()


def test_every_dependency_is_locked():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    wanted = [*project["dependencies"], *project["optional-dependencies"]["develop"]]
    known = locked()
    assert [r for r in wanted if normal(re.match(r"[\w.-]+", r)[0]) not in known] == []


def test_what_is_locked_is_within_what_the_project_asks_for():
    from packaging.requirements import Requirement

    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    known = locked()
    for text in (*project["dependencies"], *project["optional-dependencies"]["develop"]):
        requirement = Requirement(text)
        assert known[normal(requirement.name)] in requirement.specifier, text


def test_the_lock_is_complete():
    """Whatever a locked package itself needs on this machine is locked too."""
    from importlib.metadata import PackageNotFoundError, requires

    from packaging.requirements import Requirement

    known = locked()
    missing = set()
    for name in known:
        try:
            needed = requires(name) or []
        except PackageNotFoundError:
            continue
        for text in needed:
            requirement = Requirement(text)
            if requirement.marker is None or requirement.marker.evaluate({"extra": ""}):
                missing |= {normal(requirement.name)} - known.keys()
    assert missing <= {"setuptools"}


def test_the_lock_names_no_place():
    text = LOCK.read_text(encoding="utf-8")
    assert re.search(r"https?:|file:|@ |--index|--find", text) is None
    assert text.startswith("# ")


@pytest.mark.parametrize(
    "path", [*sorted((ROOT / "deploy").iterdir()), ROOT / ".ci" / "run"], ids=lambda path: path.name
)
def test_what_installs_names_no_place_and_no_registry(path):
    """Where this checkout lies and where packages come from is for each machine to say."""
    text = path.read_text(encoding="utf-8")
    assert str(ROOT) not in text
    assert (
        re.search(r"[a-z]+://|--(?:extra-)?index-url|--find-links|--trusted-host|PIP_INDEX|/home/|/Users/", text)
        is None
    )


def commands(command=cli, trail=()):
    """Every command with the words that lead to it."""
    yield trail, command
    if isinstance(command, click.Group):
        context = click.Context(command)
        for name in command.list_commands(context):
            inner = command.get_command(context, name)
            assert inner is not None
            yield from commands(inner, (*trail, name))


@pytest.mark.parametrize(
    ("trail", "command"), [pytest.param(t, c, id=" ".join(t) or "packfold") for t, c in commands()]
)
def test_every_command_explains_itself(trail, command):
    found = CliRunner().invoke(cli, [*trail, "--help"], prog_name="packfold")
    assert found.exit_code == 0
    assert found.output.startswith(f"Usage: {' '.join(('packfold', *trail))}")
    assert command.help
    assert len(command.help) >= len("Who may log in.")
    # click's mark for a paragraph that is not to be wrapped never reaches a reader
    assert "\\b" not in found.output
    assert "\b" not in found.output


def test_the_reference_has_every_command_with_all_its_options():
    text = (ROOT / "docs" / "reference.md").read_text(encoding="utf-8")
    for trail, command in commands():
        title = " ".join(("### packfold", *trail)) if trail else "## Commands"
        begin = re.search(rf"^{re.escape(title)}(?: [^a-z\n].*)?$", text, re.MULTILINE)
        assert begin, title
        part = text[begin.end() :].partition("\n##")[0]
        for option in command.params:
            if isinstance(option, click.Option) and option.name != "version":
                assert f"| `{', '.join(option.opts)}` |" in part, (title, option.opts)


def test_the_script_for_the_reference_writes_the_same_bytes_everywhere_and_tells_when_they_are_stale(tmp_path):
    """A copy of it writes beside itself: with another width of the terminal, home, language, zone and hash seed."""
    script = shutil.copy(ROOT / "docs" / "generate.py", tmp_path)
    kept = {name: value for name, value in os.environ.items() if not name.startswith(("PACKFOLD_", "LC_"))}
    odd = {"COLUMNS": "40", "HOME": str(tmp_path), "LANG": "C", "TZ": "Asia/Kathmandu", "PYTHONHASHSEED": "7"}

    def run(*arguments):
        return subprocess.run(
            [sys.executable, script, *arguments],
            cwd=tmp_path,
            env={**kept, **odd, "PYTHONPATH": str(ROOT)},
            capture_output=True,
            text=True,
            check=False,
        )

    stale = run("--check")
    assert stale.returncode == 1, stale.stderr
    assert stale.stderr == "docs/reference.md is not up to date. Run: python docs/generate.py\n"
    assert not (tmp_path / "reference.md").exists()
    assert run().returncode == 0
    assert (tmp_path / "reference.md").read_bytes() == (ROOT / "docs" / "reference.md").read_bytes()
    assert run("--check").returncode == 0


def test_the_help_of_inventory_load_holds_a_file_to_start_from():
    from hub.store import inventory_file

    found = CliRunner().invoke(cli, ["inventory", "load", "--help"])
    lines = [line.strip() for line in found.output.splitlines()]
    begin = lines.index("[[site]]")
    end = next(i for i, line in enumerate(lines) if line.startswith("Options:"))
    rows = inventory_file.parse("\n".join(lines[begin:end]), "the help")
    assert all(rows[kind] for kind in ("site", "node", "pack", "fitting"))


def test_the_module_is_the_command():
    found = subprocess.run(
        [sys.executable, "-m", "hub", "--version"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert found.stdout.startswith("packfold, version ")
