from __future__ import annotations

import json
import subprocess
import sys

import pytest

HEAVY = (
    "IPython",
    "dask",
    "distributed",
    "fastjet",
    "ipywidgets",
    "matplotlib.pyplot",
    "numba",
    "pyarrow.parquet",  # awkward itself loads pyarrow where it is installed
    "pythia8mc",
    "scipy",
    "sklearn",
    "traitlets",
)


def _loaded(statement):
    """Modules in memory after a statement in a fresh interpreter."""
    code = f"import json, sys\n{statement}\nprint(json.dumps(sorted(sys.modules)))"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    return set(json.loads(done.stdout.splitlines()[-1]))


@pytest.mark.parametrize(
    "statement",
    ["import toprecon", "import toprecon.study", "import toprecon.cli.entry"],
)
def test_import_loads_nothing_heavy(statement):
    assert sorted(_loaded(statement) & set(HEAVY)) == []


def test_import_of_the_package_loads_only_the_standard_library():
    loaded = _loaded("import toprecon")
    assert not loaded & {"pyarrow", "numpy", "awkward", "pydantic", "uproot", "vector"}


def test_the_list_of_names_is_seen_without_loading_anything():
    loaded = _loaded("import toprecon; dir(toprecon)")
    assert "toprecon.study" not in loaded


@pytest.mark.parametrize("name", ["figures", "study"])
def test_computation_loads_no_widget(name):
    loaded = _loaded(f"import toprecon.{name}")
    assert not loaded & {"ipywidgets", "IPython", "traitlets", "matplotlib.pyplot"}
