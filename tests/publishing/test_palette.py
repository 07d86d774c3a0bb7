"""Colours of the report: readable on their ground, and apart for every eye. Contrast: WCAG 2.2, 1.4.3 and 1.4.11.

Colour vision is simulated with the matrices of Machado, Oliveira & Fernandes (2009) for full severity (from memory);
distances are CIE 1976 in L*a*b* (D65).
"""

import itertools
import re

import numpy as np
import pytest

from portfolio import shipped

TEXT = ("ink", "muted", "accent", "after", "specification")
GROUNDS = ("paper", "card", "alarm")
GRAPHIC = ("process", "control", "signal", "unrest")
VERDICTS = ("after", "specification", "unrest", "unrest-mild", "line")
"In the bar of the first screen."
SIMULATED = {
    "normal": np.eye(3),
    "protan": np.array([[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]),
    "deutan": np.array([[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]),
    "tritan": np.array([[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]]),
}  # fmt: skip
TO_XYZ = np.array([[0.4124564, 0.3575761, 0.1804375], [0.2126729, 0.7151522, 0.0721750], [0.0193339, 0.1191920, 0.9503041]])  # fmt: skip


def palettes() -> dict[str, dict[str, str]]:
    """Custom properties of each scheme: light, dark, print."""
    blocks = re.findall(r":root \{(.*?)\}", shipped.text("reports/style.css"), re.S)
    assert len(blocks) == 3
    return {
        name: dict(re.findall(r"--([a-z-]+): (#[0-9a-f]{3,6});", block))
        for name, block in zip(("light", "dark", "print"), blocks, strict=True)
    }


def linear(colour: str) -> np.ndarray:
    digits = colour[1:] if len(colour) == 7 else "".join(2 * digit for digit in colour[1:])
    share = np.array([int(digits[i : i + 2], 16) for i in (0, 2, 4)]) / 255
    return np.where(share <= 0.04045, share / 12.92, ((share + 0.055) / 1.055) ** 2.4)


def contrast(one: str, other: str) -> float:
    light, dark = sorted((float(linear(c) @ [0.2126, 0.7152, 0.0722]) for c in (one, other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def lab(rgb: np.ndarray) -> np.ndarray:
    xyz = TO_XYZ @ np.clip(rgb, 0, 1) / (TO_XYZ @ np.ones(3))
    f = np.where(xyz > 216 / 24389, np.cbrt(xyz), (24389 / 27 * xyz + 16) / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def test_the_ruler_agrees_with_the_extremes_that_the_standard_names():
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.01)  # the well-known grey just below 4.5
    assert lab(linear("#ffffff")) == pytest.approx([100, 0, 0], abs=1e-6)


@pytest.mark.parametrize("scheme", ["light", "dark", "print"])
def test_text_can_be_read_on_every_ground(scheme):
    colours = palettes()[scheme]
    for text, ground in itertools.product(TEXT, GROUNDS):
        assert contrast(colours[text], colours[ground]) >= 4.5, (text, ground)


@pytest.mark.parametrize("scheme", ["light", "dark", "print"])
def test_lines_and_points_stand_out_from_the_paper(scheme):
    colours = palettes()[scheme]
    for graphic in GRAPHIC:
        assert contrast(colours[graphic], colours["paper"]) >= 3, graphic


@pytest.mark.parametrize("eye", SIMULATED)
@pytest.mark.parametrize("scheme", ["light", "dark", "print"])
def test_the_verdicts_of_the_bar_are_apart_for_every_eye(scheme, eye):
    colours = palettes()[scheme]
    seen = {name: lab(SIMULATED[eye] @ linear(colours[name])) for name in VERDICTS}
    apart = {(a, b): float(np.linalg.norm(seen[a] - seen[b])) for a, b in itertools.combinations(VERDICTS, 2)}
    assert min(apart.values()) >= 22, apart
