"""The exporters that come with the project."""

from __future__ import annotations

from subside.api import Exporter, hookimpl
from subside.export.geotiff import GeoTiff


@hookimpl
def subside_exporters() -> list[type[Exporter]]:
    """Kinds of file `subside export` writes."""
    return [GeoTiff]
