"""Words for sediment to a texture class, and from there to log-ratio coordinates.

"muddy sand", "sand, slightly gravelly", "vase sableuse", "sM": nouns, adjectives and amounts are weighed, and Folk's
(1954) rules name the class. A word that is not in the vocabulary makes the text unknown (None): stiff clay, till or peat is
no mud, and a colour is no grain size. The weights are ours and only have to land inside the right class; the spread of that class, not the
weights, is what becomes of the words in `class_moments`.
"""

import re
import tomllib
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from importlib import resources
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt

from texture.composition.classes import classify
from texture.composition.closure import Array
from texture.composition.logratio import LogRatio
from texture.composition.schemes import find_scheme
from texture.errors import CompositionError

__all__ = ["DESCRIBER_VARIANCE", "Described", "class_moments", "languages", "read_words"]

DESCRIBER_VARIANCE = 0.25
"""Added to the spread of a class in each coordinate: describers disagree by about half a unit of log-ratio. An
assumption to be replaced by a calibration on measured samples wherever there are enough of them."""
OVERLOOKED_GRAVEL = 0.01
"""Gravel that a describer does not mention."""

_PARTS = ("mud", "sand", "gravel")
_NOUN, _LATER_NOUN, _ADJECTIVE, _VERY, _SLIGHT = 1.0, 0.8, 0.35, 0.7, 0.03
# Codes of sand, silt and clay classes that mean nothing else; "cS" is clayey sand to some, coarse sand to others.
_OTHER_CODES = {"zS": "mS", "sZ": "sM", "sC": "sM"}
_WORD = re.compile(r"[^\W\d_]+|&")
_ALLOWED = re.compile(r"[\w\s,.;:/+&'()-]*")


@dataclass(frozen=True)
class Described:
    """What a description says.

    Parameters
    ----------
    code : str
        Folk's class.
    language : str
        Of the vocabulary it was read with; "code" for an abbreviation.
    """

    code: str
    language: str


def languages() -> tuple[str, ...]:
    """Languages of the vocabulary, in the order they are tried."""
    return tuple(_vocabulary())


def read_words(text: str) -> Described | None:
    """Texture class of a description, or None where a word is unknown or languages disagree.

    Parameters
    ----------
    text : str
        Words in any order with adjectives, amounts and "with ..."; or a class code such as ``sM`` or ``(g)mS``, whose
        capitals matter.

    Examples
    --------
    >>> read_words("Fine sand with a little gravel")
    Described(code='(g)S', language='english')
    >>> read_words("vase sableuse").code
    'sM'
    >>> read_words("stiff clay") is None
    True
    """
    code = text.strip()
    if code in find_scheme("folk").codes:
        return Described(code, "code")
    if code in _OTHER_CODES:
        return Described(_OTHER_CODES[code], "code")
    plain = _plain(text)
    if not _ALLOWED.fullmatch(plain) or any(c.isdigit() for c in plain):
        return None
    found: Described | None = None
    for language, vocabulary in _vocabulary().items():
        weights = _weigh(plain, vocabulary)
        if weights is None:
            continue
        answer = str(classify(weights, "folk", trace=OVERLOOKED_GRAVEL))
        if found is None:
            found = Described(answer, language)
        elif found.code != answer:
            return None  # the same letters mean different things: no guess
    return found


def class_moments(codes: Sequence[str] | npt.NDArray[np.str_], logratio: LogRatio) -> tuple[Array, Array]:
    """Mean and covariance of log-ratio coordinates for Folk's classes.

    A described sample may lie anywhere in its class: the class is filled evenly in gravel and in sand : mud within each of Folk's
    bands (gravel below 1 % where none is mentioned), and `DESCRIBER_VARIANCE` is added.

    Parameters
    ----------
    codes : sequence of str, length n
        Folk's codes.
    logratio : LogRatio
        With the parts mud, sand, gravel, or finer ones that merge into them; what the class does not tell (clay against
        silt) is NaN.

    Returns
    -------
    mean : float array, shape (n, d)
    covariance : float array, shape (n, d, d)

    Raises
    ------
    CompositionError
        For a code that is not Folk's, or parts that the classes say nothing about.
    """
    kinds, place = np.unique(np.asarray(codes, dtype=np.str_), return_inverse=True)
    unknown = [str(code) for code in kinds if code not in find_scheme("folk").codes]
    if unknown:
        raise CompositionError(f"class {unknown[0]!r}, expected one of {', '.join(find_scheme('folk').codes)}")
    find_scheme("folk").mixing(logratio.parts)
    mean = np.empty((len(kinds), logratio.n_coordinates))
    covariance = np.empty((len(kinds), logratio.n_coordinates, logratio.n_coordinates))
    for k, code in enumerate(kinds):
        mean[k], covariance[k] = _one_class(str(code), logratio)
    return mean[place], covariance[place]


@cache
def _one_class(code: str, logratio: LogRatio) -> tuple[Array, Array]:
    fractions, codes = _filled_classes()
    inside = fractions[codes == code]
    columns = [inside[:, _PARTS.index(p)] if p in _PARTS else np.full(len(inside), np.nan) for p in logratio.parts]
    coords = logratio.forward(np.column_stack(columns))
    d = logratio.n_coordinates
    mean = np.full(d, np.nan)
    covariance = np.full((d, d), np.nan)
    for i in range(d):
        for j in range(i + 1):
            both = ~np.isnan(coords[:, i]) & ~np.isnan(coords[:, j])
            # A coordinate that most of the class leaves unknown (gravel : sand of mud) is unknown.
            if both.mean() > 0.5:
                covariance[i, j] = covariance[j, i] = np.cov(coords[both, i], coords[both, j])[0, 1]
                if i == j:
                    mean[i] = coords[both, i].mean()
                    covariance[i, i] += DESCRIBER_VARIANCE
    return mean, covariance


@cache
def _filled_classes() -> tuple[Array, npt.NDArray[np.str_]]:
    """Fractions (mud, sand, gravel) that fill every class, and their codes."""
    steps = (np.arange(24) + 0.5) / 24
    gravel_limits = (0.0, OVERLOOKED_GRAVEL, 0.05, 0.30, 0.80, 1.0)
    sand_limits = (0.0, 0.1, 0.5, 0.9, 1.0)  # of sand and mud together
    gravel = np.concatenate([lo + (hi - lo) * steps for lo, hi in pairwise(gravel_limits)])
    share = np.concatenate([lo + (hi - lo) * steps for lo, hi in pairwise(sand_limits)])
    g, s = (a.ravel() for a in np.meshgrid(gravel, share))
    fractions = np.column_stack([(1 - g) * (1 - s), (1 - g) * s, g])
    return fractions, classify(fractions, "folk", trace=OVERLOOKED_GRAVEL)


@cache
def _vocabulary() -> Mapping[str, Mapping[str, tuple[str, str]]]:
    """For each language: word to (role, part)."""
    text = (resources.files("texture.composition") / "tables" / "words.toml").read_text(encoding="utf-8")
    out: dict[str, dict[str, tuple[str, str]]] = {}
    for language, table in tomllib.loads(text).items():
        words: dict[str, tuple[str, str]] = {}
        entries: dict[str, Any] = dict(table)
        for role in ("nouns", "adjectives"):
            for part, forms in entries.pop(role).items():
                words.update(dict.fromkeys(forms, (role, part)))
        for role, forms in entries.items():
            words.update(dict.fromkeys(forms, (role, "")))
        out[language] = words
    return out


def _plain(text: str) -> str:
    """Small letters without accents."""
    return "".join(c for c in unicodedata.normalize("NFKD", text.casefold()) if not unicodedata.combining(c))


def _weigh(text: str, vocabulary: Mapping[str, tuple[str, str]]) -> Array | None:
    """Weights of mud, sand, gravel; None for an unknown word, no noun, or nouns side by side without a link."""
    weights = dict.fromkeys(_PARTS, 0.0)
    nouns = 0
    amount: str | None = None  # "slightly" or "very", waiting for its word
    with_before = False  # whether "with" governs what follows
    linked = True  # whether another noun may follow
    for token in re.findall(r"[^\W\d_]+|[&,;/+]", text):
        if token in ",;/+":
            linked, amount = True, None
            continue
        role, part = vocabulary.get(token, ("unknown", ""))
        match role:
            case "unknown":
                return None
            case "nouns":
                if with_before or amount == "slightly":
                    share = _SLIGHT if amount == "slightly" else _ADJECTIVE
                elif not linked:
                    return None
                else:
                    share = _NOUN if nouns == 0 else _LATER_NOUN
                    nouns += 1
                weights[part] += share
                amount, linked = None, False
            case "adjectives":
                weights[part] += {"slightly": _SLIGHT, "very": _VERY}.get(amount or "", _ADJECTIVE)
                amount = None
            case "slightly" | "very":
                amount = amount if amount == "slightly" else role
            case "with" | "some":
                with_before = True
            case "and":
                linked = True
            case "aside":
                amount = None
    return np.array([weights[p] for p in _PARTS]) if nouns else None
