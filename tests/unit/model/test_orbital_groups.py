"""Groups by element and l."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from lattice_models import build_basis
from topovet.model.orbital_groups import declared_groups, element_groups

ORIGIN, OTHER = (0.0, 0.0, 0.0), (0.5, 0.5, 0.5)


def test_one_group_for_each_element_and_l() -> None:
    basis = build_basis(
        [("Pb1", ORIGIN, "s"), ("Pb1", ORIGIN, "pz"), ("Te1", OTHER, "px"), ("Te2", OTHER, "py")]
    )
    groups = {g.name: g.members for g in declared_groups(basis)}
    assert groups == {"Pb s": (0, 1), "Pb p": (2, 3), "Te p": (4, 5, 6, 7)}


def test_a_hybrid_makes_one_group_of_its_element() -> None:
    basis = build_basis([("C1", ORIGIN, "s"), ("C1", ORIGIN, "pz"), ("site1", OTHER, "s")])
    mixed = np.array(basis.harmonics)
    mixed[0:2, 1] = 1.0  # s + pz
    groups = declared_groups(replace(basis, harmonics=mixed))
    assert [(g.name, g.members) for g in groups] == [
        ("C (all l)", (0, 1, 2, 3)),
        ("off-atom s", (4, 5)),
    ]


def test_radial_functions_are_apart() -> None:
    basis = build_basis([("O1", ORIGIN, "s"), ("O1", ORIGIN, "s")])
    groups = declared_groups(replace(basis, shells=np.array([1, 1, 2, 2])))
    assert [g.name for g in groups] == ["O s", "O s r2"]


def test_elements_alone() -> None:
    groups = element_groups(["Bi", "Bi", "", "Se"])
    assert [(g.name, g.members) for g in groups] == [
        ("Bi (all l)", (0, 1)),
        ("off-atom (all l)", (2,)),
        ("Se (all l)", (3,)),
    ]
    assert groups[0].projector(4).tolist() == [1, 1, 0, 0]
