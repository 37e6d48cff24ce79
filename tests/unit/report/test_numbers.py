"""Numbers as people read them: units that suit, thousands parted, dashes for what is not known."""

import pytest

from sfcpart.report.numbers import amount, counted, duration, number, percent, seconds


@pytest.mark.parametrize("write", [number, percent, seconds, duration, amount])
def test_what_is_not_known_is_a_dash(write):
    assert write(None) == "-"


@pytest.mark.parametrize(
    ("found", "wanted"),
    [
        (number(1234567), "1,234,567"),
        (number(1234.5), "1,234"),
        (number(0.00012), "1.20e-04"),
        (number(0.0), "0"),
        (counted(1, "cell"), "1 cell"),
        (counted(2784, "cell"), "2,784 cells"),
        (percent(0.0123), "1.23 %"),
        (percent(1234.0), "123,400 %"),
        (seconds(0.0021), "2.1 ms"),
        (seconds(3e-9), "3e-09 s"),
        (duration(100.0), "100 s"),
        (duration(7200.0), "2 h"),
        (duration(259_200.0), "3 d"),
        (amount(2_500_000_000), "2.5 GB"),
        (amount(512), "1 kB"),
    ],
)
def test_numbers_are_written_with_units_and_thousands(found, wanted):
    assert found == wanted
