"""Travel of trims: what the extremes of spread ask of it, against setting the trim anew in a changed design."""

import pytest
from gain_stage import GAIN, TRIM, changed

from rulecheck.analysis.review import Review
from rulecheck.analysis.trims import travel
from rulecheck.testing import design_from

QUIET = (('offset_voltage = "1 mV"', 'offset_voltage = "0 V"'), ('offset_drift = "10 uV/K"', 'offset_drift = "0 V/K"'))
AT_EXTREME = (
    ('tolerance = "1 %", tempco_tolerance = "50 ppm/K", package = "N1", value = "10 kohm"', 'value = "10.1 kohm"'),
    ('tolerance = "1 %", tempco_tolerance = "50 ppm/K", package = "N1", value = "19.5 kohm"', 'value = "19.305 kohm"'),
    ('value = "1 kohm"', 'value = "0.9 kohm"'),
)


def travel_of(*changes):
    """Travel of the trim of a gain of 2."""
    (found,) = travel(Review(design_from(changed(GAIN, (*TRIM, *changes)))), "gain")
    return found


def test_the_middle_takes_up_what_is_missing():
    """20 kohm are 19.5 kohm and half of 1 kohm: set in the middle, but for the finite gain of the amplifier."""
    found = travel_of(*QUIET)
    assert found.position == pytest.approx(0.5, abs=0.01)
    assert (found.low, found.high) == (0.0, 1.0)
    assert found.error < 1e-6


def test_what_the_extremes_ask():
    """1 % of 10 kohm, of 19.5 kohm and 10 % of half a kilohm: 200, 195 and 50 ohm of 1 kohm, by sums of slopes."""
    found = travel_of(*QUIET)
    assert found.needed == pytest.approx(0.2 + 0.195 + 0.05, rel=0.02)
    assert found.left == pytest.approx(0.5 - found.needed, abs=0.01)


def test_the_extreme_is_nulled_where_the_slopes_say():
    """A design with its parts at these limits needs its trim 0.445 of travel further, less what the slopes bend."""
    nominal, extreme = travel_of(*QUIET), travel_of(*QUIET, *AT_EXTREME)
    assert extreme.position - nominal.position == pytest.approx(nominal.needed, rel=0.15)


def test_a_trim_at_its_end_keeps_its_error():
    """20.5 kohm without the trimmer are 2.5 % too much: 7.9 mV of the 0.63 V at the middle of 0.1..1 V."""
    found = travel_of(('"19.5 kohm"', '"20.5 kohm"'))
    assert found.position in (found.low, found.high)
    assert found.left <= 0
    assert found.error == pytest.approx(0.025 * 2 * 0.1**0.5, rel=0.02)


def test_what_lacks_of_the_travel_stays_as_error():
    """With 0.2 kohm of travel and 5 % resistors the rest of the spread stays at the output."""
    found = travel_of(*QUIET, ('tolerance = "1 %"', 'tolerance = "5 %"'))
    lacking = found.needed - min(found.position, 1 - found.position)
    assert lacking > 1
    # a thousandth of the travel is 1 ohm of 20 kohm, that is 1/20000 of 2·0.316 V
    assert found.error == pytest.approx(lacking * 1e3 / 20e3 * 2 * 0.1**0.5, rel=0.02)


def test_no_trim_no_travel():
    """A design without a potentiometer has none."""
    assert travel(Review(design_from(GAIN)), "gain") == ()
