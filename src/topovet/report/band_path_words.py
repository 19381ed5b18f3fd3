"""How bands connect along the path, in plain words."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from topovet.invariants.band_reps.path_results import (
    EndLevel,
    LevelConnection,
    LevelCrossing,
    PathConnections,
    PathSegment,
)
from topovet.notation import k_text, mev

OPEN_MEV = 1.0
"""Splitting of a crossing above which the gap is not said to close, as for the sampled gap."""

_PLACES = {
    "filled": "the two highest filled levels cross",
    "empty": "the two lowest empty levels cross",
    "across": "levels cross at the filling",
}


def band_numbers(first_band: int, n_bands: int) -> str:
    """ "17–18", counted from 1."""
    last = first_band + n_bands
    return f"{first_band + 1}–{last}" if n_bands > 1 else str(last)


def crossing_words(segment: PathSegment, crossing: LevelCrossing) -> str:
    """One crossing in a sentence, without its full stop."""
    lower, upper = crossing.kinds
    energy = f"{crossing.energy_ev:.3f}".replace("-", "−")
    bands = band_numbers(crossing.first_band, crossing.n_bands)
    return (
        f"{segment.start} – {segment.end}, k = {k_text(crossing.k_frac)}, {energy} eV: "
        f"{_PLACES[crossing.place]}{_gap(crossing)} (bands {bands}; "
        f"{lower} comes from below, {upper} from above; in H as it is they are within "
        f"{mev(crossing.splitting_mev)})"
    )


def _gap(crossing: LevelCrossing) -> str:
    """What a crossing at the filling means for the gap."""
    if crossing.place != "across":
        return ""
    if crossing.splitting_mev > OPEN_MEV:
        return ", where only broken symmetry keeps the gap open"
    return ", and the gap closes there"


def crossing_sentences(found: PathConnections) -> tuple[str, ...]:
    """All crossings next to the filling, those at the filling first."""
    listed = sorted(found.crossings, key=lambda pair: pair[1].place != "across")
    return tuple(crossing_words(segment, crossing) for segment, crossing in listed)


def _is_plain(segment: PathSegment) -> bool:
    """Whether all levels are of one kind, and told apart next to the filling."""
    return len(segment.kinds) == 1 and all(c.settled for c in segment.connections)


def tabled_segments(found: PathConnections) -> tuple[PathSegment, ...]:
    """Segments of which there is more to say than that levels run in order of energy."""
    return tuple(s for s in found.segments if not _is_plain(s))


def plain_segments(found: PathConnections) -> str:
    """The others: "Γ – L, L – B1"; empty without any."""
    names = [f"{s.start} – {s.end}" for s in found.segments if _is_plain(s)]
    return ", ".join(dict.fromkeys(names))


@dataclass(frozen=True, slots=True)
class ConnectionRow:
    """Levels of the line between the same two levels of the ends, as one row of a table.

    Attributes
    ----------
    start, end
        The levels at the ends.
    kinds
        Labels on the line, e.g. "1a, 1b"; with a remark where one is not told apart.
    approach_mev
        Least distance of any of them to the next of its kind.
    """

    start: EndLevel
    end: EndLevel
    kinds: str
    approach_mev: float | None


def connection_rows(segment: PathSegment) -> tuple[ConnectionRow, ...]:
    """The connections of a segment, in their order."""
    joined: dict[tuple[EndLevel, EndLevel], list[LevelConnection]] = {}
    for c in segment.connections:
        joined.setdefault((c.start, c.end), []).append(c)
    return tuple(
        ConnectionRow(
            start,
            end,
            ", ".join(_kind(c) for c in found),
            min((c.approach_mev for c in found if c.approach_mev is not None), default=None),
        )
        for (start, end), found in joined.items()
    )


def _kind(connection: LevelConnection) -> str:
    return connection.kind + ("" if connection.settled else " (not told apart from the next)")


def kinds_text(kinds: Sequence[str]) -> str:
    """ "1a, 1b, 2"."""
    return ", ".join(sorted(kinds))


def end_text(level: EndLevel, filling: int) -> str:
    """ "bands 17–18, filled"."""
    side = "across the filling"
    if level.first_band + level.n_bands <= filling:
        side = "filled"
    elif level.first_band >= filling:
        side = "empty"
    return f"{band_numbers(level.first_band, level.n_bands)} ({side})"
