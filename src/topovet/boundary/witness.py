"""The third witness: crossings between the surface's time-reversal-invariant momenta.

With k' = k.a'_i in the re-cut cell the four surface TRIM are L = (l_1, l_2)/2. A line between two
of them that differ in one component, together with the normal, spans an invariant plane of the
bulk, k'_2 = l_2/2 for a line along k'_1, and its surface levels cross an energy curve in the gap
an odd number of times exactly if the Z2 index of that plane is 1: Kramers partners change there.
With inversion it is the product of the surface fermion parities, pi(L) pi(L') = product of the
delta at the four bulk TRIM of the plane (Fu and Kane 2007, Eqs. 2.10 and 3.10 to 3.12). Hence, all
modulo 2,

    nu_0 = n(k'_2 = 0) + n(k'_2 = 1/2) = n(k'_1 = 0) + n(k'_1 = 1/2)

from one surface alone, the two routes being equal exactly if the crossings on the closed loop over
the four TRIM are even in number; and the weak indices nu'_1 = n(k'_1 = 1/2), nu'_2 = n(k'_2 = 1/2)
of the re-cut cell, where nu'_i = sum_j M_ij nu_j. The index that belongs to the normal does not
show on this surface. In two dimensions the one line from 0 to 1/2 gives nu.

Without Kramers pairs, in two dimensions, the net number of levels that rise along the closed edge
zone is the Chern number (Hatsugai 1993): nothing but the bulk gap is needed.

Nothing here uses Wannier centres, parities or eigenvectors of the bulk: what enters are the
projected edges of the bulk bands and levels of half-crystals. The curve E(k_par) runs at a fixed
fraction of the window between filled and empty bulk bands projected on k_par: a semimetal with a
direct gap will do as long as the window is open all along the line. Where the projections overlap
there is no such curve and the line is "not-applicable".

References
----------
Fu, Kane, PRB 76, 045302 (2007), doi:10.1103/PhysRevB.76.045302 (equation numbers from memory)
Hatsugai, PRL 71, 3697 (1993), doi:10.1103/PhysRevLett.71.3697
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.cleavage import Cut, home_cell_cut, layers_of, place_cut
from topovet.boundary.layers import LayerStack, build_layers
from topovet.boundary.line import Line, LineCriteria, Unfollowed
from topovet.boundary.recut import Miller, Recut, recut, recut_model
from topovet.boundary.results import Crossing, SurfaceLine, SurfaceWitness
from topovet.errors import UndefinedError
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel

CRITERIA = {
    "standard": LineCriteria(fractions=(0.41, 0.59, 0.53), curves=2, intervals=16),
    "thorough": LineCriteria(
        fractions=(0.41, 0.59, 0.53, 0.45, 0.48),
        curves=3,
        intervals=32,
        most_points=2000,
        most_layer=480,
        both_routes=True,
    ),
}
"""Two curves on two terminations are four counts that must agree; more when thorough."""

ALONG_FIRST = (((0.0, 0.0), (0.5, 0.0)), ((0.0, 0.5), (0.5, 0.5)))
ALONG_SECOND = (((0.0, 0.0), (0.0, 0.5)), ((0.5, 0.0), (0.5, 0.5)))
"""Lines between surface TRIM along b'_1, on the bulk planes k'_2 = 0 and 1/2, and along b'_2."""

GAMMA_SHARE = 0.25
"""gamma over the median |a|: the phases of all but the surface levels stay far from pi."""

GAMMA_FRACTION = 0.47
"""Where in the window that is read off: not its middle, where models with E -> -E have their
levels."""

DROPPED_SHARE = 0.02
"""Couplings between far planes are left out up to this share of the gap. Half of the gap could not
change an index; the less, the cheaper."""

ERROR_ROOM = 4.0
"""|a| at the ends over the violation of time reversal: |a| exceeds the distance of a level by one
over its weight on the layer, which may be 3."""

CHERN_SIGN = 1
"""Chern number over the net number of levels of the upper half that rise along +a'_1."""


def prepare_surface(
    model: TightBindingModel,
    crystal: Crystal,
    positions_frac: FloatArray | None,
    miller: Miller,
    *,
    most_dropped_mev: float,
) -> tuple[Recut, Cut, LayerStack]:
    """Re-cut a model for a surface, cut between atoms where the gap is widest.

    Parameters
    ----------
    positions_frac
        (n_orb, 3) sites; None leaves every Wannier function in its home cell.
    most_dropped_mev
        See `build_layers`.

    Raises
    ------
    UndefinedError
        The indices name no surface of this crystal.
    """
    cut, place = recut(crystal, miller), home_cell_cut()
    layers = sites = None
    if positions_frac is not None:
        place = place_cut(crystal, cut)
        layers = layers_of(positions_frac, cut, place.height)
        sites = cut.in_cell(positions_frac)[:, :2]
    stack = build_layers(
        recut_model(model, cut, layers), most_dropped_mev=most_dropped_mev, sites_par=sites
    )
    return cut, place, stack


def compute_surface(
    model: TightBindingModel,
    crystal: Crystal,
    positions_frac: FloatArray | None,
    filling: int,
    miller: Miller,
    direct_gap_ev: float,
    criteria: LineCriteria,
    *,
    kramers: bool,
    chosen_by: str,
    symmetry_error_ev: float = 0.0,
) -> SurfaceWitness:
    """Count crossings on the lines between the surface TRIM, or on the closed edge.

    Parameters
    ----------
    model, crystal, positions_frac
        The Hamiltonian, its cell and its sites.
    filling
        Occupied bands.
    miller
        Surface or edge.
    direct_gap_ev
        Of the bulk, sampled; sets what may be left out.
    criteria
        When a count is believed.
    kramers
        Whether time reversal squares to -1.
    chosen_by
        Where the Miller indices come from.
    symmetry_error_ev
        By how much H violates time reversal: Kramers pairs are split by that much, and must keep
        `ERROR_ROOM` times as far from the curve at the surface TRIM.

    Raises
    ------
    UndefinedError
        The indices name no surface, or there are no filled and empty bands.
    """
    if not 0 < filling < model.n_orb:
        raise UndefinedError(f"no filled and empty bands: {filling} of {model.n_orb} are filled.")
    cut, place, stack = prepare_surface(
        model,
        crystal,
        positions_frac,
        miller,
        most_dropped_mev=1e3 * DROPPED_SHARE * direct_gap_ev,
    )
    if kramers:
        criteria = replace(criteria, least_margin_ev=ERROR_ROOM * symmetry_error_ev)
    survey = _Survey(cut, place, stack, filling, criteria, chosen_by, kramers=kramers)
    return survey.witness()


class _Survey:
    """All lines of one surface, and what they say together."""

    def __init__(
        self,
        cut: Recut,
        place: Cut,
        stack: LayerStack,
        filling: int,
        criteria: LineCriteria,
        chosen_by: str,
        *,
        kramers: bool,
    ) -> None:
        self._cut, self._place, self._stack = cut, place, stack
        self._filling, self._criteria = filling, criteria
        self._chosen_by, self._kramers = chosen_by, kramers
        self._edge = len(cut.axes) == 1
        self._n_solves = self._n_bulk = 0

    def witness(self) -> SurfaceWitness:
        if self._stack.layer_size > self._criteria.most_layer:
            return self._result(
                "unresolved",
                f"a principal layer holds {self._stack.layer_size} orbitals, more than the "
                f"{self._criteria.most_layer} of this effort",
            )
        if not self._kramers and not self._edge:
            return self._result(
                "not-applicable", "surfaces without Kramers pairs are not counted, only edges"
            )
        gamma = self._gamma()
        if not self._kramers:
            return self._chern(self._survey_line((0.0,), (1.0,), gamma))
        if self._edge:
            line = self._survey_line((0.0,), (0.5,), gamma)
            z2 = None if line.parity is None else (line.parity,)
            return self._result(line.status, line.reason, (line,), z2=z2)
        lines = [self._survey_line(a, b, gamma) for a, b in ALONG_FIRST]
        if self._criteria.both_routes or not all(line.parity is not None for line in lines):
            lines += [self._survey_line(a, b, gamma) for a, b in ALONG_SECOND]
        return self._indices(tuple(lines))

    def _gamma(self) -> float:
        """A scale for the phases: a share of the usual |a| at the surface TRIM."""
        line = self._line((0.0, 0.0), (0.5, 0.0) if self._edge else (0.5, 0.5))
        try:
            found = line.inverse_greens([0.0, 1.0], GAMMA_FRACTION)
        except Unfollowed:
            inside = self._stack.planes_at(np.zeros((1, 2)))[0]
            return GAMMA_SHARE * float(np.abs(np.linalg.eigvalsh(inside)).max())
        return GAMMA_SHARE * float(np.median(np.abs(np.linalg.eigvalsh(np.concatenate(found)))))

    def _line(self, start: tuple[float, ...], end: tuple[float, ...]) -> Line:
        padded = [np.array([*point, 0.0][:2]) for point in (start, end)]
        return Line(self._stack, self._filling, padded[0], padded[1], self._criteria)

    def _survey_line(
        self, start: tuple[float, ...], end: tuple[float, ...], gamma: float
    ) -> SurfaceLine:
        line = self._line(start, end)
        status, reason, crossings = "", "", []
        try:
            points = line.resolve_window()
            for fraction in self._criteria.fractions:
                crossings += line.follow(points, fraction, gamma)
                if _resolved(crossings) >= self._criteria.curves:
                    break
        except Unfollowed as stopped:
            status = "unresolved" if stopped.applicable else "not-applicable"
            reason = str(stopped)
        self._n_solves += line.n_solves
        self._n_bulk += line.n_bulk_solves
        width, t = line.narrowest()
        if not status:
            status, reason = _judge(crossings, self._criteria.curves)
        nets = {c.net for c in crossings if c.termination == "upper" and c.net is not None}
        n = len(start)
        return SurfaceLine(
            start=start,
            end=end,
            status=status,
            reason=reason,
            parity=next(iter(nets)) % 2 if status == "ok" else None,
            net=next(iter(nets)) if len(nets) == 1 else None,
            smallest_window_ev=width,
            narrowest=tuple(float(c) for c in line.k_at(np.array([t]))[0][:n]),
            crossings=tuple(crossings),
        )

    def _indices(self, lines: tuple[SurfaceLine, ...]) -> SurfaceWitness:
        """From the parities on the planes k'_2 = 0, 1/2 and k'_1 = 0, 1/2 to the indices."""
        n = [line.parity for line in lines] + [None] * (4 - len(lines))
        if any(line.status == "failed" for line in lines):
            return self._result("failed", _first_reason(lines, "failed"), lines)
        routes = [
            (a + b) % 2 for a, b in ((n[0], n[1]), (n[2], n[3])) if a is not None and b is not None
        ]
        if len(set(routes)) > 1:
            why = "the crossings on the loop over the four surface TRIM are odd in number"
            return self._result("failed", why, lines)
        if not routes:
            kind = "unresolved"
            if all(line.status in ("ok", "not-applicable") for line in lines):
                kind = "not-applicable"
            return self._result(kind, _first_reason(lines, kind), lines)
        weak = ((0, n[3]), (1, n[1]))
        known = [(self._cut.matrix[axis] % 2, v) for axis, v in weak if v is not None]
        return self._result("ok", "", lines, z2=(routes[0], *weak_indices(known)))

    def _chern(self, line: SurfaceLine) -> SurfaceWitness:
        nets = {
            (c.termination, c.net)
            for c in line.crossings
            if c.net is not None and line.status == "ok"
        }
        upper = {net for side, net in nets if side == "upper"}
        lower = {-(net or 0) for side, net in nets if side == "lower"}
        if line.status == "ok" and (len(upper | lower) != 1):
            why = f"the edges and curves of a closed zone differ in net crossings: {sorted(nets)}"
            return self._result("failed", why, (line,))
        chern = None if line.status != "ok" else CHERN_SIGN * next(iter(upper))
        return self._result(line.status, line.reason, (line,), chern=chern)

    def _result(
        self,
        status: str,
        reason: str,
        lines: tuple[SurfaceLine, ...] = (),
        *,
        z2: tuple[int | None, ...] | None = None,
        chern: int | None = None,
    ) -> SurfaceWitness:
        x, y, z = self._cut.normal_cart.tolist()
        upper, lower = self._place.terminations
        return SurfaceWitness(
            status=status,
            reason=reason,
            z2=z2,
            chern=chern,
            miller=self._cut.miller,
            normal_cart=(x, y, z),
            spacing_ang=self._cut.spacing_ang,
            chosen_by=self._chosen_by,
            terminations=(upper.name, lower.name),
            cut_width_ang=self._place.width_ang,
            matrix=tuple((a, b, c) for a, b, c in self._cut.matrix.tolist()),
            lines=lines,
            dropped_mev=self._stack.dropped_mev,
            layer_size=self._stack.layer_size,
            n_solves=self._n_solves,
            n_bulk_solves=self._n_bulk,
        )


def weak_indices(known: Sequence[tuple[FloatArray, int]]) -> tuple[int | None, ...]:
    """Weak indices of the old cell that follow from sums of them, modulo 2.

    Parameters
    ----------
    known
        (row, value): sum_j row_j nu_j = value, at most two of them.

    Returns
    -------
    tuple
        (nu1, nu2, nu3), None where they do not fix one.
    """
    sums = [(np.asarray(row) % 2, value) for row, value in known]
    if len(sums) == 2:
        sums.append(((sums[0][0] + sums[1][0]) % 2, (sums[0][1] + sums[1][1]) % 2))
    single = {int(row.argmax()): value for row, value in sums if row.sum() == 1}
    return tuple(single.get(j) for j in range(3))


def _resolved(crossings: Sequence[Crossing]) -> int:
    """Curves that are resolved on both terminations."""
    ok = [
        {c.fraction for c in crossings if c.termination == s and c.status == "ok"}
        for s in ("upper", "lower")
    ]
    return len(ok[0] & ok[1])


def _judge(crossings: Sequence[Crossing], curves: int) -> tuple[str, str]:
    parities = {c.net % 2 for c in crossings if c.net is not None}
    if len(parities) > 1:
        return "failed", "terminations or energy curves differ in the parity of their crossings"
    if _resolved(crossings) < curves:
        why = next((c.reason for c in crossings if c.reason), "")
        return "unresolved", f"only {_resolved(crossings)} of {curves} curves are resolved: {why}"
    return "ok", ""


def _first_reason(lines: Sequence[SurfaceLine], status: str) -> str:
    chosen = next((line for line in lines if line.status == status), lines[0])
    start, end = (", ".join(f"{c:g}" for c in point) for point in (chosen.start, chosen.end))
    return f"line ({start}) to ({end}): {chosen.reason}"
