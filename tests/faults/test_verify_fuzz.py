"""Damaged bytes in every file of a pack: verify answers, and never says whole.

A few cases by default; `-m slow` runs thousands.
"""

from __future__ import annotations

import shutil
from dataclasses import replace

import numpy as np
import pytest

from schorl.formats.pack import write_pack
from schorl.formats.verify import verify
from schorl.model.profile import Profile
from support.example_record import example_record

pytestmark = [
    pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning"),
    pytest.mark.filterwarnings("ignore::RuntimeWarning"),
]


@pytest.fixture(scope="module")
def packs(tmp_path_factory):
    """A pack of polygons and one of a grid."""
    folder, record = tmp_path_factory.mktemp("packs"), example_record()
    grid = replace(record.settings, profile=Profile(task_data_layout="grid 2"))
    made = [(folder / "zones", record), (folder / "grid", replace(record, settings=grid))]
    for path, one in made:
        write_pack(one, path, extras={}, replace=False)
    return [path for path, _ in made]


def damaged(data: bytes, random) -> bytes:
    """Bytes flipped, cut out, doubled, or the end lost."""
    held = bytearray(data)
    kind, at = int(random.integers(4)), int(random.integers(len(held)))
    count = int(random.integers(1, 40))
    if kind == 0:
        for place in range(at, min(at + count, len(held))):
            held[place] ^= int(random.integers(1, 256))
    elif kind == 1:
        del held[at : at + count]
    elif kind == 2:
        held[at:at] = held[at : at + count] or b"\0"
    else:
        del held[at:]
    return bytes(held)


def fuzz(pack, folder, seed):
    random = np.random.default_rng(seed)
    files = sorted(one for one in pack.rglob("*") if one.is_file())
    chosen = files[int(random.integers(len(files)))].relative_to(pack)
    copy = folder / f"pack{seed}"
    shutil.copytree(pack, copy)
    path = copy / chosen
    before = path.read_bytes()
    path.write_bytes(damaged(before, random))
    if path.read_bytes() == before:
        return
    seen = verify(copy)  # an exception fails the test
    assert not seen.whole, (chosen, seed)
    assert all(fault.file and fault.what for fault in seen.faults)
    verify(path)  # alone, after someone else touched it
    shutil.rmtree(copy)


@pytest.mark.parametrize("seed", range(40))
def test_a_damaged_file_is_told(packs, tmp_path, seed):
    fuzz(packs[seed % 2], tmp_path, seed)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(1000, 3000))
def test_thousands_of_damaged_files_are_told(packs, tmp_path, seed):
    fuzz(packs[seed % 2], tmp_path, seed)
