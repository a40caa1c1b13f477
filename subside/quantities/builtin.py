"""Further result variables: tilt, principal horizontal strain, rate of subsidence."""

from __future__ import annotations

from typing import ClassVar

import numpy as np
import xarray as xr

from subside.api import Quantity, hookimpl

__all__ = ["subside_quantities"]

_STRAIN = ("horizontal_strain_east", "horizontal_strain_north", "horizontal_strain_shear")


class Tilt(Quantity):
    """Magnitude of the slope that subsidence adds to the ground."""

    name = "tilt"
    summary = "slope that subsidence adds to the ground, m per m"
    source = "gradient of subsidence, from derivatives of the kernels"
    unit = "1"
    long_name = "tilt"
    looks_back = 0
    needs: ClassVar[tuple[str, ...]] = ("slope_east", "slope_north")

    def compute(self, result: xr.Dataset) -> xr.DataArray:
        return xr.DataArray(np.hypot(result["slope_east"], result["slope_north"]))


def _principal(result: xr.Dataset, sign: float) -> xr.DataArray:
    east, north, shear = (result[name] for name in _STRAIN)
    return 0.5 * (east + north) + sign * np.hypot(0.5 * (east - north), shear)


class HorizontalStrainMajor(Quantity):
    """The larger principal horizontal strain, extension positive."""

    name = "horizontal_strain_major"
    summary = "larger principal horizontal strain, extension positive"
    source = "eigenvalues of the horizontal strain tensor"
    unit = "1"
    long_name = "major principal horizontal strain"
    looks_back = 0
    needs: ClassVar[tuple[str, ...]] = _STRAIN

    def compute(self, result: xr.Dataset) -> xr.DataArray:
        return _principal(result, 1.0)


class HorizontalStrainMinor(Quantity):
    """The smaller principal horizontal strain, compression negative."""

    name = "horizontal_strain_minor"
    summary = "smaller principal horizontal strain, compression negative"
    source = "eigenvalues of the horizontal strain tensor"
    unit = "1"
    long_name = "minor principal horizontal strain"
    looks_back = 0
    needs: ClassVar[tuple[str, ...]] = _STRAIN

    def compute(self, result: xr.Dataset) -> xr.DataArray:
        return _principal(result, -1.0)


class SubsidenceRate(Quantity):
    """Mean rate over the interval before each output date."""

    name = "subsidence_rate"
    summary = "rate of subsidence over the interval before each date, m/s"
    source = "difference of subsidence over the interval"
    unit = "m s-1"
    long_name = "rate of subsidence"
    looks_back = 1
    needs: ClassVar[tuple[str, ...]] = ("subsidence",)

    def compute(self, result: xr.Dataset) -> xr.DataArray:
        subsidence = result["subsidence"]
        seconds = (result["time"].values - np.datetime64(result.attrs["time_start"])) \
            / np.timedelta64(1, "s")
        # before the first output date lies the start, where everything is zero
        before = np.concatenate([[0.0], seconds[:-1]])
        interval = seconds - before
        change = np.diff(subsidence.values, axis=0, prepend=0.0)
        rate = np.zeros_like(change)
        moving = interval > 0
        rate[moving] = change[moving] / interval[moving, None, None]
        return subsidence.copy(data=rate)


@hookimpl
def subside_quantities() -> list[type[Quantity]]:
    return [Tilt, HorizontalStrainMajor, HorizontalStrainMinor, SubsidenceRate]
