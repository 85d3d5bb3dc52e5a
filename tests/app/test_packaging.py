"""What is installed is what the checkout holds, and the documents say how."""

import json
import os
import re
import subprocess
import sys
import tomllib
import zipfile
from importlib import metadata
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
ROOMS = ("app", "core", "assets", "sample_sweeps")
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]

LOOK = """
import json, sys
from app import files, places, server
mine = [m.__file__ for name, m in sys.modules.items() if name.partition(".")[0] in ("app", "core") and m.__file__]
print(json.dumps({"modules": mine, "assets": str(places.ASSETS), "samples": [s.name for s in files.samples()]}))
"""


@pytest.fixture(scope="module")
def wheel(tmp_path_factory):
    folder = tmp_path_factory.mktemp("wheel")
    build = [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(folder)]
    subprocess.run(build, cwd=ROOT, check=True, capture_output=True)
    (built,) = folder.glob("*.whl")
    return built


@pytest.fixture(scope="module")
def unpacked(wheel, tmp_path_factory):
    folder = tmp_path_factory.mktemp("site")
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(folder)
    return folder


def run_from(folder, *arguments):
    environment = os.environ | {"PYTHONPATH": str(folder), "PYTHONDONTWRITEBYTECODE": "1", "PYTHONIOENCODING": "utf-8"}
    done = subprocess.run(
        [sys.executable, *arguments], cwd=folder, env=environment, check=True, capture_output=True, encoding="utf-8"
    )
    return done.stdout


def shipped_files(room):
    for path in (ROOT / room).rglob("*"):
        name = path.relative_to(ROOT).as_posix()
        if path.is_file() and "__pycache__" not in name and not name.startswith("assets/readme/"):
            yield name


def test_the_wheel_holds_the_four_rooms_and_nothing_else(wheel):
    with zipfile.ZipFile(wheel) as archive:
        names = {name for name in archive.namelist() if ".dist-info/" not in name}
    assert names == {name for room in ROOMS for name in shipped_files(room)}


def test_the_licence_travels_with_the_wheel(unpacked):
    (licence,) = unpacked.glob("*.dist-info/licenses/LICENSE")
    assert licence.read_bytes() == (ROOT / "LICENSE").read_bytes()


def test_an_unpacked_wheel_runs_on_its_own_files(unpacked):
    seen = json.loads(run_from(unpacked, "-c", LOOK))
    assert seen["modules"] and all(Path(module).is_relative_to(unpacked) for module in seen["modules"])
    assert Path(seen["assets"]) == unpacked / "assets"
    assert {path.name for path in (unpacked / "assets").iterdir()} >= {"axes.js", "hand.js", "overlay.js", "server.js"}
    assert len(seen["samples"]) > 40


def test_the_console_command_says_its_version(unpacked):
    assert run_from(unpacked, "-m", "app", "--version").strip() == f"Sweepbench {PROJECT['version']}"


def test_the_console_command_is_installed():
    (command,) = (e for e in metadata.entry_points(group="console_scripts") if e.name == "sweepbench")
    assert callable(command.load())


def fenced(text):
    """The lines of all code blocks of a document."""
    return re.sub(r"^```.*$", "", "".join(re.findall(r"^```[^`]+^```$", text, re.M)), flags=re.M).split("\n")


def test_the_commands_of_the_readme_are_those_that_are_tested():
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    install = 'python3 -m venv .venv && .venv/bin/pip install -e ".[test]" && .venv/bin/python -m pytest'
    assert install in fenced(readme)
    assert (ROOT / ".ci" / "run").read_text(encoding="utf-8").splitlines()[-1] == install
    assert "python3 -m venv .venv && .venv/bin/pip install -e . && .venv/bin/sweepbench" in fenced(readme)
    windows = [line for line in fenced(readme) if "Scripts" in line]
    assert [line.replace("\\", "/").replace("Scripts", "bin").replace("py -m", "python3 -m") for line in windows] == [
        "python3 -m venv .venv && .venv/bin/pip install -e . && .venv/bin/sweepbench",
        install,
    ]


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md"])
def test_what_a_document_points_at_is_there(document):
    text = (ROOT / document).read_text(encoding="utf-8")
    links = [link for link in re.findall(r"\]\(([^)#\s]+)[^)]*\)", text) if "://" not in link]
    paths = re.findall(r"`((?:app|core|assets|sample_sweeps|tests)/[\w/.]*)`", text)
    assert links or paths
    assert [name for name in [*links, *paths] if not (ROOT / name).exists()] == []


def test_every_dependency_has_its_reason_in_the_developers_document():
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    needed = [*PROJECT["dependencies"], *PROJECT["optional-dependencies"]["test"]]
    names = {re.match(r"[\w-]+", requirement)[0] for requirement in needed}
    assert {name for name in names if f"| {name} |" not in text} == set()


def test_every_extra_and_the_python_version_are_what_the_documents_say():
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    assert f"Python {PROJECT['requires-python'].removeprefix('>=')}" in readme
    assert set(PROJECT["optional-dependencies"]) == {"test"}
