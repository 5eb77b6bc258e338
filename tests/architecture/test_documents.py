"""The documents: every command and every file that they name is there."""

import re
import shlex
from pathlib import Path

import pytest
import typer.main

from service.doors.command_line.commands import lanewright
from service.network.options import Options
from service.settings import Settings

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def commands(text: str) -> list[list[str]]:
    """Return the words of every line after a prompt, up to where a shell would redirect."""
    lines = re.findall(r"^\$ (.+)$", text, flags=re.MULTILINE)
    return [shlex.split(line.partition(" > ")[0]) for line in lines]


def test_every_command_of_the_readme_exists_with_its_options() -> None:
    """The first thing that a stranger types must work."""
    group = typer.main.get_command(lanewright)
    typed = [words[1:] for words in commands(README) if words[0] == "lanewright"]
    assert len(typed) >= 8

    for name, *rest in typed:
        command = group.commands[name]  # type: ignore[attr-defined] # it has several commands
        known = {spelling for parameter in command.params for spelling in parameter.opts}
        assert {word for word in rest if word.startswith("--")} - known == set(), name


def test_every_option_and_setting_of_the_readme_exists() -> None:
    """A table that lists what is gone costs an evening."""
    options = re.findall(r"^\| `([a-z_]+)` \|", README, flags=re.MULTILINE)
    settings = re.findall(r"`LANEWRIGHT_([A-Z_]+)`", README)

    assert set(options) == set(Options().to_document())
    assert {name.lower() for name in settings} - set(Settings.model_fields) == set()


def test_the_commands_of_the_run_script_exist() -> None:
    """The two commands are the promise on the first page."""
    typed = {words[2] for words in commands(README) if words[:2] == ["python3", "run"]}

    assert typed == {"demo", "tests", "benchmarks"}
    assert all(f'"{name}"' in (ROOT / "run").read_text(encoding="utf-8") for name in typed)


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_every_file_that_a_document_names_exists(text: str) -> None:
    """A map with a missing road is worse than none."""
    named = set(re.findall(r"`((?:[a-z_]+/)*[A-Za-z_.]+\.(?:py|md|lock|toml))`", text))
    prefixes = ("", "service/", "service/doors/", "service/doors/command_line/", "service/proof/")
    # Named as what is not committed, and as what an evidence zip holds.
    made_here = {"uv.lock", "verify.py"}

    missing = {
        name
        for name in named - made_here
        if not any((ROOT / prefix / name).exists() for prefix in prefixes)
    }
    assert missing == set()


def test_the_map_names_every_folder_of_the_service() -> None:
    """A folder that the map leaves out is where the surprise lives."""
    folders = {
        path.name
        for path in (ROOT / "service").iterdir()
        if path.is_dir() and path.name != "__pycache__"
    }

    assert {name for name in folders if f"  {name}/" not in DEVELOPERS} == set()
