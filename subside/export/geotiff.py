"""Maps of a result as GeoTIFF files, one per variable and date."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from subside.api import CannotDo, Exporter, InputError
from subside.errors import nearest
from subside.export.atomic import whole
from subside.export.files import file_word, refuse_existing
from subside.names import RESULT_VARIABLES

if TYPE_CHECKING:
    import numpy as np
    import xarray as xr

__all__ = ["GeoTiff"]


class GeoTiff(Exporter):
    """Cloud-optimised GeoTIFF: float32, NaN where nothing is known, DEFLATE with predictor 3."""

    name = "geotiff"
    summary = "maps as cloud-optimised GeoTIFF, VARIABLE_YYYY-MM-DD.tif (north up, float32)"
    source = "OGC GeoTIFF 1.1; OGC Cloud Optimized GeoTIFF 1.0"

    def export(
        self, result: xr.Dataset, folder: Path, overwrite: bool,
        variables: tuple[str, ...] | None = None,
    ) -> list[Path]:
        """Write every map, or those of `variables`; see `Exporter.export`.

        Raises
        ------
        InputError
            If the result has no map or no CRS, a variable is no map, or a file is there already.
        CannotDo
            If rasterio is not installed, or the disk is full, not writable, ...
        """
        from subside.export.grid_mapping import projected_crs

        try:
            import rasterio
        except ImportError as error:
            raise CannotDo("GeoTIFF needs the package rasterio, which is not installed: "
                           'pip install "subside[geotiff]"') from error
        names = _map_names(result, variables)
        wkt = str(result.attrs.get("crs_wkt", ""))
        if not wkt:
            raise InputError("a GeoTIFF needs a coordinate reference system and this result has "
                             "none; name it in the scenario ([[grid]] crs = \"EPSG:...\") and run "
                             "again.")
        profile = _profile(result, rasterio, projected_crs(wkt).to_wkt("WKT2_2019"))
        maps = {folder / file: layer for name in names for file, layer in _layers(result, name)}
        refuse_existing(maps, overwrite)
        for path, layer in maps.items():
            _write(path, layer, profile, rasterio)
        return list(maps)


def _map_names(result: xr.Dataset, variables: tuple[str, ...] | None) -> list[str]:
    maps = [str(name) for name, data in result.data_vars.items() if {"x", "y"} <= set(data.dims)]
    if not maps:
        raise InputError("this result has no map (points only), so there is nothing to write as "
                         "GeoTIFF; add [map] to the scenario and run again.")
    for name in variables or ():
        if name not in maps:
            raise InputError(f"this result has no map '{name}'." + nearest(name, maps))
    return list(variables) if variables else maps


def _profile(result: xr.Dataset, rasterio: Any, wkt: str) -> dict[str, Any]:
    from subside.export.netcdf import check_map

    check_map(result, "GeoTIFF")
    x, y = result["x"].values, result["y"].values
    dx = (x[-1] - x[0]) / (x.size - 1)
    dy = (y[-1] - y[0]) / (y.size - 1)
    west, north = min(x[0], x[-1]) - abs(dx) / 2, max(y[0], y[-1]) + abs(dy) / 2
    return {
        "driver": "COG", "dtype": "float32", "count": 1, "nodata": float("nan"),
        "height": y.size, "width": x.size, "crs": rasterio.crs.CRS.from_wkt(wkt),
        "transform": rasterio.transform.from_origin(west, north, abs(dx), abs(dy)),
        "compress": "DEFLATE", "predictor": 3, "overview_resampling": "AVERAGE",
    }


def _layers(result: xr.Dataset, name: str) -> Iterator[tuple[str, xr.DataArray]]:
    """File name and (y, x) map of each date, and of each region where there are regions."""
    data = result[name].sortby("y", ascending=False).sortby("x")
    other = [dim for dim in data.dims if dim not in ("time", "y", "x")]
    stack = [(name, data)]
    for dim in other:
        labels = [str(v) for v in result.get(f"{dim}_name", result[dim]).values]
        words = [file_word(label) for label in labels]
        if len(set(words)) < len(words):  # two names that differ in odd characters only
            words = [f"{word}-{n}" for n, word in enumerate(words)]
        stack = [(f"{stem}_{word}", part.isel({dim: n}))
                 for stem, part in stack for n, word in enumerate(words)]
    for stem, part in stack:
        if "time" not in part.dims:
            yield f"{stem}.tif", part.transpose("y", "x")
            continue
        days = [str(t.astype("datetime64[D]")) for t in part["time"].values]
        if len(set(days)) < len(days):  # several dates in a day
            days = [str(t.astype("datetime64[s]")).replace(":", "") for t in part["time"].values]
        for n, day in enumerate(days):
            yield f"{stem}_{day}.tif", part.isel(time=n).transpose("y", "x")


def _write(path: Path, layer: xr.DataArray, profile: dict[str, Any], rasterio: Any) -> None:
    values: np.ndarray = layer.values.astype("float32")
    known = RESULT_VARIABLES.get(str(layer.name))
    unit = layer.attrs.get("units", known.unit if known else "1")
    long_name = layer.attrs.get("long_name", known.long_name if known else str(layer.name))
    comment = layer.attrs.get("comment", known.comment if known else "")
    title = f"{long_name} [{unit}]"
    tags = {"units": unit, "long_name": long_name, "comment": comment,
            "TIFFTAG_SOFTWARE": "subside", "TIFFTAG_IMAGEDESCRIPTION": title}
    if "time" in layer.coords:
        moment = layer["time"].values.astype("datetime64[s]")
        tags["datetime"] = str(moment)
        tags["TIFFTAG_DATETIME"] = str(moment).replace("-", ":").replace("T", " ")
    # On a full disk GDAL may leave a cut-off file without a word, so it only writes to memory.
    with rasterio.MemoryFile() as memory:
        with memory.open(**profile) as file:
            file.write(values, 1)
            file.set_band_description(1, title)
            file.set_band_unit(1, unit)
            file.update_tags(**{key: value for key, value in tags.items() if value})
        with whole(path) as part:
            part.write_bytes(memory.getbuffer())
