"""How numbers, units and dates are written."""

import math

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from portfolio.publishing.numbers import MINUS, SPACE, THIN, Numbers, missing

N = Numbers()
SUPERSCRIPTS = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")


def read_back(text: str) -> float:
    """A written number as a float again."""
    mantissa, _, power = text.replace(MINUS, "-").replace(THIN, "").partition("·10")
    return float(mantissa) * 10.0 ** int(power.translate(SUPERSCRIPTS) or 0)


@pytest.mark.parametrize("empty", [None, float("nan"), pd.NaT, pd.NA, ""])
def test_what_is_missing_is_a_dash_and_never_a_number(empty):
    assert missing(empty)
    for written in (N.fixed(empty, 2), N.index(empty), N.value(empty), N.quantity(empty, "mm", 0.1), N.count(empty),
                    N.rough(empty), N.ppm(empty), N.percent(empty), N.share(empty), N.chance(empty),
                    N.money(empty, "EUR"), N.date(empty), N.time(empty), N.step(empty, "mm"), N.spread(empty, "mm")):  # fmt: skip
        assert written == "–"


def test_zero_and_false_are_not_missing():
    assert not missing(0) and not missing(0.0) and not missing(False)


@pytest.mark.parametrize(
    ("value", "digits", "written"),
    [
        (1234567.891, 2, f"1{THIN}234{THIN}567.89"),
        (-0.5, 1, f"{MINUS}0.5"),
        (-0.001, 2, "0.00"),  # no minus before a zero
        (float("inf"), 2, "–"),
    ],
)
def test_numbers_have_a_true_minus_and_groups_of_three(value, digits, written):
    assert N.fixed(value, digits) == written


@pytest.mark.parametrize(
    ("value", "scale", "written"),
    [
        (25.000412, 0.004, "25.0004"),
        (0.0, 0.004, "0.0000"),
        (251.987, 0.763, "251.99"),
        (1_000_000_003.24, 0.8, f"1{THIN}000{THIN}000{THIN}003.24"),
        (1.0e-9, 2e-11, f"1.000{THIN}·{THIN}10⁻⁹"),
        (9.9996e-10, 2e-11, f"1.000{THIN}·{THIN}10⁻⁹"),  # never 10.00 times a power
        (-3.2e-7, 1e-8, f"{MINUS}3.20{THIN}·{THIN}10⁻⁷"),
    ],
)
def test_a_measured_value_is_written_to_about_a_tenth_of_its_sigma(value, scale, written):
    assert N.value(value, scale) == written


@given(
    value=st.floats(min_value=-1e12, max_value=1e12, allow_nan=False),
    exponent=st.integers(min_value=-11, max_value=6),
)
def test_what_is_written_differs_from_the_value_by_less_than_a_tenth_of_its_sigma(value, exponent):
    scale = 10.0**exponent
    written = read_back(N.value(value, scale))
    assert abs(written - value) <= 0.1 * scale + 8 * math.ulp(value)


@given(value=st.floats(min_value=-1e9, max_value=1e9), scale=st.floats(min_value=1e-6, max_value=1e3))
def test_a_decimal_comma_changes_the_sign_and_nothing_else(value, scale):
    with_comma = Numbers(decimal=",").value(value, scale)
    assert with_comma.replace(",", ".") == N.value(value, scale)


def test_a_sign_is_shown_where_the_direction_matters():
    assert N.quantity(0.0136, "mm", 0.007, sign=True) == f"+0.0136{SPACE}mm"
    assert N.quantity(-0.0136, "mm", 0.007, sign=True) == f"{MINUS}0.0136{SPACE}mm"


def test_a_quantity_without_a_unit_is_only_its_number():
    assert N.quantity(1.5, None, 0.1) == N.quantity(1.5, "", 0.1) == "1.50"


@pytest.mark.parametrize(
    ("step", "written"),
    [(0.001, "0.001"), (0.25, "0.25"), (0.125, "0.125"), (1.0, "1"), (50.0, "50"), (0.0009999999, "0.001")],
)
def test_a_recording_step_is_written_without_zeros_at_the_end(step, written):
    assert N.step(step, "mm") == f"{written}{SPACE}mm"
    assert Numbers(decimal=",").step(step, "mm") == f"{written.replace('.', ',')}{SPACE}mm"


@given(st.floats(min_value=0.0, max_value=1.0))
def test_a_chance_is_never_certain_and_never_impossible(chance):
    written = N.chance(chance)
    assert written not in (f"0{THIN}%", f"100{THIN}%")
    assert written.startswith(("under", "over")) or abs(float(written.removesuffix(f"{THIN}%")) / 100 - chance) <= 0.005


@pytest.mark.parametrize(
    ("share", "written"),
    [(0.0, "0"), (0.00002, "under 0.01"), (0.0032, "0.32"), (0.05, "5.0"), (0.37, "37"), (1.0, "100")],
)
def test_a_small_share_does_not_round_to_nothing(share, written):
    assert N.share(share) == f"{written}{THIN}%"


@given(st.floats(min_value=1.0, max_value=1e9))
def test_a_rough_count_keeps_two_digits(value):
    written = int(N.rough(value).replace(THIN, ""))
    assert abs(written - value) <= 0.05 * value + 0.5
    assert len(str(written).rstrip("0")) <= 2


def test_less_than_one_part_is_not_a_number_of_parts():
    assert N.ppm(0.3) == N.rough(0.3) == "under 1" and N.ppm(2345.0) == f"2{THIN}300"


def test_money_carries_its_currency_and_has_none_when_none_is_registered():
    assert N.money(1234.0, "EUR") == f"1{THIN}200{SPACE}EUR"
    assert N.money(1234.0, None) == f"1{THIN}200"


@pytest.mark.parametrize(("value", "written"), [(0, "0 files"), (1, "1 file"), (1200, f"1{THIN}200 files")])
def test_a_count_agrees_with_its_noun(value, written):
    assert N.counted(value, "file") == written


def test_an_irregular_plural_can_be_given():
    assert N.counted(2, "index", "indices") == "2 indices"


def test_days_are_those_of_the_plants_zone_summer_and_winter():
    vienna = Numbers(zone="Europe/Vienna")
    assert vienna.date(pd.Timestamp("2026-07-31 22:30")) == "2026-08-01"  # UTC + 2
    assert vienna.date(pd.Timestamp("2026-11-30 22:30")) == "2026-11-30"  # UTC + 1
    assert vienna.time(pd.Timestamp("2026-11-30 22:30")) == "2026-11-30 23:30"
