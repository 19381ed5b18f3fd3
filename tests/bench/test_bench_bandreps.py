"""Band representations of a group: the worst one, and the one that was asked for before."""

from __future__ import annotations

import time

import pytest

from space_group_samples import sample_group
from topovet.symmetry.bandreps.indicator_group import compute_band_representations

pytestmark = pytest.mark.bench


def _seconds(number: int, *, spinful: bool) -> float:
    group = sample_group(number)
    start = time.process_time()
    compute_band_representations(group.cell, group.rotations, group.translations, spinful=spinful)
    return time.process_time() - start


def test_every_group_takes_less_than_a_second_and_a_known_one_next_to_nothing() -> None:
    """CPU seconds; the quick trial that this was built on took 1.5 s for the worst group."""
    seconds = {n: _seconds(n, spinful=True) for n in range(1, 231)}
    worst = max(seconds, key=lambda n: seconds[n])
    again = _seconds(230, spinful=True)
    print(
        f"\n230 groups in {sum(seconds.values()):.1f} s, worst {worst} with "
        f"{seconds[worst]:.3f} s, group 230 again {1e6 * again:.0f} us"
    )
    assert seconds[worst] < 1.0
    assert again < 0.01 * seconds[230]
