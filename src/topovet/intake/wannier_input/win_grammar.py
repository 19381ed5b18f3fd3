"""Lines of a `.win` file -> keywords and blocks, each with its line number.

The grammar is Wannier90's (user guide, chapter on the input file; quoted from memory): one keyword
a line, upper and lower case alike, `=`, `:` or a blank before the value; `!` and `#` start a
comment; blocks run from `begin NAME` to `end NAME`. Nothing is interpreted here.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from topovet.errors import InputError, quoted

_KEYWORD = re.compile(r"([A-Za-z]\w*)(?:\s*[=:]\s*|\s+|$)(.*)", re.ASCII | re.DOTALL)
_COMMENT = re.compile(r"[!#]")


@dataclass(frozen=True, slots=True)
class Line:
    """One line without its comment: 1-based number, text stripped of outer blanks."""

    number: int
    text: str


@dataclass(frozen=True, slots=True)
class Block:
    """Contents of `begin NAME … end NAME`, blank lines left out.

    Attributes
    ----------
    name
        In lower case.
    number
        1-based line of `begin`.
    lines
        What stands between, in file order.
    """

    name: str
    number: int
    lines: tuple[Line, ...]


@dataclass(frozen=True, slots=True)
class WinText:
    """Keywords and blocks of one `.win` file; names in lower case, repetitions kept.

    Attributes
    ----------
    file
        Name used in messages.
    keywords
        Name -> lines that carry it, with only the value left in `text`.
    blocks
        Name -> blocks of that name.
    """

    file: str
    keywords: Mapping[str, tuple[Line, ...]]
    blocks: Mapping[str, tuple[Block, ...]]

    def keyword(self, name: str) -> Line | None:
        """The only line with this keyword, its value as text; None where it is absent.

        Raises
        ------
        InputError
            The keyword stands twice, or without a value.
        """
        lines = self.keywords.get(name, ())
        if len(lines) > 1:
            raise InputError(
                self.file,
                line=lines[1].number,
                found=f"{name} a second time (first on line {lines[0].number})",
                expected="each keyword once",
                todo="delete one of the two lines",
            )
        if lines and not lines[0].text:
            raise InputError(
                self.file,
                line=lines[0].number,
                found=f"{name} without a value",
                expected=f"{name} = VALUE",
                todo="complete or delete the line",
            )
        return lines[0] if lines else None

    def block(self, name: str) -> Block | None:
        """The only block of this name; None where it is absent.

        Raises
        ------
        InputError
            The block stands twice.
        """
        blocks = self.blocks.get(name, ())
        if len(blocks) > 1:
            raise InputError(
                self.file,
                line=blocks[1].number,
                found=f"a second block {name} (first on line {blocks[0].number})",
                expected="each block once",
                todo="delete one of the two blocks",
            )
        return blocks[0] if blocks else None


def lex_win(lines: Sequence[str], file: str) -> WinText:
    """Sort the lines of a `.win` file into keywords and blocks.

    Parameters
    ----------
    lines
        The file, one entry per line; line ends do not matter.
    file
        Name used in messages.

    Raises
    ------
    InputError
        A block is not closed or closed without having been opened, or a line outside every block
        is not `keyword = value`.
    """
    keywords: dict[str, list[Line]] = {}
    blocks: dict[str, list[Block]] = {}
    rest = _meaningful(lines)
    for line in rest:
        word, name = _fence(line)
        if word == "begin":
            blocks.setdefault(name, []).append(_block(line, name, rest, file))
        elif word == "end":
            raise InputError(
                file,
                line=line.number,
                found=quoted(line.text),
                expected="the begin of that block on an earlier line",
                todo="restore the begin line or delete this one",
            )
        else:
            key, value = _keyword(line, file)
            keywords.setdefault(key, []).append(value)
    return WinText(
        file,
        {name: tuple(found) for name, found in keywords.items()},
        {name: tuple(found) for name, found in blocks.items()},
    )


def _meaningful(lines: Sequence[str]) -> Iterator[Line]:
    for number, raw in enumerate(lines, start=1):
        text = _COMMENT.split(raw, maxsplit=1)[0].strip()
        if text:
            yield Line(number, text)


def _fence(line: Line) -> tuple[str, str]:
    """("begin", name), ("end", name), or ("", "") for any other line."""
    word, _, name = line.text.replace("\t", " ").partition(" ")
    word = word.lower()
    return (word, name.strip().lower()) if word in ("begin", "end") else ("", "")


def _block(begin: Line, name: str, rest: Iterator[Line], file: str) -> Block:
    if not re.fullmatch(r"\w+", name, re.ASCII):
        raise InputError(
            file,
            line=begin.number,
            found=quoted(begin.text),
            expected="begin and the name of one block",
            todo="correct the line",
        )
    inside: list[Line] = []
    for line in rest:
        word, other = _fence(line)
        if word == "end" and other == name:
            return Block(name, begin.number, tuple(inside))
        if word:
            raise InputError(
                file,
                line=line.number,
                found=quoted(line.text),
                expected=f"end {name}, for the block opened on line {begin.number}",
                todo="close one block before the next",
            )
        inside.append(line)
    raise InputError(
        file,
        line=begin.number,
        found=f"the block {name} without its end",
        expected=f"end {name} before the end of the file",
        todo="check that the file is complete and add the line",
    )


def _keyword(line: Line, file: str) -> tuple[str, Line]:
    match = _KEYWORD.fullmatch(line.text)
    if match is None:
        raise InputError(
            file,
            line=line.number,
            found=quoted(line.text),
            expected="keyword = value, or begin and the name of a block",
            todo="correct the line or put it back into its block",
        )
    return match[1].lower(), Line(line.number, match[2].strip())
