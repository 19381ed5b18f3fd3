"""Where tests run, and which examples the properties are tried on.

Tests that share costly results stay on one process, so that those are computed once. With
`--dist loadgroup` (pytest-xdist) the tests of a group run on one process: those of one
first-principles case, and all whole screens, which have workers of their own.

The properties are tried on the same examples in every run, so that a change of the program alone
decides whether it passes; `HYPOTHESIS_PROFILE=search` draws others.
"""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

for name, same in (("same", True), ("search", False)):
    settings.register_profile(
        name,
        derandomize=same,
        deadline=None,
        suppress_health_check=[HealthCheck.too_slow],  # that is about the machine
    )
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "same"))

CASES = Path(__file__).parents[1] / "fixtures" / "cases"


@pytest.hookimpl(tryfirst=True)
def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    names = {path.name for path in CASES.iterdir() if path.is_dir()}
    for item in items:
        if item.get_closest_marker("xdist_group") is not None:
            continue
        params = getattr(item, "callspec", None)
        case = None if params is None else params.params.get("case")
        if item.path.parent.name == "screening":
            item.add_marker(pytest.mark.xdist_group("screening"))
        elif isinstance(case, str) and case in names:
            item.add_marker(pytest.mark.xdist_group(case))
