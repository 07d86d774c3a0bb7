"""Makes a text file safe to read: digest, compression, encoding and line ends are settled before a reader sees it.

A reader that guesses is wrong in silence (store study, 1.3): UTF-16 read as UTF-8 gives rows full of NUL bytes, a
damaged gzip checksum is not noticed, mixed line ends break the parser. Here each is found or put right.
"""

from __future__ import annotations

import codecs
import csv
import gzip
import hashlib
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

CHUNK = 1 << 22
DELIMITERS = (",", ";", "\t", "|")
WIDE_MARKS = (codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)
UTF8 = ("utf-8", "utf8", "ascii", "us-ascii")


class RefusedError(Exception):
    """A whole item cannot be used; the message is the reason that the ledger keeps."""


@dataclass(frozen=True)
class TextFile:
    """A file ready for the reader: `path` is the original or a cleaned copy; `header` its column names in order."""

    path: Path
    sha256: str
    header: list[str]
    delimiter: str
    ends_with_newline: bool


def digest(path: Path) -> str:
    """SHA-256 of the bytes as delivered."""
    sha = hashlib.sha256()
    with path.open("rb") as file:
        while chunk := file.read(CHUNK):
            sha.update(chunk)
    return sha.hexdigest()


def prepare(path: Path, spool: Path, *, encoding: str, delimiter: str | None, skip: int) -> TextFile:
    """Check a CSV file (plain or .gz) and copy it to `spool` where it needs cleaning.

    Raises
    ------
    RefusedError
        For a damaged gzip, another encoding than stated, NUL bytes, a missing or doubled header.
    """
    sha = digest(path)
    form = _form(path, encoding)
    as_it_is = encoding.lower().replace("_", "-") in UTF8 and path.suffix.lower() != ".gz" and not form.mixed
    if not as_it_is:
        _copy_clean(path, encoding, spool)
    readable = path if as_it_is else spool
    names, found = _header(readable, delimiter, skip)
    return TextFile(readable, sha, names, found, form.ends_with_newline)


@dataclass(frozen=True)
class _Form:
    """What a pass over the text found."""

    mixed: bool
    ends_with_newline: bool


def _text_of(path: Path, encoding: str) -> Iterator[str]:
    """The decoded text in pieces, strictly; `RefusedError` for what is not that encoding or a damaged gzip."""
    narrow = encoding.lower().replace("_", "-")
    decoder = codecs.getincrementaldecoder("utf-8-sig" if narrow in UTF8 else encoding)("strict")
    position = 0
    try:
        with gzip.open(path, "rb") if path.suffix.lower() == ".gz" else path.open("rb") as source:
            while True:
                chunk = source.read(CHUNK)
                if "16" not in narrow and "32" not in narrow:
                    if not position and chunk.startswith(WIDE_MARKS):
                        raise RefusedError('the text is UTF-16. Set encoding = "utf-16" for this source')
                    if b"\x00" in chunk:
                        raise RefusedError(f"a NUL byte at {position + chunk.index(0)}: no text file, or damaged")
                yield decoder.decode(chunk, final=not chunk)
                position += len(chunk)
                if not chunk:
                    return
    except (gzip.BadGzipFile, EOFError, zlib.error) as error:
        raise RefusedError(f"the compressed file is damaged ({error}). Ask for it again") from error
    except UnicodeDecodeError as error:
        raise RefusedError(
            f"not {encoding}: byte {error.object[error.start]:#04x} near position {position + error.start}. "
            'Set `encoding` of the source, for example "cp1252"'
        ) from error


def _form(path: Path, encoding: str) -> _Form:
    breaks = pairs = returns = 0
    last = "\n"
    for piece in _text_of(path, encoding):
        if not piece:
            continue
        pairs += piece.count("\r\n") + (last == "\r" and piece[0] == "\n")
        returns += piece.count("\r")
        breaks += piece.count("\n")
        last = piece[-1]
    plain = returns == 0 or (returns == breaks == pairs)
    return _Form(mixed=not plain, ends_with_newline=last in "\r\n")


def _copy_clean(path: Path, encoding: str, spool: Path) -> None:
    """UTF-8 with line feeds; a carriage return at the end of a piece waits for the next one."""
    held = ""
    with spool.open("w", encoding="utf-8", newline="") as out:
        for piece in _text_of(path, encoding):
            text = held + piece
            held = "\r" if text.endswith("\r") else ""
            out.write(text[: len(text) - len(held)].replace("\r\n", "\n").replace("\r", "\n"))
        out.write("\n" if held else "")


def _header(path: Path, delimiter: str | None, skip: int) -> tuple[list[str], str]:
    with path.open(encoding="utf-8-sig", newline="") as file:
        for _ in range(skip):
            file.readline()
        line = file.readline()
    if not line.strip():
        raise RefusedError("the file is empty: there is no header line")
    found = delimiter or max(DELIMITERS, key=line.count)
    names = [name.strip() for name in next(csv.reader([line.rstrip("\n")], delimiter=found))]
    doubled = sorted({name for name in names if names.count(name) > 1 and name})
    if doubled:
        raise RefusedError(f"the header names {', '.join(repr(name) for name in doubled)} more than once")
    return names, found
