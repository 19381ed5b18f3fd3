"""Nodal lines one by one: Berry phase around them, and what holds them."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.invariants.nodes.flux import loop_berry_phase, nearest_quantised
from topovet.invariants.nodes.points import Case, as_vector
from topovet.invariants.nodes.protection import (
    enforced_level,
    mirror_protection,
    quantising_operation,
)
from topovet.invariants.nodes.results import NodalLine
from topovet.spectrum.closings.distinct import between, folded
from topovet.spectrum.closings.local import describe_touching
from topovet.spectrum.closings.trace import TracedLine, step_length

LOOPS = (2.0, 0.5)
"""Radii of the loops that are tried, in steps of the trace."""

PLACES = (0.13, 0.37, 0.61, 0.86)
"""Where along the line, as parts of its points: the widest loop of these is taken, away from
places where lines meet."""


def describe_line(case: Case, line: TracedLine, images: IntArray) -> NodalLine:
    """A traced line with its Berry phase and what holds it.

    Parameters
    ----------
    line
        From `topovet.spectrum.closings.trace`.
    images
        (g, 3, 3) integers, symmetries as they act on k.
    """
    reciprocal = case.crystal.reciprocal
    place, radius, phase, gap = _best_loop(case, line)
    tangent = line.tangent(place, reciprocal)
    k_frac = line.k_frac[place]
    touching = describe_touching(case.bloch, k_frac, case.filling, reciprocal)
    protection = ""
    if nearest_quantised(phase) == 1 and quantising_operation(
        case.operators, case.crystal.periodic
    ):
        protection = "Berry phase π, and an antiunitary symmetry that allows 0 and π only"
    protection = (
        protection
        or mirror_protection(
            case.bloch, case.operators, case.crystal, k_frac, tangent, case.filling, radius
        )
        or enforced_level(
            case.bloch, case.operators, case.crystal, touching, case.filling, spinful=case.spinful
        )
    )
    away = line.energies_ev - case.reference.energy_ev
    g_1, g_2, g_3 = (int(g) for g in line.winding)
    return NodalLine(
        k_frac=line.k_frac,
        n_images=_count_images(line, images, reciprocal),
        first_cart=as_vector(line.k_frac[0] @ reciprocal),
        closed=line.closed,
        winding=(g_1, g_2, g_3),
        length=line.length(reciprocal),
        energy_min_ev=float(line.energies_ev.min()),
        energy_max_ev=float(line.energies_ev.max()),
        from_reference_ev=_nearest_to_zero(away),
        largest_gap_ev=float(line.gaps_ev.max()),
        multiplicity=touching.multiplicity,
        berry_phase_pi=phase,
        loop_gap_ev=gap,
        protection=protection,
    )


def _nearest_to_zero(energies: FloatArray) -> float:
    """0 where they change sign, else the one of least size."""
    if energies.min() < 0 < energies.max():
        return 0.0
    return float(energies[np.abs(energies).argmin()])


def _best_loop(case: Case, line: TracedLine) -> tuple[int, float, float | None, float]:
    """Point of the line, radius, phase and gap of the loop with the widest gap that is quantised,
    or of the widest of all."""
    reciprocal = case.crystal.reciprocal
    found: list[tuple[bool, float, int, float, float | None]] = []
    for part in PLACES:
        place = int(part * len(line.k_frac))
        for steps in LOOPS:
            radius = steps * step_length(reciprocal)
            phase, gap = loop_berry_phase(
                case.bloch,
                line.k_frac[place],
                line.tangent(place, reciprocal),
                radius,
                case.filling,
                reciprocal,
            )
            found.append((nearest_quantised(phase) is not None, gap, place, radius, phase))
    _, gap, place, radius, phase = max(found, key=lambda item: item[:2])
    return place, radius, phase, gap


def _count_images(line: TracedLine, images: IntArray, reciprocal: FloatArray) -> int:
    """Distinct lines among the images."""
    reach = 2 * step_length(reciprocal)
    kept: list[FloatArray] = []
    for image in images:
        turned = folded(line.k_frac @ image)
        probe = turned[len(turned) // 3]
        if not any(
            np.linalg.norm(between(other, probe) @ reciprocal, axis=1).min() < reach
            for other in kept
        ):
            kept.append(turned)
    return len(kept)
