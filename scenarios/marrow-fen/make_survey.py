"""Make levelling.csv of Marrow Fen: five invented levelling campaigns over its benchmarks.

The true ground movement is a plain sum of point sources in an elastic half-space over the cells
of pressure.nc, written here without the package so that the two can be compared:
``u_z = (1 - nu)/pi dV c/R^3`` with ``dV = Cm drop V net_to_gross`` (Mindlin & Cheng 1950;
Geertsma 1973).  Each height is then given an error of its own, and each campaign one error of
the datum.  Run without arguments; needs numpy and netCDF4.
"""

from __future__ import annotations

import csv
import sys
from pathlib import Path

import netCDF4
import numpy as np

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parent))
from cells import Cells  # noqa: E402

POISSON = 0.25
DATES = ["1990-07-01", "1997-07-01", "2004-07-01", "2012-07-01", "2020-07-01"]
REFERENCE = "D11"  # the benchmark the lines are levelled from, at the rim of the bowl


def sources() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Day numbers since 1990, centres of the active cells (n, 3) and volumes lost (time, n)."""
    with netCDF4.Dataset(HERE / "pressure.nc") as nc:
        on = nc["active"][:] == 1
        cells = Cells(np.asarray(nc["corners"][:]))
        p = np.asarray(nc["pressure"][:])[:, on].astype(float)
        strength = (cells.volume * nc["net_to_gross"][:] * nc["cm"][:])[on]
        return np.asarray(nc["time"][:]), cells.centre[on], (p[0] - p) * np.asarray(strength)


def subsidence(x: np.ndarray, y: np.ndarray, centre: np.ndarray, lost: np.ndarray) -> np.ndarray:
    """Surface subsidence [m] at n points for volumes lost (time, cell) [m3]: (time, n)."""
    depth = centre[:, 2]
    r2 = (x[:, None] - centre[:, 0]) ** 2 + (y[:, None] - centre[:, 1]) ** 2 + depth**2
    return (1 - POISSON) / np.pi * lost @ (depth / r2**1.5).T


def main() -> None:
    """Write levelling.csv; print the deepest point of the bowl on a 250 m map."""
    days, centre, lost = sources()
    at = np.array([(np.datetime64(d) - np.datetime64("1990-01-01")).astype(float) for d in DATES])
    with (HERE / "benchmarks.csv").open() as f:
        marks = [row for row in csv.DictReader(f) if float(row["depth [m]"]) == 0.0]
    x, y = (np.array([float(row[f"{name} [m]"]) for row in marks]) for name in "xy")
    every = subsidence(x, y, centre, lost)
    true = np.stack([np.interp(at, days, column) for column in every.T], axis=1)

    rng = np.random.default_rng(20200701)
    home = [row["name"] for row in marks].index(REFERENCE)
    distance = np.hypot(x - x[home], y - y[home]) / 1000
    sigma = np.sqrt(1.0**2 + 0.7**2 * distance)  # mm: the mark itself, and 0.7 mm per root km
    height = rng.uniform(-1800, 900, len(marks))  # mm above the datum: low land
    datum = rng.normal(0, 3.0, len(DATES))
    heights = height - 1000 * true + datum[:, None] + sigma * rng.standard_normal(true.shape)
    with (HERE / "levelling.csv").open("w", newline="") as f:
        out = csv.writer(f, lineterminator="\n")
        out.writerow(["point", "x [m]", "y [m]", "date", "kind", "value [mm]", "sigma [mm]"])
        for date, values in zip(DATES, heights, strict=True):
            for row, value, s in zip(marks, values, sigma, strict=True):
                out.writerow(
                    [
                        row["name"],
                        row["x [m]"],
                        row["y [m]"],
                        date,
                        "height",
                        f"{value:.2f}",
                        f"{s:.2f}",
                    ]
                )

    gx, gy = np.meshgrid(np.arange(555125, 572000, 250.0), np.arange(5905125, 5921000, 250.0))
    for step in (10, 20, 30, 35):
        bowl = subsidence(gx.ravel(), gy.ravel(), centre, lost[[step]])[0]
        n = bowl.argmax()
        print(
            f"{1990 + step}-01-01 deepest {1000 * bowl[n]:.2f} mm at "
            f"({gx.ravel()[n]:.0f}, {gy.ravel()[n]:.0f}); volume lost {lost[step].sum():.4e} m3"
        )


if __name__ == "__main__":
    main()
