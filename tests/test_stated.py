"""Stated quantities in handy units."""

import pytest

from fieldmap.readings import Coil, Integrator, Stage, Wire
from fieldmap.show.stated import in_handy_unit, stated_rows, written_out


def rows(instrument):
    return {name: tuple(rest) for name, *rest in stated_rows(instrument)}


def test_a_wire():
    wire = Wire("w", turns=20, active_length=0.05, u_active_length=2e-5, width=4e-4, polarity=-1)
    assert rows(wire) == {
        "turns": ("20", "", ""),
        "active length": ("50", "0.02", "mm"),
        "width": ("0.4", "", "mm"),
        "polarity": ("-1", "", ""),
    }


def test_a_coil_leaves_out_what_is_not_there():
    coil = Coil("c", "round", effective_area=0.3, u_effective_area=6e-5, window=0.01)
    assert rows(coil) == {
        "effective area": ("0.3", "0.00006", "m²"),
        "window": ("10", "", "mm"),
    }


def test_an_integrator_says_which_levels_were_found():
    shown = rows(Integrator("main", read_noise=5e-8, u_drift=1e-6, leak_time=4000.0))
    assert shown["read noise"] == ("50", "", "nV·s")
    assert shown["walk noise"][0].startswith("not stated")
    assert shown["drift"] == ("0", "1", "µV·s/s")
    assert shown["leak time"] == ("4000", "", "s")
    assert "full scale" not in shown


def test_a_stage_has_uncertainties_only():
    shown = rows(Stage(u_scale=2e-5, u_position=5e-6, u_offset=2e-4, u_lag=2e-3))
    assert shown == {
        "scale": ("", "20", "1e-6"),
        "position": ("", "5", "µm"),
        "offset": ("", "0.2", "mm"),
        "lag": ("", "2", "ms"),
    }


@pytest.mark.parametrize(
    ("unit", "size", "words"),
    [("m", 0.05, "mm"), ("T", 5e-6, "µT"), ("rad", 2e-3, "mrad"), ("s", 20.0, "s"), ("K", 1, "K")],
)
def test_handy_units(unit, size, words):
    assert in_handy_unit(unit, size).unit == words


def test_numbers_without_exponents():
    assert [written_out(one) for one in (0.00006, 0.0, 12.5, 1e-9)] == [
        *("0.00006", "0", "12.5", "1e-09"),
    ]
