"""File names, titles and labels made of names from outside."""

import unicodedata

from hypothesis import given
from hypothesis import strategies as st

from portfolio.publishing import names

anything = st.text(max_size=400)
DEVICES = {"con", "prn", "aux", "nul", *(f"{port}{i}" for port in ("com", "lpt") for i in range(1, 10))}
"File names that Windows reserves, with any ending (from memory)."


@given(anything)
def test_a_page_name_is_short_lower_case_and_safe_on_every_file_system(name):
    page = names.page(name)
    stem = page.removesuffix(".html")
    assert page.endswith(".html") and len(stem) <= 51
    assert set(stem) <= set("abcdefghijklmnopqrstuvwxyz0123456789-") and stem not in DEVICES


def test_a_page_name_says_what_it_is_about():
    assert names.page("H156 journal Ø 19,5").startswith("h156-journal-19-5-")


def test_a_page_name_stays_the_same_from_run_to_run():
    """Links in mails and minutes must survive: the hash is the first six digits of SHA-256 (here of 'abc', FIPS 180-4)."""
    assert names.page("abc") == "abc-ba7816.html"


@given(anything, anything)
def test_two_names_that_look_alike_have_two_pages(one, other):
    assert (names.page(one) == names.page(other)) == (one == other)


def test_thousands_of_names_without_a_latin_letter_do_not_meet():
    many = ["".join(chr(0x4E00 + (i * k) % 20_000) for k in (7, 11, 13)) for i in range(20_000)]
    assert len({names.page(name) for name in many}) == len(set(many)) == 20_000


@given(anything)
def test_a_title_has_no_control_characters_and_no_marks_that_turn_text(name):
    for text in (names.plain(name), names.short(name, 30)):
        assert not any(unicodedata.category(letter)[0] == "C" for letter in text)
        assert unicodedata.bidirectional(text[-1:] or "a") not in ("RLO", "LRO", "RLE", "LRE", "PDF", "RLI", "LRI")
    assert len(names.short(name, 30)) <= 30


def test_letters_of_other_scripts_stay_as_they_are():
    assert names.plain("\u202egnp.exe קוטר 🔩 µm") == "gnp.exe קוטר 🔩 µm"


def test_a_long_title_is_cut_where_it_shows():
    assert names.short("x" * 80, 60) == "x" * 59 + "…"
