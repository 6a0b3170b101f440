"""Words that tell of a bottom from which no sediment came: rock, stones, a grab that failed."""

from __future__ import annotations

import re

__all__ = ["is_hard_ground", "is_substrate", "is_total"]

# A grab that comes up empty says "hard" whatever else is noted.
_SURE = re.compile(
    r"\b(no recovery|nil recovery|no penetration|(grab|corer?|gravity corer?) (failed|empty|refused)|failed (grab|core)|empty (grab|corer?)|bare rock|bed ?rock|rock(y)? (outcrop|bottom|ground|reef)|"
    r"hard ?(ground|bottom|substrate|substratum|seabed)|sin recuperacion|sin recuperación|sem recuperacao|sem recuperação|sans recuperation|sans récupération|kein(e)? (probe|material)|geen monster|harter (grund|boden)|"
    r"fond dur|fondo duro|fundo duro|harde bodem)\b",
    re.I,
)
_ROCK = re.compile(
    r"\b(rocks?|rocky|stones?|boulders?|cobbles?|reefs?|coral reef|roca|rocas|roche|roches|rocher|rocha|rochas|roccia|rocce|fels|felsen|steine?|stenen|rots|rotsen|blocks?|bloques|"
    r"piedras?|pierres?|pedras?|arrecife|récif|recif|scogli)\b",
    re.I,
)
_SEDIMENT = re.compile(
    r"mud|silt|clay|sand|gravel|shell|ooze|fango|lodo|limo|arcilla|arena|grava|concha|vase|boue|sable|gravier|coquill|schlick|schlamm|ton\b|kies|muschel|slib|klei|zand|grind|schelp|"
    r"lama|argila|areia|cascalho|argilla|sabbia|ghiaia|conchigli",
    re.I,
)
_SUBSTRATE = re.compile(
    r"\b(stiff|hard|firm|consolidated) (clay|mud)\b|\b(till|boulder clay|peat|chalk|marl|mudstone|turba|craie|torf|kreide|veen|krijt)\b",
    re.I,
)
_TOTAL = re.compile(
    r"^(grand )?(totals?|sums?|means?|averages?|avg|max(imum)?|min(imum)?|median|std( ?dev)?|st\.? ?dev\.?|count|n ?=|media|promedio|moyenne|mittel(wert)?|summe|somme|gemiddelde|totaal|totale|totais)\b",
    re.I,
)


def is_hard_ground(text: str) -> bool:
    """Whether a remark tells of rock, stones or an empty grab, and of no sediment.

    >>> [is_hard_ground(t) for t in ("no recovery, rock", "stones", "sand with stones", "grab failed twice", "muddy sand")]
    [True, True, False, True, False]
    """
    return bool(_SURE.search(text)) or (bool(_ROCK.search(text)) and not _SEDIMENT.search(text))


def is_substrate(text: str) -> bool:
    """Whether a description names old, consolidated ground, which is no mud however fine it is.

    >>> [is_substrate(t) for t in ("stiff clay", "peat", "soft clay")]
    [True, True, False]
    """
    return bool(_SUBSTRATE.search(text))


def is_total(text: str) -> bool:
    """Whether the first words of a line say that it sums up the lines above.

    >>> [is_total(t) for t in ("Mean", "Total (n = 12)", "Meander Bank 3")]
    [True, True, False]
    """
    return bool(_TOTAL.match(text.strip()))
