"""Round numbers for scales, words that fit, boxes in mm."""

import numpy as np
import pytest

from morphotone.showing.sheet import (
    Box,
    even_ticks,
    factor_ticks,
    number_text,
    round_factor,
    round_length,
    text_width_mm,
    wrapped,
)


@pytest.mark.parametrize(
    ("greatest", "expected"),
    [
        (1, 1),
        (1.99, 1),
        (2, 2),
        (4.9, 2),
        (5, 5),
        (9.9, 5),
        (123, 100),
        (0.03, 0.02),
        (5e-7, 5e-7),
        (7e8, 5e8),
    ],
)
def test_a_length_is_rounded_down_to_1_2_5(greatest, expected):
    assert round_length(greatest) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("greatest", [1e-5, 0.01, 0.3, 0.68, 0.7, 1.7, 2.4, 9.3, 80.0, 600.0])
def test_a_factor_is_round_above_one_and_no_longer_than_asked(greatest):
    factor = round_factor(greatest)
    assert factor > 1.0
    assert np.log(factor) <= greatest * (1 + 1e-9)
    assert np.log(factor) > 0.3 * greatest or greatest > 2.0
    assert number_text(factor) != "1"


@pytest.mark.parametrize(
    ("least", "greatest", "labels"),
    [
        (0.0, 2.4, ["1", "2", "5", "10"]),
        (0.0, 0.5, ["1", "1.2", "1.4", "1.6"]),
        (0.0, 0.01, ["1", "1.005", "1.01"]),
        (0.0, 1e-6, ["1"]),
        (0.0, 0.0, ["1"]),
        (0.0, 14.0, ["1", "10", "100", "1000", "10⁴", "10⁵", "10⁶"]),
        (0.0, 80.0, ["1", "10⁵", "10¹⁰", "10¹⁵", "10²⁰", "10²⁵", "10³⁰"]),
        (3.0, 4.5, ["50"]),
    ],
)
def test_ticks_of_an_attenuation(least, greatest, labels):
    places, words = factor_ticks(least, greatest, most=7)
    assert words == labels
    assert ((places >= least - 1e-9) & (places <= greatest + 1e-9)).all()


@pytest.mark.parametrize("greatest", np.geomspace(1e-6, 690.0, 40))
@pytest.mark.parametrize("most", [2, 4, 7])
def test_ticks_of_any_attenuation_say_where_they_are_and_are_not_too_many(greatest, most):
    places, words = factor_ticks(0.0, greatest, most)
    assert 1 <= len(words) <= most
    assert places[0] == 0.0
    assert places[-1] <= greatest + 1e-9
    assert len(set(words)) == len(words)
    assert words[0] == "1"


@pytest.mark.parametrize(
    ("least", "greatest"), [(0.0, 1.1), (0.0, 7.0), (-3.0, 4.0), (0.0, 261_000.0), (0.0, 1e-7)]
)
@pytest.mark.parametrize("length_mm", [20.0, 35.0, 80.0])
def test_even_ticks_find_room(least, greatest, length_mm):
    places, words = even_ticks(least, greatest, length_mm)
    assert ((places >= least - 1e-9) & (places <= greatest * (1 + 1e-9))).all()
    assert sum(text_width_mm(word, 5.5) + 2.0 for word in words) <= length_mm
    assert len(set(words)) == len(words)
    assert "−0" not in words


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"),
        (-3.5, "−3.5"),
        (1234.0, "1234"),
        (15000.0, "15,000"),
        (1e6, "10⁶"),
        (-2e6, "−2·10⁶"),
        (4.42e6, "4.42·10⁶"),
        (5e-7, "5·10⁻⁷"),
        (0.95, "0.95"),
    ],
)
def test_numbers_as_a_scale_shows_them(value, text):
    assert number_text(value) == text


def test_phrases_are_put_into_lines_that_fit():
    phrases = [f"phrase {number}" for number in range(30)]
    lines = wrapped(phrases, 60.0, 5.5)
    assert " · ".join(lines).split(" · ") == phrases
    assert max(text_width_mm(line, 5.5) for line in lines) <= 60.0
    assert len(lines) < 10


def test_boxes_are_cut_evenly():
    box = Box(10.0, 20.0, 100.0, 50.0)
    left, right = box.columns(2, 4.0)
    assert (left.right, right.left, right.right) == (58.0, 62.0, 110.0)
    upper, lower = box.rows(2, 10.0)
    assert (upper.bottom, lower.top, lower.bottom) == (40.0, 50.0, 70.0)
    assert box.inside(1, 2, 3, 4) == Box(11.0, 22.0, 96.0, 44.0)
