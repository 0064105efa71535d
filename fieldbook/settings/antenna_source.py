"""Where an antenna's values come from, frozen into the session tree when a session file is read.

    [antenna] antex = "FILE"     a block of an ANTEX file beside the session file; `antex_entry` where several fit
    [antenna] listed = "NAME"    an antenna of the user's own list (`settings.antennas`)

Both are replaced by what they name: the tree of the occupation then holds the block's text and the hash of its file (or
the typed values), and neither file is ever read again: another computer reduces the same. Nothing is chosen that does
not fit: another radome is another antenna, an individual calibration goes by its serial number, two blocks that both
fit are a question to the operator.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.calibration import split_model
from fieldbook.model.canonical import Tree
from fieldbook.settings.antex import AntexBlock, AntexError, AntexFile, block_calibration, read_antex

LISTED_KEYS = (
    "model",
    "serial",
    "source",
    "slant_radius_m",
    "slant_mark_above_arp_m",
    "arp_above_mount_m",
    "arp_to_phase_centre_m",
    "offset_frequency",
    "calibration",
)


def with_antenna(raw: Tree, base_dir: Path) -> Tree:
    """The tree of a session with `antenna.antex` and `antenna.listed` frozen; unchanged where neither stands.

    Args:
        raw: as parsed; values of a wrong kind are left to the checks that follow.
        base_dir: folder a relative `antex` is taken from.

    Raises:
        UsageError: file or name not there, broken, nothing fits, or the session states something else.
    """
    antenna = raw.get("antenna")
    if not isinstance(antenna, dict):
        return raw
    if isinstance(antenna.get("listed"), str):
        antenna = _from_list(antenna, antenna["listed"])
    if isinstance(antenna.get("antex"), str) and "calibration" not in antenna:
        antenna = {**antenna, "calibration": _from_file(antenna, base_dir)}
    return {**raw, "antenna": antenna}


def _from_list(antenna: Tree, name: str) -> Tree:
    from fieldbook.settings.antennas import listed_antenna

    kept = listed_antenna(name)
    for key in LISTED_KEYS:
        if key in antenna and key in kept and not _same(antenna[key], kept[key]):
            raise UsageError(
                f'antenna.{key} is {_short(antenna[key])} in the session and {_short(kept[key])} in your antenna "{name}".',
                "Leave the key out, or correct one of them.",
            )
    return {**kept, **antenna}


def _same(one: Any, other: Any) -> bool:
    if isinstance(one, dict) and isinstance(other, dict):
        return one.keys() == other.keys() and all(_same(one[key], other[key]) for key in one)
    if isinstance(one, str) and isinstance(other, str):
        return one.split() == other.split()
    return bool(one == other)


def _short(value: Any) -> str:
    text = str(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _from_file(antenna: Tree, base_dir: Path) -> Tree:
    model, serial, entry = antenna.get("model"), antenna.get("serial"), antenna.get("antex_entry")
    if not isinstance(model, str):
        raise UsageError(
            "antenna.antex needs antenna.model.", "Write the type with its radome, as in the first 20 columns."
        )
    file = read_antex(base_dir / antenna["antex"])
    block = choose_block(
        file,
        model,
        serial if isinstance(serial, str) else None,
        entry if isinstance(entry, int) and not isinstance(entry, bool) else None,
    )
    return frozen(file, block)


def frozen(file: AntexFile, block: AntexBlock) -> Tree:
    """The table `antenna.calibration` of a block, read to its last number.

    Raises:
        AntexError: the block is broken, or relative.
    """
    require_absolute(file)
    block_calibration(block.text, file.name, block.line)
    return {"file": file.name, "sha256": file.sha256, "block": block.text}


def require_absolute(file: AntexFile) -> None:
    """Refuse relative calibrations.

    Raises:
        AntexError: always for those.
    """
    if not file.absolute:
        reference = f" (against {file.reference})" if file.reference else ""
        raise AntexError(
            f"{file.name} holds relative calibrations{reference}: differences from a reference antenna, right only with "
            "a base of the same kind.",
            "Take an absolute calibration (PCV TYPE A), or type the offset with its source: arp_to_phase_centre_m.",
            code="antex_relative",
        )


def choose_block(file: AntexFile, model: str, serial: str | None, entry: int | None = None) -> AntexBlock:
    """The block of this antenna: its own by serial number, else the mean of its type.

    Args:
        model: type and radome; the radome must be stated.
        serial: of the antenna; None = not stated, then only a type mean fits.
        entry: number of the block, where several fit.

    Raises:
        AntexError: none fits, several do, or the radome is not stated.
    """
    name, radome = split_model(model)
    if not radome:
        raise AntexError(
            f'antenna.model = "{model}" states no radome.',
            'Write it behind the type: four letters, "NONE" only where the antenna is bare.',
            code="radome",
        )
    of_type = [block for block in file.blocks if split_model(block.type_field)[0] == name]
    fitting = [block for block in of_type if split_model(block.type_field)[1] == radome]
    if not fitting:
        raise _nothing(file, name, radome, of_type)
    if entry is not None:
        chosen = next((block for block in fitting if block.entry == entry), None)
        if chosen is None:
            numbers = ", ".join(str(block.entry) for block in fitting)
            raise AntexError(f"Entry {entry} of {file.name} is not {name} {radome}.", f"That type has entry {numbers}.")
        if chosen.serial and chosen.serial != serial:
            raise AntexError(
                f"Entry {entry} of {file.name} is the calibration of serial {chosen.serial}, not of {serial or 'this one'}.",
                "An individual calibration is good for its own antenna only.",
            )
        return chosen
    own = [block for block in fitting if block.serial and block.serial == serial]
    chosen_from = own or [block for block in fitting if not block.serial]
    if len(chosen_from) == 1:
        return chosen_from[0]
    if not chosen_from:
        serials = ", ".join(block.serial for block in fitting)
        raise AntexError(
            f"{file.name} has {name} {radome} only for serial {serials}; antenna.serial is {serial or 'not stated'}.",
            "State the serial number of your antenna, or take a file with the mean of the type.",
            code="antenna_not_in_file",
        )
    numbers = ", ".join(str(block.entry) for block in chosen_from)
    raise AntexError(
        f"{file.name} has {len(chosen_from)} calibrations that fit {name} {radome}: entries {numbers}.",
        "Say which: antenna.antex_entry = N; `fieldbook antenna list FILE` shows them.",
        code="antenna_ambiguous",
    )


def _nothing(file: AntexFile, name: str, radome: str, of_type: list[AntexBlock]) -> UsageError:
    if of_type:
        radomes = ", ".join(sorted({split_model(block.type_field)[1] or "not stated" for block in of_type}))
        return AntexError(
            f"{file.name} has {name} with radome {radomes}, not with {radome}.",
            "Another radome is another antenna, by millimetres: look at the antenna, or find its calibration.",
            code="radome",
        )
    import difflib

    known = sorted({split_model(block.type_field)[0] for block in file.blocks})
    close = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
    hint = f' The nearest one is "{close[0]}".' if close else ""
    return AntexError(
        f'{file.name} has no antenna "{name}".{hint}',
        "`fieldbook antenna list FILE` shows what it has; or type the offset in: arp_to_phase_centre_m.",
        code="antenna_not_in_file",
    )
