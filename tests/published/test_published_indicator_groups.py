"""Indicator groups of all 230 space groups against the published table.

Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017), doi:10.1038/s41467-017-00133-2; the table is
written down from memory (`tests/indicator_table.py`). Their theorem that atomic limits span all
band structures, dim BS = dim AI, is checked with compatibility relations that know nothing of
band representations.
"""

from __future__ import annotations

import numpy as np
import pytest

from indicator_table import NOT_RECALLED, published_group
from space_group_samples import sample_group
from topovet.symmetry.bandreps.compatibility import relation_rank
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentations,
    compute_band_representations,
)

CHUNKS = 10


def _representations(number: int, *, spinful: bool) -> BandRepresentations:
    group = sample_group(number)
    return compute_band_representations(
        group.cell, group.rotations, group.translations, spinful=spinful
    )


@pytest.mark.parametrize("spinful", [True, False])
@pytest.mark.parametrize("first", range(1, CHUNKS + 1))
def test_every_group_has_the_published_indicators(first: int, spinful: bool) -> None:
    for number in range(first, 231, CHUNKS):
        found = _representations(number, spinful=spinful)
        if spinful or number not in NOT_RECALLED:
            assert found.indicator_group == published_group(number, spinful=spinful), number
        columns = len(found.column_dimensions)
        assert found.smith.rank == columns - relation_rank(found.relations), number
        relations = np.concatenate([r.coefficients for r in found.relations])
        assert np.abs(relations @ found.matrix.T).max() < 1e-6, number
