"""Start-up beside that of the libraries it cannot do without."""

from __future__ import annotations

import statistics
import subprocess
import sys
import time

import pytest

pytestmark = pytest.mark.benchmark


def _seconds(statement):
    """Median time of a fresh interpreter that runs a statement."""
    times = []
    for _ in range(5):
        start = time.perf_counter()
        subprocess.run([sys.executable, "-c", statement], check=True)
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def test_the_package_by_itself_costs_next_to_nothing(record_property):
    nothing, package = _seconds("pass"), _seconds("import toprecon")
    record_property("seconds", package)
    print(f"\nimport toprecon: {package:.3f} s (bare interpreter {nothing:.3f} s)")
    assert package < nothing + 0.1


def test_the_study_costs_little_beside_its_libraries(record_property):
    libraries = _seconds("import awkward, hist, pydantic, uproot, vector")
    study = _seconds("import toprecon.study")
    record_property("ratio", study / libraries)
    print(f"\nimport toprecon.study: {study:.2f} s (libraries {libraries:.2f} s)")
    assert study < 2.0 * libraries
