"""A made-up sound case as the verdict sees it, and how to change parts of it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import invented_dossiers as invented
from topovet.intake.records import CaseSettings
from topovet.model.declarations import Declarations
from topovet.symmetry.results import ShiftTest, SpinOrder
from topovet.verdict.findings import Findings


def _sound() -> Findings:
    material = invented.strong()
    assert material.parity is not None
    return Findings(
        declared=Declarations(
            name="QV-7",
            crystal=material.crystal,
            spinful=True,
            mp_grid=None,
            orbitals=(),
            undeclared_reason="",
            settings=CaseSettings(),
            structure_cell=None,
            structure_offset_ang=None,
            structure_file="POSCAR",
            win_file="QV-7.win",
            win_fermi_ev=None,
            use_ws_distance=True,
            ws_distance_tol=1e-5,
            ws_search_size=(2, 2, 2),
        ),
        spinful=True,
        audit=replace(
            material.audit,
            mesh_points=64,
            degeneracy_sum=64.0,
            all_degeneracies_one=False,
            duplicate_r=(),
            missing_partner_r=(),
            n_missing_partner=0,
            hermiticity_mev=0.0,
            centre_offsets_ang=(0.01,) * 12,
        ),
        decay=replace(material.decay, rim_mev=2.0, largest_hopping_mev=900.0),
        spin_order=SpinOrder("interlaced", 0.0009, 900.0, 900.0),
        shift_test=ShiftTest("given", (), (), None, None, ""),
        space_group=material.space_group,
        inferred=None,
        symmetry_class=None,
        time_reversal=material.time_reversal,
        inversion=material.inversion,
        electrons=material.electrons,
        gap=material.gap,
        group=None,
        parity=material.parity,
        inferred_parity=None,
        wilson=None,
        chern=None,
        s4=None,
        interpolation=None,
        missing={},
    )


SOUND = _sound()
"""A strong insulator by parities alone, without any flag."""


def changed(**parts: Any) -> Findings:
    """The sound case with attributes of its parts changed: part=dict(attribute=value)."""
    return replace(
        SOUND,
        **{
            name: replace(getattr(SOUND, name), **value) if isinstance(value, dict) else value
            for name, value in parts.items()
        },
    )
