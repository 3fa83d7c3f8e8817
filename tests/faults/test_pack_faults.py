"""Whatever breaks while a pack is written, the old pack or the new one stands, whole."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
from pathlib import Path

import pytest

from schorl.errors import OutputProblem, UsageProblem
from schorl.formats import whole_folder
from schorl.formats.pack import write_pack
from schorl.formats.verify import verify
from schorl.formats.whole_folder import complete_swaps
from support.example_record import example_record

EXTRAS = {"report.html": b"<html></html>"}


@pytest.fixture(scope="module")
def record():
    return example_record()


def fingerprint(folder: Path) -> str:
    digest = hashlib.sha256()
    for path in sorted(one for one in folder.rglob("*") if one.is_file()):
        digest.update(path.relative_to(folder).as_posix().encode() + path.read_bytes())
    return digest.hexdigest()


def leftovers(folder: Path) -> list[str]:
    return [one.name for one in folder.iterdir() if one.name.startswith(".")]


def test_nothing_is_overwritten_without_being_told(record, tmp_path):
    write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    before = fingerprint(tmp_path / "p")
    with pytest.raises(UsageProblem):
        write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    assert fingerprint(tmp_path / "p") == before
    assert leftovers(tmp_path) == []


def test_the_same_bytes_every_time(record, tmp_path):
    write_pack(record, tmp_path / "a", extras=EXTRAS, replace=False)
    write_pack(record, tmp_path / "b", extras=EXTRAS, replace=False)
    assert fingerprint(tmp_path / "a") == fingerprint(tmp_path / "b")


@pytest.mark.parametrize("function", ["fsync", "rename", "open", "mkdir"])
def test_every_failing_call_in_turn(record, tmp_path, monkeypatch, function):
    """Fail the first, second, ... call of its kind until the whole operation goes through."""
    write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    before = fingerprint(tmp_path / "p")
    real = {"rename": Path.rename, "mkdir": Path.mkdir}.get(function) or getattr(os, function)
    calls = {"left": 0}

    def failing(*arguments, **options):
        calls["left"] -= 1
        if calls["left"] == 0:
            raise OSError(28, "No space left on device")
        return real(*arguments, **options)

    where = Path if function in ("rename", "mkdir") else os
    for place in range(1, 80):
        calls["left"] = place
        monkeypatch.setattr(where, function, failing)
        try:
            write_pack(record, tmp_path / "p", extras=EXTRAS, replace=True)
            monkeypatch.undo()
            break
        except OutputProblem:
            monkeypatch.undo()
            complete_swaps(tmp_path / "p")
            assert fingerprint(tmp_path / "p") == before, place
            assert leftovers(tmp_path) == [], place
    else:
        pytest.fail("the operation never went through")
    assert verify(tmp_path / "p").whole


KILLED = """
import os, sys
sys.path[:0] = [{tests!r}]
from pathlib import Path
from support.example_record import example_record
from schorl.formats.pack import write_pack
left = [int(sys.argv[2])]
def count(event, _):
    if event in ("open", "os.rename", "os.mkdir", "os.remove", "os.rmdir", "shutil.rmtree", "os.chmod"):
        left[0] -= 1
        if left[0] == 0:
            os._exit(9)
record = example_record()
sys.addaudithook(count)
write_pack(record, Path(sys.argv[1]), extras={{"report.html": b"<html></html>"}}, replace=True)
"""


@pytest.mark.parametrize("moment", [1, 4, 12, 25, 40, 60, 90, 130, 160, 190, 220, 260, 300, 400])
def test_killed_at_any_moment(record, tmp_path, moment):
    folder = tmp_path / "p"
    write_pack(record, folder, extras=EXTRAS, replace=False)
    script = KILLED.format(tests=str(Path(__file__).resolve().parents[1]))
    subprocess.run([sys.executable, "-c", script, str(folder), str(moment)], check=False)
    complete_swaps(folder)
    assert verify(folder).whole
    write_pack(record, folder, extras=EXTRAS, replace=True)
    assert verify(folder).whole
    assert leftovers(tmp_path) == []


def test_a_swap_cut_in_the_middle_is_undone_or_completed(record, tmp_path):
    folder = tmp_path / "p"
    write_pack(record, folder, extras=EXTRAS, replace=False)
    before = fingerprint(folder)
    folder.rename(tmp_path / f".p{whole_folder.ASIDE}")
    complete_swaps(folder)
    assert fingerprint(folder) == before


def test_a_file_that_reads_back_differently_is_not_kept(record, tmp_path, monkeypatch):
    from schorl.formats import vectors

    real = vectors.geojson_bytes

    def wrong(record, shapes):
        return real(record, shapes).replace(b'"product_rate": 12.0', b'"product_rate": 14.0')

    monkeypatch.setattr(vectors, "geojson_bytes", wrong)
    with pytest.raises(OutputProblem) as problem:
        write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    assert "14" in str(problem.value)
    assert list(tmp_path.iterdir()) == []


def test_a_second_run_is_refused_while_one_writes(record, tmp_path):
    lock = tmp_path / f".p{whole_folder.LOCK}"
    lock.write_text(str(os.getpid()), encoding="ascii")
    with pytest.raises(OutputProblem, match="another run"):
        write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    lock.write_text("999999999", encoding="ascii")  # a dead run's lock does not hold
    write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    assert verify(tmp_path / "p").whole


@pytest.mark.skipif(os.name == "nt", reason="modes are POSIX")
def test_modes_follow_the_rules(record, tmp_path):
    write_pack(record, tmp_path / "p", extras=EXTRAS, replace=False)
    for path in (tmp_path / "p").rglob("*"):
        assert path.stat().st_mode & 0o022 == 0
