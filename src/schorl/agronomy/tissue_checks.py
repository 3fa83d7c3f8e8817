"""What boron in leaves, its gap between young and old ones, and brix overnight say of supply.

Leaf boron against a published range decides. The gap and brix are facts of the trade without a
source: they can tip a marginal leaf, and never decide alone.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from schorl.agronomy.tables import limit, table
from schorl.errors import Refusal, UsageProblem
from schorl.findings import finding
from schorl.model.tissue import LeafRange, LeafVerdict, TissueSample, ZoneLeaves

#: Crops that move boron in the phloem, where young leaves say nothing of supply (Brown & Shelp
#: 1997, Plant Soil 193:85-101, recalled).
MOBILE = ("apple", "pear", "stone fruit", "olive", "celery", "celeriac")
NAN = float("nan")


def leaf_ranges(crop: str) -> tuple[LeafRange, ...]:
    """Every range of the table for a crop."""
    return tuple(
        LeafRange(
            part=row["part"], stage=row["stage"], deficient_below=_number(row["deficient_below"]),
            sufficient_from=_number(row["sufficient_from"]),
            toxic_above=_number(row["toxic_above"]), row=row["id"], status=row["status"],
            source=row["source"],
        )
        for row in table("tissue")
        if crop in row["crops"].split("|")
    )  # fmt: skip


def _number(text: str) -> float | None:
    return float(text) if text else None


def leaf_range(crop: str, *, row: str | None) -> LeafRange:
    """The range for a crop; which of several must be said by the id of its row.

    Raises
    ------
    Refusal
        No range for the crop, or none that tells too little from enough (exit 4).
    UsageProblem
        Several ranges, or no such row (exit 2).
    """
    found = leaf_ranges(crop)
    own = "--deficient-below, --sufficient-from and --by"
    if not found:
        what = f"no published range of leaf boron for {crop}"
        hint = f"give your own with {own} (the person who answers for it)"
        raise Refusal([finding("TISSUE-RANGE", where="leaves", what=what, hint=hint)])
    chosen = [one for one in found if row in (None, one.row)]
    if len(chosen) != 1:
        names = "; ".join(f"`{one.row}` ({one.part} {one.stage}".rstrip() + ")" for one in found)
        what = f"{len(found)} ranges for {crop}" if row is None else f"no range `{row}` for {crop}"
        hint = f"say which part was sampled with --range: {names}"
        raise UsageProblem([finding("TISSUE-PART", where="leaves", what=what, hint=hint)])
    if chosen[0].deficient_below is None and chosen[0].sufficient_from is None:
        what = f"the range `{chosen[0].row}` only tells excess"
        raise Refusal([finding("TISSUE-RANGE", where="leaves", what=what, hint=f"give {own}")])
    return chosen[0]


def zone_leaves(
    zone: int, samples: Sequence[TissueSample], held: LeafRange, *, crop: str, lab_relative: float
) -> ZoneLeaves:
    """The evidence of a zone's samples and the verdict.

    Parameters
    ----------
    lab_relative
        Laboratory repeatability as a share of the value; the standard error of the mean is at
        least that of one laboratory error over the root of the samples.
    """
    leaf = [one.leaf for one in samples if one.leaf is not None]
    mean = float(np.mean(leaf)) if leaf else NAN
    error = _error(leaf, lab_relative)
    gap = _mean([(s.old - s.young) / s.old for s in samples if s.old and s.young is not None])
    fall = _mean(
        [
            s.brix_evening - s.brix_morning
            for s in samples
            if s.brix_evening is not None and s.brix_morning is not None
        ]
    )
    signs = _signs(gap, fall, crop)
    verdict, why = _verdict(mean, error, held, signs)
    return ZoneLeaves(
        zone=zone, samples=len(samples), leaf=mean, leaf_error=error, gap=gap, brix_fall=fall,
        verdict=verdict, why=why,
    )  # fmt: skip


def _error(leaf: Sequence[float], lab_relative: float) -> float:
    if not leaf:
        return NAN
    laboratory = lab_relative * float(np.mean(leaf)) / np.sqrt(len(leaf))
    spread = float(np.std(leaf, ddof=1)) / np.sqrt(len(leaf)) if len(leaf) > 1 else 0.0
    return float(max(laboratory, spread))


def _mean(values: Sequence[float]) -> float:
    return float(np.mean(values)) if values else NAN


def _signs(gap: float, fall: float, crop: str) -> list[str]:
    """Signs of the trade that supply has stalled, in words."""
    signs = []
    if gap > limit("leaf-gap") and crop not in MOBILE:
        signs.append(f"young leaves hold {100 * gap:.0f} % less than old ones")
    if fall <= 0:
        signs.append("brix did not fall overnight")
    return signs


def _verdict(
    mean: float, error: float, held: LeafRange, signs: Sequence[str]
) -> tuple[LeafVerdict, str]:
    said = f"; {' and '.join(signs)} (common practice, no source)" if signs else ""
    if np.isnan(mean):
        return LeafVerdict.UNDECIDED, f"no leaf boron was measured{said}: have leaves analysed"
    leaf = f"leaf boron {mean:.0f} ± {error:.0f} mg/kg"
    if held.toxic_above is not None and mean + error > held.toxic_above:
        return LeafVerdict.TOXIC, f"{leaf}, excess above {held.toxic_above:g}: give none"
    low, enough = held.deficient_below, held.sufficient_from
    if low is not None and mean + error < low:
        return LeafVerdict.WARRANTED, f"{leaf}, deficient below {low:g}{said}"
    if enough is not None and mean - error >= enough:
        return LeafVerdict.NOT, f"{leaf}, sufficient from {enough:g}{said}"
    if enough is None and low is not None and mean - error >= low:
        return LeafVerdict.NOT, f"{leaf}, not below the deficient {low:g}{said}"
    edge = _edge(low, enough)
    if enough is not None and mean + error < enough and signs:
        return LeafVerdict.WARRANTED, f"{leaf}, marginal ({edge}){said}"
    return LeafVerdict.UNDECIDED, f"{leaf}, too near the edge ({edge}) to tell: sample again"


def _edge(low: float | None, enough: float | None) -> str:
    said = []
    if low is not None:
        said.append(f"deficient below {low:g}")
    if enough is not None:
        said.append(f"sufficient from {enough:g}")
    return ", ".join(said)
