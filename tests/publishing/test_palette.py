"""The colours of the report: readable, and told apart by readers with any colour vision.

Contrast: WCAG 2.2, success criteria 1.4.3 (text 4.5) and 1.4.11 (graphics 3), formula of relative luminance there.
Colour vision: matrices of Machado, Oliveira & Fernandes (2009), severity 1 (from memory). Distance: CIE 1976.
"""

from __future__ import annotations

import re
from itertools import combinations

import numpy as np
import pytest

from portfolio import shipped

TEXT = ("--ink", "--muted", "--accent", "--specification", "--after")
DRAWN = ("--process", "--control", "--signal")
TOGETHER = [("--process", "--signal"), ("--control", "--signal"), ("--specification", "--after")]
"Now and after a move (--muted, --after) differ by dashes as well, points on the list by their shape."
SEEN = {
    "all": np.eye(3),
    "without red": [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
    "without green": [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]],
    "without blue": [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]],
}


def palettes() -> dict[str, dict[str, str]]:
    style, sheet = shipped.text("reports/style.css"), shipped.text("reports/meeting.css")
    blocks = {
        "light": style[: style.index("@media")],
        "dark": style[style.index("prefers-color-scheme: dark") :].split("}", 2)[0],
        "print": style[style.index("@media print") :],
        "sheet": sheet,
    }
    out = {}
    for name, block in blocks.items():
        first = block[block.index(":root") :]
        first = first[: first.index("}")] if "}" in first else first
        out[name] = {key: full(value) for key, value in re.findall(r"(--[a-z-]+): (#[0-9a-fA-F]{3,6})", first)}
    return out


def full(colour: str) -> str:
    return colour if len(colour) == 7 else "#" + "".join(2 * letter for letter in colour[1:])


def linear(colour: str) -> np.ndarray:
    share = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(share <= 0.04045, share / 12.92, ((share + 0.055) / 1.055) ** 2.4)


def contrast(one: str, two: str) -> float:
    light, dark = sorted((float(linear(colour) @ [0.2126, 0.7152, 0.0722]) for colour in (one, two)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def distance(one: str, two: str, seen: np.ndarray | list) -> float:
    labs = []
    for colour in (one, two):
        rgb = np.clip(np.asarray(seen) @ linear(colour), 0, 1)
        matrix = [
            [0.4124564, 0.3575761, 0.1804375],
            [0.2126729, 0.7151522, 0.0721750],
            [0.0193339, 0.1191920, 0.9503041],
        ]
        xyz = np.array(matrix) @ rgb / [0.95047, 1.0, 1.08883]
        f = np.where(xyz > (6 / 29) ** 3, np.cbrt(xyz), xyz / (3 * (6 / 29) ** 2) + 4 / 29)
        labs.append(np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])]))
    return float(np.linalg.norm(labs[0] - labs[1]))


PALETTES = palettes()


def test_the_formula_of_contrast_gives_the_published_extremes():
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.005)  # known border case of 4.5
    assert contrast("#0072b2", "#ffffff") == pytest.approx(5.19, abs=0.01)  # report study, section 7


def test_the_distance_of_black_and_white_is_a_hundred():
    assert distance("#000000", "#ffffff", np.eye(3)) == pytest.approx(100, abs=0.01)


@pytest.mark.parametrize("name", PALETTES)
def test_every_palette_defines_the_same_colours(name):
    needed = {*TEXT, *DRAWN, "--line", "--fill", "--window", "--paper"}
    assert needed - ({"--accent"} if name == "sheet" else set()) <= PALETTES[name].keys()


@pytest.mark.parametrize("name", PALETTES)
@pytest.mark.parametrize("colour", TEXT)
def test_text_can_be_read_on_paper_and_cards(name, colour):
    palette = PALETTES[name]
    if colour in palette:
        for ground in ("--paper", "--card", "--alarm"):
            assert contrast(palette[colour], palette.get(ground, palette["--paper"])) >= 4.5, (colour, ground)


@pytest.mark.parametrize("name", PALETTES)
@pytest.mark.parametrize("colour", DRAWN)
def test_what_is_drawn_stands_out_from_paper(name, colour):
    palette = PALETTES[name]
    if colour in palette:
        assert contrast(palette[colour], palette["--paper"]) >= 3.0


@pytest.mark.parametrize("name", PALETTES)
@pytest.mark.parametrize("seen", SEEN)
def test_colours_of_one_picture_are_told_apart_with_any_colour_vision(name, seen):
    palette = PALETTES[name]
    for one, two in TOGETHER:
        assert distance(palette[one], palette[two], SEEN[seen]) >= 15, (one, two)


@pytest.mark.parametrize("name", PALETTES)
def test_a_curve_is_seen_over_the_window_and_the_bars(name):
    palette = PALETTES[name]
    for line, ground in (
        ("--after", "--window"),
        ("--muted", "--window"),
        ("--ink", "--fill"),
        ("--specification", "--fill"),
    ):
        assert contrast(palette[line], palette[ground]) >= 3.0, (line, ground)


def test_no_two_grounds_are_the_same():
    for palette in PALETTES.values():
        grounds = [palette[name] for name in ("--fill", "--window", "--line")]
        assert all(one != two for one, two in combinations(grounds, 2))
