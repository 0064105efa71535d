"""The `fieldbook` command: one click group whose sub-commands are imported only when they are called.

`fieldbook --help` must answer at once on a slow laptop, so the table below holds the short help of every command and
nothing else is loaded. Each sub-command lives in the module of its name and is the click command called `command`.
`main` is the one place where an error becomes text and exit code: what, where, remedy on stderr, or, with `--json`,
`{schema, error: {code, text, remedy}}` on stdout. No foreseeable input shows a traceback.
"""

from __future__ import annotations

import importlib
import os
import sys
from typing import NoReturn

import click

from fieldbook import __version__
from fieldbook.commands.output import write_error
from fieldbook.errors import ExitCode, FieldbookError, Interrupted, UsageError

COMMANDS: dict[str, str] = {
    "demo": "The whole job on the samples: books, reductions, certificates, register.",
    "new": "Begin a book from a session file.",
    "open": "Open a book on the screen.",
    "links": "List serial ports without opening any, or listen to one link.",
    "observe": "Record one occupation without the screen.",
    "status": "What the recorder of a book is doing.",
    "watch": "One plain line a second about a running recorder.",
    "reduce": "Reduce occupations to coordinates of their marks.",
    "certify": "Issue the certificate of a mark, or a draft.",
    "verify": "Check that a book or a certificate is unchanged and consistent.",
    "entry": "Write an entry: remark, height, setup, mark, end, decision.",
    "strike": "Strike out an entry; it stays legible.",
    "key": "Keys that sign entries and certificates: make, list, show, export, trust; sign a book.",
    "marks": "List, import or export the marks of a book.",
    "frames": "Find a frame, see what a pair of frames does at a place, and which to record.",
    "geoid": "Geoid models: add one with its record, list them, show one.",
    "profiles": "Requirements by published documents, for a session file.",
    "antenna": "Your own antennas: add from an ANTEX file or typed in, list, show.",
    "register": "The office: books into one control register, decisions, what holds.",
    "export": "Write out the received bytes of an occupation.",
    "rescue": "Salvage what a damaged book still holds into a new one.",
}


class LazyGroup(click.Group):
    """A group that knows its commands by name and imports one only to run it."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002
        """Names in the order of the work."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        """The command of that name, imported now; None if there is none."""
        if cmd_name not in COMMANDS:
            return None
        module = importlib.import_module(f"fieldbook.commands.{cmd_name}")
        command: click.Command = module.command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """As click does, but an unknown name gets the nearest known one."""
        name = args[0] if args else ""
        if name and not name.startswith("-") and name not in COMMANDS:
            import difflib

            close = difflib.get_close_matches(name, list(COMMANDS), n=1)
            hint = f' The nearest one is "{close[0]}".' if close else ""
            raise UsageError(f'There is no command "{name}".{hint}', "Run `fieldbook --help` for the list of commands.")
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        """The list of commands from the table, without importing them."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="fieldbook")
def group() -> None:
    """Field book for static GNSS occupations of control marks: record, reduce, certify. Works offline."""


def run(arguments: list[str]) -> int:
    """Run one command line and return its exit code; every foreseeable error becomes text."""
    as_json = "--json" in arguments
    try:
        result = group.main(args=arguments, prog_name="fieldbook", standalone_mode=False)
        sys.stdout.flush()
    except FieldbookError as error:
        write_error(error, as_json=as_json)
        return int(error.exit_code)
    except click.exceptions.NoArgsIsHelpError as request:
        click.echo(request.format_message())
        return int(ExitCode.OK)
    except click.ClickException as slip:
        write_error(_usage(slip), as_json=as_json)
        return int(ExitCode.USAGE)
    except (click.Abort, KeyboardInterrupt):
        write_error(Interrupted("Interrupted.", "Everything received is committed."), as_json=as_json)
        return int(ExitCode.INTERRUPTED)
    except (BrokenPipeError, SystemExit):  # click turns the first into the second, with a code that is verify's
        # the reader of our output went away (`| head`): nothing is wrong, and nothing can be said any more
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return int(ExitCode.OK)
    except OSError as problem:
        write_error(_system(problem), as_json=as_json)
        return int(ExitCode.USAGE)
    return int(result) if isinstance(result, int) else int(ExitCode.OK)


def _usage(slip: click.ClickException) -> UsageError:
    context = getattr(slip, "ctx", None)
    place = context.command_path if context is not None else "fieldbook"
    return UsageError(slip.format_message(), f"Run `{place} --help` for how it is called.")


def _system(problem: OSError) -> UsageError:
    what = problem.strerror or str(problem)
    where = f" ({problem.filename})" if problem.filename else ""
    return UsageError(f"The system refused: {what}{where}.", "Check the path, the rights and the free space.")


def main() -> NoReturn:
    """The console script."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):  # a terminal that cannot show a degree sign gets \xb0, not a crash
            stream.reconfigure(errors="backslashreplace")
    sys.exit(run(sys.argv[1:]))
