"""The command line as a user meets it: words in, exit status and messages out."""

from __future__ import annotations

import csv
import io
import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from knucklepath.viewer.cli import join_signed_values, main

LAYOUTS = ("double-a-arm", "strut", "five-link", "semi-trailing-arm")
COLUMNS = (
    "travel_mm,rack_mm,camber_deg,toe_deg,caster_deg,kingpin_inclination_deg,scrub_radius_mm,caster_trail_mm,"
    "half_track_change_mm,wheelbase_change_mm,wheel_centre_x_mm,wheel_centre_y_mm,wheel_centre_z_mm,contact_x_mm,"
    "contact_y_mm,contact_z_mm,front_centre_y_mm,front_centre_z_mm,side_centre_x_mm,side_centre_z_mm,fvsa_length_mm,"
    "fvsa_height_mm,svsa_length_mm,svsa_height_mm,roll_centre_height_mm,camber_rate_deg_per_mm,toe_rate_deg_per_mm,"
    "axis_point_x_mm,axis_point_y_mm,axis_point_z_mm,axis_direction_x,axis_direction_y,axis_direction_z,"
    "axis_pitch_mm_per_rad"
)


@pytest.fixture(scope="module")
def projects(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    """A starter project of each layout, made by the command that a user would call."""
    folder = tmp_path_factory.mktemp("starters")
    for layout in LAYOUTS:
        assert main(["new", str(folder / layout), "--layout", layout]) == 0
    return {layout: folder / layout for layout in LAYOUTS}


def table(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


@pytest.mark.parametrize("layout", LAYOUTS)
def test_a_starter_sweeps_to_csv_with_the_columns_in_order(
    layout: str, projects: dict[str, Path], tmp_path: Path
) -> None:
    out = tmp_path / "sweep.csv"
    assert main(["sweep", str(projects[layout]), "--csv", str(out)]) == 0
    text = out.read_text()
    assert text.splitlines()[0].startswith(COLUMNS)
    rows = table(text)
    poses = [(float(row["travel_mm"]), float(row["rack_mm"])) for row in rows]
    assert poses == sorted(poses)
    assert len(set(poses)) == len(poses)
    if layout == "semi-trailing-arm":
        assert {rack for _, rack in poses} == {0.0}
        assert {row["caster_deg"] for row in rows} == {"nan"}
    else:
        assert len({rack for _, rack in poses}) > 1


def test_both_ways_of_writing_a_negative_range_work(
    projects: dict[str, Path], capsys: pytest.CaptureFixture[str]
) -> None:
    project = str(projects["double-a-arm"])
    assert main(["sweep", project, "--travel=-30:30:4", "--rack", "0", "--csv", "-"]) == 0
    joined = capsys.readouterr().out
    assert main(["sweep", project, "--travel", "-30:30:4", "--rack", "0", "--csv", "-"]) == 0
    assert capsys.readouterr().out == joined
    assert [float(row["travel_mm"]) for row in table(joined)] == [-30.0, -10.0, 10.0, 30.0]
    assert join_signed_values(["--rack", "-5", "x"]) == ["--rack=-5", "x"]


def test_csv_numbers_keep_full_double_precision(projects: dict[str, Path], capsys: pytest.CaptureFixture[str]) -> None:
    from knucklepath.kinematics.motion import solve_motion
    from knucklepath.viewer.project import load_project

    project = load_project(projects["five-link"])
    assert main(["sweep", str(projects["five-link"]), "--travel", "17", "--rack", "3", "--csv", "-"]) == 0
    row = table(capsys.readouterr().out)[0]
    motion = solve_motion(project.corner, [[17.0]], [[3.0]])
    centre = motion.point("wheel", project.corner.wheel.centre)[0, 0]
    assert float(row["wheel_centre_y_mm"]) == centre[1]


def test_a_project_file_and_its_folder_are_the_same_project(
    projects: dict[str, Path], capsys: pytest.CaptureFixture[str]
) -> None:
    folder = projects["strut"]
    file = next(folder.glob("*.toml"))
    outputs = []
    for path in (folder, file):
        assert main(["sweep", str(path), "--rack", "0", "--csv", "-"]) == 0
        outputs.append(capsys.readouterr().out)
    assert outputs[0] == outputs[1]


def test_the_readable_table_has_units_and_title(projects: dict[str, Path], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["sweep", str(projects["double-a-arm"]), "--rack", "0"]) == 0
    text = capsys.readouterr().out
    for word in ("travel", "mm", "camber", "deg", "caster", "toe"):
        assert word in text


def test_travel_past_lock_up_exits_1_with_the_limit(
    projects: dict[str, Path], capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    out = tmp_path / "far.csv"
    status = main(["sweep", str(projects["double-a-arm"]), "--travel", "0:600:31", "--rack", "0", "--csv", str(out)])
    message = capsys.readouterr().err
    assert status == 1
    assert "locks at travel +" in message
    assert "mm" in message
    rows = table(out.read_text())
    reached = [row["camber_deg"] != "nan" for row in rows]
    assert reached[0]
    assert not reached[-1]
    limit = float(message.split("locks at travel ")[1].split(" mm")[0])
    last = max(float(row["travel_mm"]) for row, good in zip(rows, reached, strict=True) if good)
    assert last <= limit < last + 20.0


def test_a_picture_past_lock_up_exits_1_and_leaves_no_file(
    projects: dict[str, Path], capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    out = tmp_path / "far.png"
    assert main(["picture", str(projects["double-a-arm"]), str(out), "--travel", "600"]) == 1
    assert "locks at travel" in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("layout", LAYOUTS)
def test_clearance_writes_the_stated_json_and_its_verdict_is_the_exit_status(
    layout: str, projects: dict[str, Path], capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    out = tmp_path / "gaps.json"
    status = main(["clearance", str(projects[layout]), "--json", str(out)])
    result = json.loads(out.read_text())
    assert set(result) >= {"motion", "tolerance_mm", "pairs"}
    assert result["tolerance_mm"] == 0.05
    assert result["method"] == "proven"
    for pair in result["pairs"]:
        assert pair["verdict"] in ("clear", "tight", "touching")
        assert pair["verdict"] == "clear" or pair["gap_mm"] < pair["required_mm"] or pair["gap_mm"] == 0.0
        assert pair["gap_mm"] - 0.051 <= pair["proven_gap_mm"] <= pair["gap_mm"]
        apart = np.linalg.norm(np.subtract(pair["point_a_mm"], pair["point_b_mm"]))
        assert pair["verdict"] == "touching" or apart == pytest.approx(pair["gap_mm"], abs=1e-5)
        assert result["motion"]["travel_mm"][0] <= pair["travel_mm"] <= result["motion"]["travel_mm"][1]
    assert status == int(any(pair["verdict"] != "clear" for pair in result["pairs"]))
    text = capsys.readouterr().out
    assert "Gaps are proven for rigid parts" in " ".join(text.split())
    assert "proves neither strength nor roadworthiness" in text


def test_without_numba_gaps_are_sampled_and_nothing_is_called_clear(
    projects: dict[str, Path], capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "knucklepath.kinematics.clearance.proved", None)
    out = tmp_path / "gaps.json"
    assert main(["clearance", str(projects["strut"]), "--json", str(out)]) == 1
    captured = capsys.readouterr()
    assert "numba is not installed" in captured.err
    assert "poses in between are not proven" in " ".join(captured.out.split())
    result = json.loads(out.read_text())
    assert result["method"] == "sampled"
    assert {pair["proven_gap_mm"] for pair in result["pairs"]} == {None}
    assert "clear" not in {pair["verdict"] for pair in result["pairs"]}


def test_the_map_of_a_pair_is_drawn(projects: dict[str, Path], tmp_path: Path) -> None:
    for layout, pair in (("double-a-arm", "tyre,tie_rod"), ("semi-trailing-arm", "tyre,side rail")):
        out = tmp_path / f"{layout}.png"
        assert main(["clearance", str(projects[layout]), "--pair", pair, "--map", str(out)]) in (0, 1)
        assert out.read_bytes().startswith(b"\x89PNG")


def test_one_pair_can_be_asked_for(projects: dict[str, Path], tmp_path: Path) -> None:
    out = tmp_path / "one.json"
    assert main(["clearance", str(projects["double-a-arm"]), "--pair", "tyre,lower_arm", "--json", str(out)]) in (0, 1)
    pairs = json.loads(out.read_text())["pairs"]
    assert [set(pair["between"]) for pair in pairs] == [{"tyre", "lower_arm"}]


WRONG_WORDS = {
    "unknown command": (["sweap"], "did you mean 'sweep'"),
    "unknown option": (["sweep", "PROJECT", "--trave", "1"], "--trave"),
    "no project": (["sweep", "nowhere"], "nowhere"),
    "range with two parts": (["sweep", "PROJECT", "--travel", "1:2"], "FROM:TO:COUNT"),
    "range with words": (["sweep", "PROJECT", "--travel", "low:high:5"], "'low' is not a number"),
    "range not finite": (["sweep", "PROJECT", "--travel", "0:inf:5"], "finite"),
    "count not whole": (["sweep", "PROJECT", "--travel", "0:5:2.5"], "whole number"),
    "count zero": (["sweep", "PROJECT", "--travel", "0:5:0"], "between 1"),
    "far too many poses": (["sweep", "PROJECT", "--travel", "0:5:2000000", "--rack", "0:5:10"], "at most"),
    "csv into a missing folder": (["sweep", "PROJECT", "--csv", "missing/out.csv"], "missing"),
    "picture not png": (["picture", "PROJECT", "out.jpg"], ".png"),
    "size without x": (["picture", "PROJECT", "out.png", "--size", "big"], "1920x1080"),
    "unknown look": (["picture", "PROJECT", "out.png", "--look", "under"], "corner"),
    "unknown overlay": (["picture", "PROJECT", "out.png", "--show", "instant-axes"], "instant-axis"),
    "travel is a word": (["picture", "PROJECT", "out.png", "--travel", "up"], "--travel"),
    "movie of unknown kind": (["movie", "PROJECT", "out.avi"], ".gif"),
    "tolerance negative": (["clearance", "PROJECT", "--tolerance", "-1"], "positive"),
    "pair of one": (["clearance", "PROJECT", "--pair", "tyre"], "tyre,lower_arm"),
    "map not png": (["clearance", "PROJECT", "--map", "map.jpg"], ".png"),
    "pair unknown": (["clearance", "PROJECT", "--pair", "tyre,lower_arn"], "lower_arm"),
    "unknown layout": (["layouts", "five-lnk"], "five-link"),
    "new with unknown layout": (["new", "x", "--layout", "strat"], "strut"),
    "new without layout": (["new", "x"], "--layout"),
}


@pytest.mark.parametrize("case", WRONG_WORDS)
def test_wrong_words_exit_2_with_one_message_and_no_file(
    case: str,
    projects: dict[str, Path],
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    words, hint = WRONG_WORDS[case]
    monkeypatch.chdir(tmp_path)
    words = [str(projects["double-a-arm"]) if word == "PROJECT" else word for word in words]
    assert main(words) == 2
    captured = capsys.readouterr()
    assert hint in captured.err
    assert "Traceback" not in captured.err
    assert len(captured.err.strip().splitlines()) == 1
    assert list(tmp_path.iterdir()) == []


def test_rack_on_an_axle_without_one_is_refused(projects: dict[str, Path], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["sweep", str(projects["semi-trailing-arm"]), "--rack", "5"]) == 2
    assert "no rack" in capsys.readouterr().err


def test_help_names_every_command_and_imports_nothing_heavy() -> None:
    code = (
        "import sys; from knucklepath.viewer.cli import main; status = main(['--help']);"
        "heavy = {'numpy', 'numba', 'rich', 'trimesh', 'pyvista', 'vtkmodules', 'fcl', 'PIL'} & set(sys.modules);"
        "print(heavy, status)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "set() 0"
    for command in ("new", "demo", "sweep", "picture", "movie", "clearance", "layouts", "doctor"):
        assert f"\n  {command} " in done.stdout


@pytest.mark.parametrize("command", ["new", "demo", "sweep", "picture", "movie", "clearance", "layouts", "doctor"])
def test_help_of_each_command_teaches_by_example(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([command, "--help"]) == 0
    assert f"knucklepath {command}" in capsys.readouterr().out.split("examples:")[1]


def test_headless_commands_start_without_vtk(projects: dict[str, Path]) -> None:
    code = (
        "import sys; from knucklepath.viewer.cli import main;"
        f"main(['sweep', {str(projects['strut'])!r}, '--rack', '0', '--csv', '-']);"
        "print(sorted({'pyvista', 'vtkmodules', 'matplotlib', 'numba'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


def test_doctor_says_what_the_machine_can_do(capsys: pytest.CaptureFixture[str]) -> None:
    status = main(["doctor"])
    text = capsys.readouterr().out
    assert status in (0, 1)
    assert "drawing" in text
    assert "instant-axis" in text
    assert (status == 0) == ("Everything is in place" in text)
