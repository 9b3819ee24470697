"""What was recorded to cumulative flux, and passes from plain arrays."""

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from scipy.interpolate import CubicSpline

from fieldmap.errors import InputError
from fieldmap.readings import Coil, Integrator, Wire, make_pass
from fieldmap.readings.records import cumulative_flux, integrate_voltage, undo_droop

WIRE = Wire("wire", turns=20, active_length=0.05)
COIL = Coil("coil", "round", effective_area=0.3, window=0.01)
TIME = np.array([0.0, 0.1, 0.3, 0.35, 0.6, 1.0])


def sentence(call, *arguments, **options):
    with pytest.raises(InputError) as error:
        call(*arguments, **options)
    assert "\n" not in str(error.value)
    return str(error.value)


class TestCumulative:
    def test_is_left_alone(self):
        flux = np.array([3.0, 1.0, 4.0])
        np.testing.assert_array_equal(cumulative_flux(flux, np.arange(3.0)), flux)

    def test_a_leak_time_of_a_digital_integrator_means_nothing(self):
        digital = Integrator("main", "digital", leak_time=10.0)
        flux = np.array([3.0, 1.0, 4.0])
        np.testing.assert_array_equal(
            cumulative_flux(flux, np.arange(3.0), "cumulative", digital), flux
        )


class TestIncrements:
    @settings(deadline=None)
    @given(hnp.arrays(float, st.integers(3, 50), elements=st.floats(-1, 1)))
    def test_differences_give_back_the_increments(self, dflux):
        flux = cumulative_flux(dflux, np.arange(float(dflux.size)), "increments")
        np.testing.assert_allclose(np.diff(flux), dflux[1:], atol=1e-12)
        assert flux[0] == dflux[0]

    def test_droop_cannot_be_undone(self):
        analog = Integrator("main", "analog", leak_time=4000.0)
        assert sentence(cumulative_flux, TIME, TIME, "increments", analog) == (
            "element 0 (counted from 0): found record 'increments' from an integrator with a "
            "leak_time, expected cumulative readings, since droop depends on the level that was "
            "shown; record cumulative flux, or leave leak_time out and raise u_drift."
        )


class TestVoltage:
    @settings(deadline=None)
    @given(hnp.arrays(float, 4, elements=st.floats(-10, 10)))
    def test_cubic_voltages_are_integrated_exactly(self, coefficients):
        voltage = np.polynomial.Polynomial(coefficients)
        flux = integrate_voltage(voltage(TIME), TIME)
        exact = voltage.integ()
        np.testing.assert_allclose(flux, exact(TIME) - exact(TIME[0]), atol=1e-12)

    def test_equals_the_antiderivative_of_the_spline(self):
        rng = np.random.default_rng(1)
        time = np.cumsum(rng.uniform(0.5, 1.5, 200))
        voltage = rng.normal(size=200)
        expected = CubicSpline(time, voltage).antiderivative()(time)
        np.testing.assert_allclose(integrate_voltage(voltage, time), expected, atol=1e-12)

    def test_converges_with_the_fourth_power_of_the_spacing(self):
        errors = []
        for count in (41, 81):
            time = np.linspace(0.0, np.pi, count)
            errors.append(abs(integrate_voltage(np.sin(time) ** 2, time)[-1] - np.pi / 2))
        assert errors[1] < errors[0] / 12 < 1e-6

    def test_three_samples_are_a_parabola(self):
        time = np.array([0.0, 1.0, 3.0])
        np.testing.assert_allclose(integrate_voltage(time**2, time), time**3 / 3)

    def test_a_leak_time_does_not_matter(self):
        analog = Integrator("main", "analog", leak_time=1.0)
        np.testing.assert_array_equal(
            cumulative_flux(TIME, TIME, "voltage", analog), integrate_voltage(TIME, TIME)
        )

    def test_a_repeated_time_stamp(self):
        time = np.array([0.0, 1.0, 1.0, 2.0])
        assert sentence(cumulative_flux, time, time, "voltage", None, "line {}".format) == (
            "line 2, column 'time': found 1 s after 1 s, expected time that grows: voltage samples "
            "are integrated; record time with more digits, or give 'rate' instead."
        )

    def test_time_stamps_that_almost_repeat(self):
        time = np.array([0.0, 1.0, 1.0000001, 2.0, 3.0])
        assert sentence(integrate_voltage, time, time) == (
            "element 2 (counted from 0), column 'time': found 1e-07 s to the reading before, 1 s "
            "usually, expected evenly spread samples of the voltage; mend the time stamps, or "
            "give 'rate' instead."
        )


class TestDroop:
    def test_undone_for_a_known_voltage(self):
        # A constant voltage v into a leaking integrator shows v·tau·(1 − exp(−t/tau)).
        time, tau = np.linspace(0.0, 50.0, 20_001), 40.0
        shown = 2.0 * tau * -np.expm1(-time / tau)
        np.testing.assert_allclose(undo_droop(shown, time, tau), 2.0 * time, atol=1e-6)

    def test_happens_to_analog_cumulative_records(self):
        analog = Integrator("main", "analog", leak_time=10.0)
        flux = cumulative_flux(np.ones(3), np.array([0.0, 1.0, 3.0]), "cumulative", analog)
        np.testing.assert_allclose(flux, [1.0, 1.1, 1.3])


class TestMakePass:
    def test_arrays_become_a_pass(self):
        made = make_pass(
            [0, 1, 2], [0.0, 0.5, 0.75], [0.0, 0.1, 0.1], probe=WIRE, x=0.01, y=-0.02, name="out",
            temperature=[20, 20, 21], current=[85, 85, 85],
        )  # fmt: skip
        assert (made.name, made.probe, made.integrator) == ("out", WIRE, Integrator("main"))
        assert (made.x, made.y, made.record, made.source) == (0.01, -0.02, "cumulative", None)
        for array in (made.position, made.flux, made.time, made.temperature, made.current):
            assert array.dtype == np.float64
            assert array.shape == (3,)

    def test_the_arrays_of_the_caller_are_not_kept(self):
        flux = np.array([0.0, 0.5, 0.75])
        made = make_pass([0, 1, 2], flux, rate=10.0, probe=COIL)
        flux[:] = 9.0
        np.testing.assert_array_equal(made.flux, [0.0, 0.5, 0.75])
        np.testing.assert_allclose(made.time, [0.0, 0.1, 0.2])

    def test_records_are_cumulated(self):
        made = make_pass([0, 1, 2], [1.0, 1.0, 1.0], rate=2.0, probe=WIRE, record="voltage")
        np.testing.assert_allclose(made.flux, [0.0, 0.5, 1.0])
        assert made.record == "voltage"

    def test_labelled_arrays_bring_their_units(self):
        position = xr.DataArray([0.0, 5.0, 10.0], attrs={"units": "mm"})
        made = make_pass(position, xr.DataArray([1.0, 2.0, 3.0]), rate=1.0, probe=WIRE)
        np.testing.assert_array_equal(made.position, [0.0, 0.005, 0.01])
        bad = xr.DataArray([0.0, 5.0, 10.0], attrs={"units": "s"})
        assert sentence(make_pass, bad, [1, 2, 3], rate=1.0, probe=WIRE) == (
            "pass, argument 'position': found the unit 's', which is not a unit of the dimension "
            "of 'm', expected a unit such as 'm'."
        )

    @pytest.mark.parametrize(
        ("changes", "expected"),
        [
            (
                {"flux": [1, 2]},
                "pass, argument 'flux': found 2 values, expected 3 as in 'position'.",
            ),
            (
                {"flux": [1, np.nan, 3]},
                (
                    "pass, element 1 (counted from 0), column 'flux': found a missing value or "
                    "not-a-number, expected a finite number; mend or delete the row."
                ),
            ),
            (
                {"flux": np.ma.masked_array([1, 2, 3], [0, 0, 1])},
                (
                    "pass, element 2 (counted from 0), column 'flux': found a missing value or "
                    "not-a-number, expected a finite number; mend or delete the row."
                ),
            ),
            (
                {"position": [1, 2, np.inf]},
                (
                    "pass, element 2 (counted from 0), column 'position': found an infinite value, "
                    "expected a finite number; mend or delete the row."
                ),
            ),
            (
                {"position": [[1, 2, 3]]},
                (
                    "pass, argument 'position': found an array of 2 dimensions, expected one "
                    "dimension; give one number per reading."
                ),
            ),
            (
                {"flux": [1, 2, "x"]},
                (
                    "pass, argument 'flux': found no array of numbers (could not convert string to "
                    "float: 'x'), expected an array of numbers."
                ),
            ),
            (
                {"flux": [1, 2, 3j]},
                (
                    "pass, argument 'flux': found complex numbers, expected real numbers; take the "
                    "real part."
                ),
            ),
            (
                {"position": [1, 2], "flux": [1, 2], "rate": 1.0},
                (
                    "pass: found 2 readings, expected three or more; record the pass again or "
                    "leave it out."
                ),
            ),
            (
                {"rate": None, "time": [0, 2, 1]},
                (
                    "pass, element 2 (counted from 0), column 'time': found 1 s after 2 s, "
                    "expected time that never runs backwards; sort or mend the rows."
                ),
            ),
            (
                {"rate": None},
                (
                    "pass, arguments 'time' and 'rate': found neither, expected one of the two; "
                    "give rate in Hz if no time is known."
                ),
            ),
            (
                {"time": [1, 2, 3]},
                (
                    "pass, arguments 'time' and 'rate': found both, expected one of the two; "
                    "leave one out."
                ),
            ),
            (
                {"rate": -1.0},
                "pass, argument 'rate': found -1.0, expected a finite rate above zero in Hz.",
            ),
            (
                {"record": "cumulated"},
                (
                    "pass, argument 'record': found 'cumulated', expected one of 'cumulative', "
                    "'increments', 'voltage'; write 'cumulative' if that is meant."
                ),
            ),
            (
                {"probe": "wire"},
                "pass, argument 'probe': found a str, expected a Wire or a Coil.",
            ),
        ],
    )
    def test_refusals(self, changes, expected):
        arguments = {"position": [0, 1, 2], "flux": [0, 1, 2], "rate": 1.0, "probe": WIRE}
        assert sentence(make_pass, **{**arguments, **changes}) == expected
