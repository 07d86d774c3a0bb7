"""Names that come from outside, made safe where escaping alone does not help: file names, titles, labels."""

from __future__ import annotations

import hashlib
import re
import unicodedata

LONGEST = 44
TRICKS = re.compile("[\u200e\u200f\u061c\u202a-\u202e\u2066-\u2069]")
"Marks that turn the direction of text; <bdi> does not hold in a title."


def page(characteristic: str) -> str:
    """File name of a characteristic's page: readable, at most 51 characters, unique by a hash of the whole name.

    Thousands of names without one Latin letter or digit would share the readable part, so their hash is longer.
    """
    plain = unicodedata.normalize("NFKD", characteristic).encode("ascii", "ignore").decode().lower()
    slug = re.sub(r"[^a-z0-9]+", "-", plain).strip("-")[:LONGEST].strip("-")
    digest = hashlib.sha256(characteristic.encode()).hexdigest()
    return f"{slug}-{digest[:6]}.html" if slug else f"c-{digest[:16]}.html"


def plain(text: str) -> str:
    """The text without control characters and direction marks, for titles and labels."""
    visible = TRICKS.sub("", text)
    return "".join(letter if unicodedata.category(letter)[0] != "C" else " " for letter in visible).strip()


def short(text: str, longest: int = 60) -> str:
    """The text for a title, cut where it is too long."""
    clean = plain(text)
    return clean if len(clean) <= longest else clean[: longest - 1] + "…"
