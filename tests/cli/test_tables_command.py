"""`schorl tables` as its reader meets it, and class limits by country from the command line."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from click.testing import CliRunner

from schorl.agronomy.tables import table
from schorl.agronomy.targets import regions
from schorl.cli import main
from schorl.model.sourced import STATUSES

FIELDS = Path(__file__).resolve().parents[2] / "sample_fields"


def run(*arguments):
    """The command in this process: it only prints, and starting Python anew takes seconds."""
    done = CliRunner().invoke(main, [*map(str, arguments)])
    assert done.exception is None or isinstance(done.exception, SystemExit)
    return done


def test_the_list_counts_rows_by_standing():
    listed = run("tables").stdout
    answer = json.loads(run("tables", "--json").stdout)["result"]
    for name, rows in answer["tables"].items():
        assert sum(answer["statuses"][name].values()) == rows
        line = next(one for one in listed.splitlines() if one.startswith(f"{name} "))
        assert line.split()[1] == str(rows)
    assert answer["statuses"]["crops"]["proposal"] == len(table("crops"))
    assert answer["regions"] == list(regions())
    said = " ".join(listed.split())
    assert all(f"{word}: {promise}" in said for word, promise in STATUSES.items())
    assert all(region in said for region in regions())


@pytest.mark.parametrize("name", ["crops", "class_limits", "trade_facts", "solubility"])
def test_a_table_is_readable_in_80_columns_and_whole_in_json(name):
    printed = run("tables", name).stdout
    rows = json.loads(run("tables", name, "--json").stdout)["result"]["rows"]
    long = [one for one in printed.splitlines() if len(one) > 80]
    assert all(one.strip().startswith("http") for one in long)  # an address is never broken
    blocks = printed.strip().split("\n\n")
    assert len(blocks) == len(rows)
    for block, row in zip(blocks, rows, strict=True):
        said = " ".join(block.split())
        assert said.startswith(row["id"])
        assert row["status"] in said
        assert " ".join(row["source"].split()) in said
        assert row["address"] in said


def test_an_unknown_table_names_those_there_are():
    done = run("tables", "crop")
    assert done.exit_code == 2
    assert "crops" in done.stderr


CLASS = ("--interpretation", "class table", "--region")


@pytest.mark.parametrize(
    ("options", "exit_code", "said"),
    [
        ((*CLASS, "oregon"), 0, "memory: class_limits: oregon 1"),
        ((*CLASS, "atlantis"), 2, "RATE-REGION"),
        ((*CLASS, "new jersey"), 4, "RATE-REGION-METHOD"),
        ((*CLASS, "ireland"), 4, "RATE-REGION-VOLUME"),
        ((*CLASS, "australia"), 4, "RATE-REGION-CROP"),
    ],
)
def test_class_limits_from_the_command_line(tmp_path, options, exit_code, said):
    place = FIELDS / "long_acre/2026"
    if exit_code:
        done = run("prescribe", place, *options, "--out", tmp_path, "--json")
        assert list(tmp_path.iterdir()) == []
    else:
        done = run("check", place, *options, "--json")
    assert done.exit_code == exit_code
    found = json.loads(done.stdout)["findings"]
    assert any(said in f"{one['code']} {one['what']}" for one in found)
