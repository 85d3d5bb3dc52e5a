"""From bytes to characters, whatever the bench's computer was set to."""

from __future__ import annotations

import codecs
import re

from charset_normalizer import from_bytes

from .refusal import EXPORT_TEXT, Refusal

_BYTE_ORDER_MARKS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF32_LE, "utf-32"),  # before utf-16, whose mark it begins with
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)
# Beyond ASCII, what lab files hold in the encodings of western Windows and Unix.
_EXPECTED = set("µ°²³¹·±×äöüßÄÖÜéèêàâçñåøæÅØÆÉ–—‘’“”„…‰€§´\u00a0")
_CONTROL = re.compile("[\x00-\x08\x0e-\x1a\x1c-\x1f]")
# Bytes shown to the guesser of encodings; it is slow on more and not better.
_GUESS_BYTES = 20_000
# Share of control characters above which bytes are no text.
_MAX_CONTROL_SHARE = 0.002


def decode(data: bytes) -> str:
    """The text, with line ends as ``\\n``.

    Raises
    ------
    Refusal
        If the bytes are no text.
    """
    text = _characters(data)
    sample = text[:200_000]
    if len(_CONTROL.findall(sample)) > max(3, _MAX_CONTROL_SHARE * len(sample)):
        raise Refusal("this is a binary file, not text", EXPORT_TEXT)
    # Old loggers write \r\r\n; as it stands every second line would be empty.
    return text.replace("\r\r\n", "\n").replace("\r\n", "\n").replace("\r", "\n").replace("\x00", "")


def _characters(data: bytes) -> str:
    for mark, encoding in _BYTE_ORDER_MARKS:
        if data.startswith(mark):
            return data.decode(encoding, errors="replace")
    if b"\x00" in data[:4000]:
        head = data[:4000]
        even, odd = head[::2].count(0), head[1::2].count(0)
        if odd > 0.3 * len(head) / 2 and even < 0.05 * len(head):
            return data.decode("utf-16-le", errors="replace")
        if even > 0.3 * len(head) / 2 and odd < 0.05 * len(head):
            return data.decode("utf-16-be", errors="replace")
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        return _one_byte_text(data)


def _one_byte_text(data: bytes) -> str:
    text = data.decode("cp1252", errors="replace")
    if {c for c in set(text) if ord(c) > 127} <= _EXPECTED:
        return text
    # Only lines with bytes beyond ASCII tell the encoding.
    telling = b"\n".join(line[:400] for line in data[:2_000_000].split(b"\n") if not line.isascii())[:_GUESS_BYTES]
    best = from_bytes(telling).best() if telling else None
    if best is not None:
        try:
            return data.decode(best.encoding)
        except (UnicodeDecodeError, LookupError):
            pass
    return data.decode("latin-1")
