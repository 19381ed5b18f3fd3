"""Opening files and reading lines: what is accepted, and each refusal word for word."""

from __future__ import annotations

import gzip
import io
import os
import tracemalloc
from pathlib import Path

import pytest

from topovet.errors import InputError
from topovet.intake.opening import LineReader, largest_content, open_bytes, read_lines


def read_through(path: Path) -> None:
    with open_bytes(path) as stream:
        while stream.read(1 << 16):
            pass


def refusal(path: Path) -> str:
    """The message without its folder, so that it can be compared exactly."""
    with pytest.raises(InputError) as caught:
        read_through(path)
    return str(caught.value).replace(f"{path.parent}/", "")


def test_compression_is_recognised_by_content_not_by_name(tmp_path: Path) -> None:
    packed = tmp_path / "packed.dat"
    packed.write_bytes(gzip.compress(b"a\nb\n"))
    plain = tmp_path / "plain.gz"
    plain.write_bytes(b"a\nb\n")
    for path in (packed, plain):
        with open_bytes(path) as stream:
            assert stream.read() == b"a\nb\n"


def test_gzip_of_several_members_is_read_through(tmp_path: Path) -> None:
    path = tmp_path / "two.gz"
    path.write_bytes(gzip.compress(b"one\n") + gzip.compress(b"two\n"))
    assert read_lines(path) == ["one", "two"]


def test_missing_file(tmp_path: Path) -> None:
    assert refusal(tmp_path / "no.dat") == (
        "no.dat: found no such file, expected a readable file; check the path."
    )


def test_directory(tmp_path: Path) -> None:
    folder = tmp_path / "folder"
    folder.mkdir()
    assert refusal(folder) == (
        "folder: found a directory, expected a regular file; give the path of a file."
    )


def test_pipe_is_refused_without_waiting_for_a_writer(tmp_path: Path) -> None:
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    assert refusal(pipe) == (
        "pipe: found a device or pipe, expected a regular file; give the path of a file."
    )


@pytest.mark.parametrize("content", [b"", gzip.compress(b"", mtime=0)])
def test_empty(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "empty.dat"
    path.write_bytes(content)
    assert refusal(path) == (
        "empty.dat: found an empty file, expected data; write or copy the file again."
    )


def test_gzip_cut_short(tmp_path: Path) -> None:
    path = tmp_path / "cut.gz"
    path.write_bytes(gzip.compress(os.urandom(5000))[:3000])
    assert refusal(path) == (
        "cut.gz: found gzip data that ends too early, expected a whole gzip file; "
        "copy or compress the file again."
    )


def test_gzip_with_wrong_checksum(tmp_path: Path) -> None:
    data = bytearray(gzip.compress(b"0.123456\n" * 200))
    data[-8] ^= 0xFF
    path = tmp_path / "crc.gz"
    path.write_bytes(data)
    message = refusal(path)
    assert message.startswith("crc.gz: found damaged gzip data (CRC check failed")
    assert message.endswith("expected a sound gzip file; copy or compress the file again.")


def test_no_permission(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise PermissionError(13, "Permission denied")

    path = tmp_path / "locked.dat"
    path.write_bytes(b"x")
    monkeypatch.setattr(Path, "open", refuse)  # Root may read everything, whatever its mode.
    assert refusal(path) == (
        "locked.dat: found a file that cannot be read (Permission denied), "
        "expected a readable file; check its permissions and the disk."
    )


def test_largest_content(tmp_path: Path) -> None:
    plain, packed = tmp_path / "a", tmp_path / "b"
    plain.write_bytes(b"x" * 1000)
    packed.write_bytes(gzip.compress(b"\0" * 10_000_000))
    assert largest_content(plain) == 1000
    assert largest_content(packed) >= 10_000_000


def test_read_lines_counts_lines_as_an_editor_does(tmp_path: Path) -> None:
    path = tmp_path / "a.win"
    path.write_bytes(b"\xef\xbb\xbfone\r\ntwo\x0c\x1c\xe2\x80\xa8\n\nfour\xff")
    assert read_lines(path) == ["one", "two\x0c\x1c\u2028", "", "four\ufffd"]


def test_read_lines_refuses_what_is_not_small(tmp_path: Path) -> None:
    path = tmp_path / "bomb.win"
    path.write_bytes(gzip.compress(b"\n" * 3_000_000))
    with pytest.raises(InputError) as caught:
        read_lines(path, max_bytes=1_000_000)
    assert str(caught.value) == (
        f"{path}: found more than 1000000 bytes, expected a small text file; "
        "check that the right file carries this name."
    )


def test_line_reader_knows_number_and_line_end() -> None:
    reader = LineReader(io.BytesIO(b"a\r\n\nc"), "f")
    assert reader.next_line() == b"a"
    assert reader.ended
    assert list(reader) == [(2, b""), (3, b"c")]
    assert not reader.ended
    assert reader.next_line() is None
    assert reader.line_no == 3


@pytest.mark.parametrize("pending", [b"", b"a", b"a\n", b"a\nb", b"a\nbc\n", b"a\nbc\nd"])
def test_line_reader_joins_pending_bytes_and_stream(pending: bytes) -> None:
    whole = b"a\nbc\nd"
    reader = LineReader(io.BytesIO(whole[len(pending) :]), "f", line_no=7, pending=pending)
    assert list(reader) == [(8, b"a"), (9, b"bc"), (10, b"d")]


def test_a_file_without_line_ends_does_not_fill_memory(tmp_path: Path) -> None:
    path = tmp_path / "one_line"
    path.write_bytes(gzip.compress(b"7" * 50_000_000))
    tracemalloc.start()
    with open_bytes(path) as stream, pytest.raises(InputError) as caught:
        LineReader(stream, "one_line", max_line=1000).next_line()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert str(caught.value) == (
        "one_line, line 1: found a line of more than 1000 bytes beginning "
        f'"{"7" * 40}", expected a text file with line ends; '
        "check that the right file carries this name."
    )
    assert peak < 4_000_000
