"""Opening plain and gzipped files, and reading lines that know their number.

Compression is recognised by the first two bytes, never by the name. Whatever goes wrong on the
way (no file, a folder, nothing in it, broken compression) is an `InputError`.
"""

from __future__ import annotations

import gzip
import io
import stat
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, BinaryIO

from topovet.errors import InputError, quoted

if TYPE_CHECKING:
    from _typeshed import WriteableBuffer

GZIP_MAGIC = b"\x1f\x8b"
MAX_DEFLATE_RATIO = 1032
"""Deflate codes at most 258 bytes in 2 bits (RFC 1951): no gzip file expands further."""

_BUFFER_BYTES = 1 << 18
_COPY_AGAIN = "copy or compress the file again"


class _CheckedStream(io.RawIOBase):
    """The bytes of a file, every reading error turned into an `InputError` naming it."""

    def __init__(self, inner: BinaryIO, file: str) -> None:
        self._inner = inner
        self._file = file

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: WriteableBuffer) -> int:
        try:
            n_read: int = self._inner.readinto(buffer)  # type: ignore[attr-defined]
        except EOFError:
            raise InputError(
                self._file,
                found="gzip data that ends too early",
                expected="a whole gzip file",
                todo=_COPY_AGAIN,
            ) from None
        except (gzip.BadGzipFile, zlib.error) as error:
            raise InputError(
                self._file,
                found=f"damaged gzip data ({error})",
                expected="a sound gzip file",
                todo=_COPY_AGAIN,
            ) from None
        except OSError as error:
            raise _unreadable(self._file, error) from None
        return n_read


@contextmanager
def open_bytes(path: str | Path) -> Iterator[BinaryIO]:
    """Open a plain or gzipped file as a buffered binary stream of its uncompressed bytes.

    Parameters
    ----------
    path
        A regular file; compression is recognised by its first bytes.

    Yields
    ------
    BinaryIO
        Buffered; has `read`, `readinto`, `readline`. Not seekable if the file is compressed.

    Raises
    ------
    InputError
        No such file, not a regular file, not readable, empty; and while reading: gzip data
        that are cut short or fail their checksum.
    """
    file = str(path)
    raw = _open_raw(file)
    with raw:
        packed = raw.peek(2)[:2] == GZIP_MAGIC
        inner: BinaryIO = gzip.GzipFile(fileobj=raw, mode="rb") if packed else raw  # type: ignore[assignment]
        with io.BufferedReader(_CheckedStream(inner, file), _BUFFER_BYTES) as stream:
            if not stream.peek(1):
                raise InputError(
                    file,
                    found="an empty file",
                    expected="data",
                    todo="write or copy the file again",
                )
            yield stream


def largest_content(path: str | Path) -> int:
    """Upper bound on the number of uncompressed bytes a file can hold.

    The size of a plain file, or what its compressed bytes can at most expand to; lets a reader
    refuse a header that promises more than can follow, before any memory is set aside.
    """
    file = str(path)
    with _open_raw(file) as raw:
        size = Path(file).stat().st_size
        return size * MAX_DEFLATE_RATIO if raw.peek(2)[:2] == GZIP_MAGIC else size


def read_lines(path: str | Path, *, max_bytes: int = 1 << 24) -> list[str]:
    """All lines of a small text file, without line ends; undecodable bytes become U+FFFD.

    Lines are split at newlines only, so that list index + 1 is the line number an editor shows.

    Raises
    ------
    InputError
        As `open_bytes`; or the (uncompressed) file is larger than max_bytes.
    """
    with open_bytes(path) as stream:
        data = stream.read(max_bytes + 1)
    if len(data) > max_bytes:
        raise InputError(
            path,
            found=f"more than {max_bytes} bytes",
            expected="a small text file",
            todo="check that the right file carries this name",
        )
    lines = [line.rstrip("\r") for line in data.decode("utf-8-sig", errors="replace").split("\n")]
    return lines[:-1] if lines[-1] == "" else lines


class LineReader:
    """Lines of a binary stream with their numbers, never more than `max_line` bytes at a time.

    Iterating gives (line_no, line): the 1-based number, and the bytes without the line end.

    Attributes
    ----------
    file
        Name used in messages.
    line_no
        Number of the line given last; 0 before the first.
    ended
        Whether that line had a line end: False only for the last line of a file without one.
    """

    def __init__(
        self,
        stream: BinaryIO,
        file: str | Path,
        *,
        line_no: int = 0,
        pending: bytes = b"",
        max_line: int = 1 << 20,
    ) -> None:
        """Read `pending` first (bytes already taken from the stream), then the stream."""
        self.file = str(file)
        self.line_no = line_no
        self.ended = True
        self._stream = stream
        self._pending = io.BytesIO(pending)
        self._max_line = max_line

    def __iter__(self) -> Iterator[tuple[int, bytes]]:
        while (line := self.next_line()) is not None:
            yield self.line_no, line

    def next_line(self) -> bytes | None:
        """The next line without its line end, or None at the end of the file (see `next_raw`)."""
        raw = self.next_raw()
        return None if raw is None else raw.rstrip(b"\r\n")

    def next_raw(self) -> bytes | None:
        """The next line with its line end, or None at the end of the file.

        Raises
        ------
        InputError
            The line is longer than `max_line` bytes.
        """
        raw = self._pending.readline(self._max_line + 1)
        if not raw.endswith(b"\n"):
            raw += self._stream.readline(self._max_line + 1 - len(raw))
        if not raw:
            return None
        self.line_no += 1
        self.ended = raw.endswith(b"\n")
        if not self.ended and len(raw) > self._max_line:
            raise InputError(
                self.file,
                line=self.line_no,
                found=f"a line of more than {self._max_line} bytes beginning {quoted(raw[:40])}",
                expected="a text file with line ends",
                todo="check that the right file carries this name",
            )
        return raw

    def glimpse(self) -> list[bytes]:
        """Some of the lines to come, as many as happen to be at hand, without taking them."""
        at_hand = self._pending.getvalue()[self._pending.tell() :] or self._stream.peek()  # type: ignore[attr-defined]
        return at_hand.split(b"\n")[:-1]


def _open_raw(file: str) -> io.BufferedReader:
    """The file as it is on disk; refuses what is not a readable regular file."""
    try:
        # Asked before opening: opening a pipe nobody writes to would wait for ever.
        mode = Path(file).stat().st_mode
        if stat.S_ISREG(mode):
            return Path(file).open("rb")
    except (FileNotFoundError, NotADirectoryError):
        raise InputError(
            file, found="no such file", expected="a readable file", todo="check the path"
        ) from None
    except (OSError, ValueError) as error:
        raise _unreadable(file, error) from None
    raise InputError(
        file,
        found="a directory" if stat.S_ISDIR(mode) else "a device or pipe",
        expected="a regular file",
        todo="give the path of a file",
    )


def _unreadable(file: str, error: OSError | ValueError) -> InputError:
    reason = getattr(error, "strerror", None) or str(error)
    return InputError(
        file,
        found=f"a file that cannot be read ({reason})",
        expected="a readable file",
        todo="check its permissions and the disk",
    )
