"""Faults that make another Hamiltonian: broken symmetries, noise, closing gaps, no spin-orbit."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping
from dataclasses import replace
from math import comb
from pathlib import Path

import numpy as np
from case_folder import CaseFolder, onsite_row
from clean_cases import CleanCase
from fault import CHANGED, Fault, flags

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.intake.records import DeclaredOrbital, HamiltonianFile, WinFile

SEED = 4

Cell = tuple[int, ...]
Blocks = Mapping[Cell, ComplexArray]

I_SIGMA_Y = np.array([[0.0, 1.0], [-1.0, 0.0]])
HOME: Cell = (0, 0, 0)


def another_run(folder: Path) -> CaseFolder:
    """The case without the energies that came with it: a run of its own would have others."""
    case = CaseFolder(folder)
    case.write_fermi(None)
    for suffix in (".eig", "_band.dat", "_band.kpt"):
        if case.has(suffix):
            case.remove(suffix)
    return case


def add_blocks(folder: Path, blocks: Blocks) -> None:
    """H(R) += V(R), as a run of its own; an R that a model does not list is added to it."""
    case = another_run(folder)
    h = case.hamiltonian()
    row_of = {tuple(r): i for i, r in enumerate(h.r_cells.tolist())}
    h_r = h.h_r.copy()
    for r_cell, block in blocks.items():
        if r_cell in row_of:
            h_r[row_of[r_cell]] += h.degeneracies[row_of[r_cell]] * block
    new = [r for r in blocks if r not in row_of]
    if new and case.has("_wsvec.dat"):
        raise ValueError(f"R vectors {new} are not in a file that has shifts")
    case.write_hamiltonian(
        replace(
            h,
            degeneracies=np.append(h.degeneracies, np.ones(len(new), dtype=np.int64)),
            r_cells=np.concatenate([h.r_cells, np.array(new, dtype=np.int64).reshape(-1, 3)]),
            h_r=np.concatenate([h_r, *(blocks[r][None] for r in new)]),
        )
    )


def scaled_to(blocks: Blocks, norm_mev: float) -> Blocks:
    """The same perturbation with a largest spectral norm over a mesh of k of `norm_mev`."""
    mesh = np.array(list(itertools.product((0.0, 0.21, 0.5, 0.83), repeat=3)))
    cells = np.array(list(blocks))
    stack = np.array(list(blocks.values()))
    v_k = np.einsum("kr,rmn->kmn", np.exp(2j * np.pi * mesh @ cells.T), stack)
    largest = float(np.linalg.norm(v_k, ord=2, axis=(1, 2)).max())
    return {r: block * (1e-3 * norm_mev / largest) for r, block in blocks.items()}


def _noise(n: int, rng: np.random.Generator) -> ComplexArray:
    return np.asarray(rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n)))


def random_hermitian(n: int, r_cells: IntArray) -> dict[Cell, ComplexArray]:
    """Noise on every listed R with V(-R) = V(R)†."""
    rng = np.random.default_rng(SEED)
    blocks: dict[Cell, ComplexArray] = {}
    for r_cell in sorted(map(tuple, r_cells.tolist())):
        partner = tuple(-x for x in r_cell)
        if partner not in blocks:
            noise = _noise(n, rng)
            blocks[r_cell] = noise
            blocks[partner] = noise.conj().T
            if r_cell == HOME:
                blocks[HOME] = 0.5 * (noise + noise.conj().T)
    return blocks


def time_reversed(blocks: Blocks) -> dict[Cell, ComplexArray]:
    n = len(next(iter(blocks.values())))
    u = np.kron(np.eye(n // 2), I_SIGMA_Y)
    return {r: u @ block.conj() @ u.T for r, block in blocks.items()}


def inverted(blocks: Blocks, orbitals: tuple[DeclaredOrbital, ...]) -> dict[Cell, ComplexArray]:
    """P V P^-1: element (m, n) of V(R) goes to (m', n') of -R + L_n - L_m, (-1)^(l_m + l_n)."""
    image, cell_of, sign = inversion_map(orbitals)
    result: dict[Cell, ComplexArray] = {}
    n = len(image)
    for r_cell, block in blocks.items():
        for a, b in zip(*np.nonzero(block), strict=True):
            r_new = tuple((-np.array(r_cell) + cell_of[b] - cell_of[a]).tolist())
            target = result.setdefault(r_new, np.zeros((n, n), dtype=complex))
            target[image[a], image[b]] += sign[a] * sign[b] * block[a, b]
    return result


def inversion_map(orbitals: tuple[DeclaredOrbital, ...]) -> tuple[IntArray, IntArray, FloatArray]:
    """Where inversion takes each function: partner, cell of the partner, sign.

    The centre is the middle of two sites, or a site, about which all functions of one kind change
    places.
    """
    sites = np.array([o.position_frac for o in orbitals])
    kinds = [(o.l, o.mr, o.spin) for o in orbitals]
    sign = np.array([(-1.0) ** o.l for o in orbitals])
    for centre in ((sites[0] + site) / 2 for site in sites):
        difference = (2 * centre - sites)[:, None, :] - sites[None, :, :]
        whole = np.abs(difference - np.round(difference)).max(axis=2) < 1e-4
        same = np.array([[a == b for b in kinds] for a in kinds])
        partners = whole & same
        if (partners.sum(axis=1) == 1).all():
            image = partners.argmax(axis=1)
            cells = np.round(difference[np.arange(len(sites)), image]).astype(np.int64)
            return image, cells, sign
    raise ValueError("no centre about which the functions change places")


def _combined(first: Blocks, second: Blocks, factor: float) -> dict[Cell, ComplexArray]:
    zero = np.zeros_like(next(iter(first.values())))
    return {
        r: 0.5 * (first.get(r, zero) + factor * second.get(r, zero))
        for r in sorted(set(first) | set(second))
    }


def _orbitals(case: CaseFolder) -> tuple[DeclaredOrbital, ...]:
    win: WinFile = case.win()
    return win.orbitals


# --- inversion


def inversion_odd(folder: Path, size: float) -> None:
    """Random on-site and short hopping terms, odd under inversion, even under time reversal."""
    case = CaseFolder(folder)
    orbitals = _orbitals(case)
    noise = random_hermitian(len(orbitals), np.zeros((1, 3), dtype=np.int64))
    noise = {HOME: noise[HOME] * _stays_in_range(case, orbitals)}
    even = _combined(noise, time_reversed(noise), 1.0)
    add_blocks(folder, scaled_to(_combined(even, inverted(even, orbitals), -1.0), size))


def _stays_in_range(case: CaseFolder, orbitals: tuple[DeclaredOrbital, ...]) -> FloatArray:
    """1 for elements of H(0) whose inverted image the file lists, or can be made to list."""
    n = len(orbitals)
    if not case.has("_wsvec.dat"):
        return np.ones((n, n))
    listed = {tuple(r) for r in case.hamiltonian().r_cells.tolist()}
    _, cells, _ = inversion_map(orbitals)
    steps = (cells[None, :, :] - cells[:, None, :]).reshape(-1, 3).tolist()
    return np.array([tuple(step) in listed for step in steps], dtype=float).reshape(n, n)


def staggered(folder: Path, size: float) -> None:
    """Opposite potentials, `size` eV, on the sites that inversion exchanges."""
    case = CaseFolder(folder)
    orbitals = _orbitals(case)
    image, _, _ = inversion_map(orbitals)
    first = [n for n in range(len(orbitals)) if n < image[n]]
    potential = np.zeros(len(orbitals))
    potential[first], potential[image[first]] = size, -size
    add_blocks(folder, {HOME: np.diag(potential).astype(complex)})


def exchanges_sites(case: CleanCase) -> bool:
    return case.name in ("kane_mele", "diamond_strong", "Bi2Se3", "Sb2Se3", "Sb", "Bi111_bilayer")


def strain(folder: Path, size: float) -> None:
    """All hoppings with a component along a1 multiplied by 1 + size: inversion stays."""
    another_run(folder).change_blocks(
        lambda h: replace(h, h_r=np.where((h.r_cells[:, :1] != 0)[:, :, None], 1 + size, 1) * h.h_r)
    )


# --- time reversal


def zeeman(folder: Path, size: float) -> None:
    n = CaseFolder(folder).hamiltonian().n_wann
    field = 1e-3 * size * np.kron(np.eye(n // 2), np.diag([1.0, -1.0]))
    add_blocks(folder, {HOME: field.astype(complex)})


def flux(folder: Path, size: float) -> None:
    """Imaginary hopping i phi between equal functions: odd in k, so that no TRIM feels it.

    Opposite on sites that inversion exchanges (Haldane's model), otherwise from s to pz of one
    site, where there are such; inversion is kept by both.
    """
    case = CaseFolder(folder)
    orbitals = _orbitals(case)
    n = len(orbitals)
    image, _, sign = inversion_map(orbitals)
    odd = np.zeros((n, n))
    for a, b in itertools.product(range(n), repeat=2):
        if image[a] != a and a == b:
            odd[a, a] = 1.0 if a < image[a] else -1.0
        elif image[a] == a and image[b] == b and sign[a] != sign[b]:
            same_site = orbitals[a].position_frac == orbitals[b].position_frac
            odd[a, b] = float(same_site and orbitals[a].spin == orbitals[b].spin)
    v = np.asarray(0.5e-3 * size * 1j * odd, dtype=np.complex128)
    add_blocks(folder, {(1, 0, 0): v, (-1, 0, 0): -v})


def takes_flux(case: CleanCase) -> bool:
    return case.name not in ("PbTe_a656", "atomic")


# --- noise


def noise_hermitian(folder: Path, size: float) -> None:
    """Hermitian noise on every R: breaks all symmetries."""
    h = CaseFolder(folder).hamiltonian()
    add_blocks(folder, scaled_to(random_hermitian(h.n_wann, h.r_cells), size))


def noise_with_kramers(folder: Path, size: float) -> None:
    """Noise on every R that keeps time reversal and nothing else."""
    h = CaseFolder(folder).hamiltonian()
    noise = random_hermitian(h.n_wann, h.r_cells)
    add_blocks(folder, scaled_to(_combined(noise, time_reversed(noise), 1.0), size))


# --- gap


def tune_mass(folder: Path, size: float) -> None:
    """A symmetric parameter driven through the model's transition, which is at size 1."""
    case = CaseFolder(folder)
    MASS[case.seedname](case, size)


def _mass(at_transition: float) -> Callable[[CaseFolder, float], None]:
    """m of s and -m of p: d m = at_transition closes the gap."""

    def tune(case: CaseFolder, size: float) -> None:
        parity = np.array([(-1.0) ** o.l for o in _orbitals(case)])
        add_blocks(case.folder, {HOME: np.diag(size * at_transition * parity).astype(complex)})

    return tune


def _home_bond(at_transition: float) -> Callable[[CaseFolder, float], None]:
    """The bond inside the cell, from site to site, changed by a factor."""

    def tune(case: CaseFolder, size: float) -> None:
        h = case.hamiltonian()
        bond = h.h_r[onsite_row(h)].copy()
        bond[:2, :2] = bond[2:, 2:] = 0.0
        add_blocks(case.folder, {HOME: size * at_transition * bond})

    return tune


MASS: dict[str, Callable[[CaseFolder, float], None]] = {
    "dirac_strong": _mass(1.0),  # m from -2 to -1, where the three X close
    "dirac_weak": _mass(1.0),  # 0 to 1: the three M
    "dirac_trivial": _mass(-1.0),  # 4 to 3: R
    "bhz": _mass(-2.0),  # m from 2 to 0: Gamma; b moves with nothing
    "diamond_strong": _home_bond(-0.4 / 1.4),  # t0 from 1.4 t to t: the three X
    "kane_mele": _home_bond(1.0),  # t0 from t to 2 t: one M
}
"""Where each model's gap closes: the references in `lattice_models`."""


def has_mass(case: CleanCase) -> bool:
    return case.name in MASS


def shift_orbital(folder: Path, size: float) -> None:
    """All functions of the kind of the first one (species, l, mr) moved by `size` eV."""
    case = CaseFolder(folder)
    win = case.win()
    kinds = [(None if o.atom is None else win.symbols[o.atom], o.l, o.mr) for o in win.orbitals]
    moved = np.diag([size * (kind == kinds[0]) for kind in kinds])
    add_blocks(folder, {HOME: moved.astype(complex)})


def has_several_kinds(case: CleanCase) -> bool:
    return case.name not in ("kane_mele", "diamond_strong")


def cross_level(folder: Path, size: float) -> None:
    """A decoupled s orbital whose band dips through the gap near a generic k, the more narrowly the
    larger `size`; at every TRIM it is empty."""
    case = CaseFolder(folder)
    h = case.hamiltonian()
    win = case.win()
    half_gap = _half_gap_ev(h, case)
    dip = _needle(round(size), 4 * half_gap, flat=case.settings()["dimension"] == "2")
    cells = sorted({*map(tuple, h.r_cells.tolist()), *dip})
    row_of = {tuple(r): i for i, r in enumerate(h.r_cells.tolist())}
    n = h.n_wann
    h_r = np.zeros((len(cells), n + 2, n + 2), dtype=complex)
    for i, r_cell in enumerate(cells):
        if r_cell in row_of:
            h_r[i, :n, :n] = h.h_r[row_of[r_cell]] / h.degeneracies[row_of[r_cell]]
        h_r[i, n:, n:] = dip.get(r_cell, 0.0) * np.eye(2)
    level = case.fermi_ev() + 1.5 * half_gap
    h_r[cells.index(HOME), n:, n:] += level * np.eye(2)
    case.write_hamiltonian(
        HamiltonianFile(
            h.file, h.header, np.ones(len(cells), dtype=np.int64), np.array(cells), h_r, 6, h.reader
        )
    )
    case.write_fermi(None)
    case.edit_win(rf"^num_wann.*= *{win.num_wann}$", f"num_wann = {n + 2}")
    x, y, z = inversion_site(win)
    case.write_win_block(
        "projections", [*case.win_block("projections"), f"f={x:.6f},{y:.6f},{z:.6f}:s:r=2"]
    )


def inversion_site(win: WinFile) -> FloatArray:
    sites = np.array([o.position_frac for o in win.orbitals])
    image, cells, _ = inversion_map(win.orbitals)
    return np.asarray((sites[0] + sites[image[0]] + cells[0]) / 2)


def _half_gap_ev(h: HamiltonianFile, case: CaseFolder) -> float:
    """Half of the gap at Gamma."""
    energies = np.linalg.eigvalsh((h.h_r / h.degeneracies[:, None, None]).sum(axis=0))
    filling = int(case.settings()["filling"])
    return float(energies[filling] - energies[filling - 1]) / 2


def _needle(power: int, depth_ev: float, *, flat: bool) -> dict[Cell, float]:
    """Coefficients of -depth times the sum over +-k0 of prod_i cos^(2 power)(pi (k_i - k0_i))."""
    k0 = (0.137, 0.291, 0.0) if flat else (0.137, 0.291, 0.217)
    axis = [_binomial(power, r) for r in range(-power, power + 1)]
    ranges = [range(-power, power + 1), range(-power, power + 1), range(-power, power + 1)]
    if flat:
        ranges[2] = range(1)
    found: dict[Cell, float] = {}
    for r_cell in itertools.product(*ranges):
        weight = float(np.prod([axis[r + power] for r in r_cell[: 2 if flat else 3]]))
        found[r_cell] = -2 * depth_ev * weight * float(np.cos(2 * np.pi * np.dot(k0, r_cell)))
    return found


def _binomial(power: int, r: int) -> float:
    """Fourier coefficient of cos^(2 power)(pi x) at exp(2 pi i r x)."""
    return comb(2 * power, power + r) / 4.0**power


# --- spin-orbit coupling


def weaken_spin_orbit(folder: Path, size: float) -> None:
    """A fraction of the spin-dependent part removed."""
    case = another_run(folder)

    def change(h: HamiltonianFile) -> HamiltonianFile:
        mean = 0.5 * (h.h_r[:, ::2, ::2] + h.h_r[:, 1::2, 1::2])
        without = np.kron(mean.real, np.eye(2))
        return replace(h, h_r=(1 - size) * h.h_r + size * without)

    case.change_blocks(change)


def drop_spin(folder: Path, size: float) -> None:
    """The run without spin: one function for each orbital, half of the electrons."""
    case = another_run(folder)

    def change(h: HamiltonianFile) -> HamiltonianFile:
        mean = 0.5 * (h.h_r[:, ::2, ::2] + h.h_r[:, 1::2, 1::2])
        return replace(h, h_r=mean.real.astype(complex))

    case.change_blocks(change)
    case.edit_win(r"^spinors.*$", "spinors = .false.")
    case.edit_win(r"^(num_wann\s*=).*$", rf"\1 {case.hamiltonian().n_wann}")
    case.write_settings(filling=int(case.settings()["filling"]) // 2)
    for suffix in ("_wsvec.dat", "_centres.xyz"):
        if case.has(suffix):
            case.remove(suffix)


BROKEN = flags("symmetry-broken", "parity-impure")

GAP_OR_GROUP = flags("gap-closes", "symmetry-broken")
"""One bond of three, or pz alone, also breaks rotations of the structure, and the flag says so."""

PHYSICS_FAULTS = (
    Fault(
        "symmetry-broken",
        "inversion-odd-terms",
        (0.1, 5, 50, 500, 3000),
        "meV",
        inversion_odd,
        BROKEN,
        CHANGED,
    ),
    Fault(
        "symmetry-broken",
        "staggered-potential",
        (1e-4, 0.01, 0.1, 0.4, 1.5),
        "eV",
        staggered,
        BROKEN,
        CHANGED,
        suits=exchanges_sites,
    ),
    Fault(
        "symmetry-broken",
        "strained-hoppings",
        (1e-5, 0.02, 0.3),
        "relative",
        strain,
        flags("symmetry-broken"),
        CHANGED,
    ),
    Fault(
        "time-reversal-broken",
        "zeeman-field",
        (0.1, 5, 50, 500),
        "meV",
        zeeman,
        flags("time-reversal-broken"),
        CHANGED,
    ),
    Fault(
        "time-reversal-broken",
        "flux-unseen-by-trim",
        (0.1, 5, 50, 500),
        "meV",
        flux,
        flags("time-reversal-broken"),
        CHANGED,
        suits=takes_flux,
    ),
    Fault(
        "noise",
        "hermitian-noise",
        (0.1, 5, 100, 300),
        "meV",
        noise_hermitian,
        flags("noise", "time-reversal-broken", "symmetry-broken"),
        CHANGED,
    ),
    Fault(
        "noise",
        "noise-with-kramers-pairs",
        (0.1, 5, 100, 300, 2000),
        "meV",
        noise_with_kramers,
        BROKEN | {"noise"},
        CHANGED,
    ),
    Fault(
        "gap-closes",
        "mass-through-transition",
        (0.5, 0.99, 1, 1.01, 1.5),
        "of the way to the transition",
        tune_mass,
        GAP_OR_GROUP,
        CHANGED,
        suits=has_mass,
    ),
    Fault(
        "gap-closes",
        "orbital-shifted",
        (0.05, 0.5, -1, 2, -4),
        "eV",
        shift_orbital,
        GAP_OR_GROUP,
        CHANGED,
        suits=has_several_kinds,
    ),
    Fault(
        "gap-closes",
        "level-crosses-at-generic-k",
        (1, 2, 3),
        "narrowness",
        cross_level,
        flags("gap-closes"),
        CHANGED,
        suits=lambda case: not case.real,
    ),
    Fault(
        "no-spin-orbit",
        "spin-orbit-removed",
        (1,),
        "fraction removed",
        weaken_spin_orbit,
        flags("no-spin-orbit"),
        CHANGED,
    ),
    Fault(
        "gap-closes",
        "spin-orbit-weakened",
        (0.05, 0.5, 0.9),
        "fraction removed",
        weaken_spin_orbit,
        flags("gap-closes"),
        CHANGED,
    ),
    Fault(
        "no-spin-orbit",
        "run-without-spin",
        (1,),
        "",
        drop_spin,
        flags("no-spin-orbit"),
        CHANGED,
    ),
)
