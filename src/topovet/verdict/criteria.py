"""Every threshold of the verdict, in one place, each with its reason.

Thresholds that belong to a measurement (the purity below which a parity is not read, the gap below
which a sampled gap counts as closed) live beside that measurement.
"""

from __future__ import annotations

LOOSEST_BOUND = 0.5
"""A proved bound of the direct gap stands for the gap from this part of the gap attained on. A
search that ended early leaves a bound that holds, but below this it says more of the search than of
the compound."""

HERMITICITY_MEV = 0.1
"""Violations of H(-R) = H(R)† above this are flagged; rounding to six decimals gives 0.001 meV for
each element."""

SYMMETRY_MEV = 1.0
"""Violations of a symmetry above this are flagged (practice: sound projected Wannier functions keep
inversion and time reversal to well below 0.1 meV)."""

INFERENCE_GAIN = 10.0
"""Inferred inversion must hold this many times better than the declared one before the declaration
is called wrong: noise and broken symmetry spoil both alike."""

PURITY_WARNING = 0.95
"""Parities less pure than this are flagged, though still read."""

SPIN_MIXING_MEV = 0.1
"""Spin-dependent terms below this count as no spin-orbit coupling."""

FILLING_MISMATCH = 0.5
"""Mean electrons below the Fermi energy may differ from the stated filling by less than this. A
Fermi energy a little inside a band costs hundredths, a wrong filling at least one."""

FERMI_OUTSIDE_EV = 0.025
"""A Fermi energy outside the gap by less than kT at room temperature is a rounding of the smearing
scheme; by more it is flagged."""

RIM_RATIO = 0.05
"""Largest hopping on the rim over the largest hopping of all: above this the range is cut
(practice; the 4 x 4 x 4 meshes among the real cases reach 0.043, denser ones 0.002 to 0.016)."""

MESH_ENERGY_MEV = 5.0
"""Occupied energies on the coarse mesh that differ from the first-principles ones by more are
flagged; a frozen window reproduces them to 0.1 meV."""

PATH_ENERGY_MEV = 1.0
"""Bands that differ from Wannier90's own interpolation by more are flagged."""

SAME_ATOM_ANG = 0.05
"""Atoms of two structure files that are further apart are not the same structure."""

COARSE_DIGITS_MEV = 1.0
"""Error left by the printed digits from which on they may be what closes a gap; six decimals leave
0.01 to 0.3 meV in the cases of the tests."""

ZERO_BLOCK_MEV = 0.1
"""Blocks of H(R) that are zero to the last digit were cut off if the weakest other block holds more
than this: hoppings that decay fill six decimals (0.001 meV) on the way to zero."""

ZERO_BLOCK_DIGITS = 100.0
"""The same in units of the last digit, for files with fewer than six decimals: there weak blocks
are rounded to zero."""
