"""What is slow to import is imported only where it is used."""

import subprocess
import sys

import pytest

HEAVY = ("matplotlib", "ipywidgets", "IPython", "pandas", "pint", "h5netcdf")


@pytest.mark.parametrize(
    "module",
    [
        "fieldmap",
        "fieldmap.show.tables",
        "fieldmap.show.display",
        "fieldmap.show.cautions",
        "fieldmap.show.plots",
        "fieldmap.show.field_plots",
        "fieldmap.show.figures",
        "fieldmap.show.panels",
    ],
)
def test_import_is_light(module):
    # xarray decides by itself what else it imports
    script = (
        "import sys, xarray; before = set(sys.modules)\n"
        f"import {module}\n"
        f"print(*sorted({{name.partition('.')[0] for name in set(sys.modules) - before}} "
        f"& {set(HEAVY)!r}))"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True
    )
    assert done.stdout.split() == []
