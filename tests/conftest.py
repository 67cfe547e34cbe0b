"""Repeatable random tests, and the count of standings.

An expected number is published (its source stands beside it), worked out by hand, or found by a
second method; whatever else it is, its test is marked ``standing(kind)``, and the last line of a
run counts those.
"""

from __future__ import annotations

from collections import Counter

import pytest
from hypothesis import settings

settings.register_profile(
    "repeatable", derandomize=True, deadline=None, max_examples=60, database=None
)
settings.load_profile("repeatable")

STANDING = "standing"


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport(item, call):
    """Hang the standing on the report, which is all that comes back from a worker process."""
    report = yield
    marker = item.get_closest_marker(STANDING)
    if report.when == "call" and marker is not None:
        report.user_properties.append((STANDING, marker.args[0]))
    return report


def pytest_terminal_summary(terminalreporter):
    """Count the tests whose expected numbers are not published, by hand or a second method."""
    cases = Counter(
        (kind, report.nodeid.partition("[")[0])
        for reports in terminalreporter.stats.values()
        for report in reports
        if getattr(report, "when", None) == "call"
        for name, kind in report.user_properties
        if name == STANDING
    )
    counted = [
        f"{sum(own)} {kind} (in {len(own)} functions)"
        for kind in sorted({kind for kind, _ in cases})
        for own in [[number for (other, _), number in cases.items() if other == kind]]
    ]
    line = ", ".join(counted) or "none marked"
    terminalreporter.write_line(f"tests by standing of their numbers: {line}")
