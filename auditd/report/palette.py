"""Colours as roles: a drawing names one, the page's style sheet gives it a colour in light, dark and print.

The drawing library writes colours as hexadecimal numbers, so each role has a number that nobody would draw
with; `svg_cleaning` turns it into a class. The hues are those of Okabe & Ito (2008), Color Universal Design,
which people with any common colour vision tell apart; no picture says anything by colour alone.
"""

from __future__ import annotations

INK = "#010000"
MUTED = "#020000"
GRID = "#030000"
PAPER = "#040000"
BLUE = "#050000"
ORANGE = "#060000"
GREEN = "#070000"
PURPLE = "#080000"

ROLES = {
    INK: "ink",
    MUTED: "muted",
    GRID: "grid",
    PAPER: "paper",
    BLUE: "blue",
    ORANGE: "orange",
    GREEN: "green",
    PURPLE: "purple",
}
ACCENTS = (BLUE, ORANGE, GREEN, PURPLE)
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "<", "*", "h", ">", "p")
"""Marker shapes, by which the levels of a nuisance are told apart."""
