"""The documents say what is true: commands are run, files loaded, messages read, links followed, tables compared."""

import ast
import contextlib
import importlib
import itertools
import json
import os
import re
import runpy
import shutil
import signal
import socket
import subprocess
import sys
import time
import tomllib
from dataclasses import dataclass
from pathlib import Path

import pytest

from hub import settings
from hub.cli import COMMANDS
from hub.quantities import NAMES
from hub.settings import Settings
from hub.store import inventory_file
from hub.store.export import TABLES
from hub.telemetry import senml
from hub.telemetry.logmapping import mapping_from
from hub.telemetry.nodelog import read_log

ROOT = Path(__file__).parents[1]
DOCUMENTS = [ROOT / "README.md", *sorted((ROOT / "docs").glob("*.md"))]
REFERENCE = ROOT / "docs" / "reference.md"
RECEIVED_MS = 1_780_000_600_000  # ten minutes after the base time of the examples

BLOCK = re.compile(r"(?:<!-- (?P<mark>[^\n]*?) -->\n)?^```(?P<kind>\w+)\n(?P<text>.*?)^```$", re.DOTALL | re.MULTILINE)
NOT_RUN = {"not run", "not run here"}
MARKS = NOT_RUN | {"keeps running", "typed", "file"}


@dataclass
class Block:
    document: Path
    kind: str
    text: str
    mark: str
    said: str


def blocks(document):
    found = []
    for match in BLOCK.finditer(document.read_text(encoding="utf-8")):
        mark, _, said = (match["mark"] or "").partition(": ")
        found.append(Block(document, match["kind"], match["text"], mark, said))
    return found


def of_kind(kind):
    """Blocks of one kind, as parameters with names that say where they are."""
    return [
        pytest.param(block, id=f"{document.name}-{number}")
        for document in DOCUMENTS
        for number, block in enumerate(blocks(document))
        if block.kind == kind
    ]


def free_port():
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return probe.getsockname()[1]


def script(document, folder):
    """All commands of a document as written, in one script, as a person would type them into two terminals."""
    lines = ["set -euo pipefail"]
    running = 0
    for block in blocks(document):
        if block.mark == "file":
            (folder / block.said).write_text(block.text, encoding="utf-8")
        if block.kind == "toml" and document.name == "README.md":
            (folder / "inventory.toml").write_text(block.text, encoding="utf-8")
        if block.kind != "sh" or block.mark in NOT_RUN:
            continue
        text = block.text
        if block.mark == "keeps running":
            running += 1
            log = f"running-{running}.txt"
            wait = f"for _ in $(seq 1200); do grep -qs -- '{block.said}' {log} && break; sleep 0.1; done"
            lines += [
                f"{{ {text.rstrip()}; }} > {log} 2>&1 &",
                wait,
                f"grep -- '{block.said}' {log} || {{ cat {log}; exit 1; }}",
            ]
        elif block.mark == "typed":
            lines += [
                f"printf '%s\\n' '{block.said}' '{block.said}' > typed.txt",
                f"{{ {text.rstrip()}; }} < typed.txt",
            ]
        else:
            lines.append(text)
    return "\n".join(lines) if len(lines) > 1 else None


@pytest.mark.broker
@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_its_commands_work_one_after_the_other(document, tmp_path):
    home, work = tmp_path / "home", tmp_path / "work"
    work.mkdir()
    text = script(document, work)
    if text is None:
        assert not any(block.kind == "sh" and block.mark not in NOT_RUN for block in blocks(document))
        return
    if "mosquitto_pub" in text and shutil.which("mosquitto_pub") is None:
        pytest.skip("mosquitto_pub is not installed; as root: apt install mosquitto-clients")
    broker_port = free_port()
    # The port that Mosquitto's clients take where the command names none.
    for client in ("mosquitto_pub", "mosquitto_sub", "mosquitto_rr"):
        file = home / ".config" / client
        file.parent.mkdir(parents=True, exist_ok=True)
        file.write_text(f"-p {broker_port}\n", encoding="utf-8")
    environment = {
        "HOME": str(home),
        "PATH": f"{Path(sys.executable).parent}:{os.environ['PATH']}",
        "LANG": "C.UTF-8",
        "PYTHONPATH": str(ROOT),
        "PACKFOLD_BROKER_PORT": str(broker_port),
        "PACKFOLD_WEB_LISTEN": f"127.0.0.1:{free_port()}",
        "PACKFOLD_DATA": str(work / "data"),
    }
    # A session of its own: no terminal to ask for a password, and one signal ends all that the document left running.
    output = tmp_path / "output.txt"
    with output.open("wb") as stream:
        child = subprocess.Popen(
            ["bash", "-c", text],
            cwd=work,
            env=environment,
            stdin=subprocess.DEVNULL,
            stdout=stream,
            stderr=subprocess.STDOUT,
            start_new_session=True,
        )
        try:
            code = child.wait(timeout=240)
        finally:
            end_group(child.pid)
            child.wait()
    logs = "".join(path.read_text(errors="replace") for path in sorted(work.glob("running-*.txt")))
    assert code == 0, f"{output.read_text(errors='replace')}\n{logs}"


def end_group(group):
    """End what a document left running: first asked, then told."""
    for number, seconds in ((signal.SIGTERM, 10.0), (signal.SIGKILL, 5.0)):
        with contextlib.suppress(ProcessLookupError):
            os.killpg(group, number)
        last = time.monotonic() + seconds
        while time.monotonic() < last:
            if not alive(group):
                return
            time.sleep(0.05)


def alive(group):
    """Whether a process of the group still works; one that only waits to be buried does not."""
    for stat in Path("/proc").glob("[0-9]*/stat"):
        with contextlib.suppress(OSError):
            state, _, its_group = stat.read_text().rpartition(")")[2].split()[:3]
            if int(its_group) == group and state != "Z":
                return True
    return False


@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_every_mark_is_known_and_every_omission_has_its_reason(document):
    for block in blocks(document):
        assert block.mark in MARKS | {""}, block
        assert bool(block.mark) == bool(block.said), block


@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_every_fence_is_a_block_that_the_tests_see(document):
    fences = re.findall(r"^```", document.read_text(encoding="utf-8"), re.MULTILINE)
    assert len(fences) == 2 * len(blocks(document))
    assert {block.kind for block in blocks(document)} <= {"sh", "toml", "json", "csv"}


@pytest.mark.parametrize("block", of_kind("toml"))
def test_toml_loads(block, tmp_path):
    document = tomllib.loads(block.text)
    if "columns" in document:
        assert mapping_from(document).columns
    elif {"site", "node", "pack", "fitting"} & document.keys():
        rows = inventory_file.parse(block.text, block.document.name)
        assert rows["site"]
        assert rows["node"]
    else:
        file = tmp_path / "hub.toml"
        file.write_text(block.text, encoding="utf-8")
        assert settings.load(file, {}) != Settings()


@pytest.mark.parametrize("block", of_kind("json"))
def test_messages_are_read_without_a_remark(block):
    message = senml.decode(block.text.encode(), RECEIVED_MS)
    assert message.readings
    assert (message.remarks, message.unknown, message.ignored) == ([], {}, 0)


def test_the_inventory_of_the_tutorial_and_the_first_page_agree():
    first, tutorial = (
        next(block for block in blocks(ROOT / name) if block.kind == "toml")
        for name in ("README.md", "docs/tutorial.md")
    )
    less = {**tomllib.loads(tutorial.text)}
    for site in less["site"]:
        site.pop("altitude_m")
    assert tomllib.loads(first.text) == less


@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_links_lead_somewhere(document):
    text = re.sub(r"^```.*?^```$", "", document.read_text(encoding="utf-8"), flags=re.DOTALL | re.MULTILINE)
    for target in re.findall(r"\]\(([^)\s]+)\)", text):
        name, _, anchor = target.partition("#")
        assert not name.startswith(("http:", "https:")), target
        file = (document.parent / name).resolve() if name else document
        assert file.is_file(), target
        if anchor:
            assert anchor in anchors(file), target


def anchors(file):
    headings = re.findall(r"^#+ (.+)$", file.read_text(encoding="utf-8"), re.MULTILINE)
    return {re.sub(r"[^\w\- ]", "", heading.lower()).replace(" ", "-") for heading in headings}


def test_every_document_is_in_the_index():
    index = (ROOT / "docs" / "README.md").read_text(encoding="utf-8")
    assert {path.name for path in DOCUMENTS[1:]} - {"README.md"} == set(re.findall(r"\]\((\w+\.md)\)", index))


def test_the_reference_is_what_the_code_says():
    assert runpy.run_path(str(ROOT / "docs" / "generate.py"))["reference"]() == REFERENCE.read_text(encoding="utf-8"), (
        "Run: python docs/generate.py"
    )


def test_the_reference_has_every_setting_command_quantity_table_and_column():
    text = REFERENCE.read_text(encoding="utf-8")
    for section in Settings.__struct_fields__:
        assert f"### [{section}]" in text
        for key in type(getattr(Settings(), section)).__struct_fields__:
            assert f"| `{key}` |" in text
    for name in COMMANDS:
        assert re.search(rf"^### packfold {name}\b", text, re.MULTILINE)
    for name in (*NAMES, *(column for table in TABLES.values() for column in table.columns)):
        assert f"| `{name}` |" in text
    for table in TABLES:
        assert f"### {table}\n" in text


def test_the_reference_has_every_reason_the_code_gives():
    """Reasons are first arguments of ``Remark``, or pairs that ``time_problem`` returns."""
    given = set()
    for path in (ROOT / "hub").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Call) and getattr(node.func, "id", "") == "Remark" and node.args:
                given |= {a.value for a in node.args[:1] if isinstance(a, ast.Constant)}
    from hub.telemetry.gather import time_problem

    given |= {time_problem(0, RECEIVED_MS)[0], time_problem(RECEIVED_MS + 10_000_000, RECEIVED_MS)[0]}
    documented = runpy.run_path(str(ROOT / "docs" / "generate.py"))["REASONS"]
    assert given <= documented.keys()
    assert len(given) > 5


def test_the_reference_has_every_way_a_session_ends():
    from typing import get_args

    from hub.battery.fullness import EndedBy

    assert set(get_args(EndedBy)) == runpy.run_path(str(ROOT / "docs" / "generate.py"))["ENDINGS"].keys()


def test_the_numbers_of_the_methods_are_those_in_force():
    rows = re.findall(
        r"^\| `(hub\.[\w.]+)\.(\w+)` \| (\S+) \|", (ROOT / "docs/methods.md").read_text("utf-8"), re.MULTILINE
    )
    assert len(rows) > 10
    assert {f"{m}.{n}": float(v) for m, n, v in rows} == {
        f"{m}.{n}": getattr(importlib.import_module(m), n) for m, n, _ in rows
    }


def test_every_dependency_has_its_line_in_the_choices():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    text = (ROOT / "docs" / "choices.md").read_text(encoding="utf-8")
    for requirement in project["dependencies"]:
        name = re.match(r"[\w-]+", requirement)[0]
        assert re.search(rf"^\| `{name}` \| .{{10,}} \|$", text, re.MULTILINE), name
    for requirement in project["optional-dependencies"]["develop"]:
        name = re.match(r"[\w-]+", requirement)[0]
        assert f"`{name}`" in text, name


def test_the_first_two_commands_of_the_first_page_can_be_run():
    commands = [block.text.strip() for block in blocks(ROOT / "README.md") if block.kind == "sh"][:2]
    assert commands == ["./deploy/quickstart", "./deploy/test"]
    for command in commands:
        assert os.access(ROOT / command, os.X_OK), command
        helped = subprocess.run([ROOT / command, "--help"], capture_output=True, text=True, check=True, timeout=20)
        assert command in helped.stdout


@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_no_document_names_a_place_on_somebodys_machine(document):
    text = document.read_text(encoding="utf-8")
    assert not re.findall(r"(?<![\w.~-])/(?:work|root|tmp|var/tmp|home/\w+|Users/\w+)\b", text)


def test_the_log_in_the_document_is_read_as_it_says():
    log = next(block for block in blocks(ROOT / "docs" / "node.md") if block.said == "log.csv")
    chunks = list(read_log(log.text.encode(), received_ms=RECEIVED_MS + 86_400_000 * 30))
    assert sum(chunk.taken for chunk in chunks) == 3
    assert [remark.reason for chunk in chunks for remark in chunk.set_aside] == ["line"]
    assert not any(chunk.message.unknown for chunk in chunks)
    moments = sorted(time_ms for chunk in chunks for time_ms in chunk.message.readings)
    assert [b - a for a, b in itertools.pairwise(moments)] == [60_000, 60_000]


def test_the_first_page_is_short_and_its_pictures_are_light():
    assert len((ROOT / "README.md").read_text(encoding="utf-8").splitlines()) < 130
    pictures = list((ROOT / "docs" / "pictures").glob("*"))
    assert pictures
    for picture in pictures:
        assert picture.stat().st_size <= 200_000, picture
        assert any(picture.name in document.read_text(encoding="utf-8") for document in DOCUMENTS), picture


def test_the_cautions_are_on_the_first_page():
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    for word in ("hydrogen", "burns", "no protection", "Local codes and licensed practice"):
        assert word in text


def test_the_receipt_in_the_document_is_what_the_hub_sends():
    receipt = re.search(r"The receipt `(\{[^`]+\})`", (ROOT / "docs" / "node.md").read_text(encoding="utf-8"))
    assert json.loads(receipt[1]).keys() == {"boot", "sequence"}
