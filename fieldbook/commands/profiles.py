"""`fieldbook profiles`: requirements by published documents, to be put into a session file."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.output import line, note, write_json

if TYPE_CHECKING:
    from fieldbook.settings.profiles import Profile


@click.group("profiles", help="Requirements by published documents: list them, show one as a [requirement] table.")
def command() -> None:
    """The group."""


@command.command("list", help="All profiles, the office's own included.")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def list_profiles(*, as_json: bool) -> None:
    """Names and titles."""
    from fieldbook.settings.profiles import profiles, user_folder

    found = profiles()
    if as_json:
        write_json({"schema": "fieldbook.profiles/1", "profiles": [_tree(item) for item in found.values()]})
        return
    width = max(len(name) for name in found)
    for item in found.values():
        line(f"{item.name:{width}}  {item.title}")
        line(f"{'':{width}}  {item.source}")
    note(f"Profiles of your own: {user_folder()}")


@command.command("show", help="One profile, ready to be put into a session file.")
@click.argument("name")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def show(name: str, *, as_json: bool) -> None:
    """The table on stdout, what no figure can judge on stderr."""
    from fieldbook.settings.profiles import profile

    found = profile(name)
    if as_json:
        write_json({"schema": "fieldbook.profiles/1", "profiles": [_tree(found)]})
        return
    for text in found.toml().splitlines():
        line(text)
    note(f"{found.title}; {found.standing}: {found.path}")
    for text in found.also:
        note(f"also, and for you to see to: {text}")


def _tree(item: Profile) -> dict[str, Any]:
    return {
        "name": item.name,
        "title": item.title,
        "document": item.document,
        "edition": item.edition,
        "standing": item.standing,
        "also": list(item.also),
        "requirement": item.requirement,
        "open": list(item.open_keys),
        "source": item.source,
        "path": item.path,
    }
