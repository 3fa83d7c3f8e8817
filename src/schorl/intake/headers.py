"""Which column holds what, from headers as laboratories write them in several languages."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from schorl.intake.quantities import plain_words, unit_named

#: Words (after ``plain_words``) that name a property; the longest that fits wins.
WORDS: dict[str, tuple[str, ...]] = {
    "boron": (
        "b", "boron", "bor", "bore", "boro", "borium", "borio", "boor", "hwb", "hws b", "b hws",
        "hot water boron", "boron hot water", "available boron", "boron available", "avail b",
        "b avail", "extractable boron", "soil boron", "bore soluble", "boro disponible",
        "boro disponivel", "boro assimilabile", "pflanzenverfugbares bor", "b hw", "b ppm",
        "boron hws", "hw boron", "b2o3", "bor dostepny", "b mehlich3", "b m3", "b dtpa",
        "bor heisswasser", "bore eau bouillante", "boro agua caliente", "boro agua quente",
        "tillgangligt bor", "bortal", "bt",
    ),
    "organic_matter": (
        "om", "o.m.", "organic matter", "soil organic matter", "som", "humus", "humusgehalt",
        "matiere organique", "mo", "m.o.", "materia organica", "sostanza organica", "so",
        "organische stof", "organische substanz", "os", "mull", "mullhalt", "materia orgaanica",
        "substancja organiczna", "prochnica", "loi", "organic matter loi", "om loi", "loss on ignition",
        "gluhverlust", "perte au feu",
    ),
    "organic_carbon": (
        "oc", "toc", "soc", "organic carbon", "soil organic carbon", "total organic carbon",
        "corg", "c org", "org c", "organischer kohlenstoff", "carbone organique",
        "carbono organico", "carbonio organico", "organische koolstof", "organisk kol",
        "wegiel organiczny",
    ),
    "clay": (
        "clay", "clay content", "ton", "tongehalt", "argile", "argiles", "arcilla", "argila",
        "argilla", "klei", "lutum", "ler", "lerhalt", "il", "ilowa", "clay fraction",
    ),
    "sand": ("sand", "sandgehalt", "sable", "arena", "areia", "sabbia", "zand", "piasek"),
    "ph": ("ph", "soil ph", "ph h2o", "ph water", "ph cacl2", "ph kcl", "ph soil", "bodem ph",
           "ph wasser", "ph eau", "water ph", "ph 1 1"),
    "bulk_density": ("bd", "bulk density", "lagerungsdichte", "rohdichte", "densite apparente",
                     "densidad aparente", "densidade aparente", "bulkdichtheid"),
    "stones": ("stones", "steine", "skelett", "cailloux", "piedras", "stenen", "gravel"),
    "calcium": ("ca", "calcium", "kalzium", "calcio"),
    "total_boron": ("total boron", "boron total", "gesamtbor", "bore total", "boro total", "b total",
                    "total b"),
    "sample": ("sample", "sample id", "id", "sample no", "sample number", "lab no", "probe",
               "proben nr", "probennummer", "probe nr", "echantillon", "muestra", "amostra",
               "campione", "monster", "prov", "prove", "probka", "name", "point", "site", "nr",
               "no", "zone", "zone name", "sample name", "label", "station", "punkt", "numero"),
    "longitude": ("lon", "long", "longitude", "lng", "longitud", "laengengrad", "langengrad",
                  "lon wgs84"),
    "latitude": ("lat", "latitude", "latitud", "breitengrad", "lat wgs84"),
    "east": ("x", "east", "easting", "e", "rechtswert", "ostwert", "utm e", "utm east", "este",
             "x coord", "x m", "east m", "ost"),
    "north": ("y", "north", "northing", "n", "hochwert", "nordwert", "utm n", "utm north", "norte",
              "y coord", "y m", "north m", "nord"),
    "depth": ("depth", "depth cm", "tiefe", "profondeur", "profundidad", "profundidade",
              "profondita", "diepte", "djup", "glebokosc", "sampling depth", "sample depth",
              "horizon depth"),
    "cores": ("cores", "n cores", "number of cores", "einstiche", "carottes", "steken", "stick"),
    "analyte": ("analyte", "parameter", "element", "analysis", "test", "analyse", "parametro",
                "determination", "untersuchung"),
    "result": ("result", "value", "results", "wert", "ergebnis", "resultat", "valeur", "valor",
               "resultado", "waarde", "wynik", "messwert"),
    "unit": ("unit", "units", "einheit", "unite", "unidad", "unidade", "unita", "eenheid", "enhet"),
}  # fmt: skip

#: Words beside boron, also in brackets, that make it another test than available boron.
TOTAL = frozenset({"total", "gesamt", "totale", "gesamtgehalt", "aqua", "konigswasser"})

METHOD_WORDS = {
    "hot water": ("hot water", "hws", "hwb", "heisswasser", "eau bouillante", "agua caliente",
                  "agua quente", "acqua calda", "heet water", "hw boron", "b hw", "bortal"),
    "mehlich-3": ("mehlich-3", "mehlich 3", "mehlich3", "m3"),
    "mehlich-1": ("mehlich-1", "mehlich 1", "mehlich1"),
    "dtpa-sorbitol": ("sorbitol",),
    "cat": ("cat", "cacl2/dtpa", "cacl2-dtpa"),
}  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A recognised column."""

    place: int
    header: str
    what: str  # a key of WORDS
    unit: str | None  # as named in the header
    method: str | None
    oxide: bool  # B2O3
    depth: str | None  # "0-20" where the header says one


def recognise(headers: Sequence[str]) -> tuple[Column, ...]:
    """Recognise what can be; columns that mean nothing here are left out."""
    found = [_column(place, header) for place, header in enumerate(headers)]
    return tuple(one for one in found if one is not None)


def _column(place: int, header: str) -> Column | None:
    text = plain_words(header)
    if not text:
        return None
    unit = _unit_in(text)
    method = method_in(text)
    depth = _depth_in(text)
    name = _bare_name(text)
    what = None if re.match(r"Mo\b", header.strip()) else _meaning(name)  # molybdenum
    if what == "boron" and set(re.split(r"[\s()\[\]{},;:]+", text)) & TOTAL:
        what = "total_boron"
    if what is None:
        return None
    return Column(
        place=place,
        header=header.strip(),
        what=what,
        unit=unit,
        method=method,
        oxide="b2o3" in text,
        depth=depth,
    )


def method_in(text: str) -> str | None:
    """An extraction method named in words, or None."""
    padded = f" {re.sub(r'[()_,;:]', ' ', text)} "
    for method, words in METHOD_WORDS.items():
        if any(f" {word} " in padded for word in words):
            return method
    return None


def _unit_in(text: str) -> str | None:
    """A unit in brackets, or as the last word or words of a header."""
    for inside in re.findall(r"[(\[{]([^)\]}]*)[)\]}]", text):
        if unit := unit_named(inside):
            return unit
        for part in re.split(r"[,;]", inside):
            if unit := unit_named(part):
                return unit
    outside = re.sub(r"[(\[{][^)\]}]*[)\]}]", " ", text)
    words = re.split(r"[\s,;:]+", outside.strip())
    for count in (4, 3, 2, 1):
        if len(words) >= count and (unit := unit_named(" ".join(words[-count:]))):
            return unit
        if len(words) == 1:
            break
    if len(words) > 1 and words[0] == "%":
        return "%"
    return None


def _depth_in(text: str) -> str | None:
    match = re.search(r"(\d{1,3})\s*[-–]\s*(\d{1,3})\s*(cm|in)\b", text)
    return f"{match.group(1)}-{match.group(2)} {match.group(3)}" if match else None


def _bare_name(text: str) -> str:
    text = re.sub(r"[(\[{][^)\]}]*[)\]}]", " ", text)
    text = re.sub(r"\d{1,3}\s*[-–]\s*\d{1,3}\s*(cm|in)\b", " ", text)
    words = [one for one in re.split(r"[\s,;:]+", text.strip()) if one]
    for count in (4, 3, 2, 1):  # a unit at the end is not part of the name
        if len(words) > count and unit_named(" ".join(words[-count:])):
            words = words[:-count]
            break
    if len(words) > 1 and words[0] == "%":
        words = words[1:]
    return " ".join(words).strip(" .#")


def _meaning(name: str) -> str | None:
    candidates = {name, name.replace("-", " "), name.replace(".", " ").strip()}
    for what, words in WORDS.items():
        if candidates & set(words):
            return what
    reduced = re.sub(
        r"\b(hot water|heisswasser|mehlich[- ]?[13]|m3|dtpa|sorbitol|cat|extr\w*|avail\w*|soluble|"
        r"walkley black|loi|by ignition|soil|content|total fraction|pflanzenverfugbar\w*|disponi\w*|"
        r"assimil\w*|verfugbar\w*|tillgang\w*)\b",
        " ",
        name,
    )
    reduced = " ".join(reduced.split())
    if reduced and reduced != name:
        for what in ("boron", "organic_matter", "organic_carbon", "clay", "sand", "ph"):
            if reduced in WORDS[what]:
                return what
    return None
