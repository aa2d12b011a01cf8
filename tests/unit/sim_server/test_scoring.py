"""Scores from true values."""

from __future__ import annotations

import io
import json
from pathlib import Path

import pytest

from sim_server.scoring import SPECIFICATIONS, TruthFile, main, read_truth, score


def row(time_s: float, ppm: float = 150.0, water: float = 0.2) -> dict[str, float]:
    return {
        "time_s": time_s,
        "bottoms_methanol_wt_ppm": ppm,
        "distillate_water_wt_pct": water,
        "reboiler_duty_kw": 5000.0,
        "distillate_kg_h": 6250.0,
        "advice_usable": 1.0,
        "crew_actions": time_s / 1800.0,
    }


def test_a_run_is_scored_after_its_first_hour() -> None:
    rows = [row(1800.0, ppm=9000.0), row(3600.0, ppm=9000.0), row(3630.0), row(3660.0, ppm=600.0)]
    result = score(rows)
    bottoms, distillate = result.qualities
    assert (result.rows, result.from_s, result.to_s) == (2, 3630.0, 3660.0)
    assert bottoms.in_spec_fraction == 0.5
    assert bottoms.mean_abs_error is None
    assert distillate.in_spec_fraction == 1.0
    assert result.in_spec_fraction == 0.5
    assert distillate.mean_abs_error is None
    assert result.energy_kwh_per_t_distillate == pytest.approx(800.0)
    assert result.crew_actions == 2


def test_a_shorter_run_is_scored_as_a_whole() -> None:
    assert score([row(30.0), row(60.0, ppm=500.0)]).qualities[0].in_spec_fraction == 0.5


def test_nothing_to_score_is_said_so() -> None:
    with pytest.raises(ValueError, match="no rows"):
        score([])
    with pytest.raises(ValueError, match="no distillate"):
        score([{**row(30.0), "distillate_kg_h": 0.0}])


def test_a_truth_file_reads_back_without_a_torn_last_row(tmp_path: Path) -> None:
    file = io.StringIO()
    names = ("time_s", "reboiler_duty_kw", *(spec.column for spec in SPECIFICATIONS))
    truth = TruthFile(file, (*names, "distillate_kg_h"))
    truth.record(30.0, row(30.0), usable=True, crew_actions=0)
    truth.record(60.0, row(60.0), usable=False, crew_actions=1)
    path = tmp_path / "truth.csv"
    path.write_text(file.getvalue() + "90,5000,", encoding="utf-8")
    rows = read_truth(path)
    assert rows == [
        row(30.0) | {"crew_actions": 0.0},
        row(60.0) | {"advice_usable": 0.0, "crew_actions": 1.0},
    ]


def test_the_command_prints_the_score_or_says_what_is_wrong(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "truth.csv"
    path.write_text(
        "time_s,bottoms_methanol_wt_ppm,distillate_water_wt_pct,reboiler_duty_kw,"
        "distillate_kg_h,advice_usable,crew_actions\n"
        "30,100,0.3,5000,7000,1,0\n60,600,0.3,5000,7000,1,2\n"
    )
    assert main([str(path)]) == 0
    said = json.loads(capsys.readouterr().out)
    assert said["energy_kwh_per_t_distillate"] == pytest.approx(5000.0 / 7.0)
    assert said["qualities"][0]["in_spec_fraction"] == 0.5
    assert main([str(path), "--aim", "BOTTOMS=150"]) == 0
    aimed = json.loads(capsys.readouterr().out)["qualities"]
    assert aimed[0]["mean_abs_error"] == pytest.approx(250.0)
    assert aimed[1]["mean_abs_error"] is None
    assert main([str(path), "--aim", "BOTTOMS"]) == 1
    assert main([str(tmp_path / "none.csv")]) == 1
    with pytest.raises(SystemExit, match="2"):
        main([])
    assert "none.csv" in capsys.readouterr().err
