"""The README is true: every command in it runs, its Python runs, and every key and command is in it."""

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()
COMMANDS = re.findall(r"^\$ smallbody (.+)$", README, re.M)
PROGRAMS = re.findall(r"```python\n(.+?)```", README, re.S)


@pytest.fixture(scope="module")
def place(tmp_path_factory):
    """A folder like a user's: shapes and runs beside each other."""
    folder = tmp_path_factory.mktemp("readme")
    shutil.copytree(ROOT / "shapes", folder / "shapes")
    shutil.copytree(ROOT / "runs", folder / "runs", ignore=shutil.ignore_patterns("pictures", "out"))
    return folder


def run(words, place):
    return subprocess.run(
        [sys.executable, *words], cwd=place, capture_output=True, text=True, timeout=600, env=dict(os.environ)
    )


def test_the_readme_has_commands_and_programs():
    assert len(COMMANDS) >= 8
    assert len(PROGRAMS) >= 1


def test_every_command_in_the_readme_runs(place):
    for command in COMMANDS:  # in their order: later ones use the files of earlier ones
        done = run(["-m", "smallbody.cli", *command.split()], place)
        assert done.returncode == 0, f"{command}\n{done.stdout}\n{done.stderr}"


def test_every_program_in_the_readme_runs(place):
    for program in PROGRAMS:
        done = run(["-c", program], place)
        assert done.returncode == 0, f"{program}\n{done.stderr}"


def test_every_key_of_the_body_file_is_in_the_readme():
    from dataclasses import fields

    from smallbody import body

    for section in (body.ShapeSource, body.Bulk, body.Surface, body.Spin, body.Orbit, body.Solver):
        for field in fields(section):
            assert f"`{field.name}" in README, f"{section.__name__}.{field.name} is not in the README"


def test_every_picture_in_the_readme_is_there():
    for picture in re.findall(r"\]\((runs/pictures/[^)]+)\)", README):
        assert (ROOT / picture).is_file(), picture


def test_every_benchmark_in_the_guide_is_there():
    guide = (ROOT / "DEVELOPERS.md").read_text()
    for script in re.findall(r"`python (tests/\S+\.py)", guide):
        assert (ROOT / script).is_file(), script
