"""The shape of the repository: what lies where, how long it is, who may import whom, and what is not said."""

import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
TOP = {"README.md", "pyproject.toml", "hub", "migrations", "tests", "deploy", "docs"}
LONGEST_MODULE = 450

# Modules that have nothing to test by themselves.
WITHOUT_TESTS = {"__init__.py", "__main__.py"}
# Tests of the whole rather than of one module.
WITHOUT_MODULE = {
    "test_layout.py",
    "test_migrations.py",
    "test_packaging.py",
    "test_docs.py",
    "test_deploy.py",
    "test_main_job.py",
}

# Split, so that this file does not say them.
UNSAID = {
    "unfinished work": r"\bTO" r"DO\b|\bFIX" r"ME\b|\bXX" r"X\b|NotImplemented" r"Error",
    "a place on somebody's machine": r"(?<![A-Za-z0-9_.~-])/(?:work|root|tmp|home/[a-z]+)\b",
    "how the work is organised": r"\b(?:sub)?ag" r"ents?\b|\bhel" r"pers?\b|\bdos" r"sier\b|\bissue #?\d",
    "a talk": r"\blec" r"tures?\b|\btrans" r"cripts?\b",
    "a host of a package registry": r"py" r"pi\.org|python" r"hosted",
}


@pytest.fixture(scope="module")
def kept():
    """Files that are, or are about to be, under version control."""
    git = shutil.which("git")
    if git is None or not (ROOT / ".git").exists():
        pytest.skip("this is not a checkout, so there is no list of the files that belong to it")
    listing = subprocess.run(
        [git, "ls-files", "--cached", "--others", "--exclude-standard"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    return [ROOT / name for name in listing.stdout.splitlines() if (ROOT / name).is_file()]


def modules():
    return [path for path in sorted((ROOT / "hub").rglob("*.py")) if path.name not in WITHOUT_TESTS]


def mirror_of(module):
    place = module.relative_to(ROOT / "hub")
    return ROOT / "tests" / place.parent / f"test_{place.name}"


def test_every_module_has_its_tests():
    assert [str(m.relative_to(ROOT)) for m in modules() if not mirror_of(m).is_file()] == []


def test_every_test_file_has_its_module():
    packages = {path.parent for path in (ROOT / "hub").rglob("__init__.py")}
    known = {mirror_of(module) for module in modules()} | {mirror_of(package / "init.py") for package in packages}
    files = [
        path
        for path in (ROOT / "tests").rglob("test_*.py")
        if path.relative_to(ROOT / "tests").parts[0] != "browser" and path.name not in WITHOUT_MODULE
    ]
    assert [str(path.relative_to(ROOT)) for path in files if path not in known] == []


def test_modules_are_short_enough_to_be_read_at_a_sitting():
    lengths = {path: len(path.read_text(encoding="utf-8").splitlines()) for path in (ROOT / "hub").rglob("*.py")}
    assert {str(path.relative_to(ROOT)): n for path, n in lengths.items() if n > LONGEST_MODULE} == {}


def test_every_module_says_what_it_is():
    for path in (ROOT / "hub").rglob("*.py"):
        assert path.read_text(encoding="utf-8").startswith(('"""', 'r"""')), path


def test_the_top_level_holds_only_what_belongs_there(kept):
    tops = {path.relative_to(ROOT).parts[0] for path in kept}
    assert {top for top in tops if not top.startswith(".")} <= TOP
    assert TOP - tops == set()


def test_imports_point_one_way():
    code = "import sys; from importlinter.cli import lint_imports; sys.exit(lint_imports(no_cache=True, no_logo=True))"
    found = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=False)
    assert found.returncode == 0, found.stdout + found.stderr


@pytest.mark.parametrize("what", UNSAID)
def test_nothing_is_said_that_does_not_belong_here(kept, what):
    pattern = re.compile(UNSAID[what])
    said = []
    for path in kept:
        try:
            lines = path.read_text(encoding="utf-8").splitlines()
        except UnicodeDecodeError:
            continue
        said += [
            f"{path.relative_to(ROOT)}:{n}: {line.strip()}" for n, line in enumerate(lines, 1) if pattern.search(line)
        ]
    assert said == []


@pytest.mark.parametrize(
    "parts", [("see /t", "mp/x"), ("open('/wo", "rk/x')"), ("# TO", "DO"), ("a hel", "per"), ("iss", "ue 3")]
)
def test_the_patterns_find_what_they_are_for(parts):
    assert any(re.search(pattern, "".join(parts)) for pattern in UNSAID.values())
