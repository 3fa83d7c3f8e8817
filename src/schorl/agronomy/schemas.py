"""What each table of agronomy must hold besides id, unit, source, status and address."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise
from types import MappingProxyType

from schorl.model.sourced import Column, Row, Schema, number, words

NEEDS = ("high", "medium", "low")
TOLERANCES = (
    "very sensitive", "sensitive", "moderately sensitive", "moderately tolerant", "tolerant",
    "very tolerant", "not rated",
)  # fmt: skip
CEILING_CLASSES = ("texture", "sensitive", "very sensitive")
STATUS_OR_NONE = words("read", "second-hand", "memory", "proposal", "none")
_TEST = frozenset({"mg/kg hot-water boron"})
_YES_NO = words("yes", "no")
_FREE, _MAYBE = Column(), Column(needed=False)
_BORON = number(0.05, 20, needed=False)


def _class_faults(rows: Sequence[Row]) -> Iterator[str]:
    """Rows of a region cover all clay contents once, with one method, scope and basis."""
    regions: dict[str, list[Row]] = {}
    for row in rows:
        regions.setdefault(row["region"], []).append(row)
    for region, own in regions.items():
        for same in ("scope", "crops", "method", "unit"):
            if len({row[same] for row in own}) > 1:
                yield f"region {region} has more than one {same}"
        mineral = [row for row in own if row["organic"] == "no"]
        given = [(row["clay_from_pct"], row["clay_below_pct"]) for row in mineral]
        if not given or "" in (one for pair in given for one in pair):
            yield f"region {region} has mineral soil without clay contents"
            continue
        ends = [(float(low), float(high)) for low, high in given]
        if ends[0][0] != 0 or ends[-1][1] <= 100:
            yield f"region {region} does not cover all clay contents"
        if any(before[1] != after[0] for before, after in pairwise(ends)):
            yield f"region {region}: its clay classes leave a gap or overlap"


def _crop_faults(rows: Sequence[Row]) -> Iterator[str]:
    """No name twice, and caps that follow need and ceiling class."""
    names: dict[str, str] = {}
    for row in rows:
        for name in (row["id"].lower(), *filter(None, row["aliases"].lower().split("|"))):
            if names.setdefault(name, row["id"]) != row["id"]:
                yield f"`{name}` names both {names[name]} and {row['id']}"
        if row["ceiling_class"] == "very sensitive" and float(row["rate_cap_kg_ha"]) > 0:
            yield f"row `{row['id']}`: a very sensitive crop gets no boron"
        if row["need"] == "low" and float(row["rate_cap_kg_ha"]) > 0.56:
            yield f"row `{row['id']}`: a crop of low need has a cap above 0.56"
        if "sensitive" in row["ceiling_class"] and row["tolerance"] in (
            "tolerant",
            "very tolerant",
        ):
            yield f"row `{row['id']}`: a tolerant crop under the ceiling of sensitive ones"


def _method_faults(rows: Sequence[Row]) -> Iterator[str]:
    names: dict[str, str] = {}
    for row in rows:
        for name in (row["id"], *filter(None, row["aliases"].split("|"))):
            if name != name.lower().strip():
                yield f"`{name}` is not in small letters"
            if names.setdefault(name, row["id"]) != row["id"]:
                yield f"`{name}` names both {names[name]} and {row['id']}"


def _tissue_faults(rows: Sequence[Row]) -> Iterator[str]:
    for row in rows:
        if not any(row[one] for one in ("deficient_below", "sufficient_from", "toxic_above")):
            yield f"row `{row['id']}` has no figure"


SCHEMAS: Mapping[str, Schema] = MappingProxyType(
    {
        "cautions": Schema(
            columns={"applies": words("all", "handling", "foliar"), "text": _FREE},
            units=frozenset({"-"}),
        ),
        "ceilings": Schema(
            columns={
                "group": words("texture", "organic", "sensitive", "very sensitive"),
                "clay_pct": number(0, 100, needed=False),
                "ceiling_mg_kg": number(0.5, 3.0),
            },
            units=_TEST,
            stepping=("group", "clay_pct"),
        ),
        "class_limits": Schema(
            columns={
                "region": _FREE,
                "scope": _FREE,
                "crops": _FREE,
                "method": _FREE,
                "organic": _YES_NO,
                "clay_from_pct": number(0, 100, needed=False),
                "clay_below_pct": number(0, 101, needed=False),
                "low_from": _BORON,
                "medium_from": _BORON,
                "adequate_from": number(0.05, 20),
                "high_from": _BORON,
                "excessive_from": _BORON,
                "note": _MAYBE,
            },
            units=frozenset({"mg/kg", "mg/L"}),
            rising=("low_from", "medium_from", "adequate_from", "high_from", "excessive_from"),
            more=_class_faults,
        ),
        "compounds": Schema(
            columns={"formula": _FREE, "boron_pct": number(5, 35)},
            units=frozenset({"% B w/w"}),
        ),
        "crops": Schema(
            columns={
                "aliases": _MAYBE,
                "need": words(*NEEDS),
                "need_status": STATUS_OR_NONE,
                "tolerance": words(*TOLERANCES),
                "tolerance_status": STATUS_OR_NONE,
                "rate_cap_kg_ha": number(0, 2.24),
                "ceiling_class": words(*CEILING_CLASSES),
                "sensitive_next": _YES_NO,
                "perennial": _YES_NO,
            },
            units=frozenset({"kg B/ha a season"}),
            more=_crop_faults,
        ),
        "limits": Schema(columns={"value": number(-1, 1000)}),
        "methods": Schema(
            columns={"aliases": _FREE, "limits_apply": _YES_NO, "note": _FREE},
            units=frozenset({"-"}),
            more=_method_faults,
        ),
        "removal": Schema(columns={"g_b_t": number(0.5, 100)}),
        "targets": Schema(
            columns={
                "group": words(*NEEDS, "texture line"),
                "clay_pct": number(0, 100),
                "target_mg_kg": number(0.1, 2.0),
            },
            units=_TEST,
            stepping=("group", "clay_pct"),
        ),
        "textures": Schema(
            columns={"sand_pct": number(0, 100), "clay_pct": number(0, 100)},
            units=frozenset({"%"}),
        ),
        "tissue": Schema(
            columns={
                "crops": _FREE,
                "part": _FREE,
                "stage": _MAYBE,
                "deficient_below": number(1, 100, needed=False),
                "sufficient_from": number(1, 200, needed=False),
                "sufficient_to": number(1, 300, needed=False),
                "toxic_above": number(10, 1000, needed=False),
            },
            units=frozenset({"mg/kg dry matter"}),
            rising=("deficient_below", "sufficient_from", "sufficient_to", "toxic_above"),
            more=_tissue_faults,
        ),
        "trade_facts": Schema(
            columns={"saying": _FREE, "used_for": _FREE, "published": _FREE},
        ),
    }
)
