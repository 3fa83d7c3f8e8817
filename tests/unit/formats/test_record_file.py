"""A record comes back from its file exactly, and nothing else does."""

from __future__ import annotations

import gzip
import json
from dataclasses import fields, is_dataclass

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st

from schorl.errors import Refusal
from schorl.formats.codec import Decoder, Encoder
from schorl.formats.record_file import RECORD_FILE, read_record, record_bytes
from schorl.model.summary import summary
from support.example_record import example_record

RECORD = example_record()


def same(one, other) -> bool:
    """Whether two values are equal field by field, arrays and geometries to the last bit."""
    if is_dataclass(one):
        return type(one) is type(other) and all(
            same(getattr(one, f.name), getattr(other, f.name)) for f in fields(one)
        )
    if isinstance(one, np.ndarray):
        return one.dtype == other.dtype and np.array_equal(one, other, equal_nan=one.dtype == float)
    if isinstance(one, shapely.Geometry):
        return bool(shapely.equals_exact(one, other, 0.0))
    if isinstance(one, tuple | list):
        return len(one) == len(other) and all(map(same, one, other))
    if hasattr(one, "items"):
        return sorted(one) == sorted(other) and all(same(one[key], other[key]) for key in one)
    return one == other or (one != one and other != other)  # noqa: PLR0124 - not a number


def test_the_whole_record_comes_back(tmp_path):
    (tmp_path / RECORD_FILE).write_bytes(record_bytes(RECORD))
    again = read_record(tmp_path)
    assert same(again, RECORD)
    assert summary(again) == summary(RECORD)


@given(st.floats(allow_nan=True, allow_infinity=True))
def test_every_number_keeps_its_bits(value):
    kept = json.loads(json.dumps(Encoder().value(value), allow_nan=False))
    again = Decoder({}).value(float, kept)
    assert np.array_equal([again], [value], equal_nan=True)
    assert np.signbit(again) == np.signbit(value) or value != value  # noqa: PLR0124


def damaged(change):
    document = json.loads(gzip.decompress(record_bytes(RECORD)))
    change(document)
    return gzip.compress(json.dumps(document).encode())


DAMAGE = {
    "cut short": lambda: record_bytes(RECORD)[:-40],
    "no gzip": lambda: b"{}",
    "no record": lambda: damaged(lambda d: d.pop("record")),
    "later schema": lambda: damaged(lambda d: d.update(schema=99)),
    "unknown field": lambda: damaged(lambda d: d["record"].update(extra=1)),
    "word for a number": lambda: damaged(lambda d: d["record"]["field"].update(area_ha="twelve")),
    "unknown choice": lambda: damaged(
        lambda d: d["record"]["settings"].update(placement="anywhere")
    ),
    "array gone": lambda: damaged(lambda d: d["arrays"].clear()),
    "array too long": lambda: damaged(
        lambda d: next(iter(d["arrays"].values())).update(shape=[10**7])
    ),
    "array of objects": lambda: damaged(
        lambda d: next(iter(d["arrays"].values())).update(kind="|O")
    ),
    "line for an area": lambda: damaged(
        lambda d: d["record"]["field"].update(
            boundary=shapely.to_wkb(shapely.LineString([(0, 0), (1, 1)]), hex=True)
        )
    ),
}


@pytest.mark.parametrize("damage", DAMAGE)
def test_a_damaged_record_is_refused(tmp_path, damage):
    (tmp_path / RECORD_FILE).write_bytes(DAMAGE[damage]())
    with pytest.raises(Refusal) as refused:
        read_record(tmp_path)
    assert [one.code for one in refused.value.findings] == ["OUT-RECORD"]
