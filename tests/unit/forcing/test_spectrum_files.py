"""Wave spectra from every layout read, and from files that are damaged, ambiguous or lying."""

from __future__ import annotations

from pathlib import Path

import netCDF4
import numpy as np
import pytest

from lespost.errors import DataError
from lespost.forcing.spectrum import Spectrum, stokes_drift, summary
from lespost.forcing.spectrum_files import read_spectrum

REALTIME = """#YY  MM DD hh mm Sep_Freq  < spec_1 (freq_1) spec_2 (freq_2) spec_3 (freq_3) ... >
2026 01 01 00 30 0.120 0.000 (0.033) 1.250 (0.100) 0.310 (0.200) >
2026 01 01 00 00 9.999 0.000 (0.033) 0.750 (0.100) 0.110 (0.200) >
"""
HISTORY = """#YY  MM DD hh mm  .0330  .1000  .2000
2026 01 01 00 00   0.00   0.75   0.11
2026 01 01 00 30   0.00   1.25   0.31
2026 01 01 01 00 999.00 999.00 999.00
"""


def write(path: Path, text: str) -> Path:
    path.write_text(text)
    return path


def netcdf(path: Path, *, units: str = "m2 s rad-1", direction: str = "sea_surface_wave_from_direction", wave_height: float | None = None,
           angles: np.ndarray | None = None, frequency_units: str = "Hz") -> Path:
    """Energy in one bin, 250 degrees of the compass: density 1 at the first time, 3 at the second, from 0.1 to 0.3 Hz."""
    compass = np.arange(0.0, 360.0, 10.0) if angles is None else angles
    with netCDF4.Dataset(str(path), "w") as data:
        for name, size in (("time", 2), ("frequency", 5), ("direction", compass.size)):
            data.createDimension(name, size)
        axis = data.createVariable("frequency", "f8", ("frequency",))
        axis.standard_name, axis.units = "wave_frequency", frequency_units
        axis[:] = np.linspace(0.1, 0.3, 5)
        axis = data.createVariable("direction", "f8", ("direction",))
        axis.standard_name, axis.units = direction, "degree"
        axis[:] = compass
        density = data.createVariable("efth", "f4", ("direction", "time", "frequency"), fill_value=-9999.0)
        density.standard_name, density.units = "sea_surface_wave_directional_variance_spectral_density", units
        values = np.zeros((compass.size, 2, 5))
        values[np.argmin(abs(compass - 250.0))] = [[1.0], [3.0]]
        density[:] = values
        if wave_height is not None:
            height = data.createVariable("hs", "f8", ("time",))
            height.standard_name, height.units = "sea_surface_wave_significant_height", "m"
            height[:] = wave_height
    return path


def test_two_columns_with_units(tmp_path: Path) -> None:
    found = read_spectrum(write(tmp_path / "w.csv", "f (Hz),E (m2/Hz)\n0.2,1\n0.1,4\n0.3,0.5\n"))
    assert found.frequency.tolist() == [0.1, 0.2, 0.3]
    assert found.density.tolist() == [4, 1, 0.5]
    assert not found.has_direction


@pytest.mark.parametrize("text", [
    "frequency (rad/s),density (m2 s/rad)\n0.62831853,0.63661977\n1.25663706,0.15915494\n1.88495559,0.07957747\n",
    "f (mHz);E (cm2/Hz)\n100;40000\n200;10000\n300;5000\n",
    "0.1 4\n0.2 1\n0.3 0.5\n", "f (Hz) E (m2/Hz)\n0.1  4\n0.2  1\n0.3  0.5\n",
    "# f E\n0.1\t4\n0.2\t1\n0.3\t0.5\n",
    "E [m^2/Hz], freq [Hz]\n4,0.1\n1,0.2\n0.5,0.3\n",
])
def test_spellings_of_one_table(tmp_path: Path, text: str) -> None:
    found = read_spectrum(write(tmp_path / "w.csv", text))
    assert found.frequency == pytest.approx([0.1, 0.2, 0.3], rel=1e-6)
    assert found.density == pytest.approx([4, 1, 0.5], rel=1e-6)


def test_table_with_moments(tmp_path: Path) -> None:
    text = "f (Hz),E (m2/Hz),r1,direction_from (degree)\n0.1,4,0.9,270\n0.2,1,0.5,180\n0.3,0.5,0.5,180\n"
    found = read_spectrum(write(tmp_path / "w.csv", text))
    east, north = found.first_moments()
    assert east == pytest.approx([3.6, 0, 0], abs=1e-12)
    assert north == pytest.approx([0, 0.5, 0.25], abs=1e-12)
    opposite = read_spectrum(write(tmp_path / "v.csv", text.replace("direction_from", "direction_to")))
    assert opposite.first_moments()[0] == pytest.approx(-east, abs=1e-12)


def test_buoy_layouts_agree(tmp_path: Path) -> None:
    realtime = read_spectrum(write(tmp_path / "b.data_spec", REALTIME))
    history = read_spectrum(write(tmp_path / "b.txt", HISTORY))
    for found in (realtime, history):
        assert found.frequency.tolist() == [0.033, 0.1, 0.2]
        assert found.density == pytest.approx([0.0, 1.0, 0.21])  # the mean of two, the missing one left out
    assert read_spectrum(tmp_path / "b.data_spec", time=0).density == pytest.approx([0.0, 1.25, 0.31])
    assert read_spectrum(tmp_path / "b.txt", time=-2).density == pytest.approx([0.0, 1.25, 0.31])
    with pytest.raises(DataError, match="missing or flagged"):
        read_spectrum(tmp_path / "b.txt", time=2)
    with pytest.raises(DataError, match="numbered from 0"):
        read_spectrum(tmp_path / "b.txt", time=7)


def test_buoy_companions_give_the_first_moment(tmp_path: Path) -> None:
    path = write(tmp_path / "b.data_spec", REALTIME)
    header = "#YY  MM DD hh mm alpha1_1 (freq_1) ... >\n"
    stamps = ("2026 01 01 00 00", "2026 01 01 00 30")  # another order of times than the energies
    write(tmp_path / "b.swdir", header + "".join(f"{stamp} 999.0 (0.033) {a} (0.100) 180.0 (0.200) >\n" for stamp, a in
                                                 zip(stamps, (270.0, 90.0), strict=True)))
    write(tmp_path / "b.swr1", header + "".join(f"{stamp} 999.00 (0.033) 0.80 (0.100) 0.50 (0.200) >\n" for stamp in stamps))
    first = read_spectrum(path, time=0)
    assert first.first_moments()[0] == pytest.approx([0.0, -1.25 * 0.8, 0.0], abs=1e-12)  # 00:30 comes from the east
    assert first.first_moments()[1] == pytest.approx([0.0, 0.0, 0.31 * 0.5], abs=1e-12)
    mean = read_spectrum(path)  # the mean of energies times cosines, not of angles
    assert mean.first_moments()[0] == pytest.approx([0.0, 0.8 * (0.75 - 1.25) / 2, 0.0], abs=1e-12)
    u, v = stokes_drift(0.0, mean)
    singles = [stokes_drift(0.0, read_spectrum(path, time=number)) for number in (0, 1)]
    assert (u, v) == pytest.approx(tuple(np.mean(singles, axis=0)), rel=1e-12)


def test_minimal_netcdf_example(shared: Path) -> None:
    found = read_spectrum(shared / "data" / "records" / "minimal" / "min_wave_spectrum.nc")
    numbers = summary(found)
    # density 1 m2 s rad-1 from all sides: m0 = 2π (0.2 - 0.05), no net drift; worked out by hand
    assert numbers.hs == pytest.approx(4 * np.sqrt(2 * np.pi * 0.15), rel=1e-6)
    assert numbers.us0 == 0.0
    assert np.isnan(numbers.decay_scale) and np.isnan(numbers.direction)
    with pytest.raises(DataError, match="all sides"):
        found.towards(20.0)


def test_direction_and_units_of_netcdf(tmp_path: Path) -> None:
    """∫∫ = mean of 1 and 3 m2 s rad-1 over 10 degrees and 0.2 Hz; waves from 250 go towards 70 (compass), 20 from east."""
    found = read_spectrum(netcdf(tmp_path / "a.nc"))
    variance = 2 * np.radians(10.0) * 0.2
    assert summary(found).hs == pytest.approx(4 * np.sqrt(variance), rel=1e-6)
    assert summary(found).direction == pytest.approx(20.0)
    towards = read_spectrum(netcdf(tmp_path / "b.nc", direction="sea_surface_wave_to_direction"))
    assert summary(towards).direction == pytest.approx(-160.0)
    assert summary(read_spectrum(tmp_path / "a.nc", x_axis_compass_bearing=70.0)).direction == pytest.approx(0.0, abs=1e-9)
    degrees = read_spectrum(netcdf(tmp_path / "c.nc", units="m2 s degree-1"))
    assert summary(degrees).hs == pytest.approx(4 * np.sqrt(2 * 10.0 * 0.2), rel=1e-6)
    assert summary(read_spectrum(tmp_path / "a.nc", time=1)).hs == pytest.approx(4 * np.sqrt(1.5 * variance), rel=1e-6)
    assert read_spectrum(netcdf(tmp_path / "d.nc", angles=np.arange(0.0, 361.0, 10.0))).density.shape == (5, 36)


def test_density_per_radian_on_a_degree_axis_is_held_against_the_wave_height(tmp_path: Path) -> None:
    per_radian, per_degree = (4 * np.sqrt(2 * width * 0.2) for width in (np.radians(10.0), 10.0))
    assert summary(read_spectrum(netcdf(tmp_path / "a.nc", wave_height=per_radian))).hs == pytest.approx(per_radian, rel=1e-6)
    with pytest.raises(DataError, match="per degree or per radian"):
        read_spectrum(netcdf(tmp_path / "b.nc", wave_height=per_degree))
    # a unit that says neither is decided by the wave height, and refused without one
    assert summary(read_spectrum(netcdf(tmp_path / "c.nc", units="m2 s", wave_height=per_degree))).hs == pytest.approx(per_degree, rel=1e-6)
    assert summary(read_spectrum(netcdf(tmp_path / "d.nc", units="m2 s", wave_height=per_radian))).hs == pytest.approx(per_radian, rel=1e-6)
    with pytest.raises(DataError, match="per radian or per degree"):
        read_spectrum(netcdf(tmp_path / "e.nc", units="m2 s"))


def test_directions_that_do_not_say_their_sense_are_refused(tmp_path: Path) -> None:
    with pytest.raises(DataError, match="come from or go to"):
        read_spectrum(netcdf(tmp_path / "a.nc", direction="direction"))


def test_one_dimensional_netcdf_with_band_widths(tmp_path: Path) -> None:
    with netCDF4.Dataset(str(tmp_path / "one.nc"), "w") as data:
        data.createDimension("wave", 3)
        data.createDimension("nv", 2)
        axis = data.createVariable("freq", "f8", ("wave",))
        axis.standard_name, axis.units, axis.bounds = "sea_surface_wave_frequency", "s-1", "freq_bounds"
        axis[:] = [0.05, 0.1, 0.2]
        data.createVariable("freq_bounds", "f8", ("wave", "nv"))[:] = [[0.04, 0.07], [0.07, 0.15], [0.15, 0.25]]
        density = data.createVariable("e", "f8", ("wave",))
        density.standard_name, density.units = "sea_surface_wave_variance_spectral_density", "m2 s"
        density[:] = [0.5, 2.0, 1.0]
        mean = data.createVariable("dir", "f8", ("wave",))
        mean.standard_name, mean.units = "sea_surface_wave_from_direction", "degree"
        mean[:] = 180.0
    found = read_spectrum(tmp_path / "one.nc")
    assert summary(found).hs == pytest.approx(4 * np.sqrt(0.5 * 0.03 + 2 * 0.08 + 1 * 0.1))
    assert summary(found).direction == pytest.approx(90.0)


@pytest.mark.parametrize(("text", "message"), [
    ("", "empty"), ("nothing here\nat all\n", "no line of numbers"), ("f (Hz),E (m2/Hz)\n0.1,1\n0.2\n", "line 3"),
    ("f (Hz),E (m2/Hz)\n0.1,1\n0.2,x\n", "line 3"), ("f (Hz),E (m2/Hz)\n0.1,-1\n0.2,1\n", "negative"), ("f (Hz),E "
                                                                                                        "(K)\n0.1,1\n0.2,1\n", "m2/Hz"),
    ("f (Hz),E (m2/Hz)\n0.1,1\n0.1,1\n", "stands twice"), ("f (Hz),E (m2/Hz)\n0.1,1\n", "missing or flagged"),
    ("0.1,1,2\n0.2,1,2\n", "without a header"), ("f (Hz),E (m2/Hz),direction\n0.1,1,2\n0.2,1,2\n", "come from or go to"),
    ("f (Hz),E (m2/Hz),r1,direction_from\n0.1,1,90,2\n0.2,1,90,2\n", "r1"), ("f (furlong),E (m2/Hz)\n0.1,1\n0.2,1\n", "furlong"),
    (REALTIME + "2026 01 01 01 00 0.120 0.000 (0.033) 1.250 (0.1\n", "cut off"), (HISTORY + "2026 01 01 02 00 0.1\n", "cut off"),
    ("#YY  MM DD hh mm  .0330  .1000  .2000\n", "no spectra"),
])
def test_bad_text_is_refused_in_words(tmp_path: Path, text: str, message: str) -> None:
    path = write(tmp_path / "bad.csv", text)
    with pytest.raises(DataError, match=message) as error:
        read_spectrum(path)
    assert "bad.csv" in str(error.value)


def test_bad_files_are_refused_in_words(tmp_path: Path) -> None:
    with pytest.raises(DataError, match="no such file"):
        read_spectrum(tmp_path / "absent.nc")
    whole = netcdf(tmp_path / "whole.nc").read_bytes()
    (tmp_path / "cut.nc").write_bytes(whole[: len(whole) // 2])
    with pytest.raises(DataError, match=r"cut\.nc"):
        read_spectrum(tmp_path / "cut.nc")
    (tmp_path / "picture.csv").write_bytes(bytes(range(256)))
    with pytest.raises(DataError, match="neither netCDF nor text"):
        read_spectrum(tmp_path / "picture.csv")
    with netCDF4.Dataset(str(tmp_path / "other.nc"), "w") as data:
        data.createDimension("x", 3)
        data.createVariable("temperature", "f8", ("x",))[:] = 1.0
    with pytest.raises(DataError, match="standard name"):
        read_spectrum(tmp_path / "other.nc")


def test_arrays_that_are_no_spectrum_are_refused() -> None:
    for frequency, density in (([0.2, 0.1], [1, 1]),
                               ([0.0, 0.1], [1, 1]), ([0.1, 0.2], [1, np.nan]), ([0.1], [1]), ([0.1, 0.2], [1, 2, 3])):
        with pytest.raises(DataError):
            Spectrum(np.array(frequency, float), np.array(density, float))
