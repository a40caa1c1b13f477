"""Make pressure.nc of Sallow Heath: a shallow oil sand drawn down, then refilled with water.

Run it without arguments (about a minute); needs numpy, scipy, netCDF4 and, for the text of
the map projection, pyproj.  The place and the field are invented; random numbers are seeded.
The injected water is given the oil's viscosity: one liquid fills all the pores.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
from scipy.ndimage import gaussian_filter

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parent))
from cells import Cells, Links, connect, outer_edge  # noqa: E402
from flow import (  # noqa: E402
    BAR,
    GRAVITY,
    MILLIDARCY,
    YEAR,
    Field,
    Fluid,
    Rock,
    Well,
    run_years,
    well_index,
)
from grid_file import grid_file  # noqa: E402

NI, NJ, NK = 44, 32, 5
EPSG, ORIGIN, AZIMUTH = 3035, (4207800.0, 3316400.0), 35.0  # j axis, clockwise from north
SIDE = 100.0  # m
LAYER_THICKNESS = np.array([6.0, 8.0, 3.0, 9.0, 7.0])
LAYER_POROSITY = np.array([0.33, 0.35, 0.27, 0.34, 0.32])
LAYER_NET = np.array([0.90, 0.95, 0.60, 0.95, 0.90])
# region: name, compressibility before and after yield, unloading [1/MPa], depletion at yield [MPa]
REGIONS = {
    1: ("upper_sand", 8.0e-4, 6.0e-3, 4.0e-4, 0.9),
    2: ("lower_sand", 6.0e-4, 4.0e-3, 3.5e-4, 1.2),
    3: ("silty_margin", 5.0e-4, 1.5e-3, 3.0e-4, 1.8),
}
START, LAST = 1996, 2020
# name, i, j, then (from year, surface m3/day); production positive, injection negative
WELLS = [
    ("SH-1", 13, 12, [(1996, 75.0), (2010, 0.0)]),
    ("SH-2", 18, 19, [(1996, 75.0), (2010, 0.0)]),
    ("SH-3", 22, 13, [(1997, 68.0)]),
    ("SH-4", 26, 19, [(1997, 68.0)]),
    ("SH-5", 30, 13, [(1998, 64.0), (2010, 0.0)]),
    ("SH-6", 16, 16, [(2009, -80.0), (2016, -46.0)]),
    ("SH-7", 28, 16, [(2010, -80.0), (2016, -46.0)]),
    ("SH-8", 22, 17, [(2010, -80.0), (2016, -46.0)]),
]
PRODUCER_FLOOR, INJECTOR_LID = 11 * BAR, 62 * BAR


def oil() -> Fluid:
    """Dead oil of 905 kg/m3 and 14 mPa s at 50 bar, compressibility 7e-5 1/bar."""
    p = np.linspace(0.5, 200.0, 400) * BAR
    rho = 905.0 * np.exp(7e-10 * (p - 50 * BAR))
    return Fluid.tabulated(p, rho, 14e-3 * np.exp(1.5e-8 * (p - 50 * BAR)), 900.0)


def plan(u: np.ndarray, v: np.ndarray) -> np.ndarray:
    """Map coordinates (..., 2) of a place `u` along the i axis and `v` along the j axis [m]."""
    a = np.radians(AZIMUTH)
    return np.stack(
        [ORIGIN[0] + u * np.cos(a) + v * np.sin(a), ORIGIN[1] - u * np.sin(a) + v * np.cos(a)], -1
    )


def boxes() -> dict[str, np.ndarray]:
    """Local centres u, v (j, i) and flat tops and bottoms (k, j, i) [m]: a low swell."""
    u, v = np.meshgrid((np.arange(NI) - (NI - 1) / 2) * SIDE, (np.arange(NJ) - (NJ - 1) / 2) * SIDE)
    crest = 492 + 22 * ((u / 2000) ** 2 + (v / 1300) ** 2) + 0.006 * u
    thick = LAYER_THICKNESS[:, None, None] * (1 + 0.06 * np.cos(u / 900) - 0.05 * np.sin(v / 700))
    bottom = np.round((crest + np.cumsum(thick, axis=0)) * 128) / 128
    top = np.concatenate([np.round(crest * 128)[None] / 128, bottom[:-1]])
    return {"u": u, "v": v, "top": top, "bottom": bottom}


def as_corners(box: dict[str, np.ndarray]) -> np.ndarray:
    """Corners (k, j, i, 8, 3) of the boxes, in the axes of the grid (lengths stay the same)."""
    corners = np.empty((NK, NJ, NI, 8, 3))
    for n, (du, dv) in enumerate([(-1, -1), (1, -1), (1, 1), (-1, 1)]):
        for face, depth in enumerate((box["top"], box["bottom"])):
            corners[..., n + 4 * face, 0] = box["u"] + du * SIDE / 2
            corners[..., n + 4 * face, 1] = box["v"] + dv * SIDE / 2
            corners[..., n + 4 * face, 2] = depth
    return corners


def rock(box: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
    """Properties per cell (k, j, i), seeded: porosity, net-to-gross, permeability, region."""
    noise = np.random.default_rng(19960101).standard_normal((NK, NJ, NI))
    noise = gaussian_filter(noise, (0.5, 2.0, 2.5), mode="nearest")
    noise /= noise.std()
    outward = np.sqrt((box["u"] / 1650) ** 2 + (box["v"] / 1050) ** 2)
    shaly = 1 / (1 + np.exp(-(outward - 1.05) / 0.06))  # the sand bar passes into silt
    porosity = LAYER_POROSITY[:, None, None] + 0.012 * noise - 0.05 * shaly
    permeability = 10 ** (-1.5 + 12 * porosity) * 10 ** (-3.5 * shaly)
    region = np.where(np.arange(NK)[:, None, None] < 2, 1, 2) * np.ones((NK, NJ, NI), int)
    return {
        "porosity": porosity,
        "net_to_gross": np.clip(LAYER_NET[:, None, None] + 0.02 * noise - 0.25 * shaly, 0.2, 1.0),
        "permeability": permeability,
        "region": np.where(outward > 1.05, 3, region),
        "active": np.broadcast_to(
            (box["u"] / 2200) ** 4 + (box["v"] / 1600) ** 4 < 1.3, (NK, NJ, NI)
        ),
    }


def build(cells: Cells, props: dict[str, np.ndarray]) -> tuple[Field, np.ndarray]:
    """The flow problem over the active cells, and the flat numbers of those."""
    on = np.flatnonzero(props["active"])
    renumber = np.full(props["active"].size, -1)
    renumber[on] = np.arange(len(on))
    kh = props["permeability"] * props["net_to_gross"] * MILLIDARCY
    links = connect(cells, kh, 0.05 * kh, props["active"])
    links = Links(renumber[links.a], renumber[links.b], links.transmissibility, links.axis)
    flat = {name: value.ravel()[on] for name, value in props.items()}
    depth, net = cells.centre[..., 2].ravel()[on], cells.volume.ravel()[on] * flat["net_to_gross"]
    before, after, unload, at_yield = (
        np.array([REGIONS[r][n] for r in flat["region"]]) for n in (1, 2, 3, 4)
    )
    fluid = oil()
    pressure = np.full(len(on), 50 * BAR)
    for _ in range(30):  # at rest: 51 bar at 510 m
        pressure = 51 * BAR + 0.5 * GRAVITY * (depth - 510) * (
            fluid.density(pressure) + fluid.density(51 * BAR)
        )
    wells = []
    for name, i, j, steps in WELLS:
        column = np.arange(NK) * NI * NJ + j * NI + i
        height = cells.volume.ravel()[column] / SIDE**2

        def schedule(time: float, steps: list[tuple[int, float]] = steps) -> float:
            passed = [rate for year, rate in steps if year <= START + time / YEAR]
            return passed[-1] / 86400 if passed else 0.0

        limit = PRODUCER_FLOOR if steps[0][1] > 0 else INJECTOR_LID
        index = well_index(kh.ravel()[column], height, SIDE, SIDE)
        wells.append(Well(name, renumber[column], index, schedule, limit))
    n = len(on)
    return Field(
        links=links,
        depth=depth,
        fluid=np.zeros(n, int),
        fluids=[fluid],
        start_pressure=pressure,
        pore_volume=net * flat["porosity"],
        elastic_volume=np.zeros(n),
        net_volume=net,
        rock=Rock(before / 1e6, after / 1e6, at_yield * 1e6, unload / 1e6),
        contact=np.zeros(n),
        wells=wells,
    ), on


def write(
    path: Path,
    box: dict[str, np.ndarray],
    props: dict[str, np.ndarray],
    pressure: np.ndarray,
    days: np.ndarray,
) -> None:
    """Write the pressure grid as boxes; `pressure` (time, k, j, i) [MPa]."""
    with grid_file(
        path, "Sallow Heath, simulated pressure", EPSG, f"{START}-01-01", days, props["active"]
    ) as grid:
        middle = plan(box["u"], box["v"])
        for n, (name, meaning) in enumerate([("x", "easting"), ("y", "northing")]):
            grid.add(
                name,
                "f8",
                "j i",
                middle[..., n],
                units="m",
                grid_mapping="crs",
                standard_name=f"projection_{name}_coordinate",
                long_name=f"{meaning} of the box's centre",
            )
        for name, meaning in [("dx", "size along i"), ("dy", "size along j")]:
            grid.add(name, "f8", "j i", np.full((NJ, NI), SIDE), units="m", long_name=meaning)
        grid.add(
            "azimuth",
            "f8",
            "j i",
            np.full((NJ, NI), AZIMUTH),
            units="degree",
            long_name="clockwise from grid north to the box's own y axis, the j axis",
        )
        for name in ("top", "bottom"):
            grid.add(
                name,
                "f8",
                "k j i",
                box[name],
                units="m",
                positive="down",
                vertical_datum="mean sea level",
                grid_mapping="crs",
                long_name=f"depth of the box's {name}",
            )
        grid.add_pressure(pressure, "MPa", 8192)
        grid.add_flags(
            "region", props["region"], [r[0] for r in REGIONS.values()], 1, "kind of sand"
        )
        for name, unit, meaning in [
            ("porosity", "1", "pore share of the net rock"),
            ("net_to_gross", "1", "net share of the cell's volume"),
        ]:
            grid.add(name, "f4", "k j i", props[name], units=unit, long_name=meaning)


def main() -> None:
    """Compute and write pressure.nc beside this script, and print its history."""
    box = boxes()
    cells, props = Cells(as_corners(box)), rock(box)
    # what is written is what flows: the same rounded numbers
    props = {
        name: value.astype("f4").astype(float) if value.dtype == float else value
        for name, value in props.items()
    }
    field, on = build(cells, props)
    days, states = run_years(field, START, LAST, parts=12)
    pressure = np.full((len(days), NK * NJ * NI), np.nan)
    pressure[:, on] = [state.pressure / 1e6 for state in states]
    write(HERE / "pressure.nc", box, props, pressure.reshape(-1, NK, NJ, NI), days)
    region, drop = props["region"].ravel()[on], pressure[0, on] - pressure[:, on]
    print("depletion [MPa], mean by pore volume:", *[r[0] for r in REGIONS.values()], "| largest")
    for n, row in enumerate(drop):
        means = [
            np.average(row[region == r], weights=field.pore_volume[region == r]) for r in REGIONS
        ]
        print(START + n, " ".join(f"{m:7.3f}" for m in means), f"| {row.max():7.3f}")
    edge = outer_edge(props["active"]).ravel()[on]
    print(f"largest on the outer edge of the active cells {drop[:, edge].max():.4f} MPa")


if __name__ == "__main__":
    main()
