"""Notebooks: run anywhere without an edit, hold calls and prose only, agree with themselves."""

import ast
import json
import os
import shutil
import subprocess
import sys
from pathlib import Path

import ipywidgets
import pytest

import fieldmap
from fieldmap.shipped import demo_folder, notebook_folder
from fieldmap.show.rows import result_rows

NAMES = ("check_magnetic_length", "map_fringe_field", "explore_passes")
WRITTEN = {"check_magnetic_length": ["fieldmap-results/by_calls/report.html"]}
LOGIC = (
    *(ast.FunctionDef, ast.ClassDef, ast.Lambda, ast.If, ast.IfExp, ast.For, ast.While),
    *(ast.With, ast.Try, ast.ListComp, ast.DictComp, ast.SetComp, ast.GeneratorExp, ast.BinOp),
)
STITCH = fieldmap.stitch


def cells(name):
    text = (notebook_folder() / f"{name}.ipynb").read_text(encoding="utf-8")
    return json.loads(text)["cells"]


def code(name):
    return ["".join(cell["source"]) for cell in cells(name) if cell["cell_type"] == "code"]


def test_all_notebooks_are_tested():
    assert {file.stem for file in notebook_folder().glob("*.ipynb")} == set(NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_kept_with_static_outputs_and_names_of_cells(name):
    """Filled by .ci/fill_notebooks.py, for viewers that run nothing."""
    ids = [cell["id"] for cell in cells(name)]
    assert len(set(ids)) == len(ids)
    assert all(not identity.isdigit() for identity in ids)
    counts = [cell["execution_count"] for cell in cells(name) if cell["cell_type"] == "code"]
    assert counts == list(range(1, len(counts) + 1))  # run once, from top to bottom
    for cell in cells(name):
        assert cell["metadata"] == {}
        for output in cell.get("outputs", []):
            assert output["output_type"] in {"display_data", "execute_result"}
            assert set(output["data"]) <= {"text/html", "text/plain"}
            assert "/tmp" not in json.dumps(output)
    shown = [output for cell in cells(name) for output in cell.get("outputs", [])]
    assert len(shown) >= 5
    pictures = [html for html in map(_html, shown) if "<img" in html]
    assert len(pictures) >= 2
    assert all('alt="' in html for html in pictures)


def _html(output):
    return "".join(output["data"].get("text/html", ""))


def test_kept_outputs_are_those_of_this_kit():
    """The magnetic length that the notebook shows is the one that the kit finds."""
    results = fieldmap.evaluate(fieldmap.stitch(fieldmap.load(demo_folder() / "gap_dipole")))
    row = next(r for r in result_rows(results.lines[0], None, 2.0) if r.key == "magnetic_length")
    kept = "".join(
        _html(output)
        for cell in cells("check_magnetic_length")
        for output in cell.get("outputs", [])
    )
    assert f"<td>{row.value}</td><td>{row.half_width}</td>" in kept


@pytest.mark.parametrize("name", NAMES)
def test_calls_and_prose_only(name):
    for source in code(name):
        # paths are joined by a slash, which is no arithmetic
        nodes = [node for node in ast.walk(ast.parse(source)) if isinstance(node, LOGIC)]
        assert all(isinstance(getattr(node, "op", None), ast.Div) for node in nodes)


@pytest.mark.parametrize("name", NAMES)
def test_first_code_cell_shows_the_cautions(name):
    namespace = {}
    exec(compile(code(name)[0], name, "exec"), namespace)
    assert "0.5 mT line" in namespace["cautions"]()._repr_html_()
    assert code(name)[0].rstrip().endswith("cautions()")


@pytest.fixture(scope="module")
def maps():
    return {}


@pytest.mark.parametrize("name", NAMES)
def test_panel_and_calls_agree(name, maps, monkeypatch, tmp_path):
    def stitch(campaign, **more):
        if campaign.sha256 not in maps:
            maps[campaign.sha256] = STITCH(campaign, **more)
        return maps[campaign.sha256]

    monkeypatch.setattr(fieldmap, "stitch", stitch)
    monkeypatch.chdir(tmp_path)
    namespace = {}
    for source in code(name):
        exec(compile(source, name, "exec"), namespace)
    state, campaign = namespace["panel"].state, namespace["campaign"]
    assert state.error == ""
    assert state.campaign.sha256 == campaign.sha256
    # the panels leave out the fringes, which take their time
    by_calls = fieldmap.evaluate(namespace["fmap"], campaign, fringe=False)
    assert state.results.as_dict() == by_calls.as_dict()
    written = [file for file in tmp_path.rglob("*") if file.is_file()]
    assert [str(file.relative_to(tmp_path)) for file in written] == WRITTEN.get(name, [])
    ipywidgets.Widget.close_all()


@pytest.mark.slow
def test_every_cell_runs_in_a_kernel(tmp_path):
    for name in NAMES:
        shutil.copy(notebook_folder() / f"{name}.ipynb", tmp_path)
    home = Path(fieldmap.__file__).resolve().parents[1]
    paths = [str(home), *filter(None, [os.environ.get("PYTHONPATH")])]
    run = subprocess.run(
        [
            *(sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", "-c", os.devnull),
            *("--rootdir", str(tmp_path), "--nbval-lax", "--nbval-current-env"),
            *("--nbval-cell-timeout", "300", str(tmp_path)),
        ],
        cwd=tmp_path,
        env=os.environ | {"PYTHONPATH": os.pathsep.join(paths)},
        capture_output=True,
        text=True,
        check=False,
    )
    assert run.returncode == 0, run.stdout[-3000:] + run.stderr[-2000:]
    assert f"{sum(len(code(name)) for name in NAMES)} passed" in run.stdout
