"""Rules of ISO 11783-10 task data that readers and even its schema let pass.

The schema is not at hand where a stick is checked, so what it would say of our few elements is
said here too: names, required and known attributes, references, codes, rings, numbers.
"""

from __future__ import annotations

import re
from pathlib import Path
from xml.etree import ElementTree

from schorl.formats.taskdata import MASS_DDI, MOST_CODES, VOLUME_DDI, XML_NAME

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
    for one in root.iter():
        said += _attribute_faults(one)
    said += _identifier_faults(root)
    tasks = root.findall("TSK")
    if len(tasks) != 1:
        said.append(("TSK", f"{len(tasks)} tasks; one is expected"))
    for task in tasks:
        said += _zone_code_faults(task)
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
        if not one.isdigit() or int(one) > MOST_CODES
    ]
    for key, words in (("H", "default"), ("I", "position lost"), ("J", "out of field")):
        if task.get(key) not in codes:
            said.append(("TSK", f"the {words} zone `{task.get(key)}` is not there"))
    if len(task.findall("GRD")) > 1:
        said.append(("GRD", "more than one grid in a task"))
    if task.findall("GRD") and any(zone.findall("PLN") for zone in task.findall("TZN")):
        said.append(("GRD", "polygons and a grid in one task"))
    for value in task.iter("PDV"):
        counts = value.get("B", "")
        if value.get("A") not in (MASS_DDI, VOLUME_DDI):
            said.append(("PDV", f"`{value.get('A')}` is not a product rate entry"))
        if not counts.isdigit() or int(counts) >= 2**31:
            said.append(("PDV", f"`{counts}` is not a rate"))
    return said
