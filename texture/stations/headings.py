"""What column headings are called: the vocabulary by which a heading is recognised, in six languages.

Words are matched on a heading made plain (`plain`): lower case, without accents, brackets and most
punctuation. A weight of 3 is a heading's proper name, 2 a good sign, 1 a hint that anything better beats.
"""

from __future__ import annotations

import functools
import re
import unicodedata
from collections.abc import Iterable

__all__ = ["PARTS", "is_tare", "is_unit", "is_weight", "plain", "role_of", "roles_in", "unit_in"]

PARTS = ("mud", "sand", "gravel", "silt", "clay")

_SUBCLASS = (
    r"(very|v|vf|vc|fine|medium|med|coarse|coarser|fina|fino|media|medio|gruesa|fin|moyen|grossier|fein|mittel|grob)"
)
_UNDER_63 = r"(<|under|less than|finer than|passing|below|sub|kleiner|inferieur a|menor que)\s*(0\.06\d*\s*mm|6[0-9](\.\d+)?\s*(um|micron|microns|micrometer|mu)?|1/16\s*mm|4\s*phi)"
_OVER_2 = r"(>|over|more than|coarser than|retained|above|groesser|superieur a|mayor que)\s*(2(\.0+)?\s*mm|2000\s*um|-1\s*phi)"

# role, weight, pattern; read from the top, the heaviest match wins, the first on a tie
_PATTERNS: tuple[tuple[str, int, str], ...] = (
    ("latitude_minutes", 4, r"\blat\w*\b.*\bmin(utes?|uten|utos?)?\b(?!.*\bdeg)"),
    ("longitude_minutes", 4, r"\blon\w*\b.*\bmin(utes?|uten|utos?)?\b(?!.*\bdeg)"),
    ("latitude_seconds", 4, r"\blat\w*\b.*\bsec(onds?)?\b(?!.*\bdeg)"),
    ("longitude_seconds", 4, r"\blon\w*\b.*\bsec(onds?)?\b(?!.*\bdeg)"),
    ("latitude_hemisphere", 4, r"\blat\w*\b.*\b(hemisphere|hem|dir|direction|n/s|ns)\b|^n ?/ ?s$"),
    ("longitude_hemisphere", 4, r"\blon\w*\b.*\b(hemisphere|hem|dir|direction|e/w|ew)\b|^[ew] ?/ ?[ew]$"),
    ("position", 4, r"\blat\w*\b.*\b(lon|long|longitude|lng)\b|\blon\w*\b.*\b(lat|latitude)\b"),
    ("latitude", 3, r"\blat(itude|itud|itudine)?s?\b|\bbreite(ngrad)?\b|\bgeogr\w* breite\b|\bbreedte(graad)?\b"),
    ("longitude", 3, r"\b(lon|long|lng)(itude|gitude|gitud|itud)?s?\b|\blongitudine\b|\bla(e)?nge(ngrad)?\b|\blengte(graad)?\b"),
    ("easting", 3, r"\beastings?\b|\brechtswert\b|\b(utm|coord\w*|koord\w*) ?[xe]\b|\b[xe] ?(utm|coord\w*|koord\w*)\b|^x( m)?$"),
    ("northing", 3, r"\bnorthings?\b|\bhochwert\b|\b(utm|coord\w*|koord\w*) ?[yn]\b|\b[yn] ?(utm|coord\w*|koord\w*)\b|^y( m)?$"),
    ("easting", 1, r"^(e|east|este|est|ost)( m)?$"),
    ("northing", 1, r"^(n|north|norte|nord|noord)( m)?$"),
    ("zone", 3, r"\b(utm )?(zone|zona|huso|fuseau|fuso)\b"),
    ("position", 2, r"^(position|positions|coordinates|coords|coordenadas|posicion|posicao|posizione|koordinaten|coordinaten|coordonnees|positie)$"),
    ("sample_interval", 4, r"\b(sample|core|sediment|depth)\b.*\b(interval|range|slice|section)\b|^interval\b|\bhorizon(te)?\b"),
    ("sample_top", 4, r"\b(sample|core|sediment|section|interval|depth|layer|horizon|cm|slice)\b.*\b(top|from|start|upper)\b|^(top|from|upper|von|desde|de)\b.*\b(cm|depth|m|core|tiefe)\b|\b(top|upper) (of )?(sample|section|core|interval|depth|slice)\b"),
    ("sample_bottom", 4, r"\b(sample|core|sediment|section|interval|depth|layer|horizon|cm|slice)\b.*\b(bottom|base|to|end|lower)\b|^(bottom|base|to|lower|bis|hasta)\b.*\b(cm|mm|core|tiefe)\b|^lower depth\b|\b(bottom|base|lower) (of )?(sample|section|core|interval|slice)\b"),
    ("depth", 3, r"\b(water|sea|bottom|station|sounding) ?depth\b|\bdepth\b.*\b(water|below sea|msl|bsl|chart)\b|\bwassertiefe\b|\bwaterdiepte\b|\bprofondeur d eau\b"),
    ("depth", 2, r"^depth\b|\bdepths?$|\b(profundidad|profundidade|profondeur|profondita|tiefe|diepte|sonda|bathymetry|sounding)\b|^prof( d)?( agua| eau)?( m)?$"),
    ("survey", 3, r"\b(survey|cruise|campaign|expedition|voyage|campana|campanha|campagne|kampagne|kampanje|crociera|campagna|ausfahrt|reise|mission)\b"),
    ("date", 3, r"\b(date|datum|fecha|jour|dia|sampled on|collected on|sampling day|sampling date)\b"),
    ("date", 2, r"^(data|year|jahr|annee|ano|anno|jaar|day)$"),
    ("replicate", 3, r"\b(replicate|replicates|rep|repeat|replica|replikat|duplicate)\b( ?(no|nr|number))?$"),
    ("method", 3, r"^(method|methode|metodo|analysis|technique|instrument)\b|\b(analysis|grain ?size|lab) method\b"),
    ("id", 3, r"\b(sample|station|stn|site|grab|core|location|lab|probe|proben|monster|muestra|echantillon|amostra|campione|punto|punkt)\b ?\b(id|no|nr|num|number|nummer|code|name|label|ref|reference|numero|codigo|codice)\b"),
    ("id", 3, r"^(sample|station|stations|stn|st|site|grab|sample id|id|probe|probennummer|estacion|muestra|echantillon|station|amostra|estacao|campione|stazione|monster|locatie|standort|messstelle|stationsnummer|monsternummer)$"),
    ("id", 2, r"\b(id|code|label|ref|reference)$|^(no|nr|number|name|nummer|numero|num|code|codigo|codice)$|^(codice|codigo|code) (campione|stazione|amostra|estacao|estacion|muestra|echantillon)$"),
    ("split_factor", 3, r"(\bsplit(s|ting|ter)?\b|\bsub ?sampl\w* (factor|ratio|fraction)\b)(?!.*\b(g|gr|grams?|weight|wt)\b)"),
    ("median_size", 3, r"^(?!.*\b(sand|mud|gravel|silt|clay|fraction|depth)\b).*(\bmedian[ae]?\b|\bmedianwert\b|\bd ?50\b|\bd ?0\.5\b|^md( phi| mm| um)?$|^mdphi$)"),
    ("median_size", 2, r"^(?!.*\b(sand|mud|gravel|silt|clay|fraction|depth)\b).*(\bmean (grain |particle |sediment )?(size|diameter)\b|^mz\b)"),
    ("mud", 3, r"\bmud\b|\bfines\b|\bfangos?\b|\blodos?\b|\bvases?\b|\bschlamm\b|\bschlick\b|\bslib\b|\blama\b|\bboues?\b|\bpelit[ae]s?\b|\bfinos\b|\bfango\b|\bpelitic\b"),
    ("mud", 3, r"\bsilt\b\s*(\+|&|and|und|et|y|e|en|/|)\s*\bclay\b|\bclay\b\s*(\+|&|and|/|)\s*\bsilt\b|\bschluff\b.*\bton\b|\bton\b.*\bschluff\b|\blimos?\b.*\barcillas?\b|\blimons?\b.*\bargiles?\b"),
    ("mud", 2, r"^(% ?|fraction |part )?" + _UNDER_63 + r"( ?%| ?g| fraction| percent)?$"),
    ("sand", 3, r"\bsands?\b|\barenas?\b|\bareias?\b|\bsables?\b|\bsabbi[ae]\b|\bzand\b"),
    ("sand", 2, r"^(0\.06\d*|6[0-9](\.\d+)?)\s*(mm|um)?\s*(-|to|–)\s*(2|2000|2\.0)\s*(mm|um)( ?%)?$"),
    ("gravel", 3, r"\bgravels?\b|\bgravas?\b|\bgraviers?\b|\bkies\b|\bghiai[ae]\b|\bcascalhos?\b|\bgrind\b|\bgrus\b"),
    ("gravel", 2, r"^(% ?|fraction |part )?" + _OVER_2 + r"( ?%| ?g| fraction| percent)?$"),
    ("silt", 3, r"\bsilts?\b|\blimos?\b|\blimons?\b|\bschluff\b|\bsilte\b"),
    ("clay", 3, r"\bclays?\b|\barcillas?\b|\bargiles?\b|\bton\b|\bargill[ae]\b|\bklei\b|\bargilas?\b|\blutum\b"),
    ("description", 3, r"\b(description|sediment type|bottom type|seabed type|nature of (the )?(bottom|seabed)|lithology|descripcion|beschreibung|omschrijving|descrizione|descricao|bodenart|litologia|lithologie|bodemsoort|sedimenttyp|tipo de sedimento)\b"),
    ("description", 2, r"^(sediment|bottom|seabed|folk class|folk|texture|texture class|class|type|sediment class|sedimento|fond|grund|bodem)$"),
    ("remarks", 3, r"\b(remarks?|comments?|notes?|observaciones|observacoes|remarques?|bemerkung(en)?|opmerking(en)?|osservazioni|notas?|anmerkung(en)?|observations?)\b"),
)  # fmt: skip
_COMPILED = tuple((role, weight, re.compile(pattern)) for role, weight, pattern in _PATTERNS)

_SAND_SUBCLASS = re.compile(
    rf"\b{_SUBCLASS}\w*\s+(sands?|gravels?|silts?|clays?|zand|kies)\b|\b(arena|areia|sable|sabbia)s?\s+{_SUBCLASS}|\b(fein|mittel|grob)(sand|kies|schluff)\b"
)
# "63-250 um % of sand"; but "percent of sand" is the sand
_SIZE_OF_PART = re.compile(
    r"\d.*\b(of|von|van|de|del|du|di|da) (the |total |la |le )?(sand|gravel|mud|arena|sable|sabbia|areia|zand)\b"
)
# Quantities that are named after a part but are not its share
_NOT_A_SHARE = re.compile(
    r"\b(median|mean|mode|d50|d ?\d\d|mz|sorting|skew\w*|kurt\w*|ratio|class|type|sd|std|error|uncertainty|flag|carbonate|organic|toc|loi|colou?r|temperature|ph|strength|density|moisture|porosity|water content)\b|:"
)

_UNITS: tuple[tuple[str, str], ...] = (
    ("percent", r"%|\b(percent|per cent|pct|prozent|por ?ciento|pourcent|procent|wt ?%|mass ?%)\b"),
    ("permille", r"‰|\b(permille|ppt|per mille|g/kg)\b"),
    ("phi", r"\bphi\b"),
    ("um", r"\b(um|micron|microns|micrometers?)\b"),
    ("mm", r"\bmm\b"),
    ("cm", r"\bcm\b"),
    ("ft", r"\b(ft|feet|foot)\b"),
    ("fathom", r"\b(fm|fathoms?|fms)\b"),
    ("m", r"\b(m|metres?|meters?|metros?|metri)\b"),
    ("g", r"\b(g|gr|grams?|gram|gramos|grammes|weight|wt|mass)\b"),
    ("degree", r"°|\b(deg|degrees?|dd|ddm|dms|decimal degrees?|grad|grados|degres)\b"),
    ("fraction", r"\b(fraction|frac|fractions|proportion|share|anteil|0-1)\b"),
)  # fmt: skip
_UNIT_PATTERNS = tuple((unit, re.compile(pattern)) for unit, pattern in _UNITS)
_UNIT_WORDS = re.compile(
    r"(%|‰|-|\[?-?\]?|wt ?%|°( ?['′]? ?(n|s|e|w)?)?|(dry )?(weight|wt|mass)( ?%| percent)?|percent|fraction|frac|deg(rees?)?( ?(n|s|e|w|min|dec\w*|north|east|south|west))*"
    r"|d{2,3}[ °]?m{0,2}([.,]m+)?['′]?( ?[nsew/]+)?|ddm|dms|dd|decimal degrees?|m|cm|mm|um|ft|fm|g|gr|phi|m\^?2|psu|yyyy\S*|dd\S*yy\S*|text|iso|utc|no unit|none|metres?|meters?|degrees?( and)? ?(decimal )?minutes|"
    r"m (below|above|bsl|msl|chart)\b.*|m \w{2,4})"
)


@functools.lru_cache(maxsize=4096)
def plain(heading: str) -> str:
    """Return a heading in lower case without accents, brackets and idle punctuation.

    >>> plain("Länge (°E)"), plain("< 63 µm, %"), plain("Sand_Fraction")
    ('lange e', '< 63 um %', 'sand fraction')
    """
    text = re.sub(r"(?<=[a-z])(?=[A-Z][a-zA-Z])", " ", heading).casefold()  # SampleID, DecLat
    for old, new in (("µ", "u"), ("μ", "u"), ("φ", " phi "), ("ϕ", " phi "), ("ø", " phi "), ("ß", "ss"), ("−", "-")):
        text = text.replace(old, new)
    text = "".join(c for c in unicodedata.normalize("NFKD", text) if not unicodedata.combining(c))
    text = re.sub(r"[_\s()\[\]{}:;\"'’′″°º*#?!|=]+", " ", text)
    text = re.sub(r"(?<!\d)[.,]|[.,](?!\d)", " ", text)
    text = re.sub(r"(?<=[a-z])-(?=[a-z])", " ", text)
    return " ".join(text.split())


@functools.lru_cache(maxsize=4096)
def role_of(heading: str) -> tuple[str, int] | None:
    """Return the role that a heading names and how plainly (1 hint … 4 unmistakable), or None.

    Quantities that merely carry a part's name (median of the sand, fine sand, mud colour) have no role.

    >>> role_of("Lat (DDM)"), role_of("Arena %"), role_of("very fine sand"), role_of("Silt + clay (%)")
    (('latitude', 3), ('sand', 3), None, ('mud', 3))
    """
    text = plain(heading)
    if not text:
        return None
    best: tuple[str, int] | None = None
    for role, weight, pattern in _COMPILED:
        if (best is None or weight > best[1]) and pattern.search(text):
            best = (role, weight)
    other = (_SAND_SUBCLASS, _NOT_A_SHARE, _SIZE_OF_PART)
    if best is not None and best[0] in PARTS and any(pattern.search(text) for pattern in other):
        return None
    return best


def roles_in(row: Iterable[object]) -> set[str]:
    """Return the distinct roles named in one row of cells."""
    found = (role_of(cell) for cell in row if isinstance(cell, str) and 0 < len(cell) <= 80)
    return {role[0] for role in found if role is not None}


@functools.lru_cache(maxsize=4096)
def unit_in(text: str) -> str | None:
    """Return the unit named in a heading or units cell, or None.

    >>> unit_in("Mud (%)"), unit_in("depth [m]"), unit_in("Lat"), unit_in("fraction of 1")
    ('percent', 'm', None, 'fraction')
    """
    low = " ".join(text.casefold().replace("µ", "u").replace("μ", "u").replace("_", " ").split())
    for unit, pattern in _UNIT_PATTERNS:
        if pattern.search(low):
            return unit
    return None


def is_weight(heading: str) -> bool:
    """Whether a heading says that its column was weighed, in grams, whatever other unit it names.

    >>> is_weight(">2 mm (g)"), is_weight("weight %"), is_weight("63-125 µm")
    (True, False, False)
    """
    return bool(re.search(r"\b(g|gr|grams?|weights?|wt)\b", plain(heading))) and unit_in(heading) != "percent"


def is_tare(heading: str) -> bool:
    """Whether a heading names the weight of an empty vessel.

    >>> is_tare("Tare (g)"), is_tare("Sand, empty dish"), is_tare("Sand gross (g)")
    (True, True, False)
    """
    return bool(re.search(r"\b(tare|tara|empty|dish|beaker|container|vessel)\b", plain(heading)))


def is_unit(cell: object) -> bool:
    """Whether a cell below a heading merely tells its unit.

    >>> [is_unit(c) for c in ("%", "(%)", "dd mm.mmm N", "m", "mud", "12.5")]
    [True, True, True, True, False, False]
    """
    if not isinstance(cell, str):
        return False
    text = cell.strip().casefold().replace("µ", "u").replace("μ", "u").strip("()[] ")
    return bool(_UNIT_WORDS.fullmatch(text)) if text else False
