"""Frozen values as JSON and back, exactly, guided by their type annotations.

Nothing but the annotated types can come out of a file: no code, no class by name. Floats keep
every bit (their shortest repr), arrays are kept once each as little-endian bytes, geometries as
well-known binary.
"""

from __future__ import annotations

import base64
import dataclasses
import hashlib
import math
import types
import typing
import zlib
from collections.abc import Mapping
from datetime import date
from enum import Enum
from typing import Any, get_args, get_origin

import numpy as np
import shapely

KINDS = {"f": "<f8", "i": "<i8", "b": "|b1"}


class Encoder:
    """Values to JSON; arrays go to a table of their own, equal ones once."""

    def __init__(self) -> None:
        self.arrays: dict[str, dict[str, Any]] = {}

    def value(self, value: Any) -> Any:
        """One value as JSON."""
        if value is None or (isinstance(value, bool | int) and not isinstance(value, Enum)):
            return value
        if isinstance(value, Enum):
            return value.value
        if isinstance(value, str):
            return str(value)
        if isinstance(value, float | np.floating):
            return float(value) if math.isfinite(value) else repr(float(value))
        if isinstance(value, date):
            return value.isoformat()
        if isinstance(value, np.ndarray):
            return self._array(value)
        if isinstance(value, shapely.Geometry):
            return shapely.to_wkb(value, hex=True, byte_order=1)
        return self._held(value)

    def _held(self, value: Any) -> Any:
        if dataclasses.is_dataclass(value):
            return {
                one.name: self.value(getattr(value, one.name)) for one in dataclasses.fields(value)
            }
        if isinstance(value, Mapping):
            return {str(key): self.value(item) for key, item in value.items()}
        if isinstance(value, tuple | list):
            return [self.value(item) for item in value]
        raise TypeError(f"cannot keep a {type(value).__name__}")

    def _array(self, array: np.ndarray) -> str:
        kind = KINDS[array.dtype.kind]
        raw = np.ascontiguousarray(array, dtype=kind).tobytes()
        name = hashlib.sha256(kind.encode() + repr(array.shape).encode() + raw).hexdigest()[:24]
        if name not in self.arrays:
            packed = base64.b64encode(zlib.compress(raw, 6)).decode("ascii")
            self.arrays[name] = {"kind": kind, "shape": list(array.shape), "bytes": packed}
        return name


class Decoder:
    """JSON back to values of annotated types; anything else is a ``ValueError``."""

    def __init__(self, arrays: Mapping[str, Mapping[str, Any]]) -> None:
        self.arrays = arrays

    def value(self, kind: Any, value: Any) -> Any:
        """One value of an annotated type."""
        origin = get_origin(kind)
        if origin in (typing.Union, types.UnionType):
            return self._one_of(get_args(kind), value)
        if origin is np.ndarray:
            return self._array(value)
        if origin is typing.Literal:
            return _checked(value in get_args(kind), value)
        if origin in (tuple, Mapping, dict):
            return self._many(origin, get_args(kind), value)
        if isinstance(kind, type) and dataclasses.is_dataclass(kind):
            return self._dataclass(kind, value)
        return _plain(kind, value)

    def _one_of(self, kinds: tuple[Any, ...], value: Any) -> Any:
        if value is None and type(None) in kinds:
            return None
        found = None
        for kind in (one for one in kinds if one is not type(None)):
            try:
                return self.value(kind, value)
            except (ValueError, TypeError, KeyError) as reason:
                found = reason
        raise ValueError(f"{value!r} fits none of {kinds}") from found

    def _many(self, origin: Any, kinds: tuple[Any, ...], value: Any) -> Any:
        if origin is not tuple:
            return {key: self.value(kinds[1], item) for key, item in _mapping(value).items()}
        if not isinstance(value, list):
            raise ValueError(f"a list was expected, not {type(value).__name__}")
        if len(kinds) == 2 and kinds[1] is Ellipsis:
            return tuple(self.value(kinds[0], item) for item in value)
        return tuple(self.value(kind, item) for kind, item in zip(kinds, value, strict=True))

    def _dataclass(self, kind: type, value: Any) -> Any:
        hints = typing.get_type_hints(kind)
        known = {one.name for one in dataclasses.fields(kind)}
        held = _mapping(value)
        strange = sorted(set(held) - known)
        if strange:
            raise ValueError(f"{kind.__name__} has no `{strange[0]}`")
        return kind(**{name: self.value(hints[name], item) for name, item in held.items()})

    def _array(self, name: Any) -> np.ndarray:
        if not isinstance(name, str):
            raise ValueError("an array was expected")
        held = self.arrays[name]
        kind = _checked(held["kind"] in KINDS.values(), held["kind"])
        shape = tuple(int(one) for one in held["shape"])
        wanted = math.prod(shape) * np.dtype(kind).itemsize
        raw = zlib.decompressobj().decompress(base64.b64decode(held["bytes"]), wanted + 1)
        if len(raw) != wanted:
            raise ValueError(f"an array of {shape} has {len(raw)} bytes")
        return np.frombuffer(raw, dtype=kind).reshape(shape)


def _mapping(value: Any) -> Mapping[str, Any]:
    if not isinstance(value, dict):
        raise ValueError(f"an object was expected, not {type(value).__name__}")
    return value


def _checked(sound: bool, value: Any) -> Any:
    if not sound:
        raise ValueError(f"{value!r} is not one of the choices")
    return value


def _plain(kind: Any, value: Any) -> Any:
    """Numbers, words, days, choices and geometries."""
    if kind is object or kind is Any:
        return value
    if kind is float:
        if isinstance(value, bool) or not isinstance(value, int | float | str):
            raise ValueError(f"{value!r} is no number")
        return float(value)
    if kind in (int, bool, str):
        return _checked(type(value) is kind, value)
    if kind is date:
        return date.fromisoformat(value)
    if isinstance(kind, type) and issubclass(kind, Enum):
        return kind(value)
    if isinstance(kind, type) and issubclass(kind, shapely.Geometry):
        geometry = shapely.from_wkb(value)
        return _checked(isinstance(geometry, kind), geometry)
    raise ValueError(f"no way to read a {kind}")
