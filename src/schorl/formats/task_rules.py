"""Rules of ISO 11783-10 task data that readers and even its schema let pass.

The schema is not at hand where a stick is checked, so what it would say of our few elements is
said here too: names, required and known attributes, references, codes, rings, numbers.
"""

from __future__ import annotations

import re
from pathlib import Path
from xml.etree import ElementTree

from schorl.formats.taskdata import (
    MASS_COUNTS,
    MASS_DDI,
    MOST_CODES,
    VOLUME_COUNTS,
    VOLUME_DDI,
    XML_NAME,
)

Said = list[tuple[str, str]]
#: Element -> attributes it must have, may have, and those of them that name another element.
ELEMENTS = {
    "CTR": ("AB", "CDEFGHIJKL", ""),
    "FRM": ("AB", "CDEFGHI", "I"),
    "PFD": ("ACD", "BEFGHI", "EF"),
    "PDT": ("AB", "CDEFGHIJ", "D"),
    "VPN": ("ABCD", "E", ""),
    "TSK": ("AG", "BCDEFHIJK", "CDEF"),
    "TZN": ("A", "BC", ""),
    "PLN": ("A", "BCDE", ""),
    "LSG": ("A", "BCDEF", ""),
    "PNT": ("ACD", "BEFGHIJ", ""),
    "PDV": ("AB", "CDEF", "CE"),
    "GRD": ("ABCDEFGI", "HJ", ""),
}
WITH_ID = ("CTR", "FRM", "PFD", "PDT", "VPN", "TSK")
NAMED = ("CTR", "FRM", "PDT", "TSK", "TZN")
HEAD = ("VersionMajor", "VersionMinor", "ManagementSoftwareManufacturer",
        "ManagementSoftwareVersion", "DataTransferOrigin")  # fmt: skip
LONGEST = 32
IDENTIFIER = re.compile(r"[A-Z]{3}[1-9][0-9]{0,9}")
DECIMALS = 9


def task_faults(path: Path, root: ElementTree.Element) -> Said:
    """What is wrong with a task data document, as place and fault."""
    said: Said = []
    if path.name != XML_NAME:
        said.append(("file", f"the name must be {XML_NAME}"))
    if root.tag != "ISO11783_TaskData":
        said.append(("top", f"`{root.tag}` is no task data"))
    said += _head_faults(root)
    for one in root.iter():
        said += _attribute_faults(one)
    said += _polygon_faults(root)
    said += _identifier_faults(root)
    tasks = root.findall("TSK")
    if len(tasks) != 1:
        said.append(("TSK", f"{len(tasks)} tasks; one is expected"))
    for task in tasks:
        said += _zone_code_faults(task)
        said += _value_faults(task)
    said += _shown_faults(root)
    for line in root.iter("LSG"):
        said += _ring_faults(line)
    return said


def _attribute_faults(one: ElementTree.Element) -> Said:
    if one.tag not in ELEMENTS:
        return []
    required, optional, _ = ELEMENTS[one.tag]
    said = [(one.tag, f"attribute {key} is missing") for key in required if key not in one.attrib]
    said += [
        (one.tag, f"there is no attribute {key}")
        for key in one.attrib
        if key not in required + optional
    ]
    name = "C" if one.tag == "PFD" else "B"
    if one.tag in (*NAMED, "PFD") and len(one.get(name, "")) > LONGEST:
        said.append((one.tag, f"{name} is longer than {LONGEST} characters"))
    return said


def _identifier_faults(root: ElementTree.Element) -> Said:
    """Names of elements: their form, each once, and that what is referred to is there."""
    ids = [one.get("A", "") for one in root.iter() if one.tag in WITH_ID]
    said = [
        ("ids", f"`{one}` stands twice") for one in sorted({i for i in ids if ids.count(i) > 1})
    ]
    for one in root.iter():
        own = one.get("A", "")
        if one.tag in WITH_ID and not (own.startswith(one.tag) and IDENTIFIER.fullmatch(own)):
            said.append((one.tag, f"`{own}` is no name of a {one.tag}"))
        for key in ELEMENTS.get(one.tag, ("", "", ""))[2]:
            value = one.get(key)
            if value is not None and value not in ids:
                said.append((one.tag, f"{key} names `{value}`, which is not there"))
    return said


def _ring_faults(line: ElementTree.Element) -> Said:
    points = [(one.get("C"), one.get("D")) for one in line]
    said: Said = []
    if len(points) < 4 or points[0] != points[-1]:
        said.append(("LSG", "a ring is not closed"))
    said += [
        ("PNT", f"{c}, {d} is no plain latitude and longitude")
        for c, d in points
        if not (_plain_degree(c, 90) and _plain_degree(d, 180))
    ]
    return said


def _plain_degree(text: str | None, most: float) -> bool:
    if text is None or not re.fullmatch(rf"-?[0-9]+(\.[0-9]{{1,{DECIMALS}}})?", text):
        return False
    return abs(float(text)) <= most


def _zone_code_faults(task: ElementTree.Element) -> Said:
    said: Said = []
    codes = [zone.get("A", "") for zone in task.findall("TZN")]
    said += [
        ("TZN", f"code {one} stands twice")
        for one in sorted({c for c in codes if codes.count(c) > 1})
    ]
    said += [
        ("TZN", f"`{one}` is no code from 0 to {MOST_CODES}")
        for one in codes
        if not re.fullmatch("[0-9]{1,3}", one) or int(one) > MOST_CODES
    ]
    for key, words in (("H", "default"), ("I", "position lost"), ("J", "out of field")):
        if task.get(key) not in codes:
            said.append(("TSK", f"the {words} zone `{task.get(key)}` is not there"))
    if len(task.findall("GRD")) > 1:
        said.append(("GRD", "more than one grid in a task"))
    if task.findall("GRD") and any(zone.findall("PLN") for zone in task.findall("TZN")):
        said.append(("GRD", "polygons and a grid in one task"))
    return said


def _value_faults(task: ElementTree.Element) -> Said:
    """Rates: one a zone, all by mass or all by volume, none where the machine is lost or outside."""
    said: Said = []
    for zone in task.findall("TZN"):
        values = zone.findall("PDV")
        code = zone.get("A")
        if len(values) != 1:
            said.append(("TZN", f"{len(values)} rates in zone {code}; one is expected"))
        if code in (task.get(key) for key in "HIJ") and any(one.get("B") != "0" for one in values):
            said.append(("TZN", f"zone {code} is for ground without product, and has a rate"))
    for value in task.iter("PDV"):
        counts = value.get("B", "")
        if value.get("A") not in (MASS_DDI, VOLUME_DDI):
            said.append(("PDV", f"`{value.get('A')}` is not a product rate entry"))
        if not (counts.isascii() and counts.isdigit() and len(counts) <= 10):
            said.append(("PDV", f"`{counts}` is not a rate"))
        elif int(counts) >= 2**31:
            said.append(("PDV", f"`{counts}` is larger than the format can hold"))
    if len({value.get("A") for value in task.iter("PDV")}) > 1:
        said.append(("PDV", "rates by mass and by volume in one task"))
    return said


def _shown_faults(root: ElementTree.Element) -> Said:
    """What a terminal shows for a rate: counts times scale must be the unit that is named."""
    per = {MASS_DDI: ("kg/ha", MASS_COUNTS), VOLUME_DDI: ("L/ha", VOLUME_COUNTS)}
    used = {(one.get("A", ""), one.get("E")) for one in root.iter("PDV")}
    said: Said = []
    for shown in root.findall("VPN"):
        for entry in sorted(entry for entry, name in used if name == shown.get("A")):
            unit, counts = per.get(entry, ("", 0.0))
            if unit and not (
                shown.get("E") == unit
                and shown.get("B") == "0"
                and _is_number(shown.get("C"), 1 / counts)
            ):
                what = f"rates of entry {entry} are not shown in {unit} by scale {shown.get('C')}"
                said.append(("VPN", what))
    return said


def _is_number(text: str | None, value: float) -> bool:
    try:
        return abs(float(text or "") / value - 1) < 1e-9
    except ValueError:
        return False


def _head_faults(root: ElementTree.Element) -> Said:
    said = [
        ("top", f"attribute {key} is missing") for key in HEAD if not root.get(key)
    ]  # fmt: skip
    if root.get("VersionMajor") not in ("3", "4"):
        said.append(("top", f"version `{root.get('VersionMajor')}` is neither 3 nor 4"))
    return said


def _polygon_faults(root: ElementTree.Element) -> Said:
    """Kinds of polygons and rings: boundary 1 or treatment zone 2; outer 1 or inner 2."""
    said: Said = []
    for holder, kind in (("PFD", "1"), ("TZN", "2")):
        for polygon in root.iterfind(f".//{holder}/PLN"):
            if polygon.get("A") != kind:
                said.append(("PLN", f"a {holder} has a polygon of type `{polygon.get('A')}`"))
            kinds = [ring.get("A") for ring in polygon.findall("LSG")]
            if "1" not in kinds or set(kinds) - {"1", "2"}:
                said.append(("PLN", "its rings are not one outer ring and inner ones"))
    return said
