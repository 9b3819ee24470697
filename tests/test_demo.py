"""The demo campaigns: what is shipped is what the kit makes, and it is honest."""

from __future__ import annotations

import filecmp
import json
import math
from pathlib import Path

import numpy as np
import pytest
from scipy.constants import mu_0

from fieldmap.bench.demo import main, make_demos
from fieldmap.bench.demo_campaigns import DEMOS
from fieldmap.errors import InputError
from fieldmap.readings import Coil, ZeroReference, load

SHIPPED = Path(__file__).parents[1] / "demo_data"
MOST_BYTES = 1_500_000

every_demo = pytest.mark.parametrize("demo", DEMOS, ids=lambda demo: demo.folder)


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    folder = tmp_path_factory.mktemp("demo")
    make_demos(folder)
    return folder


def files_in(folder):
    return sorted(path.relative_to(folder) for path in folder.rglob("*") if path.is_file())


def test_making_them_again_gives_the_shipped_files(made):
    assert files_in(made) == files_in(SHIPPED)
    _, differing, missing = filecmp.cmpfiles(made, SHIPPED, files_in(made), shallow=False)
    assert not differing
    assert not missing


def test_they_are_small():
    assert sum((SHIPPED / path).stat().st_size for path in files_in(SHIPPED)) < MOST_BYTES


def test_global_random_state_is_left_alone(tmp_path):
    state = np.random.get_state()[1].copy()  # noqa: NPY002 - it must not move
    make_demos(tmp_path)
    np.testing.assert_array_equal(state, np.random.get_state()[1])  # noqa: NPY002 - as above


@every_demo
def test_passes_overlap_and_cover_the_limits(demo):
    campaign = load(SHIPPED / demo.folder)
    start, stop = campaign.axis.integrate
    spans = sorted((one.position.min(), one.position.max()) for one in campaign.passes)
    assert spans[0][0] < start
    assert max(high for _, high in spans) > stop
    reached = spans[0][1]
    for low, high in spans[1:]:
        assert low < reached - campaign.magnet.gap / 4
        reached = max(reached, high)
    assert max(high - low for low, high in spans) < 0.75 * (reached - spans[0][0])
    directions = {np.sign(one.position[-1] - one.position[0]) for one in campaign.passes}
    assert directions == {-1.0, 1.0}


@every_demo
def test_truth_is_that_of_the_field(demo):
    truth = json.loads((SHIPPED / demo.folder / "truth.json").read_text())
    axis = load(SHIPPED / demo.folder).axis
    values = {name: result["value"] for name, result in truth["results"].items()}
    s = np.linspace(*axis.integrate, 400_001)  # even steps: Simpson's rule
    weights = np.tile([2.0, 4.0], 200_001)[:-1]
    weights[[0, -1]] = 1.0
    total = float(weights @ demo.source.field(s)) * (s[1] - s[0]) / 3
    assert values["integrated_field"] == pytest.approx(total, rel=1e-9)
    flat = np.linspace(*axis.flat, 10_001)
    mean = float(np.mean((demo.source.field(flat[1:]) + demo.source.field(flat[:-1])) / 2))
    assert values["central_field"] == pytest.approx(mean, rel=1e-8)
    assert values["magnetic_length"] == pytest.approx(total / mean, rel=1e-8)
    length = values["boundary_out"] - values["boundary_in"]
    assert length == pytest.approx(values["magnetic_length"], rel=1e-10)


def test_solenoid_truth_by_the_textbook():
    # partial integral of a thin solenoid: (mu0 N I / L)(sqrt(R^2 + (Z + L/2)^2) - ...)
    truth = json.loads((SHIPPED / "solenoid_fringe" / "truth.json").read_text())
    ends = math.hypot(0.04, 1.2 + 0.15) - math.hypot(0.04, 1.2 - 0.15)
    expected = mu_0 * 600 * 100 / 0.3 * ends
    assert truth["results"]["integrated_field"]["value"] == pytest.approx(expected, rel=1e-11)


@every_demo
def test_zero_references_bound_the_true_field(demo):
    for reference in load(SHIPPED / demo.folder).references:
        if isinstance(reference, ZeroReference):
            mean = demo.source.between(reference.start, reference.stop)
            mean /= reference.stop - reference.start
            assert 0 < abs(mean) < reference.u


@every_demo
def test_coils_alone_have_a_level(demo):
    campaign = load(SHIPPED / demo.folder)
    if all(isinstance(one.probe, Coil) for one in campaign.passes):
        assert campaign.references


def test_kinds_of_tables_are_all_there():
    campaigns = {demo.folder: load(SHIPPED / demo.folder) for demo in DEMOS}
    assert list(campaigns) == ["gap_dipole", "solenoid_fringe", "slot", "foreign_tables"]
    assert {one.record for one in campaigns["slot"].passes} == {"increments"}
    assert all(one.current is not None for one in campaigns["solenoid_fringe"].passes)
    assert {type(one.probe).__name__ for one in campaigns["gap_dipole"].passes} == {"Wire", "Coil"}
    head = (SHIPPED / "slot" / "pass_01.csv").read_text().splitlines()[1]
    assert head == "time [s],position [um],dflux [uV s]"
    foreign = (SHIPPED / "foreign_tables" / "pass_01.csv").read_text().splitlines()
    assert foreign[3] == "T;Int;position"


def test_command_makes_them_and_names_them(tmp_path, capsys):
    assert main([str(tmp_path / "new")]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert [Path(line).parent.name for line in lines] == [demo.folder for demo in DEMOS]
    assert all(Path(line).is_file() for line in lines)


def test_command_refuses_in_one_sentence(tmp_path, capsys):
    assert main([]) == 2
    assert capsys.readouterr().err.startswith("usage: ")
    (tmp_path / "slot").mkdir()
    (tmp_path / "slot" / "notes.txt").write_text("mine")
    assert main([str(tmp_path)]) == 2
    error = capsys.readouterr().err
    assert "not empty" in error
    assert "Traceback" not in error
    with pytest.raises(InputError):
        make_demos(tmp_path)
