"""The colours of clearances: even steps, and readable without telling red from green."""

import itertools
import math

import numpy as np
import pytest
from numpy.typing import NDArray

from app.clearance_scale import BANDS, EDGE_COLOURS, EDGES_MM, band_of, places
from app.colours import linear_light, relative_luminance, rgb

Array = NDArray[np.float64]

# Linear RGB to CIE XYZ under D65 (IEC 61966-2-1) and the white point; from memory, rounded.
XYZ_OF_RGB = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])
WHITE = XYZ_OF_RGB.sum(axis=1)
# How linear RGB looks to someone without red or without green receptors (Machado, Oliveira and Fernandes 2009,
# severity 1); from memory.
DEFICIENT = {
    "without red": [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
    "without green": [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.01182, 0.04294, 0.968881]],
}


def lab(linear_rgb: Array) -> Array:
    """Return CIELAB 1976 of a linear RGB colour."""
    ratio = XYZ_OF_RGB @ linear_rgb / WHITE
    f = np.where(ratio > (6 / 29) ** 3, np.cbrt(np.maximum(ratio, 0.0)), ratio / (3 * (6 / 29) ** 2) + 4 / 29)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def linear(colour: str) -> Array:
    return np.array([linear_light(channel) for channel in rgb(colour)])


def test_lab_of_the_test_itself_is_right_for_white_and_for_a_red() -> None:
    assert lab(linear("#ffffff")) == pytest.approx([100.0, 0.0, 0.0], abs=1e-6)
    # sRGB red is L 53.24, a 80.09, b 67.20 (from memory, as commonly tabulated).
    assert lab(linear("#ff0000")) == pytest.approx([53.24, 80.09, 67.20], abs=0.05)


def test_neighbouring_colours_are_evenly_apart_for_everyone() -> None:
    steps = [np.linalg.norm(lab(linear(b)) - lab(linear(a))) for a, b in itertools.pairwise(EDGE_COLOURS)]
    assert max(steps) / min(steps) < 1.15
    assert min(steps) > 10.0


@pytest.mark.parametrize("eyes", DEFICIENT)
def test_they_stay_apart_for_eyes_that_cannot_tell_red_from_green(eyes: str) -> None:
    seen = [lab(np.clip(np.array(DEFICIENT[eyes]) @ linear(colour), 0.0, 1.0)) for colour in EDGE_COLOURS]
    steps = [np.linalg.norm(b - a) for a, b in itertools.pairwise(seen)]
    assert min(steps) > 8.0
    lightness = [colour[0] for colour in seen]
    assert lightness == sorted(lightness)


def test_bands_cover_every_clearance_once() -> None:
    assert BANDS[0].low_mm == 0.0
    assert math.isinf(BANDS[-1].high_mm)
    for lower, upper in itertools.pairwise(BANDS):
        assert lower.high_mm == upper.low_mm
    for index, band in enumerate(BANDS):
        assert band_of(band.low_mm) == index
        assert band_of(math.nextafter(band.low_mm, math.inf)) == index
    assert band_of(math.inf) == len(BANDS) - 1
    assert [BANDS[0].label, BANDS[-1].label] == ["0 to 10", "200 and more"]


def test_places_rise_evenly_over_the_edges_and_keep_what_is_missing() -> None:
    assert places(np.array(EDGES_MM)) == pytest.approx(np.linspace(0.0, 1.0, len(EDGES_MM)))
    placed = places(np.array([-5.0, 1e6, np.nan, np.inf]))
    assert placed[[0, 1, 3]].tolist() == [0.0, 1.0, 1.0]
    assert math.isnan(placed[2])


@pytest.mark.parametrize("band", BANDS)
def test_letters_on_every_band_have_contrast(band: object) -> None:
    assert isinstance(band, type(BANDS[0]))
    ground = relative_luminance(band.colour)
    letters = relative_luminance("#ffffff" if band.is_dark else "#1b1f23")
    lighter, darker = max(ground, letters), min(ground, letters)
    # Contrast of WCAG 2.1, success criterion 1.4.3, asks 4.5 for body text, 3 for large.
    assert (lighter + 0.05) / (darker + 0.05) > 4.0
