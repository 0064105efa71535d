"""`fieldbook register`: the office's file, from many books to one answer per mark.

The sub-commands stand in modules of their own; each is imported when it is called, as the commands are.
"""

from __future__ import annotations

import importlib

import click

from fieldbook.errors import UsageError
from fieldbook.settings.values import nearest

SUBCOMMANDS: dict[str, str] = {
    "add": "Verify books and add them, or their later states.",
    "elsewhere": "Published control and post-processed results from a CSV file.",
    "list": "Books and marks of a register.",
    "proposals": "Which marks may be one, which may have been re-set: the evidence.",
    "decide": "Decide such a question, or strike a decision.",
    "coordinates": "What the evidence gives for each mark, with both accuracies.",
    "check": "What is not in order; exit 1 when anything is found.",
    "publish": "Make what the evidence gives the value in force, with a number.",
    "in-force": "Which value of a mark was in force on a date.",
    "changes": "What changed since a date, by how much, and why.",
    "export": "The values in force as a file for others.",
    "import": "The same register again from its GeoPackage.",
    "dispute": "Everything behind one certificate's or published value's number.",
    "decisions": "Who decided what, when and why.",
}


class SubcommandGroup(click.Group):
    """Sub-commands by name, imported only to run."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002
        """Names in the order of the work."""
        return list(SUBCOMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        """The sub-command of that name.

        Raises:
            UsageError: there is none.
        """
        if cmd_name not in SUBCOMMANDS:
            raise UsageError(
                f'There is no command "register {cmd_name}".{nearest(cmd_name, SUBCOMMANDS)}',
                "Run `fieldbook register --help` for the list.",
            )
        module = importlib.import_module(f"fieldbook.commands.register_{cmd_name.replace('-', '_')}")
        command: click.Command = module.command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        """The list of sub-commands from the table, without importing them."""
        with formatter.section("Commands"):
            formatter.write_dl(list(SUBCOMMANDS.items()))


@click.group("register", cls=SubcommandGroup)
def command() -> None:
    """The office's register: books of many parties into one file, which coordinate holds, and from what evidence."""
