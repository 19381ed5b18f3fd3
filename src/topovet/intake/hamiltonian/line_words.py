"""Lines of integers and numbers in any layout, cut into checked words.

A line is cut at blanks and each word is held against a strict grammar. The *shape* of the line
(digits replaced by 9) remembers the outcome, so that the next line of that shape costs almost
nothing, and tells `topovet.intake.hamiltonian.line_tally` what the lines of the file look like.
"""

from __future__ import annotations

import math
import re
from dataclasses import replace

from topovet.errors import InputError, quoted
from topovet.intake.hamiltonian.line_tally import LineForm, LineTally, NumberStyle

MEND = "mend that line, or write the file again"

_TO_SHAPE = bytes.maketrans(b"0123456789", b"9999999999")
_WORD = re.compile(rb"[^ \t]+")
_INTEGER = re.compile(rb"[-+]?9{1,9}")
# At least one digit before the point: a lost leading digit must not pass for ".5"; one digit
# before an exponent, and a sign in it, as every common language writes them: more or less is
# damage. Fortran drops the letter E where the exponent takes three digits.
_PLAIN = re.compile(rb"[-+]?(?:9{1,4}|9{1,9}\.(9{0,40}))")
_SCIENTIFIC = re.compile(rb"[-+]?9(?:\.(9{0,40}))?(?:[EeDd][-+](9{1,3})|[-+]999)")
_TO_ZEROS = bytes.maketrans(b"123456789\t+", b"999999999 -")
_NOT_FINITE = re.compile(rb"[-+]?(?:nan|inf|infinity)(?:\(.*\))?", re.IGNORECASE)
_BARE_EXPONENT = re.compile(rb"(?<=[\d.])(?=[-+]\d\d\d$)")
_PRINTABLE = re.compile(rb"[\t -~]*")
_MAX_SHAPES = 4096
_LONGEST_LINE = 1000


class LineParser:
    """Cuts the lines of one file into words and keeps the tally of their forms.

    Attributes
    ----------
    tally
        Complete only after `settle`.
    """

    def __init__(
        self,
        file: str,
        columns: tuple[str, ...],
        n_integers: int,
        *,
        usual_stops: tuple[int, ...] = (),
    ) -> None:
        """Prepare for lines of `n_integers` integers followed by numbers.

        Parameters
        ----------
        file
            Name used in messages.
        columns
            What each column is called in messages.
        n_integers
            How many of them hold integers; the others hold numbers.
        usual_stops
            Where the columns of a line with touching words end if it is as long as that.
        """
        self.tally = LineTally(file)
        self._file = file
        self._columns = columns
        self._n_integers = n_integers
        self._forms: dict[bytes, LineForm] = {}
        self._round_ends: dict[tuple[NumberStyle, ...], list[bool]] = {}
        self._layouts = {usual_stops[-1]: usual_stops} if usual_stops else {}

    def words(self, line: bytes, line_no: int) -> list[bytes]:
        """The words of a line: integers, then numbers for `to_float`.

        Raises
        ------
        InputError
            Anything but the right number of integers and finite numbers.
        """
        form = self._forms.get(line.translate(_TO_SHAPE))
        if form is None:
            form = self._new_form(line, line_no)
        if _has_leading_zero(line):
            raise self._refusal(line, line_no)
        form.count += 1
        words = _cut(line, form.stops) if form.touching else line.split()
        if not all(form.round_ends):
            self._note_round_ends(form, words)
        return words

    def credit(self, line: bytes, line_no: int, count: int, round_ends: list[bool]) -> None:
        """Count lines in the same fixed columns and decimals as this one without reading them."""
        form = self._new_form(line, line_no)
        self.tally.add([replace(form, count=count, round_ends=round_ends)])

    def settle(self) -> None:
        """Bring the tally up to date."""
        self.tally.add(self._forms.values())
        self._forms.clear()

    def to_float(self, word: bytes, line_no: int) -> float:
        """A number that passed `words`, with Fortran's ways of writing exponents."""
        try:
            value = float(word)
        except ValueError:
            text = word.upper().replace(b"D", b"E")
            value = float(text if b"E" in text else _BARE_EXPONENT.sub(b"E", text))
        if math.isfinite(value):
            return value
        raise InputError(
            self._file,
            line=line_no,
            found=f"the number {quoted(word)}",
            expected="a number that double precision can hold",
            todo=MEND,
        )

    def _new_form(self, line: bytes, line_no: int) -> LineForm:
        """Check a line of a shape not met before, and remember the shape."""
        if len(line) > _LONGEST_LINE:
            raise self._refusal(line, line_no)
        if len(self._forms) >= _MAX_SHAPES:
            self.settle()
        shape = line.translate(_TO_SHAPE)
        n_columns = len(self._columns)
        spans = [match.span() for match in _WORD.finditer(line)]
        touching = len(spans) != n_columns
        if touching:
            stops = self._layouts.get(len(line.rstrip(b" \t")), ())
            spans = _word_spans(line, stops)
        styles = self._styles([shape[start:stop] for start, stop in spans])
        if styles is None:
            raise self._refusal(line, line_no)
        form = LineForm(
            stops=tuple(stop for _, stop in spans),
            rooms=_rooms(line, spans),
            styles=styles,
            round_ends=self._round_ends.setdefault(styles, [False] * len(styles)),
            line_no=line_no,
            line=line[:200],
            touching=touching,
        )
        self._forms[shape] = form
        if not touching and max(form.rooms) > 1:
            self._layouts.setdefault(form.stops[-1], form.stops)
        return form

    def _styles(self, shapes: list[bytes]) -> tuple[NumberStyle, ...] | None:
        """Style of each number, or None if any word is not what its column needs."""
        if len(shapes) != len(self._columns):
            return None
        if not all(_INTEGER.fullmatch(shape) for shape in shapes[: self._n_integers]):
            return None
        styles = [_style(shape) for shape in shapes[self._n_integers :]]
        return None if None in styles else tuple(style for style in styles if style is not None)

    def _note_round_ends(self, form: LineForm, words: list[bytes]) -> None:
        numbers = words[self._n_integers :]
        for i, (style, word) in enumerate(zip(form.styles, numbers, strict=True)):
            form.round_ends[i] |= word[-1 - style.exponent_width] == ord("0")

    def _refusal(self, line: bytes, line_no: int) -> InputError:
        """What is wrong with a line, the most telling reason first."""
        found, expected, todo = quoted(line), f"{len(self._columns)} columns", MEND
        words = _WORD.findall(line)
        wrong = self._first_wrong_word(words)
        if len(line) > _LONGEST_LINE:
            found = f"a line of {len(line)} characters"
        elif not _PRINTABLE.fullmatch(line):
            found = f"bytes that are no text in {found}"
        elif b"**" in line:
            found = f"asterisks, a number too wide for its column, in {found}"
            expected = "numbers"
            todo = "see what went wrong in the run that wrote it"
        elif any(_NOT_FINITE.fullmatch(word) for word in words):
            found = f"a number that is not finite in {found}"
            expected = "finite numbers"
            todo = "see what went wrong in the run that wrote it"
        elif wrong is not None:
            name, word = wrong
            found = f"{quoted(word)} for {name}"
            whole = name in self._columns[: self._n_integers]
            expected = "an integer" if whole else "a number like -0.25"
        else:
            found = f"{len(words)} column{'s' * (len(words) != 1)} in {found}"
        if expected.endswith("columns"):
            expected += f" ({' '.join(self._columns)})"
        return InputError(self._file, line=line_no, found=found, expected=expected, todo=todo)

    def _first_wrong_word(self, words: list[bytes]) -> tuple[str, bytes] | None:
        if len(words) != len(self._columns):
            return None
        for i, (name, word) in enumerate(zip(self._columns, words, strict=True)):
            shape = word.translate(_TO_SHAPE)
            lawful = _INTEGER.fullmatch(shape) if i < self._n_integers else _style(shape)
            if not lawful or _has_leading_zero(word):
                return name, word
        return None


def _has_leading_zero(line: bytes) -> bool:
    """Whether a word begins with a superfluous 0, which no program writes."""
    # Every line is searched: this takes a third of the time of a regular expression.
    text = b" " + line.translate(_TO_ZEROS)
    return b" 00" in text or b" 09" in text or b" -00" in text or b" -09" in text


def _style(shape: bytes) -> NumberStyle | None:
    """How a number of this shape is written, None if it is no number."""
    plain = _PLAIN.fullmatch(shape)
    if plain:
        return NumberStyle(len(plain[1] or b""), 0)
    scientific = _SCIENTIFIC.fullmatch(shape)
    if scientific:
        return NumberStyle(len(scientific[1] or b""), len(scientific[2] or b"") or -3)
    return None


def _cut(line: bytes, stops: tuple[int, ...]) -> list[bytes]:
    return [line[start:stop] for start, stop in _word_spans(line, stops)]


def _word_spans(line: bytes, stops: tuple[int, ...]) -> list[tuple[int, int]]:
    """Spans of the words that end at these stops, blanks in front left out."""
    spans = []
    for start, stop in zip((0, *stops[:-1]), stops, strict=False):
        text = line[start:stop]
        spans.append((stop - len(text.lstrip(b" \t")), stop))
    return spans


def _rooms(line: bytes, spans: list[tuple[int, int]]) -> tuple[int, ...]:
    rooms, last = [], 0
    for start, stop in spans:
        signed = line[start : start + 1] in (b"-", b"+")
        rooms.append(start - last - (not signed))
        last = stop
    return tuple(rooms)
