"""Reading a certificate file that somebody hands over: its facts, and its text as a person sees it.

The file is hostile input: sizes are limited, and whatever a damaged file makes a parser raise becomes one
`Unreadable` with a sentence. pypdf is imported only when a PDF is read.
"""

from __future__ import annotations

import html
import io
import json
import logging
import re
import struct
import zlib
from typing import Any

from fieldbook.certificate.as_pdf import ATTACHMENT
from fieldbook.model.canonical import Tree

LIMIT_BYTES = 50_000_000
LIMIT_FACTS = 2_000_000  # characters; a combined mark of many occupations has some 300,000, and pages are set from them
# What parsers are known to raise on damaged input.
PARSER_ERRORS = (
    ArithmeticError,
    AssertionError,
    AttributeError,
    LookupError,
    MemoryError,
    NotImplementedError,
    OSError,
    RecursionError,
    RuntimeError,
    TypeError,
    ValueError,
    struct.error,
    zlib.error,
)
# Each is searched for in time that grows with the size of the text alone, whatever the text.
_FACTS = '<script type="application/json" id="facts">'
_HIDDEN = re.compile(r"<(script|style|title)\b")
_TAG = re.compile(r"<[^<>]*>")


class Unreadable(Exception):
    """A file that holds no facts of a certificate."""


def facts_of(data: bytes, extension: str) -> Tree:
    """The facts inside a `.pdf`, `.html` or `.json` certificate.

    Raises:
        Unreadable: there are none, or they are damaged.
    """
    if len(data) > LIMIT_BYTES:
        raise Unreadable("it is larger than 50 MB")
    try:
        text = {"pdf": _attached, "html": _embedded, "json": _plain}[extension](data)
        if len(text) > LIMIT_FACTS:
            raise Unreadable("its facts are larger than those of any certificate")
        tree = json.loads(text)
    except Unreadable:
        raise
    except PARSER_ERRORS as error:
        raise Unreadable(f"it is damaged ({type(error).__name__})") from error
    if not isinstance(tree, dict) or not str(tree.get("schema", "")).startswith("fieldbook.certificate/"):
        raise Unreadable("its data are not the facts of a certificate")
    return tree


def _plain(data: bytes) -> str:
    return data.decode("utf-8")


def _embedded(data: bytes) -> str:
    _, *found = data.decode("utf-8").split(_FACTS, 2)
    if len(found) > 1:
        raise Unreadable("it holds more than one set of facts")
    facts, end, _ = found[0].partition("</script>") if found else ("", "", "")
    if not end:
        raise Unreadable("it holds no facts of a certificate")
    return facts


def _attached(data: bytes) -> str:
    from pypdf.errors import PyPdfError

    try:
        attachments = _reader(data).attachments.get(ATTACHMENT, [])
    except PyPdfError as error:  # pypdf reads a file piece by piece, as it is asked
        raise Unreadable(f"its attachments are damaged ({type(error).__name__})") from error
    if len(attachments) != 1:
        raise Unreadable(f"it has {len(attachments) or 'no'} attached facts where one is expected")
    return bytes(attachments[0]).decode("utf-8")


def _reader(data: bytes) -> Any:
    import pypdf
    from pypdf.errors import PyPdfError

    logger = logging.getLogger("pypdf")
    level, logger.level = logger.level, logging.CRITICAL
    try:
        return pypdf.PdfReader(io.BytesIO(data))
    except PyPdfError as error:
        raise Unreadable("it is no readable PDF") from error
    finally:
        logger.level = level


def text_lines(data: bytes, extension: str) -> list[str]:
    """The text of a file as a person sees it, line by line, spaces evened out."""
    if extension == "pdf":
        from pypdf.errors import PyPdfError

        try:
            text = "\n".join(page.extract_text() for page in _reader(data).pages)
        except PyPdfError as error:
            raise Unreadable(f"its pages are damaged ({type(error).__name__})") from error
    elif extension == "html":
        text = html.unescape(_TAG.sub("\n", _without_hidden(data.decode("utf-8", "replace"))))
    else:
        text = data.decode("utf-8", "replace")
    lines = (" ".join(line.split()) for line in text.splitlines())
    return [line for line in lines if line]


def _without_hidden(text: str) -> str:
    """HTML without the elements that a page does not show, from each opening tag to its closing one."""
    kept: list[str] = []
    unclosed: set[str] = set()
    position = 0
    for match in _HIDDEN.finditer(text):
        name = match[1]
        if match.start() < position or name in unclosed:
            continue
        end = text.find(f"</{name}>", match.end())
        if end < 0:
            unclosed.add(name)
            continue
        kept.append(text[position : match.start()])
        position = end + len(name) + 3
    return "".join([*kept, text[position:]])
