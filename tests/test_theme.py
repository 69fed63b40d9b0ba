"""Colours and marks: readable, and apart for every kind of colour vision."""

from __future__ import annotations

import itertools

import numpy as np
import numpy.typing as npt
import pytest
from matplotlib.colors import to_rgb

from ladderfit.plots.theme import DARK, LIGHT, Theme

FloatArray = npt.NDArray[np.float64]

MACHADO = {  # Machado, Oliveira & Fernandes (2009), severity 1, linear RGB
    "protanopia": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "deuteranopia": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
    "tritanopia": [
        [1.255528, -0.076749, -0.178779],
        [-0.078411, 0.930809, 0.147602],
        [0.004733, 0.691367, 0.303900],
    ],
    "full colour vision": [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]],
}


def linear(colour: str) -> FloatArray:
    rgb = np.array(to_rgb(colour))
    return np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)


def lab(rgb: FloatArray) -> FloatArray:
    """CIE L*a*b* of linear sRGB, white D65."""
    to_xyz = np.array(
        [
            [0.4124564, 0.3575761, 0.1804375],
            [0.2126729, 0.7151522, 0.0721750],
            [0.0193339, 0.1191920, 0.9503041],
        ]
    )
    x, y, z = (
        np.cbrt(value) if value > 0.008856 else 7.787 * value + 16.0 / 116.0
        for value in to_xyz @ rgb / np.array([0.95047, 1.0, 1.08883])
    )
    return np.array([116.0 * y - 16.0, 500.0 * (x - y), 200.0 * (y - z)])


def nearest(colours: list[str], vision: str) -> float:
    seen = [lab(np.clip(np.array(MACHADO[vision]) @ linear(c), 0.0, 1.0)) for c in colours]
    return min(float(np.linalg.norm(a - b)) for a, b in itertools.combinations(seen, 2))


def contrast(one: str, other: str) -> float:
    """WCAG contrast ratio."""
    dark, light = sorted(float(linear(c) @ [0.2126, 0.7152, 0.0722]) for c in (one, other))
    return (light + 0.05) / (dark + 0.05)


@pytest.mark.parametrize("vision", list(MACHADO))
@pytest.mark.parametrize("theme", [LIGHT, DARK], ids=lambda theme: theme.name)
def test_accents_keep_apart(theme: Theme, vision: str) -> None:
    assert nearest([accent.colour for accent in theme.accents], vision) > 18.0


def test_the_colour_test_notices_red_and_green() -> None:
    """A negative control."""
    assert nearest(["#a05000", "#508000"], "deuteranopia") < 18.0
    assert nearest(["#a05000", "#508000"], "full colour vision") > 18.0


@pytest.mark.parametrize("theme", [LIGHT, DARK], ids=lambda theme: theme.name)
def test_contrast_and_marks(theme: Theme) -> None:
    assert contrast(theme.ink, theme.paper) > 7.0
    assert contrast(theme.muted, theme.paper) > 3.0
    assert all(contrast(accent.colour, theme.paper) > 3.0 for accent in theme.accents)
    for kind in ("marker", "line"):
        assert len({str(getattr(accent, kind)) for accent in theme.accents}) == len(theme.accents)
    assert theme.tint(theme.ink, 0.0) == theme.paper
    assert theme.tint(theme.ink, 1.0) == theme.ink
