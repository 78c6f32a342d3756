"""Numbers as a paper prints them."""

import pytest

from morphotone.showing.digits import decimals, fixed, p_value

NAN = float("nan")


@pytest.mark.parametrize(
    ("mean", "sd", "shown"),
    [
        (166.07, 40.2, "166 ± 40"),
        (105.12, 7.44, "105.1 ± 7.4"),
        (2742.3, 548.0, "2740 ± 550"),
        (0.3391, 0.0096, "0.3391 ± 0.0096"),
        (9.99, 0.996, "10.0 ± 1.0"),  # an SD that rounds up keeps two digits, not three
        (27412.0, 5520.0, "27400 ± 5500"),
        (-0.0041, 0.02, "−0.004 ± 0.020"),
        (-0.0001, 0.02, "0.000 ± 0.020"),
        (3.2, 290.0, "0 ± 290"),
        (1e-7, 3e-8, "0.000000100 ± 0.000000030"),
    ],
)
def test_mean_and_sd_have_the_digits_that_the_sd_bears_out(mean, sd, shown):
    places = decimals(sd, mean)
    assert f"{fixed(mean, places)} ± {fixed(sd, places)}" == shown


@pytest.mark.parametrize("spread", [0.0, NAN])
@pytest.mark.parametrize(
    ("value", "shown"),
    [(7.0, "7"), (3.14159, "3.14"), (26052.4, "26100"), (0.00123456, "0.00123"), (NAN, "")],
)
def test_a_value_without_spread_keeps_three_digits_or_is_whole(value, spread, shown):
    assert fixed(value, decimals(spread, value)) == shown


def test_a_median_beside_a_wide_tail_keeps_digits_of_its_own():
    assert fixed(3.04, decimals(145.0, 3.04, least=2)) == "3.0"
    assert fixed(0.0, decimals(145.0, 0.0, least=2)) == "0"


@pytest.mark.parametrize(
    ("p", "shown"),
    [
        (0.5, "0.50"),
        (0.0512, "0.051"),
        (0.00123, "0.0012"),
        (0.00012, "0.0001"),
        (0.00009, "< 0.0001"),
        (0.0, "< 0.0001"),
        (1.0, "1.00"),
        (NAN, "–"),
    ],
)
def test_p_values(p, shown):
    assert p_value(p) == shown
