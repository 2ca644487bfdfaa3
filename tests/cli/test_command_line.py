"""The real command in a process of its own; only what it prints, writes and returns is looked at."""

import csv
import json
import re
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import openpyxl
import pytest

from service import samples

LINE = {
    "format": 1,
    "title": "Line between two pegs",
    "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
    "unknowns": {"y": {"unit": "m"}},
    "functional": {"seek": "minimum", "integrand": "y'^2"},
    "endpoints": ["y(0) = 0", "y(3) = 2"],
}
VALUE = 4 / 3  # the straight line: (2/3)^2 * 3


def _run(*arguments, stdin="", **options):
    command = [sys.executable, "-m", "service", *map(str, arguments)]
    return subprocess.run(command, input=stdin, capture_output=True, text=True, timeout=120, check=False, **options)


@pytest.fixture(scope="module")
def solved():
    """`solve --json` of the line from standard input."""
    return _run("solve", "-", "--json", stdin=json.dumps(LINE))


def test_a_sweep_is_summed_up_and_written(tmp_path):
    document = LINE | {"constants": {"h": "2 m +/- 0.1 m"}, "endpoints": ["y(0) = 0", "y(3) = h"]}
    document["sweep"] = {"h": {"values": [1, 2, 4]}}
    done = _run("solve", "-", "--part", "sweep", tmp_path / "sweep.csv", stdin=json.dumps(document))
    assert done.returncode == 0, done.stderr
    assert "Sweep of h: 3 points, 3 " in done.stdout
    assert re.search(r"h = 4\s?m +5\.333333", done.stdout)
    assert re.search(r"one sigma +0\.13\s?m from the tolerances", done.stdout)  # dJ/dh = 2 h/3
    rows = list(csv.reader((tmp_path / "sweep.csv").read_text().splitlines()))
    assert [float(row[2]) for row in rows[1:]] == pytest.approx([1 / 3, 4 / 3, 16 / 3])


def test_json_is_the_result_document_and_nothing_else(solved):
    assert solved.returncode == 0
    assert solved.stderr == ""
    result = json.loads(solved.stdout)
    assert result["verdict"] in ("global minimum", "local minimum")
    assert result["value"] == pytest.approx(VALUE, abs=max(result["value_error"], 1e-12))
    assert result["problem"] == LINE
    assert result["id"] is None
    assert result["reading"]["necessary"]


def test_the_summary_says_what_matters_and_a_table_is_written(tmp_path):
    file = tmp_path / "line.json"
    file.write_text(json.dumps(LINE))
    done = _run("solve", file, "--table", tmp_path / "line.csv", "--step", "0.7", "--derivatives", "1")
    assert done.returncode == 0
    assert done.stdout.splitlines()[0] == LINE["title"]
    assert re.search(r"verdict\s+(global|local) minimum", done.stdout)
    assert re.search(r"value\s+1\.3333\d* ± \S+\s+?m\n", done.stdout)
    assert re.search(r"passed\s+motion\s+\S+ \(at most \S+\)", done.stdout)
    assert (
        "The result holds for the stated model only" in done.stdout or "holds for the stated model only" in done.stdout
    )
    heading, *rows = csv.reader((tmp_path / "line.csv").read_text().splitlines())
    assert heading == ["x [m]", "y [m]", "y'"]
    assert float(rows[-1][0]) == 3
    assert float(rows[-1][1]) == pytest.approx(2)


def test_the_suffix_chooses_the_format(tmp_path):
    done = _run("solve", "-", "--table", tmp_path / "line.xlsx", "--rows", "5", stdin=json.dumps(LINE))
    assert done.returncode == 0
    sheet = openpyxl.load_workbook(tmp_path / "line.xlsx").worksheets[0]
    assert sheet.max_row == 6


def test_a_weaker_verdict_is_told_by_the_exit_code():
    document = {**LINE, "constraints": ["integral(sqrt(1 + y'^2)) <= 3.2"]}  # the chord alone is 3.6 m
    done = _run("solve", "-", stdin=json.dumps(document))
    assert done.returncode == 1
    assert re.search(r"verdict\s+infeasible", done.stdout)
    assert re.search(r"integral\(sqrt\(1 \+ y'\^2\)\) <= 3\.2, by 0\.405\d\sm", done.stdout)
    assert "Without any one of them the others can be met" in done.stdout


def test_what_nothing_determines_is_in_the_summary():
    document = {**LINE, "parameters": {"a": {"within": [-9, 9]}, "b": {"within": [-9, 9]}}}
    document["functional"] = {"seek": "minimum", "integrand": "y'^2 + (a + b - 1)^2"}
    done = _run("solve", "-", stdin=json.dumps(document))
    assert done.returncode == 0
    assert "Undetermined (one choice of many is shown)" in done.stdout
    assert "Nothing determines a here: when it is moved together with b" in done.stdout


def test_a_refused_document_is_printed_with_a_marker_under_the_place():
    document = {**LINE, "constraints": ["y <= h + 1"], "where": {"a": "b"}}
    for command in ("solve", "check"):
        done = _run(command, "-", stdin=json.dumps(document))
        assert done.returncode == 2
        assert done.stdout == ""
        blocks = done.stderr.split("\n\n")
        assert blocks[0] == "The document is refused (names): 2 complaints."
        block = next(block for block in blocks if block.startswith("/constraints/0: "))
        lines = block.splitlines()
        assert lines[1] == "    y <= h + 1"
        assert lines[2] == "         ^"
        assert lines[3].strip()


def test_broken_json_is_marked_in_its_line():
    done = _run("check", "-", stdin='{\n  "format": 1,\n  "title": oops\n}')
    assert done.returncode == 2
    assert '      "title": oops\n               ^' in done.stderr


def test_check_reads_back():
    done = _run("check", "-", stdin=json.dumps(LINE))
    assert done.returncode == 0
    assert "x from 0 to 3 [m]" in done.stdout
    reading = json.loads(_run("check", "-", "--json", stdin=json.dumps(LINE)).stdout)
    assert reading["unknowns"][0]["name"] == "y"


def test_samples_are_listed_and_can_stand_for_a_file():
    listed = _run("samples").stdout
    assert [line.split()[0] for line in listed.splitlines()] == list(samples.names())
    done = _run("check", "hose")
    assert done.returncode == 0
    assert done.stdout.startswith(samples.load("hose")["title"])


def test_a_sample_is_printed_to_be_edited():
    assert _run("samples", "hose").stdout == samples.text("hose")


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("solve", "nowhere.json"), "no file 'nowhere.json'"),
        (("samples", "nothing"), "no sample 'nothing'"),
        (("solve", "hose", "--rows", "5"), "--table"),
        (("solve", "hose", "--table", "a.csv", "--rows", "5", "--step", "1"), "not both"),
        (("solve", "hose", "--table", "a.pdf"), ".csv, .json, .xlsx, .npz"),
        (("serve", "--host", "0.0.0.0"), "--open"),
        (("serve", "--port", "99999"), "--port"),
        (("dance",), "dance"),
    ],
)
def test_a_call_that_cannot_be_meant_is_refused(arguments, said):
    done = _run(*arguments)
    assert done.returncode == 2
    assert said in done.stderr
    assert "Traceback" not in done.stderr


def test_a_refused_host_says_why():
    said = _run("serve", "--host", "0.0.0.0").stderr
    assert "no keys" in said


def test_the_help_names_every_command():
    said = _run("--help").stdout
    for command in ("serve", "solve", "check", "samples"):
        assert f"  {command}" in said


def test_interrupting_keeps_the_best_curve_so_far():
    document = samples.load("crucible")
    document["constants"]["g"] = "6.374 m/s^2"  # the curve is found at once, its switches are not
    document["solve"] = {"tolerance": 1e-11, "time_limit": 100, "points": 200_000}
    with subprocess.Popen(
        [sys.executable, "-m", "service", "solve", "-", "--json"],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    ) as process:
        process.stdin.write(json.dumps(document))
        process.stdin.close()
        process.stdin = None
        _until(lambda: "casadi" in Path(f"/proc/{process.pid}/maps").read_text())
        time.sleep(2)  # into the solve, as far as that matters
        process.send_signal(signal.SIGINT)
        output, errors = process.communicate(timeout=60)
    assert process.returncode == 1, errors
    result = json.loads(output)
    assert result["state"] == "stopped"
    assert result["diagnosis"]["reason"] == "stopped"
    assert result["curve"] is not None


def test_a_taken_port_is_told_plainly(tmp_path):
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        port = other.getsockname()[1]
        done = _run("serve", "--port", port, "--data", tmp_path / "data")
    assert done.returncode == 1
    assert done.stderr == f"Error: 127.0.0.1 port {port} cannot be used: Address already in use\n"


def test_a_taken_or_impossible_directory_is_told_plainly(tmp_path):
    with _serving("--port", "0", "--data", tmp_path / "data") as first:
        assert "serves at" in first.stdout.readline()
        done = _run("serve", "--port", "0", "--data", tmp_path / "data")
        first.send_signal(signal.SIGINT)
        assert first.communicate(timeout=30)[1] == "Stopped.\n"
    assert done.returncode == 1
    assert done.stderr.startswith("Error: another server works in")
    assert "Traceback" not in done.stderr
    (tmp_path / "file").touch()
    done = _run("serve", "--port", "0", "--data", tmp_path / "file" / "data")
    assert done.returncode == 1
    assert "cannot be made" in done.stderr
    assert "Traceback" not in done.stderr


def test_an_open_server_warns(tmp_path):
    with _serving("--host", "0.0.0.0", "--open", "--port", "0", "--data", tmp_path / "data") as process:
        assert "Curvewright serves at http://0.0.0.0:" in process.stdout.readline()
        process.terminate()
        assert "there are no keys" in process.communicate(timeout=30)[1]


def _until(condition, seconds=60):
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end, "it did not come true in time"
        time.sleep(0.1)


def _serving(*options):
    command = [sys.executable, "-m", "service", "serve", "--workers", "1", *map(str, options)]
    return subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def test_a_fit_and_what_other_starts_found_are_told():
    document = {
        "format": 1,
        "independent": {"name": "x", "unit": "m", "from": 0, "to": 1},
        "parameters": {"a": {"unit": "m"}},
        "unknowns": {"y": {"unit": "m"}},
        "dynamics": ["y' = 0"],
        "endpoints": ["y(0) = a"],
        "observations": [{"of": "y", "unit": "cm", "points": [[0, 1], [0.5, 2], [1, 6]]}],
        "solve": {"starts": 2},
    }  # the mean: 3 cm; its sigma: sqrt(7/3) cm
    done = _run("solve", "-", stdin=json.dumps(document))
    assert done.returncode == 0
    assert re.search(r"a +0\.03\xa0m, sigma 0\.01528\xa0m", done.stdout)
    assert re.search(r"spread +2\.646\xa0cm of 3 observations", done.stdout)
    assert re.search(r"passed +other starts", done.stdout)
