"""Compounds whose indices are in the literature, vetted from first-principles Wannier functions.

The runs behind the cases (PBE, spin-orbit coupling, experimental lattices) are the project's own;
the indices are the published ones.
"""

from __future__ import annotations

import pytest

from real_cases import vetted

pytestmark = pytest.mark.real_data

ZHANG_2009 = "Zhang et al., Nat. Phys. 5, 438 (2009), doi:10.1038/nphys1270"
FU_KANE_2007 = "Fu, Kane, PRB 76, 045302 (2007), doi:10.1103/PhysRevB.76.045302, on Bi(1-x)Sb(x)"
MURAKAMI_2006 = "Murakami, PRL 97, 236805 (2006), doi:10.1103/PhysRevLett.97.236805"
HSIEH_2012 = "Hsieh et al., Nat. Commun. 3, 982 (2012), doi:10.1038/ncomms1969"
OWN_DFT = "parities of the data set's own DFT wave functions (dft_parity.json); no paper claimed"
TEXTBOOK = "covalent sp3 insulator with negligible spin-orbit coupling, an atomic limit"

PUBLISHED = [
    ("Bi2Se3", (1, 0, 0, 0), "strong-ti", ZHANG_2009),
    ("Bi2Se3_k666", (1, 0, 0, 0), "strong-ti", ZHANG_2009),
    ("Bi2Se3_mlwf", (1, 0, 0, 0), "strong-ti", ZHANG_2009),
    ("Bi2Se3_centres_off", (1, 0, 0, 0), "strong-ti", ZHANG_2009),
    ("Sb2Se3", (0, 0, 0, 0), "trivial", ZHANG_2009),
    ("Sb", (1, 1, 1, 1), "strong-ti", FU_KANE_2007),
    ("Bi111_bilayer", (1,), "strong-ti", MURAKAMI_2006),
    ("Sb111_bilayer", (0,), "trivial", OWN_DFT),
    ("PbTe_a656", (0, 0, 0, 0), "trivial", HSIEH_2012),
    ("PbTe", (0, 0, 0, 0), "trivial", HSIEH_2012),
    ("Si", (0, 0, 0, 0), "trivial", TEXTBOOK),
]
"""Case, Z2 indices, class, source.

Zhang et al. find Sb2Se3 trivial and Bi2Se3 strong; Hsieh et al. find PbTe in normal order (and
SnTe inverted). The Bi(111) bilayer is Murakami's quantum spin Hall film.
"""


@pytest.mark.parametrize(("case", "z2", "class_", "source"), PUBLISHED, ids=lambda x: str(x)[:24])
def test_indices_are_the_published_ones(
    case: str, z2: tuple[int, ...], class_: str, source: str
) -> None:
    verdict = vetted(case)
    assert verdict.invariants.z2 == z2, source
    assert verdict.class_ == class_


def test_antimony_is_a_semimetal_with_a_direct_gap() -> None:
    """Its indices belong to the bands below a direct gap that no Fermi level lies in (Fu-Kane)."""
    gap = vetted("Sb").gap
    assert gap.status == "semimetal-direct-gap"
    assert gap.indirect_eV is not None
    assert gap.indirect_eV < 0
