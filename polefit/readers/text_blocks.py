"""Text files as blocks of whole lines, whatever their encoding and line ends.

Numbers are ASCII in every encoding that is read here, so blocks are handed on as text in
which each byte of a one-byte encoding is one character; headings are decoded properly.
"""

from __future__ import annotations

import codecs
from collections.abc import Iterator
from dataclasses import dataclass

from polefit.errors import FormatError
from polefit.readers.large_files import Content as Content
from polefit.readers.large_files import release

BLOCK_BYTES = 1 << 21
LONGEST_LINE = 1 << 24
_HEAD_BYTES = 4096
# Control characters that no text file holds; tab, line ends and form feed are allowed.
_CONTROL = {*range(9), *range(14, 32), 127}
_ORDINARY = bytes(c for c in range(256) if c not in _CONTROL)
_RESAVE = "save it as UTF-8 text, or name a file of a supported format"


@dataclass(frozen=True)
class Text:
    """A text file, not yet cut into lines.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    encoding : str
        Python name of its encoding.
    start : int
        Where the text begins, behind a byte-order mark.
    """

    content: Content
    encoding: str
    start: int

    @property
    def wide(self) -> bool:
        """Whether characters take two bytes."""
        return self.encoding.startswith("utf-16")

    def blocks(self, size: int = BLOCK_BYTES) -> Iterator[str]:
        """Yield the text in pieces of whole lines with line ends as newlines."""
        pending = ""
        for piece in self._pieces(size):
            pending += piece
            held = "\r" if pending.endswith("\r") else ""  # may be half of a CRLF
            body = pending[: len(pending) - len(held)]
            if "\r" in body:
                body = body.replace("\r\n", "\n").replace("\r", "\n")
            cut = body.rfind("\n") + 1
            if cut:
                yield body[:cut]
            pending = body[cut:] + held
            if len(pending) > LONGEST_LINE:
                raise FormatError(f"a line of more than {LONGEST_LINE} characters", _RESAVE)
        pending = pending.replace("\r", "\n")
        if pending:
            yield pending if pending.endswith("\n") else pending + "\n"

    def _pieces(self, size: int) -> Iterator[str]:
        encoding = self.encoding if self.wide else "latin-1"
        decoder = codecs.getincrementaldecoder(encoding)()
        for at in range(self.start, len(self.content), size):
            piece = bytes(self.content[at : at + size])
            release(self.content, at, at + size)
            if not self.wide and piece.translate(None, _ORDINARY):
                raise FormatError("binary bytes within a text file", _RESAVE)
            try:
                yield decoder.decode(piece)
            except UnicodeDecodeError:
                raise FormatError("broken UTF-16 text", _RESAVE) from None
        if decoder.getstate()[0]:
            raise FormatError("UTF-16 text that ends within a character", _RESAVE)

    def decoded(self, piece: str) -> str:
        """Give a heading its true characters: UTF-8 where it is valid, else Latin-1."""
        if self.wide:
            return piece
        try:
            return piece.encode("latin-1").decode("utf-8")
        except UnicodeDecodeError:
            return piece


def open_text(content: Content) -> Text:
    """Settle the encoding of a text file.

    Parameters
    ----------
    content : bytes-like
        The whole file.

    Returns
    -------
    Text
        UTF-16 by its byte-order mark or by its evident zero bytes, else UTF-8 or Latin-1.

    Raises
    ------
    FormatError
        If the file is empty or is no text.
    """
    head = bytes(content[:_HEAD_BYTES])
    if not head:
        raise FormatError("the file is empty", "export it again")
    if head.startswith((codecs.BOM_UTF32_LE, b"\x00\x00\xfe\xff")):
        raise FormatError("UTF-32 text", _RESAVE)
    if head.startswith(codecs.BOM_UTF8):
        return Text(content, "utf-8", 3)
    if head.startswith(codecs.BOM_UTF16_LE):
        return Text(content, "utf-16-le", 2)
    if head.startswith(codecs.BOM_UTF16_BE):
        return Text(content, "utf-16-be", 2)
    even, odd = head[0::2], head[1::2]
    if odd and odd.count(0) >= 0.9 * len(odd) and even.count(0) == 0:
        return Text(content, "utf-16-le", 0)
    if odd and even.count(0) >= 0.9 * len(even) and odd.count(0) == 0:
        return Text(content, "utf-16-be", 0)
    if head.translate(None, _ORDINARY):
        raise FormatError("not a text file", _RESAVE)
    return Text(content, "utf-8", 0)


def numbered_lines(text: Text) -> Iterator[tuple[int, str]]:
    """Yield (line number counted from 1, line) over the whole file; slow, for diagnosis."""
    number = 0
    for block in text.blocks():
        for line in block.removesuffix("\n").split("\n"):
            number += 1
            yield number, line
