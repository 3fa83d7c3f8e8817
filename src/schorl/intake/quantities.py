"""Numbers and units as laboratories write them."""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass

#: Oxide to element by mass: B in B2O3, from standard atomic weights (CIAAW 2021).
BORON_IN_B2O3 = 0.31056
#: Organic carbon to organic matter (58 % carbon, Van Bemmelen factor).
MATTER_PER_CARBON = 1.724
#: Laboratories print lb/acre as 2 x ppm (2,000,000 lb of soil) and kg/ha as 2.24 x ppm.
LB_ACRE_PER_PPM, KG_HA_PER_PPM = 2.0, 2.24
SLICE_CM = 17.0  # depth that the furrow slice stands for, about 6 2/3 in

CENSORED_WORDS = frozenset(
    {"nd", "n.d", "n.d.", "tr", "tr.", "trace", "traces", "bdl", "bld", "<lod", "<loq", "<dl", "nn"}
)
MISSING_WORDS = frozenset({"", "-", "--", "na", "n/a", "nan", "null", "none", ".", "x", "k.a."})


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """One cell as read: a value (None where missing), below a limit or not, its own unit."""

    value: float | None
    below: bool = False
    unit: str = ""
    bad: bool = False  # neither number nor a word that is known


def read_cell(text: str, *, decimal_comma: bool) -> Cell:
    """Read a cell such as ``0.61``, ``0,61``, ``<0.1``, ``ND``, ``0.6 ppm``.

    A word for "not detected" without a figure has value None and ``below`` true.
    """
    plain = text.replace("\u00a0", " ").replace("\u2212", "-").strip().strip("'").strip()
    low = plain.lower()
    if low in MISSING_WORDS:
        return Cell(value=None)
    if low in CENSORED_WORDS:
        return Cell(value=None, below=True)
    pattern = r"(<=|≤|<)?\s*([+-]?[\d.,]*\d(?:[eE][+-]?\d+)?)\s*([^\d\s<].*)?$"
    match = re.fullmatch(pattern, plain)
    if match is None:
        return Cell(value=None, bad=True)
    number = _number(match.group(2), decimal_comma=decimal_comma)
    unit = (match.group(3) or "").strip()
    if number is None or (unit and unit_named(unit) is None):
        return Cell(value=None, bad=True)
    return Cell(value=number, below=bool(match.group(1)), unit=unit)


def _number(text: str, *, decimal_comma: bool) -> float | None:
    if "," in text and "." in text:
        thousands = "." if text.rfind(",") > text.rfind(".") else ","
        text = text.replace(thousands, "")
        text = text.replace(",", ".")
    elif "," in text:
        if not decimal_comma:
            return None
        text = text.replace(",", ".")
    try:
        value = float(text)
    except ValueError:
        return None
    return value if abs(value) < 1e12 else None


#: A figure whose single comma or point may part thousands as well as decimals: 1,234 or 1.234.
EITHER_WAY = re.compile(r"[+-]?[1-9]\d{0,2}([.,])\d{3}")


def marks_of(text: str) -> tuple[str, str]:
    """Which mark of a figure surely parts decimals, and which surely thousands ("" where none)."""
    figure = _figure(text)
    commas, points = figure.count(","), figure.count(".")
    if EITHER_WAY.fullmatch(figure) or not commas + points:
        return "", ""
    if commas and points:
        decimal = max(",.", key=figure.rfind)
        return decimal, ",."[decimal == ","]
    mark = "," if commas else "."
    return (mark, "") if commas + points == 1 else ("", mark)


def either_way(text: str) -> str:
    """The mark of a figure such as 1,234 that may be read two ways; "" of all others."""
    found = EITHER_WAY.fullmatch(_figure(text))
    return found[1] if found else ""


def _figure(text: str) -> str:
    """The figure of a cell that holds one, without its sign of a limit and its unit; else ""."""
    plain = text.replace("\u2212", "-").strip()
    found = re.match(r"(?:<=|≤|<)?\s*([+-]?[\d.,]*\d)", plain)
    if found is None:
        return ""
    rest = plain[found.end() :].strip()
    return found[1] if not rest or unit_named(rest) else ""


def plain_words(text: str) -> str:
    """Lower case, without accents, separators as single spaces; units and signs kept."""
    text = text.replace("µ", "u").replace("μ", "u").replace("³", "3").replace("²", "2")
    text = unicodedata.normalize(
        "NFKD", text.replace("ß", "ss").replace("ø", "o").replace("ł", "l")
    )
    text = "".join(one for one in text if not unicodedata.combining(one)).lower()
    return " ".join(re.sub(r"[_\s]+", " ", text).split())


#: Spellings of units after ``plain_words`` and with blanks removed.
UNIT_SPELLINGS: dict[str, str] = {
    "ppm": "mg/kg", "mg/kg": "mg/kg", "mgkg-1": "mg/kg", "mg.kg-1": "mg/kg", "mgkg": "mg/kg",
    "ug/g": "mg/kg", "mcg/g": "mg/kg", "mg/kgts": "mg/kg", "mg/kgdm": "mg/kg", "mg/kgboden": "mg/kg",
    "ppb": "ug/kg", "ug/kg": "ug/kg", "mcg/kg": "ug/kg",
    "g/kg": "g/kg", "gkg-1": "g/kg", "g.kg-1": "g/kg",
    "mg/100g": "mg/100g", "mg/100gboden": "mg/100g",
    "mg/l": "mg/L", "mg/lsoil": "mg/L soil", "mg/lofsoil": "mg/L soil", "mg/lboden": "mg/L soil",
    "mg/lextract": "mg/L extract", "mg/dm3": "mg/L", "mgdm-3": "mg/L", "mg.dm-3": "mg/L",
    "mg/dm3soil": "mg/L soil",
    "lb/acre": "lb/acre", "lbs/acre": "lb/acre", "lb/ac": "lb/acre", "lbs/ac": "lb/acre",
    "lb/a": "lb/acre", "lbs/a": "lb/acre", "#/acre": "lb/acre", "#/ac": "lb/acre",
    "pounds/acre": "lb/acre", "lbperacre": "lb/acre", "lbsperacre": "lb/acre",
    "kg/ha": "kg/ha", "kgha-1": "kg/ha", "kg.ha-1": "kg/ha",
    "%": "%", "pct": "%", "percent": "%", "prozent": "%", "procent": "%", "por cento": "%",
    "%w/w": "%", "g/100g": "%", "dag/kg": "%",
    "g/cm3": "g/cm3", "gcm-3": "g/cm3", "kg/l": "g/cm3", "kg/dm3": "g/cm3", "t/m3": "g/cm3",
    "mg/m3": "g/cm3", "kg/m3": "kg/m3",
}  # fmt: skip


def unit_named(text: str) -> str | None:
    """The unit that a spelling means, or None."""
    bare = plain_words(text).strip(" .()[]{}").replace(" ", "")
    return UNIT_SPELLINGS.get(bare)


#: What each property's units are multiplied by to reach the unit it is held in.
FACTORS: dict[str, dict[str, float]] = {
    "boron": {
        "mg/kg": 1.0, "ug/kg": 1e-3, "g/kg": 1e3, "mg/100g": 10.0,
        "lb/acre": 1.0 / LB_ACRE_PER_PPM, "kg/ha": 1.0 / KG_HA_PER_PPM, "mg/L soil": 1.0,
    },
    "organic_matter": {"%": 1.0, "g/kg": 0.1},
    "clay": {"%": 1.0, "g/kg": 0.1},
    "sand": {"%": 1.0, "g/kg": 0.1},
    "stones": {"%": 1.0},
    "ph": {"": 1.0},
    "bulk_density": {"g/cm3": 1.0, "kg/m3": 1e-3},
    "calcium": {"mg/kg": 1.0, "g/kg": 1e3, "mg/100g": 10.0, "lb/acre": 0.5, "kg/ha": 1 / 2.24},
    "total_boron": {"mg/kg": 1.0, "ug/kg": 1e-3, "g/kg": 1e3},
}  # fmt: skip
