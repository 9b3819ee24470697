"""Pass tables in NetCDF, sound and damaged."""

import h5py
import numpy as np
import pytest
import xarray as xr

from fieldmap.errors import InputError
from fieldmap.readings.layout import ColumnSpec, TableLayout
from fieldmap.readings.tables import preview_table, read_table


def dataset(**changes):
    variables = {
        "time": ("reading", [0.0, 10.0, 20.0], {"units": "ms"}),
        "position": ("reading", [-600.0, -599.5, -599.0], {"units": "mm"}),
        "flux": ("reading", [0.0, 2.5, 4.0], {"units": "uV s"}),
    }
    variables.update(changes)
    return xr.Dataset({name: value for name, value in variables.items() if value is not None})


def stored(folder, data, kind="h5netcdf", **options):
    path = folder / "pass_01.nc"
    path.unlink(missing_ok=True)
    if kind == "h5netcdf":
        data.to_netcdf(path, engine="h5netcdf", **options)
    else:
        data.to_netcdf(path, engine="scipy", format=kind, **options)
    return path


def sentence(path, layout=None):
    with pytest.raises(InputError) as error:
        read_table(path, layout)
    assert "\n" not in str(error.value)
    return str(error.value)


KINDS = ["h5netcdf", "NETCDF3_CLASSIC", "NETCDF3_64BIT"]


@pytest.mark.parametrize("kind", KINDS)
def test_variables_come_in_si(tmp_path, kind):
    temperature = ("reading", [293.15, 293.15, 294.15], {"units": "K"})
    table = read_table(stored(tmp_path, dataset(temperature=temperature), kind))
    np.testing.assert_array_equal(table.time, [0.0, 0.01, 0.02])
    np.testing.assert_array_equal(table.position, [-0.6, -0.5995, -0.599])
    np.testing.assert_array_equal(table.samples, [0.0, 2.5e-6, 4e-6])
    np.testing.assert_allclose(table.temperature, [20.0, 20.0, 21.0])
    assert table.place(1) == "pass_01.nc, reading 2"
    assert len(table.sha256) == 64


@pytest.mark.parametrize("kind", KINDS)
def test_packed_values_are_unpacked(tmp_path, kind):
    packed = {"flux": {"dtype": "int16", "scale_factor": 0.5, "add_offset": 1.0, "_FillValue": -9}}
    path = stored(tmp_path, dataset(), kind, encoding=packed)
    np.testing.assert_array_equal(read_table(path).samples, [0.0, 2.5e-6, 4e-6])


def test_coordinates_counts_and_foreign_names(tmp_path):
    data = dataset(time=None, position=None, flux=None)
    data = data.assign_coords(t=("t", [0.0, 1.0, 2.0], {"units": "s"}))
    data["enc"] = ("t", np.array([0, 100, 200], dtype=np.int32))
    data["int"] = ("t", np.array([0.0, 2.5, 4.0], dtype=np.float32))
    data["notes"] = ((), "an experiment")
    columns = {
        "time": ColumnSpec("t"),
        "position": ColumnSpec("enc"),
        "flux": ColumnSpec("int", "uV s"),
    }
    table = read_table(stored(tmp_path, data), TableLayout(per_count=5e-6, columns=columns))
    np.testing.assert_allclose(table.position, [0.0, 5e-4, 1e-3])
    np.testing.assert_array_equal(table.samples, [0.0, 2.5e-6, 4e-6])
    assert table.time.dtype == table.position.dtype == table.samples.dtype == np.float64


def test_a_missing_variable(tmp_path):
    assert sentence(stored(tmp_path, dataset(flux=None, fluxes=("reading", [1.0, 2, 3])))) == (
        "pass_01.nc: found no column 'flux' among 'time', 'position', 'fluxes', expected a column "
        "'flux' for flux; write 'fluxes' if that is meant."
    )


def test_no_units(tmp_path):
    assert sentence(stored(tmp_path, dataset(flux=("reading", [1.0, 2, 3])))) == (
        "pass_01.nc, column 'flux': found no unit, expected a unit such as 'V s'; give the "
        "variable 'flux' the attribute units = 'V s'."
    )


def test_wrong_units(tmp_path):
    assert "found the unit 'mm', which is not a unit of the dimension of 'V s'" in sentence(
        stored(tmp_path, dataset(flux=("reading", [1.0, 2, 3], {"units": "mm"})))
    )


@pytest.mark.parametrize(
    ("values", "found"), [([0.0, np.nan, 4.0], "a missing value"), ([0, np.inf, 4], "an infinite")]
)
def test_values_that_are_no_numbers(tmp_path, values, found):
    path = stored(tmp_path, dataset(flux=("reading", values, {"units": "uV s"})))
    assert sentence(path).startswith(f"pass_01.nc, reading 2, column 'flux': found {found}")


def test_text_in_place_of_numbers(tmp_path):
    path = stored(tmp_path, dataset(flux=("reading", ["a", "b", "c"], {"units": "uV s"})))
    assert "pass_01.nc, variable 'flux': found values of type" in sentence(path)
    assert sentence(path).endswith("expected numbers.")


def test_another_dimension(tmp_path):
    path = stored(tmp_path, dataset(flux=("sample", [1.0, 2, 3, 4], {"units": "uV s"})))
    assert sentence(path) == (
        "pass_01.nc, variable 'flux': found the dimension 'sample' of 4, expected that of 'time': "
        "'reading'; store all columns along one dimension."
    )


def test_too_few_readings(tmp_path):
    assert "pass_01.nc: found 2 readings, expected three or more" in sentence(
        stored(tmp_path, dataset().isel(reading=slice(2)))
    )


def test_time_that_runs_backwards(tmp_path):
    path = stored(tmp_path, dataset(time=("reading", [0.0, 2, 1], {"units": "s"})))
    assert sentence(path).startswith("pass_01.nc, reading 3, column 'time': found 1 s after 2 s")


def test_more_values_declared_than_held(tmp_path):
    path = tmp_path / "pass_01.nc"
    with h5py.File(path, "w") as root:
        for name, unit in (("time", "s"), ("position", "m"), ("flux", "V s")):
            item = root.create_dataset(name, (10**12,), dtype="f8", chunks=(10**6,), fillvalue=0.0)
            item.attrs["units"] = unit
    assert "found 1000000000000 values declared in a file of" in sentence(path)
    assert sentence(path).endswith("expected values that the file holds; write the file again.")


@pytest.mark.parametrize("kind", ["link", "raw", "virtual"])
def test_data_kept_in_other_files(tmp_path, kind):
    (tmp_path / "secret.bin").write_bytes(np.arange(3.0).tobytes())
    stored(tmp_path, dataset()).rename(tmp_path / "other.nc")
    path = stored(tmp_path, dataset(flux=None))
    with h5py.File(path, "a") as root:
        if kind == "link":
            root["flux"] = h5py.ExternalLink(str(tmp_path / "other.nc"), "flux")
        elif kind == "raw":
            source = [(str(tmp_path / "secret.bin"), 0, 24)]
            root.create_dataset("flux", (3,), dtype="f8", external=source)
        else:
            virtual = h5py.VirtualLayout((3,), dtype="f8")
            virtual[:] = h5py.VirtualSource(str(tmp_path / "other.nc"), "flux", shape=(3,))
            root.create_virtual_dataset("flux", virtual)
    assert sentence(path) == (
        "pass_01.nc, variable 'flux': found data kept in another file, expected values; store the "
        "values in the file itself."
    )


def test_an_unknown_version(tmp_path):
    path = tmp_path / "pass_01.nc"
    path.write_bytes(b"CDF\x05" + bytes(100))
    assert sentence(path) == (
        "pass_01.nc: found a NetCDF file of an unknown version, expected NetCDF-4 or classic; "
        "write it as NetCDF-4, classic NetCDF or CSV."
    )


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.filterwarnings("ignore")
def test_damaged_files(tmp_path, kind):
    path = stored(tmp_path, dataset(), kind)
    whole = path.read_bytes()
    rng = np.random.default_rng(5)
    cuts = [whole[:n] for n in (8, 12, 30, len(whole) // 2, len(whole) - 10)]
    flips = []
    for _ in range(60):
        data = bytearray(whole)
        for place in rng.integers(4, len(data), 8):
            data[place] = rng.integers(256)
        flips.append(bytes(data))
    refused = 0
    for data in [*cuts, *flips]:
        path.write_bytes(data)
        try:
            table = read_table(path)
        except InputError as error:
            refused += 1
            message = str(error)
            assert (message.startswith("pass_01.nc"), "\n" in message) == (True, False)
        else:
            assert np.isfinite(table.samples).all()
    assert refused >= len(cuts)


def test_plain_hdf5(tmp_path):
    path = tmp_path / "pass_01.h5"
    with h5py.File(path, "w") as root:
        for name, unit in (("time", "s"), ("position", "m"), ("flux", "V s")):
            root[name] = np.arange(3.0)
            root[name].attrs["units"] = unit
    np.testing.assert_array_equal(read_table(path).samples, [0.0, 1.0, 2.0])


def test_preview(tmp_path):
    preview = preview_table(stored(tmp_path, dataset()), rows=1)
    assert preview.columns == ("time [ms]", "position [mm]", "flux [uV s]")
    assert preview.rows == (("0.0", "-600.0", "0.0"),)
