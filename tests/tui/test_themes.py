"""The themes are legible."""

import itertools

import pytest
from textual.color import Color

from rulecheck.tui.themes import GROUNDS, TEXT, THEMES


def luminance(colour):
    """Relative luminance, W3C WCAG 2.1, "relative luminance"."""
    channels = [c / 255 for c in Color.parse(colour).rgb]
    linear = [c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return sum(weight * c for weight, c in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def contrast(one, other):
    """Contrast ratio, W3C WCAG 2.1, "contrast ratio"."""
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("theme", THEMES, ids=lambda theme: theme.name)
def test_every_text_on_every_ground_has_contrast(theme):
    """4.5:1, W3C WCAG 2.1, success criterion 1.4.3."""
    colours = theme.variables | {
        name: getattr(theme, name) for name in ("foreground", "background", "surface", "panel")
    }
    for text, ground in itertools.product((*TEXT, "foreground"), GROUNDS):
        assert contrast(colours[text], colours[ground]) >= 4.5, (text, ground)
