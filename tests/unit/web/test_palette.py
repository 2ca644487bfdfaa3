"""Colours by measure: what is set in the style sheet is readable, and the same as what figures use."""

import re

import pytest

from web.assets import STATIC
from web.palette import LINES

TEXT, GRAPHIC = 4.5, 3.0  # WCAG 2.2, success criteria 1.4.3 and 1.4.11

TOKENS = {
    name: {"light": light, "dark": dark}
    for name, light, dark in re.findall(
        r"--([\w-]+): light-dark\((#\w{6}), (#\w{6})\)", (STATIC / "css/tokens.css").read_text(encoding="utf-8")
    )
}


def contrast(first, second):
    """Contrast ratio of two colours, WCAG 2.2."""
    low, high = sorted(_luminance(colour) for colour in (first, second))
    return (high + 0.05) / (low + 0.05)


def _luminance(colour):
    channels = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_contrast_is_computed_as_the_standard_says():
    assert contrast("#ffffff", "#000000") == pytest.approx(21)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.01)  # just fails: a well-known example


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize(
    ("ink", "papers", "least"),
    [
        ("ink", ("paper", "sheet", "well", "brass-wash", "good-wash", "bad-wash", "mark"), TEXT),
        ("faint", ("paper", "sheet", "well"), TEXT),
        ("act", ("paper", "sheet", "well", "brass-wash"), TEXT),
        ("act-deep", ("paper", "sheet", "well"), TEXT),
        ("on-act", ("act", "act-deep"), TEXT),
        ("brass", ("paper", "sheet", "brass-wash"), TEXT),
        ("good", ("paper", "sheet", "good-wash"), TEXT),
        ("bad", ("paper", "sheet", "bad-wash"), TEXT),
        ("edge", ("paper", "sheet", "well"), GRAPHIC),
    ],
)
def test_text_and_outlines_stand_out_from_what_is_behind_them(scheme, ink, papers, least):
    measured = {paper: contrast(TOKENS[ink][scheme], TOKENS[paper][scheme]) for paper in papers}
    assert {paper: ratio for paper, ratio in measured.items() if ratio < least} == {}


@pytest.mark.parametrize("number", range(1, len(LINES) + 1))
def test_figures_and_style_sheet_agree_on_a_line(number):
    line = LINES[number - 1]
    assert TOKENS[f"line-{number}"] == {"light": line.light, "dark": line.dark}
    assert contrast(line.light, TOKENS["sheet"]["light"]) >= GRAPHIC
    assert contrast(line.dark, TOKENS["sheet"]["dark"]) >= GRAPHIC


def test_no_two_lines_share_a_dash():
    assert len({line.dash for line in LINES}) == len(LINES)


def test_a_registered_colour_starts_as_the_light_one():
    css = (STATIC / "css/tokens.css").read_text(encoding="utf-8")
    registered = dict(re.findall(r"@property --([\w-]+) \{[^}]*initial-value: (#\w{6})", css))
    assert registered == {name: TOKENS[name]["light"] for name in registered}
    assert registered
