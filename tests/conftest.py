"""Where tests run, and which examples the properties are tried on.

With `--dist loadgroup` (pytest-xdist) tests that share costly results run on one process, so that
those are computed once: the tests of a first-principles case, all whole screens (which have workers
of their own), and elsewhere those of a file.

The properties are tried on the same examples in every run, so that a change of the program alone
decides whether it passes; `HYPOTHESIS_PROFILE=search` draws others.
"""

from __future__ import annotations

import os
import re
from pathlib import Path
from typing import Any

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

CASES = {p.name for p in (Path(__file__).parents[1] / "fixtures" / "cases").iterdir()}

EACH_ALONE = ("tests/sabotage/", "tests/demo/test_campaign_verdicts.py")
"""Long files whose tests share nothing."""


def group_of(test: str) -> str:
    """The group of a test, from its id: its case, its folder, its file, or itself."""
    file, _, rest = test.partition("::")
    words = re.split(r"[-\[\]]", rest)
    case = next((word for word in words[1:] if word in CASES), None)
    if test.startswith(EACH_ALONE):
        return test
    if case is not None:
        return case
    return "screens" if file.startswith("tests/screening/") else file


@pytest.hookimpl(optionalhook=True)
def pytest_xdist_make_scheduler(config: pytest.Config, log: Any) -> Any:
    """Groups of our own: marks alone do not reach the scheduler with every release of pytest."""
    from xdist.scheduler import LoadScopeScheduling

    class Groups(LoadScopeScheduling):  # type: ignore[misc]
        def _split_scope(self, nodeid: str) -> str:
            return group_of(nodeid)

    return Groups(config, log) if config.getvalue("dist") == "loadgroup" else None
