"""Every command has a help text with an example that it would take, and a page in the guide."""

from pathlib import Path

import pytest

from tests.house.command_lines import unknown_parts
from tests.house.commands import Command, commands

GUIDE = Path(__file__).parents[2] / "docs" / "guide"
COMMANDS = commands()[1:]


@pytest.mark.parametrize("command", COMMANDS, ids=lambda one: one.name)
def test_a_command_says_what_it_does_and_shows_an_example(command: Command):
    assert command.paragraphs[0].endswith(".")
    assert command.example.startswith(f"pbm {command.name}")
    assert not unknown_parts(command.example)


@pytest.mark.parametrize("command", COMMANDS, ids=lambda one: one.name)
def test_every_argument_and_option_says_what_it_means(command: Command):
    assert all(one.help.endswith(".") for one in command.parameters)


@pytest.mark.parametrize("command", COMMANDS, ids=lambda one: one.name)
def test_a_command_has_a_page_in_the_guide(command: Command):
    page = command.name.split()[0]
    assert (GUIDE / f"{page}.md").read_text(encoding="utf-8").startswith(f"# pbm {page}\n")
