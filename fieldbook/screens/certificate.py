"""The certificate: what still keeps the paper a draft, what was issued, and the two keys that write paper."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import Any, ClassVar

from fieldbook.model.reduction import Reduction
from fieldbook.model.visible import file_stem
from fieldbook.screens.bridge import Issued
from fieldbook.screens.diary_text import occupations_of
from fieldbook.screens.fields import Field
from fieldbook.screens.figures import wanted_rows_uncertainty
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.one_by_one import OccupationByOccupation
from fieldbook.screens.page import Desk
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, heading, labelled, paragraph, row
from fieldbook.screens.sheets import Sheet
from fieldbook.screens.words import length_95
from fieldbook.settings.schema import words

FORMATS = ("pdf", "html", "txt", "json")


class CertificatePage(OccupationByOccupation):
    """One occupation at a time, or all of a mark together."""

    name_of_page: ClassVar[str] = "certificate"
    _missing: tuple[tuple[str, tuple[int, ...], int], tuple[str, ...]] | None = None

    def left(self, width: int, height: int) -> list[Row]:
        """Which occupation, what is missing, what was issued."""
        sheet = self.chosen()
        rows = [heading("CERTIFICATE", width, "← → occupation, or all together")]
        if sheet is None:
            text = "reducing …" if self.desk.reduced is None or self.desk.reducing else "No occupation is reduced yet."
            return [*rows, BLANK, row(f" {text}")]
        item = sheet.reduction
        stated, place = wanted_rows_uncertainty(item), item.client or item.receiver
        epoch = "" if place.epoch is None else f" at {place.epoch:.2f}"
        rows += [
            labelled("Mark", ", ".join(text for text in (sheet.title, sheet.state) if text), width, style="strong"),
            labelled(
                "States",
                f"95 % {length_95(stated.horizontal95_m)} horizontal, {length_95(stated.vertical95_m)} height",
                width,
            ),
            labelled("In", f"{place.frame_name} ({place.frame}){epoch}", width),
            BLANK,
        ]
        rows += self._missing_rows(sheet, width)
        rows += [BLANK, row((" Issued for this mark", "soft"))]
        return rows + self._documents(item, width)

    def _missing_rows(self, sheet: Sheet, width: int) -> list[Row]:
        missing = self.missing(sheet)
        if missing is None:
            return [row((" looking what is missing …", "soft"))]
        if not missing:
            return [row(" ", ("✓", "good"), " Nothing is missing.  ", ("I", "strong"), " issues it, signed off.")]
        count = "1 thing keeps" if len(missing) == 1 else f"{len(missing)} things keep"
        rows = [row(" ", ("○", "warn"), f" {count} this paper a draft:")]
        for text in missing:
            rows += paragraph(text, width, indent=3, mark=("○", "warn"), most=3)
        return rows

    def missing(self, sheet: Sheet) -> tuple[str, ...] | None:
        """What keeps it a draft, found once per state of the book; None while it is being found."""
        key = (*sheet.key, self.view.state.head_seq if self.view else 0)
        if self._missing is not None and self._missing[0] == key:
            return self._missing[1]
        if sheet.reduction.open:
            return ("The occupation is open: end it first (4, then E).",)
        bridge = self.desk.bridge

        def found(texts: Any) -> None:
            self._missing = (key, tuple(texts))
            self.desk.redraw()

        if self._missing is None or self._missing[0] != (*key[:2], -1):
            self._missing = ((*key[:2], -1), ())
            self.desk.work(lambda: bridge.missing(sheet), found)
        return None

    def _documents(self, item: Reduction, width: int) -> list[Row]:
        documents = [
            entry for entry in (self.view.state.documents if self.view else []) if entry.body.get("mark") == item.mark
        ]
        if not documents:
            return [row(" none yet")]
        superseded = {entry.body.get("supersedes") for entry in documents}
        rows = []
        for entry in reversed(documents):
            number = entry.body.get("number")
            what = f"certificate {number}" if number else "draft"
            state = "superseded" if number and number in superseded else ""
            rows.append(
                row(
                    f" {entry.utc[:16].replace('T', ' ')}  ",
                    (pad(what, 24), "strong" if number else "text"),
                    f" {occupations_of(entry.body)}  ",
                    (state, "warn"),
                )
            )
            for made in self.view.state.rendered if self.view else []:
                if made.body.get("digest") == entry.body.get("digest"):
                    rows.append(row((fit(f"   {made.body.get('format')}  {made.body.get('name')}", width - 2), "soft")))
        return rows


def standing_number(desk: Desk, sheet: Sheet) -> str | None:
    """The number of the standing certificate of this sheet, if one was issued."""
    if desk.view is None:
        return None
    mark, occupation = sheet.reduction.mark, None if sheet.result else sheet.numbers[0]
    numbers = [
        str(entry.body["number"])
        for entry in desk.view.state.documents
        if entry.kind == "certificate"
        and (entry.body.get("mark"), entry.body.get("occupation")) == (mark, occupation)
        and entry.seq not in desk.view.state.strikes
    ]
    return numbers[-1] if numbers else None


def paper(desk: Desk, sheet: Sheet | None, *, issue: bool) -> None:
    """Ask where and by whom, then write a certificate or a draft."""
    if sheet is None:
        desk.tell("No occupation is reduced yet.", "bad")
        return
    item = sheet.reduction
    if item.open:
        desk.tell(f"Occupation {item.occupation} of {item.mark} is open: end it first (4, then E).", "bad")
        return
    standing = standing_number(desk, sheet)
    stem = (
        desk.bridge.path.absolute().parent
        / f"{file_stem(item.mark)}-{'+'.join(map(str, sheet.numbers))}{'' if issue else '-draft'}"
    )
    fields = [
        Field("format", "Format", words(*FORMATS), "pdf", required=True),
        Field("path", "File", "text", str(stem), required=True),
    ]
    if issue:
        fields.append(Field("sign_off", "Signed off by", "text", required=True, hint="name; licence"))
    if issue and standing:
        fields.append(
            Field("supersede", "Supersedes", "text", hint=f"why {standing} is replaced, if its facts changed")
        )
    title = f"{'CERTIFICATE' if issue else 'DRAFT'} of {sheet.title}"
    note = "The ending is added by the format. An existing file is never overwritten."

    def write(values: Values | None) -> None:
        if values is None:
            return
        ending = f".{values['format']}"
        out = values["path"] if values["path"].endswith(ending) else values["path"] + ending
        bridge, mark, number = desk.bridge, item.mark, None if sheet.result else sheet.numbers[0]
        desk.tell("writing the paper …", "soft")
        desk.work(
            lambda: bridge.certify(mark, number, out, values.get("sign_off", ""), values.get("supersede", "")),
            lambda made: _said(desk, made),
        )

    desk.ask(Form(title, fields, note=note), write)


def _said(desk: Desk, made: Issued) -> None:
    what = f"certificate {made.number}" if made.number else "draft"
    desk.tell(f"{what} is in {made.path}")
    desk.redraw()
