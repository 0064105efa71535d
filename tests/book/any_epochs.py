"""Hypothesis strategy: any epoch the model allows, with extreme values and with anything not given."""

from __future__ import annotations

import dataclasses

from hypothesis import strategies as st

from fieldbook.model.epoch import Epoch, SetAside

_int = st.integers(-(2**62), 2**62)
_small = st.integers(0, 99)


def _maybe(strategy: st.SearchStrategy[object]) -> st.SearchStrategy[object]:
    return st.none() | strategy


_text = st.text(st.characters(codec="utf-8", exclude_characters="\0"), max_size=8)
_fields = {
    "source": st.sampled_from(["GGA", "GNS", "RMC"]),
    "talker": _text,
    "code": _maybe(st.sampled_from([item.value for item in SetAside])),
    "station": _maybe(_text),
    "datum": _maybe(_text),
    "flags": st.integers(0, 127),
    "latitude_e8min": _maybe(st.integers(-324_000_000_000, 324_000_000_000)),
    "longitude_e8min": _maybe(st.integers(-648_000_000_000, 648_000_000_000)),
}
any_epoch = st.builds(
    Epoch,
    number=st.just(1),
    **_fields,
    **{
        item.name: _maybe(_small if "decimals" in item.name else _int)
        for item in dataclasses.fields(Epoch)
        if item.name not in {*_fields, "number"}
    },
)


def numbered(epochs: list[Epoch]) -> list[Epoch]:
    """The epochs with numbers 1, 2, ..."""
    return [dataclasses.replace(epoch, number=number) for number, epoch in enumerate(epochs, 1)]
