"""Any figure that ruled a rate can be traced to its row, and says so where nobody looked it up."""

from __future__ import annotations

import json
import re
import shutil
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path

import pytest

from schorl.agronomy import tables as of_agronomy
from schorl.machinery import tables as of_machines

FIELDS = Path(__file__).resolve().parents[2] / "sample_fields"
OPTIONS = {
    "crop need": (),
    "texture line": ("--interpretation", "texture line"),
    "recalled": ("--interpretation", "class table", "--region", "oregon"),
}
STATUS = {"crop need": "proposal", "texture line": "common practice", "recalled": "memory"}


def row_named(name: str, row_id: str):
    """The row of a key, from whichever package holds the table."""
    if name in of_agronomy.table_names():
        return of_agronomy.row_of(name, row_id)
    return of_machines.table(name)[row_id]


@pytest.fixture(scope="module", params=OPTIONS)
def pack(request, tmp_path_factory):
    """A pack made under an interpretation, and the standing of its targets."""
    out = tmp_path_factory.mktemp("traced")
    command = [sys.executable, "-m", "schorl", "prescribe", FIELDS / "long_acre/2026"]
    command += ["--out", out, *OPTIONS[request.param], "--json"]
    done = subprocess.run(
        list(map(str, command)), capture_output=True, text=True, encoding="utf-8", check=False
    )
    assert done.returncode == 0, done.stderr
    answer = json.loads(done.stdout)
    return Path(answer["result"]["pack"]["folder"]), answer, STATUS[request.param]


def test_every_source_in_the_summary_is_a_row_of_a_table(pack):
    folder, _, _ = pack
    sources = json.loads((folder / "summary.json").read_text(encoding="utf-8"))["sources"]
    assert len(sources) > 8
    for used in sources:
        row = row_named(used["table"], used["row"])
        assert used["key"] == f"{used['table']}: {used['row']}"
        for column in ("status", "source", "address", "unit"):
            assert used[column] == row[column]
        assert any(
            float(used["value"]) == pytest.approx(float(cell))
            for cell in row.values()
            if re.fullmatch(r"-?[\d.]+", cell)
        )


def test_a_zone_says_how_far_what_ruled_it_was_checked(pack):
    folder, _, status = pack
    summary = json.loads((folder / "summary.json").read_text(encoding="utf-8"))
    keys = {(one["table"], one["row"]): one["status"] for one in summary["sources"]}
    by_need = [zone for zone in summary["zones"] if zone["ruled_by"] in ("need", "nothing")]
    # The line of the trade asks for so much that other limits rule all over this field.
    assert by_need or status == "common practice"
    for zone in summary["zones"]:
        for part in filter(None, zone["rests_on"].split("; ")):
            name, rows, said = re.fullmatch(r"(\w+): (.+) \(([a-z -]+)\)", part).groups()
            assert {keys[name, one] for one in rows.split(", ")} == {said}
    assert all(f"({status})" in zone["rests_on"] for zone in by_need)
    assert status in {one["status"] for one in summary["sources"] if one["table"] != "limits"}


def test_the_findings_say_it_too(pack):
    _, answer, status = pack
    said = [one["what"] for one in answer["findings"] if one["code"] == "RATE-STATUS"]
    assert any(one.startswith(f"{status}: ") for one in said)
    assert any("crops: sugar beet 2.24" in one for one in said)


class _Words(HTMLParser):
    def __init__(self):
        super().__init__()
        self.said = []

    def handle_data(self, data):
        self.said.append(data)


def test_report_note_and_sheet_carry_the_rows(pack):
    folder, _, status = pack
    summary = json.loads((folder / "summary.json").read_text(encoding="utf-8"))
    reader = _Words()
    reader.feed((folder / "report.html").read_text(encoding="utf-8"))
    page = " ".join(" ".join(reader.said).split())
    note = (folder / "READ_ME.txt").read_text(encoding="utf-8")
    for used in summary["sources"]:
        assert used["key"] in page
        assert " ".join(used["source"].split()) in page
    ruling = [zone["rests_on"] for zone in summary["zones"] if zone["rests_on"]]
    assert ruling
    for rows in ruling:
        assert rows in page
        assert rows in note
    assert status in page


def test_the_job_sheet_names_the_rows(pack):
    folder, _, _ = pack
    if shutil.which("pdftotext") is None:
        pytest.skip("pdftotext (poppler) is not installed")
    summary = json.loads((folder / "summary.json").read_text(encoding="utf-8"))
    command = ["pdftotext", str(folder / "job_sheet.pdf"), "-"]
    sheet = subprocess.run(command, capture_output=True, check=True, encoding="utf-8")
    said = " ".join(sheet.stdout.split())
    assert "The rates rest on" in said
    first = next(zone["rests_on"] for zone in summary["zones"] if zone["rests_on"])
    assert first.split("; ")[0] in said
