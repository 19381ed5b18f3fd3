"""A walk for the terminal: plain text with units."""

from __future__ import annotations

from topovet.deformation.conclusion import side_text
from topovet.deformation.results import Closing, Walk
from topovet.notation import angstrom, ev, k_text, mev, one_line, z2_text
from topovet.report.deformation.material import DeformationMaterial, EndEntry
from topovet.report.text import plain_text
from topovet.units import MEV_PER_EV

_SYMBOLS = str.maketrans({"λ": "lambda", "₄": "4", "η": "eta", "Å": "angstrom"})


def deformation_lines(material: DeformationMaterial) -> str:
    """A summary of one walk, each number with its unit."""
    made, conclusion = material.walk, material.conclusion
    rows = [
        ("A", _end(material.a)),
        ("B", _end(material.b)),
        ("compared", compared_text(made)),
        ("averaged", averaged_text(made)),
        ("outcome", conclusion.sentence),
        *(("closing", closing_text(c)) for c in made.closings),
        *(
            (
                "open",
                f"λ = {s.lo:.4f} to {s.hi:.4f}: {side_text(s)}; "
                f"gap proved over {100 * s.proved_share:.1f} % of it",
            )
            for s in made.segments
        ),
        ("proof", proof_text(made)),
        *(("doubt", doubt) for doubt in conclusion.doubts),
    ]
    lines = [f"{one_line(material.a.name)} to {one_line(material.b.name)}"]
    lines += [f"  {label:<10} {_plain(value)}" for label, value in rows if value]
    return "\n".join(lines)


def _plain(text: str) -> str:
    return plain_text(text.translate(_SYMBOLS))


def _end(end: EndEntry) -> str:
    errors = f"; errors: {', '.join(end.errors)}" if end.errors else ""
    return f"{end.name}: {end.class_}, Z₂ = {z2_text(end.z2)}, grade {end.grade}{errors}"


def compared_text(made: Walk) -> str:
    """On what grounds the two were mixed."""
    found = made.comparison
    strain = max(found.stretches, key=lambda s: abs(s - 1)) - 1
    parts = [
        f"overlap of H(R) {found.overlap:.4f}, of the worst function {found.least_overlap:.4f}",
        "same cell" if abs(strain) < 1e-5 else f"cell strained by up to {_percent(strain)}",
    ]
    if found.displacement_ang is not None:
        moved = found.displacement_ang
        parts.append("same sites" if moved < 1e-5 else f"sites moved by up to {angstrom(moved)}")
    if found.substitutions:
        parts.append(", ".join(found.substitutions))
    if found.functions != "declared":
        parts.append(found.functions)
    if found.spin_added:
        parts.append(f"{found.spin_added} is spinless and was taken for either spin")
    return "; ".join(parts)


def averaged_text(made: Walk) -> str:
    """What was made exact, and what that moved."""
    one, two = made.averagings
    names = [f"{one.n_operations} operations"] if one.n_operations > 1 else []
    names += ["inversion"] if made.inversion and one.n_operations == 1 else []
    names += ["time reversal"] if made.time_reversal else []
    if not names:
        return "over nothing: no symmetry is shared"
    said = (
        f"over {' and '.join(names)}; on the sampled k the levels beside the gap move by "
        f"{mev(one.levels_moved_mev)} (A) and {mev(two.levels_moved_mev)} (B), H(k) by "
        f"{mev(one.moved_mev)} and {mev(two.moved_mev)}"
    )
    ends = ((one, made.samples[0]), (two, made.samples[-1]))
    if any(a.moved_mev >= MEV_PER_EV * sample.gap_ev / 2 for a, sample in ends):
        said += (
            "; that is half of the gap there or more: that the average is in the phase of the "
            "Hamiltonian itself rests on its indices"
        )
    return said


def closing_text(closing: Closing) -> str:
    """Where the gap closes, and which levels change places."""
    exchanges = "; ".join(
        f"at {k_text(e.k)} {e.n_minus_before} odd states below the gap become {e.n_minus_after}"
        for e in closing.exchanges
    )
    if closing.kind == "interval":
        where = (
            f"λ = {closing.lo:.4f} to {closing.hi:.4f}: gapless, at {closing.lam:.4f} for "
            f"instance at k = {k_text(closing.k)}"
        )
    else:
        where = f"λ = {closing.lam:.6f}, k = {k_text(closing.k)}: gap {_tiny(closing.gap_ev)}"
    return f"{where}; {exchanges}" if exchanges else where


def _percent(part: float) -> str:
    return f"{100 * part:+.2f} %".replace("-", "−")


def _tiny(gap_ev: float) -> str:
    return "below 1e-7 eV" if gap_ev < 1e-7 else mev(MEV_PER_EV * gap_ev)


def proof_text(made: Walk) -> str:
    """What is proved, and at what price."""
    if not made.stretches:
        return made.proof_note
    share = f"the gap is proved open over {100 * made.proved_share:.1f} % of λ"
    proved = [s.proved_min_ev for s in made.stretches if s.proved_min_ev > 0]
    least = f", nowhere below {ev(min(proved))} there" if proved else ""
    beside = (
        f"; {made.resolution:.4f} on each side of a closing is left out" if made.closings else ""
    )
    note = f"; {made.proof_note}" if made.proof_note else ""
    return f"{share}{least} ({made.n_solves} eigenvalue problems){beside}{note}"
