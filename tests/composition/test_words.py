import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.composition import LogRatio, classify, find_scheme
from texture.composition.words import class_moments, languages, read_words
from texture.errors import CompositionError


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("mud", "M"),
        ("Sandy mud", "sM"),
        ("MUDDY SAND", "mS"),
        ("sand", "S"),
        ("slightly gravelly mud", "(g)M"),
        ("slightly gravelly sandy mud", "(g)sM"),
        ("slightly gravelly muddy sand", "(g)mS"),
        ("slightly gravelly sand", "(g)S"),
        ("gravelly mud", "gM"),
        ("gravelly muddy sand", "gmS"),
        ("gravelly sand", "gS"),
        ("muddy gravel", "mG"),
        ("muddy sandy gravel", "msG"),
        ("sandy gravel", "sG"),
        ("gravel", "G"),
    ],
)
def test_the_names_of_folks_classes_are_read_back(text, code):
    # Folk (1954): the names of the classes themselves.
    assert read_words(text).code == code
    assert dict(zip(find_scheme("folk").words, find_scheme("folk").codes, strict=True))[text.lower()] == code


# Common practice, no source: how describers write.
@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("shelly gravel", "G"),
        ("fine sand with mud", "mS"),
        ("fine sand with a little gravel", "(g)S"),
        ("very fine grey silty sand", "mS"),
        ("sand, gravelly, slightly muddy", "gS"),
        ("mud and sand", "sM"),
        ("sand and mud", "mS"),
        ("sand & gravel", "sG"),
        ("mud/sand", "sM"),
        ("Silty clay", "M"),
        ("clayey fine sand with shell fragments", "mS"),
        ("mud, sand and gravel", "mG"),  # the first named is the most
        ("sand, mud and gravel", "msG"),
        ("pebbly sand", "gS"),
        ("sM", "sM"),
        ("(g)mS", "(g)mS"),
        ("zS", "mS"),
        ("arena fangosa", "mS"),
        ("Arena fina con grava", "gS"),
        ("fango ligeramente arenoso", "M"),
        ("areia lamosa", "mS"),
        ("lodo arenoso", "sM"),
        ("cascalho com areia", "sG"),
        ("vase sableuse", "sM"),
        ("sable légèrement graveleux", "(g)S"),
        ("sable fin à moyen", "S"),  # "à" links sizes here, parts elsewhere
        ("sablo-vaseux", "mS"),
        ("graviers et sables", "sG"),
        ("schlickiger Sand", "mS"),
        ("Feinsand, schwach kiesig", "(g)S"),
        ("sandiger Schlick mit Schill", "sM"),
        ("Kies und Sand", "sG"),
        ("sabbia limosa", "mS"),
        ("ghiaia sabbiosa", "sG"),
        ("fango con sabbia", "sM"),
        ("slibrijk zand", "mS"),
        ("zandig grind", "sG"),
        ("fijn zand met een beetje slib", "S"),
    ],
)
def test_descriptions(text, code):
    assert read_words(text).code == code


@pytest.mark.parametrize(
    "text",
    [
        "stiff clay",
        "till",
        "peat over sand",
        "sand?",
        "sand or mud",
        "sand without mud",
        "no gravel",
        "rock",
        "muddy",
        "shell",
        "sand mud",
        "cS",  # clayey sand to some, coarse sand to others
        "Sand 50",
        "",
        "fine",
        "sandy",
    ],
)
def test_what_is_not_understood_is_never_guessed(text):
    assert read_words(text) is None


def test_languages_come_in_their_order():
    assert languages() == ("english", "spanish", "portuguese", "french", "german", "italian", "dutch")


@given(st.text(max_size=30))
def test_any_text_is_a_class_or_nothing(text):
    read = read_words(text)
    assert read is None or read.code in find_scheme("folk").codes


@given(st.permutations(["sand", "muddy", "gravelly", "fine", "grey"]))
def test_word_order_does_not_matter(words):
    assert read_words(" ".join(words)).code == "gmS"


def test_the_centre_of_every_class_lies_in_it():
    lr = LogRatio(["mud", "sand", "gravel"])
    codes = find_scheme("folk").codes
    mean, covariance = class_moments(codes, lr)
    for code, m, c in zip(codes, mean, covariance, strict=True):
        known = ~np.isnan(m)
        assert known[0]
        assert (np.linalg.eigvalsh(c[np.ix_(known, known)]) > 0.2).all()
        if known.all():
            assert classify(lr.inverse(m), trace=0.01) == code
    assert np.isnan(class_moments(["M"], lr)[0][0, 1]) or mean[codes.index("M"), 1] < 0


def test_muddy_sand_by_hand():
    # Mud is 10 to 50 % of mud and sand, evenly, with gravel up to 1 %: the mean of its logit by numerical integration.
    mean, covariance = class_moments(["mS"], LogRatio(["mud", "sand", "gravel"]))
    share = np.linspace(0.1, 0.5, 200_001)
    logit = np.log(share / (1 - share))
    assert mean[0, 0] == pytest.approx(logit.mean(), abs=0.02)
    assert covariance[0, 0, 0] == pytest.approx(logit.var() + 0.25, abs=0.02)


def test_finer_parts_stay_unknown():
    mean, _ = class_moments(["mS", "sG"], LogRatio(["clay", "silt", "sand", "gravel"]))
    assert np.isnan(mean[:, 1]).all()
    assert np.isfinite(mean[:, [0, 2]]).all()


def test_a_class_of_another_scheme_is_refused():
    with pytest.raises(CompositionError, match="class 'xS', expected one of G, sG"):
        class_moments(["xS"], LogRatio(["mud", "sand", "gravel"]))
