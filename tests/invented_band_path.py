"""Made-up connections along a band path: one crossing at the filling, one level not told apart."""

from __future__ import annotations

from topovet.invariants.band_reps.path_results import (
    EndLevel,
    LevelConnection,
    LevelCrossing,
    PathConnections,
    PathSegment,
)

GAMMA_LOW, GAMMA_HIGH = EndLevel("Γ2a+", 4, 2, -0.4), EndLevel("Γ4−", 6, 4, 0.3)
A_LOW, A_HIGH = EndLevel("A2", 4, 2, -0.2), EndLevel("", 6, 2, 0.5)

AXIS = PathSegment(
    start="Γ",
    end="A",
    k_start=(0.0, 0.0, 0.0),
    k_end=(0.0, 0.0, 0.5),
    symmetry="-6m2",
    kinds=("2b", "1ab"),
    error_mev=0.4,
    connections=(
        LevelConnection("1ab", 2, GAMMA_LOW, A_HIGH, None, settled=True),
        LevelConnection("2b", 2, GAMMA_HIGH, A_LOW, 0.3, settled=False),
        LevelConnection("2b", 2, GAMMA_HIGH, A_HIGH, 0.3, settled=False),
        LevelConnection("1ab", 2, GAMMA_HIGH, A_HIGH, 12.0, settled=True),
    ),
    crossings=(
        LevelCrossing((0.0, 0.0, 0.1), -0.35, 2, 4, ("2b", "1ab"), "filled", 0.02),
        LevelCrossing((0.0, 0.0, 0.21), -0.123, 4, 4, ("1ab", "2b"), "across", 0.5),
    ),
)

PLAIN = PathSegment(
    "A", "L", (0.0, 0.0, 0.5), (0.5, 0.0, 0.5), "m", ("1ab",), 0.1, connections=(), crossings=()
)

CONNECTIONS = PathConnections(n_operations=24, segments=(AXIS, PLAIN))
