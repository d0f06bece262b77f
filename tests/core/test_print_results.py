"""The table that scripts/run_sample.sh prints, from a results file made by hand."""

import contextlib
import sqlite3
import subprocess
import sys

import pytest
from house_rules import ROOT

_SCRIPT = ROOT / "scripts" / "print_results.py"
_TABLES = """
    create table section_lines (fid integer primary key, run_id, section_id);
    create table predicted_fault_traces (
        run_id, section_id, horizon, heave, throw, displacement, detachment_z,
        z_base, band, length_unit, warnings);
"""


def _run(path):
    return subprocess.run(
        [sys.executable, str(_SCRIPT), str(path), "plots    here"],
        capture_output=True,
        text=True,
        check=False,
    )


@pytest.fixture
def results(tmp_path):
    """Three sections: with a detachment, without one, and unsolved."""
    path = tmp_path / "results file.gpkg"
    trace = "insert into predicted_fault_traces values (?,?,?,?,?,?,?,?,?,?,?)"
    with contextlib.closing(sqlite3.connect(path)) as file:
        file.executescript(_TABLES)
        for name in ("S1", "S2", "S3"):
            file.execute(
                "insert into section_lines (run_id, section_id) values ('r', ?)",
                (name,),
            )
        one = ("r", "S1", "Top", 812.4, 460.0, 933.6, -4210.0, -4210.0)
        two = ("r", "S2", "Top", 700.0, 400.0, 806.2, None, -3900.0)
        file.execute(trace, (*one, "best", "m", ""))
        file.execute(trace, (*one, "deep", "m", "not to be shown"))
        file.execute(trace, (*two, "best", "m", "regional not reached"))
        file.commit()
    return path


def test_table_tells_detachment_minimum_depth_and_unsolved_sections(results):
    """A detachment is named only where one was found; elsewhere the depth reached."""
    done = _run(results)
    assert done.returncode == 0, done.stderr
    lines = [line.split() for line in done.stdout.splitlines()]
    assert ["S1", "Top", "812", "460", "934", "detachment", "at", "-4210"] in lines
    assert ["S2", "Top", "700", "400", "806", "below", "-3900"] in lines
    assert ["S3", "no", "prediction"] in lines
    assert "  S2: regional not reached" in done.stdout
    assert "not to be shown" not in done.stdout
    assert str(results) in done.stdout
    assert "plots    here" in done.stdout


def test_run_without_any_prediction_is_an_error(results):
    """A command that predicts nothing must not look as if it had worked."""
    with contextlib.closing(sqlite3.connect(results)) as file:
        file.execute("delete from predicted_fault_traces")
        file.commit()
    done = _run(results)
    assert done.returncode == 1
    assert "no section has a prediction" in done.stderr
