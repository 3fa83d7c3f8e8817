"""Which rows of the tables a prescription rests on, and which of them ruled each zone's rate."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence

from schorl.agronomy.tables import limit, trace
from schorl.model.prescription import Limit
from schorl.model.samples import SampleSet
from schorl.model.settings import Placement, RunSettings

Source = Mapping[str, str]

_TARGETS = ("targets", "class_limits", "job: target", "job: own targets")
_CEILINGS = ("ceilings", "job: ceiling")
#: Tables or keys whose rows stand behind each limit.
BEHIND: Mapping[Limit, tuple[str, ...]] = {
    Limit.NEED: _TARGETS,
    Limit.NOTHING: _TARGETS,
    Limit.RATE_CAP: ("crops", "limits: cap-"),
    Limit.ABSOLUTE: ("limits: absolute-",),
    Limit.CHANCE_OF_EXCESS: (*_CEILINGS, "limits: chance-of-excess"),
    Limit.SOIL_CEILING: _CEILINGS,
    Limit.HOT_SPOT: (*_CEILINGS, "limits: hot-chance"),
    Limit.LEAST_WORTH: ("limits: least-worth",),
    Limit.MACHINE: ("solubility: ",),
}


def rests_on(by: Limit, sources: Sequence[Source]) -> str:
    """The rows behind the limit that ruled, each with how far it was checked.

    For example "targets: high-1, high-2 (proposal); limits: least-worth (proposal)"; of a machine
    only what its mix rests on.
    """
    groups: dict[tuple[str, str], list[str]] = {}
    for row in sources:
        if row.get("key", "").startswith(BEHIND.get(by, ("\0",))):
            groups.setdefault((row["table"], row["status"]), []).append(row["row"])
    return "; ".join(
        f"{table}: {', '.join(dict.fromkeys(rows))} ({status})"
        for (table, status), rows in groups.items()
    )


def limits_used(samples: SampleSet, settings: RunSettings) -> tuple[Source, ...]:
    """Rows of the table of limits that took part in this prescription."""
    names = dict.fromkeys(_names(samples, settings))
    return tuple(trace("limits", name, limit(name)) for name in names)


def _names(samples: SampleSet, settings: RunSettings) -> Iterator[str]:
    crop = settings.crop
    yield from ("absolute-season", "absolute-pass", "chance-of-excess", "hot-chance")
    yield "recovery-next-test"
    if settings.placement in (Placement.BROADCAST, Placement.INCORPORATED):
        yield "least-worth"
    if samples.campaign.lab_relative_sd is None:
        yield "lab-sd"
    if samples.campaign.depth_cm > limit("need-depth-most"):
        yield "need-depth-most"
    if crop.incorporation_cm is None:
        yield "ceiling-depth"
    if crop.bulk_density_g_cm3 is None and not samples.campaign.per_volume:
        yield from ("organic-from", "density-om-least", "density-om-most", "density-least")
        yield "density-most"
    if any(one.what == "alfalfa season limit" for one in settings.overrides):
        yield "absolute-alfalfa"
    if crop.drainage_mm is not None:
        yield from ("leach-drainage", "leach-clay", "leach-constant", "leach-applied")
        yield "leach-split-share"
    if crop.applied:
        yield from ("residual-sand", "residual-loam", "residual-clay")
        yield from ("sandy-clay-most", "loam-clay-most")
    yield from _of_properties(samples.properties)


def _of_properties(properties: Iterable[str]) -> Iterator[str]:
    """Thresholds of remarks that no rate hangs on."""
    if "ph" in properties:
        yield from ("ph-flag", "ph-strong")
    if "total_boron" in properties:
        yield "total-boron-low"
