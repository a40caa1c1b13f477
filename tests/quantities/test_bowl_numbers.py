"""Numbers of the whole bowl and further result variables."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from subside.quantities.bowl import extremes, volumes
from subside.quantities.builtin import (
    HorizontalStrainMajor,
    HorizontalStrainMinor,
    SubsidenceRate,
    Tilt,
    subside_quantities,
)


def test_extremes_and_their_places() -> None:
    values = np.array([[0.0, 0.0, 0.0], [0.1, 0.3, -0.2], [0.05, 0.02, 0.4]])
    found = extremes(values, np.array([10.0, 20.0, 30.0]), np.array([1.0, 2.0, 3.0]))
    assert found["max_subsidence"].tolist() == [0.0, 0.3, 0.4]
    assert found["max_subsidence_x"].tolist()[1:] == [20.0, 30.0]
    assert found["max_subsidence_y"].tolist()[1:] == [2.0, 3.0]
    # uplift is positive up, and zero where nothing rises
    assert found["max_uplift"].tolist() == [0.0, 0.2, 0.0]
    assert (found["max_uplift_x"][1], found["max_uplift_y"][1]) == (30.0, 3.0)


def test_extremes_where_everything_rises() -> None:
    found = extremes(np.array([[-0.1, -0.2]]), np.array([5.0, 6.0]), np.array([7.0, 8.0]))
    assert found["max_subsidence"].tolist() == [0.0]
    assert (found["max_uplift"][0], found["max_uplift_x"][0]) == (0.2, 6.0)


def test_volume_inside_the_one_centimetre_contour() -> None:
    """Pixels of 9.999 mm, -20 mm and 0 stay out; exactly 1 cm is in. All count for the whole map.

    By hand, pixels of 100 m2: 0.01 + 0.5 + 0.03 m and 0.01 + 0.009999 + 0.5 - 0.02 + 0.03 m.
    """
    values = np.array([[0.0, 0.0, 0.0, 0.0, 0.0, 0.0], [0.01, 0.009999, 0.5, -0.02, 0.0, 0.03]])
    every, deep = volumes(values, 100.0)
    assert deep.tolist() == pytest.approx([0.0, 54.0])
    assert every.tolist() == pytest.approx([0.0, 52.9999])
    assert volumes(values, 100.0, threshold=0.1)[1].tolist() == pytest.approx([0.0, 50.0])


def test_volumes_of_a_slice_of_a_larger_array() -> None:
    values = np.random.default_rng(0).normal(size=(4, 6, 70))
    every, deep = volumes(values[:, 1:5, ::2].reshape(4, -1), 2.0, 0.5)
    part = values[:, 1:5, ::2]
    assert every == pytest.approx(2.0 * part.sum(axis=(1, 2)))
    assert deep == pytest.approx(2.0 * np.where(part >= 0.5, part, 0.0).sum(axis=(1, 2)))


DAY = 86400.0


def result(days: list[float], subsidence: list[float]) -> xr.Dataset:
    time = np.datetime64("2000-01-01", "ns") + (np.array(days) * DAY * 1e9).astype(
        "timedelta64[ns]")
    return xr.Dataset(
        {"subsidence": (("time", "y", "x"), np.reshape(subsidence, (-1, 1, 1)))},
        coords={"time": time}, attrs={"time_start": "2000-01-01T00:00:00"})


def test_rate_from_the_start_on() -> None:
    """First date at the start: zero there, then the mean of each interval."""
    rate = SubsidenceRate().compute(result([0.0, 10.0, 30.0], [0.0, 0.1, 0.05])).values.ravel()
    assert rate == pytest.approx([0.0, 0.1 / (10 * DAY), -0.05 / (20 * DAY)])


def test_rate_where_the_first_date_is_later() -> None:
    """Before the first output date lies the start, where subsidence is zero."""
    rate = SubsidenceRate().compute(result([50.0, 60.0], [0.2, 0.3])).values.ravel()
    assert rate == pytest.approx([0.2 / (50 * DAY), 0.1 / (10 * DAY)])


def strains(east: float, north: float, shear: float) -> xr.Dataset:
    return xr.Dataset({f"horizontal_strain_{n}": (("time", "y", "x"), np.full((1, 1, 1), v))
                       for n, v in (("east", east), ("north", north), ("shear", shear))})


@pytest.mark.parametrize("angle", [0.0, 17.0, 45.0, 90.0, 133.0])
def test_principal_strains_do_not_turn(angle: float) -> None:
    """3e-4 and -1e-4 turned by any angle come back, with trace and determinant."""
    a = np.radians(angle)
    turn = np.array([[np.cos(a), -np.sin(a)], [np.sin(a), np.cos(a)]])
    tensor = turn @ np.diag([3e-4, -1e-4]) @ turn.T
    data = strains(tensor[0, 0], tensor[1, 1], tensor[0, 1])
    major = HorizontalStrainMajor().compute(data).item()
    minor = HorizontalStrainMinor().compute(data).item()
    assert (major, minor) == pytest.approx((3e-4, -1e-4), rel=1e-12)


def test_shear_is_the_tensor_component() -> None:
    """Pure shear of tensor component 1e-4 (engineering 2e-4): principal strains +-1e-4."""
    data = strains(0.0, 0.0, 1e-4)
    assert HorizontalStrainMajor().compute(data).item() == pytest.approx(1e-4)
    assert HorizontalStrainMinor().compute(data).item() == pytest.approx(-1e-4)


def test_tilt_is_the_length_of_the_slope() -> None:
    data = xr.Dataset({"slope_east": ("x", [3e-5, 0.0]), "slope_north": ("x", [-4e-5, -1e-6])})
    assert Tilt().compute(data).values == pytest.approx([5e-5, 1e-6])


def test_units_and_needs_are_declared() -> None:
    units = {q.name: q.unit for q in subside_quantities()}
    assert units == {"tilt": "1", "horizontal_strain_major": "1", "horizontal_strain_minor": "1",
                     "subsidence_rate": "m s-1"}
