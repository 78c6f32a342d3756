"""What the page's drawings draw: every cell, in its place, with its group's median."""

import numpy as np
import pytest

from morphotone.showing.page_figures import MOST_GROUPS, WIDTH, group_rows, spread


def places_of(drawn):
    return {dot.row: dot.x for strip in drawn.strips for dot in strip.dots}


def test_every_cell_with_a_value_is_one_dot_of_its_own_group():
    values = np.array([1.0, 2.0, np.nan, 4.0, np.inf, 3.0])
    drawn = spread("X", values, ["a", "b", "a", "b", "a", "a"])
    assert [(strip.label, strip.count) for strip in drawn.strips] == [("a", 2), ("b", 2)]
    assert [sorted(dot.row for dot in strip.dots) for strip in drawn.strips] == [[0, 5], [1, 3]]
    assert drawn.without == 2
    assert [strip.median for strip in drawn.strips] == ["2", "3"]
    assert [strip.quartiles for strip in drawn.strips] == ["1.5 to 2.5", "2.5 to 3.5"]


@pytest.mark.parametrize(
    ("values", "is_log"), [([1.0, 5.0, 9.9], False), ([1.0, 5.0, 10.0], True), ([0.0, 5.0, 100.0], False)]
)
def test_places_go_with_the_axis(values, is_log):
    drawn = spread("R_in", np.array(values), None)
    assert drawn.is_log is is_log
    scaled = np.log10(values) if is_log else np.array(values)
    shares = (scaled - scaled[0]) / (scaled[-1] - scaled[0])
    x = places_of(drawn)
    expected = x[0] + shares * (x[2] - x[0])
    np.testing.assert_allclose([x[0], x[1], x[2]], expected, atol=0.06)  # places have one decimal
    assert drawn.strips[0].median_x == pytest.approx(x[1], abs=0.06)


@pytest.mark.parametrize("low", [1e-9, 0.03, 1.0, 7.0, 4e5])
@pytest.mark.parametrize("ratio", [1.0, 1.001, 3.0, 10.0, 47.0, 1e3, 1e7, 1e15])
def test_ticks_are_few_told_apart_and_where_they_say(low, ratio):
    values = np.array([low, low * ratio])
    drawn = spread("any", values, None)
    places = [x for x, _ in drawn.ticks]
    assert 2 <= len(places) <= 7
    assert places == sorted(set(places))
    assert min(places) >= 0
    assert max(places) <= WIDTH
    assert len({text for _, text in drawn.ticks}) == len(places)
    scale = np.log10 if drawn.is_log else np.asarray
    numbers = scale([float(text) for _, text in drawn.ticks])
    steps, gaps = np.diff(numbers), np.diff(places)
    np.testing.assert_allclose(gaps / gaps[0], steps / steps[0], rtol=1e-3)


@pytest.mark.parametrize("value", [0.0, 5.0, -2.0])
def test_cells_that_are_all_alike_stand_in_the_middle(value):
    drawn = spread("alike", np.full(4, value), None)
    assert {dot.x for dot in drawn.strips[0].dots} == {160.0}
    assert drawn.ticks


def test_no_value_draws_nothing():
    drawn = spread("none", np.array([np.nan, np.inf]), ["a", "b"])
    assert (drawn.strips, drawn.ticks, drawn.without) == ((), (), 2)
    assert spread("no cell", np.array([]), None).strips == ()


def test_many_cells_are_bars_whose_heights_are_their_counts():
    values = np.concatenate([np.zeros(150), np.ones(75), [0.5]])
    drawn = spread("many", values, None)
    assert drawn.strips[0].dots == ()
    heights = [
        float(part.partition("h")[0].partition("v-")[2]) for part in drawn.strips[0].bars.split("M")[1:]
    ]
    assert heights == [18.0, 0.1, 9.0]


def test_dots_of_a_row_stay_between_its_label_and_the_next_row():
    drawn = spread("rows", np.linspace(1, 2, 60), ["a", "b", ""] * 20)
    for strip in drawn.strips:
        assert all(abs(dot.y - strip.base) <= 6 for dot in strip.dots)
    assert np.diff([strip.base for strip in drawn.strips]).min() > 12
    assert drawn.height > drawn.strips[-1].base + 20
    assert spread("rows", np.linspace(1, 2, 60), ["a", "b", ""] * 20) == drawn


def test_cells_without_a_group_and_small_groups_beyond_twelve_share_rows():
    groups = [name for number in range(20) for name in [f"g{number}"] * (number + 1)] + [""]
    rows = group_rows(groups, len(groups))
    assert len(rows) == MOST_GROUPS + 1
    assert [name for name, _ in rows[-2:]] == ["9 smaller groups", "no group"]
    assert sorted(np.concatenate([members for _, members in rows]).tolist()) == list(range(len(groups)))
