"""The command line: help, exit codes, streams, one JSON document."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from schorl.cli import COMMANDS
from schorl.findings import catalogue

FIELDS = Path(__file__).resolve().parents[2] / "sample_fields"
MARL_PIT = FIELDS / "marl_pit" / "2026"


def schorl(*arguments, cwd=None, env=None):
    """Run the command as a person does."""
    command = [sys.executable, "-m", "schorl", *map(str, arguments)]
    return subprocess.run(
        command, capture_output=True, text=True, cwd=cwd, env=env, encoding="utf-8", check=False
    )


def document(done):
    lines = done.stdout.strip().splitlines()
    assert len(lines) == 1, done.stdout + done.stderr
    return json.loads(lines[0])


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_with_examples(command):
    done = schorl(command, "--help")
    assert done.returncode == 0
    assert "Examples:" in done.stdout
    assert f"schorl {command}" in done.stdout


def test_help_loads_nothing_heavy():
    script = (
        "import sys\nfrom schorl.cli import main\n"
        "try: main(['--help'])\nexcept SystemExit: pass\n"
        "bad = {'numpy', 'scipy', 'shapely', 'pyproj', 'rasterio', 'sklearn'} & set(sys.modules)\n"
        "sys.exit(bool(bad))"
    )
    assert (
        subprocess.run([sys.executable, "-c", script], capture_output=True, check=False).returncode
        == 0
    )


def test_a_missing_fact_is_asked_for_by_option():
    done = schorl("prescribe", "--boundary", MARL_PIT / "boundary.geojson")
    assert done.returncode == 2
    for option in ("--samples", "--crop", "--form", "--boron-pct"):
        assert option in done.stderr
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize(
    ("text", "code", "word"),
    [
        ("field = ", 3, "cannot be read"),
        ("feild = 'x'", 2, "did you mean"),
        ("[crop]\ntarget_mg_kg = -1", 2, "greater than 0"),
        ("[machine]\nworking_width_m = 'wide'", 2, "number"),
        ("seed = 1e400", 2, "finite"),
    ],
)
def test_bad_job_files(tmp_path, text, code, word):
    (tmp_path / "job.toml").write_text(text, encoding="utf-8")
    done = schorl("check", tmp_path)
    assert done.returncode == code
    assert word in done.stderr
    assert "Traceback" not in done.stderr


def test_a_missing_file_is_named(tmp_path):
    shutil.copytree(MARL_PIT, tmp_path / "job")
    (tmp_path / "job" / "Bericht.csv").unlink()
    done = schorl("check", tmp_path / "job", "--json")
    answer = document(done)
    assert done.returncode == 1
    assert answer["result"]["prescribe_exit"] == 3
    assert any("Bericht.csv" in one["what"] for one in answer["findings"])


def test_json_is_one_document_also_when_the_answer_is_no(tmp_path):
    done = schorl("prescribe", MARL_PIT, "--method", "mehlich-3", "--out", tmp_path, "--json")
    answer = document(done)
    assert done.returncode == 4
    assert answer["ok"] is False
    (refused,) = [one for one in answer["findings"] if one["severity"] == "error"]
    assert refused["code"] == "RATE-METHOD"
    assert "--target-mg-kg" in refused["hint"]
    assert list(tmp_path.iterdir()) == []


def test_prescribe_verify_and_a_second_run(tmp_path):
    done = schorl("prescribe", MARL_PIT, "--out", tmp_path, "--json")
    assert done.returncode == 0, done.stderr
    result = document(done)["result"]
    folder = Path(result["pack"]["folder"])
    expected = {"field", "surfaces", "audit", "zones", "zoning", "totals", "pack"}
    assert expected <= set(result)
    assert result["audit"]["largest_difference"] < 1e-6
    zones = result["zones"]
    assert sum(z["area_ha"] * z["boron_kg_ha"] for z in zones) == pytest.approx(
        result["totals"]["boron_kg"]
    )
    assert schorl("verify", folder).returncode == 0
    again = schorl("prescribe", MARL_PIT, "--out", tmp_path)
    assert again.returncode == 2
    assert "--replace" in again.stderr
    first = {one["path"]: one["sha256"] for one in result["pack"]["files"]}
    repeat = schorl("prescribe", MARL_PIT, "--out", tmp_path, "--replace", "--json")
    assert {f["path"]: f["sha256"] for f in document(repeat)["result"]["pack"]["files"]} == first
    (folder / "prescription.geojson").write_text("{}", encoding="utf-8")
    spoiled = schorl("verify", folder, "--json")
    assert spoiled.returncode == 1
    assert document(spoiled)["result"]["faults"]


def test_the_same_bytes_with_any_threads_hash_seed_clock_zone_and_locale(tmp_path):
    import os

    seen = []
    places = [("1", "0", "UTC", "C"), ("2", "1", "Asia/Tokyo", "C.UTF-8"),
              ("8", "random", "America/St_Johns", "de_DE.UTF-8")]  # fmt: skip
    for threads, seed, zone, words in places:
        out = tmp_path / threads
        env = {**os.environ, "SCHORL_THREADS": threads, "PYTHONHASHSEED": seed, "TZ": zone,
               "LC_ALL": words, "LANG": words}  # fmt: skip
        done = schorl("prescribe", MARL_PIT, "--out", out, "--json", env=env)
        files = document(done)["result"]["pack"]["files"]
        seen.append({one["path"]: one["sha256"] for one in files})
    assert seen[0] == seen[1] == seen[2]


STOPPED = """
import signal, sys, time
from schorl.formats import pack
# A shell's background job starts with interrupts ignored; a person at a terminal does not.
signal.signal(signal.SIGINT, signal.default_int_handler)
def ready(*_):
    print("ready", flush=True)
    time.sleep(60)
pack._read_back = ready
from schorl.cli import main
main(["prescribe", sys.argv[1], "--out", sys.argv[2]])
"""


@pytest.mark.skipif(sys.platform == "win32", reason="signals are POSIX")
@pytest.mark.parametrize("signal_name", ["SIGTERM", "SIGINT"])
def test_a_stopped_run_leaves_nothing(tmp_path, signal_name):
    """Stopped with the whole pack written beside, just before it is read back."""
    import signal

    command = [sys.executable, "-c", STOPPED, str(MARL_PIT), str(tmp_path)]
    with subprocess.Popen(command, stderr=subprocess.PIPE, stdout=subprocess.PIPE) as process:
        assert process.stdout.readline() == b"ready\n"
        assert list(tmp_path.iterdir())
        process.send_signal(getattr(signal, signal_name))
        process.communicate(timeout=30)
    assert process.returncode == {"SIGTERM": 143, "SIGINT": 130}[signal_name]
    assert list(tmp_path.iterdir()) == []


def test_new_writes_a_job_that_prescribes(tmp_path):
    arguments = [
        "--boundary", MARL_PIT / "boundary.geojson", "--samples", MARL_PIT / "Bericht.csv",
        "--samples-crs", "EPSG:32633", "--depth-cm", "17", "--method", "hot water",
        "--crop", "lucerne", "--form", "granule", "--boron-pct", "3",
    ]  # fmt: skip
    done = schorl("new", tmp_path / "job", *arguments)
    assert done.returncode == 0, done.stderr
    assert "lb/acre" in done.stdout
    assert "assumed: working width 24 m was assumed" in done.stdout
    assert schorl("new", tmp_path / "job", *arguments).returncode == 2
    assert schorl("check", tmp_path / "job", "-q").returncode == 0


def test_explain_knows_every_code():
    listed = schorl("explain", "--json")
    codes = {one["code"] for one in document(listed)["result"]["codes"]}
    assert codes == set(catalogue())
    assert schorl("explain", "no-such").returncode == 2
    one = schorl("explain", "rate-method")
    assert "way out" in one.stdout


def test_tables_show_sources():
    assert "crops" in schorl("tables").stdout
    rows = document(schorl("tables", "limits", "--json"))["result"]["rows"]
    assert all(row["source"] and row["status"] for row in rows)
    assert schorl("tables", "nothing").returncode == 2


def test_no_colour_and_no_progress_when_piped():
    done = schorl("check", MARL_PIT)
    assert "\x1b" not in done.stderr + done.stdout
    assert "\r" not in done.stderr
