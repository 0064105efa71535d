"""The user's configuration folder, in one place: settings, own antennas, own grids, own profiles."""

from __future__ import annotations

from pathlib import Path


def user_folder() -> Path:
    """`~/.config/fieldbook` on Linux and its like elsewhere, whether it exists or not."""
    import platformdirs

    return Path(platformdirs.user_config_path("fieldbook", appauthor=False))
