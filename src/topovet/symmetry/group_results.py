"""What is found about the symmetry group of a Hamiltonian, with the evidence."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray, IntArray
from topovet.notation import mev


@dataclass(frozen=True, slots=True, eq=False)
class OperationTest:
    """One operation, tested on the Hamiltonian.

    Attributes
    ----------
    name
        E.g. "3+ [1 1 1]"; with Θ where time reversal is part of it.
    rotation, translation
        W (3, 3) integer and w (3,) fractional, x' = W x + w in the Hamiltonian's cell.
    antiunitary
        Whether time reversal is part of it.
    missing
        Why there is no such operator in the declared basis; empty where there is one. All numbers
        are None then.
    violation_mev
        Spectral norm of g H(k) g^-1 - H(gk), largest over the sampled k.
    violation_mesh_mev
        The same over points of the coarse mesh that go to points of the mesh, where Wigner-Seitz
        shifts play no role; None without a mesh, or where it does not go over into itself.
    violation_r_mev
        Spectral norm of the same difference in real space, largest over R.
    band_shift_mev, band_shift_mesh_mev
        Largest |E(gk) - E(k)| of the occupied bands, over either set of k; None without a filling.
        For an inversion beside time reversal, with spin, the splitting of the pairs that both
        together demand at every k counts as well: E(-k) = E(k) says nothing there.
    holds
        The operator: `judged_mev` is within the tolerance.
    in_bands
        The energies: `judged_shift_mev` is. None without a filling, and where the energies know
        nothing of the operation because one that holds takes each k to the same k' (C2 Θ and an
        inversion together do what C2 does).
    """

    name: str
    rotation: IntArray
    translation: FloatArray
    antiunitary: bool
    missing: str
    violation_mev: float | None
    violation_mesh_mev: float | None
    violation_r_mev: float | None
    band_shift_mev: float | None
    band_shift_mesh_mev: float | None
    holds: bool
    in_bands: bool | None

    @property
    def judged_mev(self) -> float | None:
        """The violation that decides: on the mesh where one is known, else over sampled k."""
        return self.violation_mev if self.violation_mesh_mev is None else self.violation_mesh_mev

    @property
    def judged_shift_mev(self) -> float | None:
        """The band shift that decides, on the same points."""
        on_mesh = self.violation_mesh_mev is not None
        return self.band_shift_mesh_mev if on_mesh else self.band_shift_mev

    @property
    def status(self) -> str:
        """ "holds", "bands-only" (the Wannier functions break it), "broken" or "missing"."""
        if self.missing:
            return "missing"
        if self.holds:
            return "holds"
        return "bands-only" if self.in_bands else "broken"


@dataclass(frozen=True, slots=True)
class FoundGroup:
    """A group of operations.

    Attributes
    ----------
    members
        Positions in `GroupTest.tests`.
    number, symbol
        Space group of the unitary ones; 0 and "unknown" where spglib does not name it.
    magnetic
        BNS number of the magnetic group; grey (with time reversal itself) in the common case.
    dropped
        Names of operations that pass but had to be left out to make it a group.
    """

    members: tuple[int, ...]
    number: int
    symbol: str
    magnetic: str
    dropped: tuple[str, ...]


@dataclass(frozen=True, slots=True, eq=False)
class GroupTest:
    """The symmetry group of the Hamiltonian beside that of its structure.

    Attributes
    ----------
    structure_number, structure_symbol
        Space group of the structure.
    tests
        The operations of the structure, in its order; then time reversal; then, where that is
        broken, its products with all of them (candidates of a magnetic group).
    n_structure
        Number of operations of the structure.
    own
        The operations that hold.
    in_bands
        Those that the energies of the occupied bands have; None without a filling.
    additional
        Operations the Hamiltonian has and the structure lacks, tested where those that hold are.
    larger_number, larger_symbol
        Space group that they make together with the structure's that hold; 0 and "" without any.
    n_candidates
        Number of operations that were tried for it.
    closure_defect
        Largest deviation of a product of two operators of `own` from the operator of the product.
    n_k, n_mesh
        Numbers of sampled k and of mesh points.
    tolerance_mev, band_tolerance_mev
        Within which operators and bands hold.
    """

    structure_number: int
    structure_symbol: str
    tests: tuple[OperationTest, ...]
    n_structure: int
    own: FoundGroup
    in_bands: FoundGroup | None
    additional: tuple[OperationTest, ...]
    larger_number: int
    larger_symbol: str
    n_candidates: int
    closure_defect: float
    n_k: int
    n_mesh: int
    tolerance_mev: float
    band_tolerance_mev: float

    @property
    def operations(self) -> tuple[OperationTest, ...]:
        """The structure's operations."""
        return self.tests[: self.n_structure]

    @property
    def time_reversal(self) -> OperationTest:
        return self.tests[self.n_structure]

    @property
    def magnetic(self) -> tuple[OperationTest, ...]:
        """Products of operations with a broken time reversal; empty where it holds."""
        return self.tests[self.n_structure + 1 :]

    @property
    def kept(self) -> tuple[OperationTest, ...]:
        """The structure's operations in the Hamiltonian's own group."""
        return tuple(self.tests[i] for i in self.own.members if i < self.n_structure)

    @property
    def relation(self) -> str:
        """The Hamiltonian's group beside the structure's: "equal", "smaller", "larger", "other"."""
        smaller = len(self.kept) < self.n_structure
        larger = bool(self.additional)
        return {
            (False, False): "equal",
            (True, False): "smaller",
            (False, True): "larger",
            (True, True): "other",
        }[smaller, larger]

    @property
    def sentence(self) -> str:
        """What was found, in plain words."""
        parts = [self._about_operations(), *self._about_losses()]
        if self.additional:
            parts.append(
                f"It has {len(self.additional)} operations that the structure lacks and then makes "
                f"up {self.larger_symbol} ({self.larger_number}): the structure is less symmetric "
                "than the Hamiltonian."
            )
        return " ".join(parts + self._about_time_reversal())

    def _about_operations(self) -> str:
        structure = f"{self.structure_symbol} ({self.structure_number})"
        if len(self.kept) == self.n_structure:
            worst = max(test.judged_mev or 0.0 for test in self.kept)
            return (
                f"The Hamiltonian has all {self.n_structure} operations of {structure}, "
                f"to {mev(worst)}."
            )
        return (
            f"Of the {self.n_structure} operations of {structure} the Hamiltonian keeps "
            f"{len(self.kept)}, which make up {self.own.symbol} ({self.own.number})."
        )

    def _about_losses(self) -> list[str]:
        parts = []
        by_status = {
            status: [test for test in self.operations if test.status == status]
            for status in ("bands-only", "broken", "missing")
        }
        if lost := by_status["bands-only"]:
            shift = max(test.judged_shift_mev or 0.0 for test in lost)
            worst = max(test.judged_mev or 0.0 for test in lost)
            parts.append(
                f"{len(lost)} hold for the occupied bands, to {mev(shift)}, and are broken by the "
                f"Wannier functions, by up to {mev(worst)}."
            )
        if broken := by_status["broken"]:
            worst = max(test.judged_mev or 0.0 for test in broken)
            parts.append(f"{len(broken)} are broken, by up to {mev(worst)}.")
        if missing := by_status["missing"]:
            parts.append(
                f"{len(missing)} have no operator in the declared basis: {missing[0].missing}."
            )
        if self.own.dropped:
            names = ", ".join(self.own.dropped)
            parts.append(f"Left out, because with them it would be no group: {names}.")
        return parts

    def _about_time_reversal(self) -> list[str]:
        theta = self.time_reversal
        if theta.holds:
            return []
        if theta.missing:
            return [f"Time reversal has no operator in the declared basis: {theta.missing}."]
        n_held = sum(self.tests[i].antiunitary for i in self.own.members)
        products = f"{n_held} of its products with operations hold" if n_held else "so are all"
        name = f" (magnetic group {self.own.magnetic})" if self.own.magnetic else ""
        return [f"Time reversal is broken by {mev(theta.judged_mev)}, {products}{name}."]
