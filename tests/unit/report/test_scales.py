"""Colours: classes say what the legend says, labels stand out, neighbours differ in grey."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from schorl.report import scales

HUES = (scales.ABOUT_TARGET, scales.UNSURE, scales.SUPPORTING, scales.ZONES, scales.RATES)


def contrast(one: str, other: str) -> float:
    """Contrast as WCAG 2.1 defines it (success criterion 1.4.3)."""
    light, dark = sorted((scales.luminance(one), scales.luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def test_luminance_of_published_colours():
    # W3C, "Understanding SC 1.4.3": black on white is 21 to 1; #777777 on white is 4.48 to 1.
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.005)


@pytest.mark.parametrize("colour", sorted({one for hue in HUES for one in hue} | {"#ffffff"}))
def test_labels_stand_out_on_every_colour(colour):
    assert contrast(scales.ink_on(colour), colour) >= 4.5


@pytest.mark.parametrize("hue", [scales.UNSURE, scales.SUPPORTING, scales.RATES, scales.ZONES])
def test_ordered_scales_keep_their_order_in_grey_print(hue):
    light = [scales.luminance(colour) for colour in hue]
    assert light in (sorted(light), sorted(light, reverse=True))


@pytest.mark.parametrize("count", range(1, scales.MOST_RATE_CLASSES + 1))
def test_rates_differ_by_at_least_a_visible_step_of_grey(count):
    light = [scales.luminance(c) for c in ("#ffffff", *scales.spread_over(scales.RATES[1:], count))]
    lightness = [116 * y ** (1 / 3) - 16 for y in light]  # CIE L*, steps of 2 are just visible
    assert min(-np.diff(lightness)) > 5


@given(
    st.lists(st.floats(0, 6), min_size=1, max_size=30),
    st.floats(0.3, 2.0),
    st.floats(0.01, 3.0),
)
def test_boron_classes_never_hide_an_excess_or_a_shortage(values, target, room):
    boron = np.array(values)
    aim, ceiling = np.full(len(boron), target), np.full(len(boron), target + room)
    classes = scales.boron_classes(boron, aim, ceiling)
    assert ((classes == 6) == (boron >= ceiling)).all()
    assert (classes[(boron < 0.9 * target)] <= 2).all()
    order = np.argsort(boron, kind="stable")
    assert (np.diff(classes[order]) >= 0).all()


def test_one_target_gives_a_legend_in_its_unit_many_give_shares():
    one = scales.boron_scale(np.full(3, 1.0), np.full(3, 2.0))
    many = scales.boron_scale(np.array([0.8, 1.0, 1.2]), np.full(3, 2.0))
    assert one.labels[3] == "0.90 to 1.10"
    assert many.labels[3] == "90 to 110 %"
    assert len(one.labels) == len(many.labels) == len(one.colours)


@given(st.lists(st.floats(0.001, 400), min_size=1, max_size=40))
def test_even_classes_cover_everything_with_round_breaks(values):
    scale = scales.even_scale(np.array(values), scales.SUPPORTING)
    classes = scale.classes(np.array(values))
    assert classes.min() >= 0
    assert classes.max() < len(scale.colours)
    assert len(scale.labels) == len(scale.colours)
    assert len(set(scale.labels)) == len(scale.labels)
