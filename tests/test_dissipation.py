"""Powers, their means and how they follow the switching rate, on waveforms with closed forms.

Outside references: Joule's law; energy C V^2 that a source spends in a full cycle of a capacitor behind a resistor,
half of it left in the resistor at each edge (common textbook result, from memory); integrals of exponentials.
"""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.errors import MeasurementError
from transim.measure import METRICS, Definitions, Rating, Record, Timing, Waveform, extract
from transim.measure.cycle import RateLaw, duty_cycle, period_mean, rate_law, settling_after
from transim.measure.rate import CHARGE, rate_bound, rate_study

US = 1e-6
TIMING = Timing(on_edge=1 * US, off_edge=5 * US, edge=0.0, start=0.5 * US, stop=11 * US, period=10 * US)


def wave(time, value, unit="W"):
    return Waveform(np.array(time) * US, np.array(value), unit)


def relaxing(tau, on, off, kick_on=0.0, kick_off=0.0):
    """Return a power that settles with one time constant after each edge, from a kick above its settled value."""
    rising, falling = np.linspace(1e-6, 4.0, 8001), np.linspace(1e-6, 6.0, 12001)
    time = np.concatenate(([0.0, 1.0], 1.0 + rising, 5.0 + falling))
    kicks = kick_on * np.exp(-rising * US / tau), kick_off * np.exp(-falling * US / tau)
    return wave(time, np.concatenate(([off, off], on + kicks[0], off + kicks[1])))


def cycle(**parts):
    given_parts = {
        "timing": TIMING,
        # the RF takes 0.2 us each way, and 20 dB, 0.5 dB are passed on the ramps
        "envelope": wave([0, 1, 1.2, 5, 5.2, 11], [0, 0, 1, 1, 0, 0], "1"),
        "static_on": 1.0 + 0.0j,
        "junction_power": {"j1": relaxing(0.2 * US, 4e-3, 0.0), "j2": relaxing(0.2 * US, 2e-3, 0.0)},
    } | parts
    return Record(definitions=Definitions(), carrier=30e6, impedance=50.0, biased_passes=True, **given_parts)


def test_mean_is_over_one_period_though_the_record_is_longer():
    assert period_mean(wave([0, 1, 1.000001, 5, 5.000001, 11], [0, 0, 3, 3, 0, 0]), TIMING) == pytest.approx(1.2)


@pytest.mark.parametrize("period", [10.5, 40.0])
def test_mean_holds_the_last_value_to_the_end_of_the_period(period):
    timing = replace(TIMING, period=period * US)
    mean = period_mean(wave([0, 1, 1.000001, 5, 5.000001, 11], [1, 1, 3, 3, 1, 1]), timing)
    assert mean == pytest.approx((3 * 4 + 1 * (period - 4)) / period, rel=1e-6)


@pytest.mark.parametrize(("on", "off", "duty"), [(1, 5, 0.4), (5, 1, 0.6)])
def test_duty_cycle_counts_the_time_in_which_rf_passes(on, off, duty):
    assert duty_cycle(replace(TIMING, on_edge=on * US, off_edge=off * US)) == pytest.approx(duty)


def test_edges_a_period_apart_have_no_duty_cycle():
    with pytest.raises(MeasurementError, match="a period or more apart"):
        duty_cycle(replace(TIMING, off_edge=11 * US))


def test_energy_of_an_edge_is_the_integral_of_an_exponential():
    law = rate_law(relaxing(0.2 * US, 4e-3, 1e-3, kick_on=0.1, kick_off=0.05), TIMING)
    assert (law.settled_on, law.settled_off) == pytest.approx((4e-3, 1e-3), rel=1e-6)
    assert (law.edge_on, law.edge_off) == pytest.approx((0.1 * 0.2 * US, 0.05 * 0.2 * US), rel=1e-3)
    assert law.at(200e3) == pytest.approx(0.4 * 4e-3 + 0.6 * 1e-3 + 200e3 * 0.15 * 0.2 * US, rel=1e-3)


def test_a_resistor_that_charges_a_capacitor_burns_c_v_squared_a_cycle():
    # V^2/R exp(-2 t/RC) at each edge: half of C V^2 each
    volts, ohms, farads = 5.0, 100.0, 4e-9
    kick = volts**2 / ohms
    law = rate_law(relaxing(ohms * farads / 2.0, 0.0, 0.0, kick, kick), TIMING)
    assert law.idle == pytest.approx(0.0, abs=1e-8)
    assert law.slope == pytest.approx(farads * volts**2, rel=1e-3)


@given(st.floats(-1e-2, 1e-2), st.floats(-1e-2, 1e-2), st.floats(-0.1, 0.1), st.floats(-0.1, 0.1))
def test_law_at_the_commands_own_rate_is_the_mean(on, off, kick_on, kick_off):
    power = relaxing(0.7 * US, on, off, kick_on, kick_off)
    law = rate_law(power, TIMING)
    assert law.at(1.0 / TIMING.period) == pytest.approx(period_mean(power, TIMING), rel=1e-9, abs=1e-12)


def test_settling_is_to_the_last_entry_into_the_band():
    on, off = settling_after(relaxing(0.2 * US, 1.0, 0.0, kick_on=1.0, kick_off=1.0), TIMING, 0.02)
    assert (on, off) == pytest.approx((0.2 * US * math.log(50.0),) * 2, rel=1e-3)


def test_worst_junction_and_driver():
    record = cycle(
        supply_power=wave([0, 1, 1.000001, 5, 5.000001, 11], [0, 0, 10e-3, 10e-3, 0, 0]),
        driver_output_power=wave([0, 1, 1.000001, 5, 5.000001, 11], [0, 0, 6e-3, 6e-3, 0, 0]),
        supply_current={"vp": wave([0, 1, 11], [0, 0.02, 0], "A"), "vn": wave([0, 1, 11], [0, -0.03, 0], "A")},
        junction_current={"j1": wave([0, 1, 2, 11], [0, 7e-3, -9e-3, 0], "A")},
    )
    figures = {name: figure.value for name, figure in extract(record).items()}
    assert figures["junction_dissipation"] == pytest.approx(0.4 * 4e-3, rel=1e-4)
    assert figures["driver_dissipation"] == pytest.approx(0.4 * 4e-3, rel=1e-4)
    assert figures["driver_power"] == pytest.approx(0.4 * 10e-3, rel=1e-4)
    assert figures["supply_current_peak"] == 0.03
    assert figures["junction_current_peak"] == 7e-3


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("junction_current_peak", "no junction current in this record"),
        ("junction_dissipation", "no junction power in this record"),
        ("driver_dissipation", "the driver has no supply"),
        ("supply_current_peak", "no supply current in this record"),
        ("highest_rate", "on_settling is undefined: no RF envelope in this record"),
    ],
)
def test_what_is_not_recorded_has_its_reason(name, reason):
    figure = extract(cycle(junction_power={}, envelope=None))[name]
    assert (figure.value, figure.note) == (None, reason)


def test_without_ratings_the_slower_interval_sets_the_highest_rate():
    record = cycle()
    bound = rate_bound(record)
    # -0.5 dB is 0.9441 of the ramp up, -20 dB 0.9 of the ramp down
    assert bound.rate == pytest.approx(0.4 / (0.2 * US * 10 ** (-0.5 / 20)), rel=1e-6)
    assert bound.reason == "on_settling"
    late = replace(record, envelope=wave([0, 1, 1.2, 5, 8, 11], [0, 0, 1, 1, 0, 0], "1"))
    assert rate_bound(late).reason == "off_settling"
    assert rate_bound(late).rate == pytest.approx(0.6 / (0.9 * 3 * US), rel=1e-6)
    assert METRICS["highest_rate"].function(late) == rate_bound(late).rate


def rated(power, most, kind="mean", **parts):
    rating = Rating("junction.a.dissipation j1", most, kind, power)
    return cycle(junction_power={"j1": power}, ratings=(rating,), **parts)


def test_a_rated_mean_sets_the_rate_at_which_the_law_reaches_it():
    power = relaxing(0.02 * US, 4e-3, 0.0, kick_on=0.5)
    bound = rate_bound(rated(power, 4e-3))
    assert bound.rate == pytest.approx((4e-3 - 0.4 * 4e-3) / (0.5 * 0.02 * US), rel=0.01)
    assert bound.reason == "rating junction.a.dissipation j1"


def test_a_rated_mean_is_not_promised_where_charge_no_longer_settles():
    slow = wave(np.linspace(0, 11, 12), [0, 0, 1, 2, 3, 4, 0, 0, 0, 0, 0, 0], "C")
    power = relaxing(0.02 * US, 4e-3, 0.0, kick_on=0.5)
    bound = rate_bound(rated(power, 1.0, junction_charge={"j1": slow}))
    # within 2 % of its end, 4, from 3.92 us after the edge on
    assert (bound.rate, bound.reason) == (pytest.approx(0.4 / (3.92 * US)), CHARGE)
    assert rate_bound(cycle(junction_charge={"j1": slow})).reason == "on_settling"


@pytest.mark.parametrize(
    ("most", "kind", "text"),
    [
        (1e-3, "mean", "is exceeded at the lowest rates already: 1.6 mW, at most 1 mW"),
        (0.2, "peak", "is exceeded at any rate: 504 mW, at most 200 mW"),
    ],
)
def test_no_rate_holds_where_a_rating_is_exceeded_at_all(most, kind, text):
    text = f"rating junction.a.dissipation j1 {text}"
    record = rated(relaxing(0.02 * US, 4e-3, 0.0, kick_on=0.5), most, kind)
    assert extract(record)["highest_rate"].note == text
    study = rate_study(record)
    assert (study.highest, study.note) == (None, text)
    assert study.settled.reason == "on_settling"


def test_study_takes_the_worst_junction_and_leaves_out_what_is_not_recorded():
    study = rate_study(cycle())
    assert set(study.laws) == {"junction_dissipation"}
    assert study.laws["junction_dissipation"].settled_on == pytest.approx(4e-3)
    assert (study.duty, study.stated) == pytest.approx((0.4, 1e5))
    assert rate_study(cycle(junction_power={})) is None


def test_a_law_is_linear_in_the_rate():
    law = RateLaw(0.25, 8e-3, 4e-3, 3e-9, -1e-9, "W")
    assert (law.idle, law.slope) == (5e-3, pytest.approx(2e-9))
    assert law.at(1e6) == pytest.approx(7e-3)
