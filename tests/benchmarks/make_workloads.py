"""Makes the workloads W1 to W5: seeded, rotated, dipping, faulted fields of invented cells.

    python tests/benchmarks/make_workloads.py W1 W2 --geometry boxes -o /tmp/w

writes a folder for each (``/tmp/w/W2-boxes``) with a pressure grid and a scenario that `subside
run` takes.
"""

from __future__ import annotations

from pathlib import Path

import click
import numpy as np
from bench.field import Field
from bench.workloads import WORKLOADS, write_workload

from subside.superposition.interface import Bodies, Targets

__all__ = ["field_of_cells", "raster"]


def field_of_cells(columns: int, rows: int, layers: int, *, size: float, thickness: float,
                   depth: float, dip: float = 0.02, throw: float = 60.0, azimuth: float = 25.0,
                   active: float = 0.6, steps: int = 20,
                   seed: int = 1) -> tuple[Bodies, np.ndarray]:
    """A small field about the origin for the tests: cells, and moments that are rougher.

    Returns
    -------
    Bodies, array (steps, cell)
        Cells outside the oval that holds the share `active` of the area lose no volume.
    """
    field = Field(columns, rows, layers, size, thickness, depth, steps, dip, throw, azimuth,
                  active, seed=seed)
    rng = np.random.default_rng(seed)
    layer = np.repeat(np.arange(layers), rows * columns)
    v, u = field.place
    far = np.tile((v[:, None] ** 2 + u[None, :] ** 2).ravel(), layers)
    strain = 1e-3 * np.exp(-far) * rng.uniform(0.3, 1.0, layers)[layer]
    strain *= np.tile(field.is_active.ravel(), layers) * rng.uniform(0.5, 1.0, field.count)
    speed = rng.uniform(0.5, 3.0, layers)[layer]
    time = np.linspace(0.0, 1.0, steps + 1)[1:]
    moments = strain * size * size * thickness * (1 - np.exp(-speed * time[:, None]))
    return Bodies(field.count, lambda index: field.corners(
        *np.unravel_index(index, field.shape))), moments


def raster(pixels: int, half: float) -> Targets:
    """A square map about the origin."""
    line = np.linspace(-half, half, pixels) + 13.0
    x, y = np.meshgrid(line, line[::-1])
    return Targets(x.ravel(), y.ravel(), np.zeros(x.size))


@click.command()
@click.argument("names", nargs=-1, type=click.Choice(list(WORKLOADS)))
@click.option("--geometry", default="boxes", show_default=True,
              type=click.Choice(["boxes", "corners", "leaning"]), help="How cells are stored.")
@click.option("--date-chunks", is_flag=True, help="One date in a storage chunk.")
@click.option("--cells-times", default=1, show_default=True, type=click.Choice([1, 4, 16]),
              help="So many times the cells, in the same field.")
@click.option("--seed", default=1, show_default=True)
@click.option("-o", "--output", default=Path("/tmp/w"), show_default=True,
              type=click.Path(path_type=Path, file_okay=False))
def main(names: tuple[str, ...], geometry: str, date_chunks: bool, cells_times: int, seed: int,
         output: Path) -> None:
    """Write workloads as pressure grids with scenarios."""
    for name in names or ("W1",):
        write_workload(WORKLOADS[name], output, geometry=geometry, date_chunks=date_chunks,
                       cells_times=cells_times, seed=seed)


if __name__ == "__main__":
    main()
