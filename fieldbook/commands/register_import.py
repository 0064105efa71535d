"""`fieldbook register import`: the same register again from its GeoPackage."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.commands.output import line


@click.command("import")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("file", type=click.Path(path_type=Path))
def command(register: Path, file: Path) -> None:
    """Make REGISTER of FILE, a GeoPackage written by `register export`: same entries, same hashes."""
    from fieldbook.register.import_geopackage import import_geopackage

    count = import_geopackage(file, register)
    line(f"{register}: {count} entries, the chain and all evidence hold")
