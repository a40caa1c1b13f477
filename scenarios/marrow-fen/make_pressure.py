"""Make pressure.nc of Marrow Fen: thirty years of gas production from three fault blocks.

Run it without arguments (about two minutes); needs numpy, scipy, netCDF4 and, for the text of
the map projection, pyproj.  The place and the field are invented; random numbers are seeded.
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

NI, NJ, NK = 60, 40, 8
WEST_FAULT, EAST_FAULT = 21, 41  # first column east of each fault
EPSG, ORIGIN, ROTATION = 32631, (563400.0, 5912700.0), 24.0  # i axis, degrees north of east
CONTACT = np.array([3015.0, 2965.0, 2965.0])  # gas-water contact of each block [m]
CONNATE_WATER, TEMPERATURE = 0.22, 376.0  # fraction, K
LAYER_POROSITY = np.array([0.185, 0.215, 0.20, 0.15, 0.195, 0.21, 0.18, 0.165])
LAYER_SHARE = np.array([0.11, 0.15, 0.13, 0.09, 0.14, 0.15, 0.13, 0.10])  # of the thickness
LAYER_NET = np.array([0.86, 0.95, 0.92, 0.70, 0.90, 0.95, 0.88, 0.80])
LEAKY_FAULT = 0.004  # share of the sand-to-sand transmissibility left by the fault's smear
START, SHUT_IN, LAST = 1990, 2020, 2025
REGIONS = ["west", "centre", "east", "water_west", "water_centre", "water_east"]
# name, i, j, first year, plateau [million surface m3/day]
WELLS = [
    ("MF-1", 11, 19, 1990, 0.88),
    ("MF-2", 14, 23, 1990, 0.88),
    ("MF-3", 16, 17, 1991, 0.80),
    ("MF-4", 27, 20, 1990, 0.63),
    ("MF-5", 31, 22, 1991, 0.63),
    ("MF-6", 35, 18, 1992, 0.63),
    ("MF-7", 45, 20, 1997, 0.09),
    ("MF-8", 48, 19, 2003, 0.06),
]
PLATEAU_END, DECLINE = 2006, 0.06  # after it the target falls, share per year
WELL_FLOOR = 84 * BAR


def gas() -> Fluid:
    """Dry gas of 17.4 g/mol (pseudo-critical 196 K, 46.1 bar) at the field's temperature.

    z factor: Dranchuk & Abou-Kassem (1975, J. Can. Pet. Tech. 14(3)); viscosity: Lee, Gonzalez
    & Eakin (1966, J. Pet. Tech. 18(8)).  Coefficients of both written down from memory.
    """
    molar, t_r = 0.0174, TEMPERATURE / 196.0
    p = np.linspace(1.0, 600.0, 600) * BAR
    p_r, z = p / 46.1e5, np.ones_like(p)
    a = [0.3265, -1.07, -0.5339, 0.01569, -0.05165, 0.5475, -0.7361, 0.1844, 0.1056, 0.6134, 0.721]
    first = a[0] + a[1] / t_r + a[2] / t_r**3 + a[3] / t_r**4 + a[4] / t_r**5
    pair = a[6] / t_r + a[7] / t_r**2
    for _ in range(200):
        r = 0.27 * p_r / (z * t_r)
        tail = a[9] * (1 + a[10] * r**2) * r**2 / t_r**3 * np.exp(-a[10] * r**2)
        z = 0.5 * z + 0.5 * (1 + first * r + (a[5] + pair) * r**2 - a[8] * pair * r**5 + tail)
    rho = p * molar / (z * 8.314462618 * TEMPERATURE)
    rankine, m = 1.8 * TEMPERATURE, 1000 * molar
    k = (9.379 + 0.01607 * m) * rankine**1.5 / (209.2 + 19.26 * m + rankine)
    x = 3.448 + 986.4 / rankine + 0.01009 * m
    mu = 1e-7 * k * np.exp(x * (rho / 1000) ** (2.447 - 0.2224 * x))
    return Fluid.tabulated(p, rho, mu, 1.01325e5 * molar / (8.314462618 * 288.15))


def brine() -> Fluid:
    """Brine of 1080 kg/m3 at 330 bar, compressibility 4.2e-5 1/bar, 0.38 mPa s."""
    p = np.linspace(1.0, 600.0, 600) * BAR
    rho = 1080.0 * np.exp(4.2e-10 * (p - 330 * BAR))
    return Fluid.tabulated(p, rho, np.full_like(p, 0.38e-3), 1060.0)


def spread(knots: list[float], at: list[int], n: int) -> np.ndarray:
    """Positions of n + 1 grid lines that pass the knots at the given line numbers."""
    return np.interp(np.arange(n + 1), at, knots)


def geometry() -> np.ndarray:
    """Corners (k, j, i, 8, 3): x, y in the map projection and depth [m], to 1/128 m."""
    v = spread([-4300, -2300, 2300, 4300], [0, 8, 32, 40], NJ)
    u = np.empty((NJ + 1, NI + 1))
    for j, across in enumerate(v):  # faults run oblique and slightly bowed
        west = -1500 + 0.16 * across + 260 * np.cos(across / 2600)
        east = 1500 - 0.12 * across - 220 * np.cos(across / 2900)
        u[j] = spread([-6800, -4300, west, east, 4300, 6800], [0, 9, 21, 41, 51, 60], NI)
    v = np.broadcast_to(v[:, None], u.shape)

    def bed(shift: float) -> np.ndarray:
        q = (u / 4100) ** 2 + ((v - 150 * np.sin(u / 2500)) / 2000) ** 2
        return 2838 + 105 * q / (1 + q / 5) - 0.006 * u - 0.003 * v + shift

    west_throw = 42.5 - 7.5 * np.tanh(v[:, WEST_FAULT] / 1800)  # 35-50 m, west side down
    east_throw = 52.5 + 7.5 * np.tanh(v[:, EAST_FAULT] / 1800)  # 45-60 m, east side down
    gross = 118 + 8 * np.sin(u / 3100) - 6 * np.cos(v / 2400)
    edges = np.concatenate([[0.0], np.cumsum(LAYER_SHARE)])
    c, s = np.cos(np.radians(ROTATION)), np.sin(np.radians(ROTATION))
    x, y = ORIGIN[0] + c * u - s * v, ORIGIN[1] + s * u + c * v
    corners = np.empty((NK, NJ, NI, 8, 3))
    i, j = np.arange(NI), np.arange(NJ)
    # throw dies away from the fault, so that a block is tilted rather than lifted whole
    down_west = west_throw[:, None] * np.exp(-(u[:, [WEST_FAULT]] - u).clip(0) / 6000)
    down_east = east_throw[:, None] * np.exp(-(u - u[:, [EAST_FAULT]]).clip(0) / 6000)
    shift = np.where(i < WEST_FAULT, 1, 0), np.where(i >= EAST_FAULT, 1, 0)
    for n, (di, dj) in enumerate([(0, 0), (1, 0), (1, 1), (0, 1)]):
        at = (j[:, None] + dj, i[None, :] + di)
        top = bed(0.0)[at] + shift[0] * down_west[at] + shift[1] * down_east[at]
        for face in (0, 1):
            corner = corners[..., n + 4 * face, :]
            corner[..., 0], corner[..., 1] = x[at], y[at]
            for k in range(NK):
                corner[k, ..., 2] = top + edges[k + face] * gross[at]
    return np.round(corners * 128) / 128


def rock(cells: Cells) -> dict[str, np.ndarray]:
    """Properties per cell (k, j, i), seeded: porosity, net-to-gross, permeability, Cm, region."""
    noise = np.random.default_rng(19900101).standard_normal((NK, NJ, NI))
    noise = gaussian_filter(noise, (0.6, 2.5, 3.5), mode="nearest")
    noise /= noise.std()
    i = np.broadcast_to(np.arange(NI), (NK, NJ, NI))
    block = (i >= WEST_FAULT).astype(int) + (i >= EAST_FAULT)
    below = cells.centre[..., 2] - CONTACT[block]
    wet = below > 0
    porosity = LAYER_POROSITY[:, None, None] + 0.012 * noise - 2e-5 * (cells.centre[..., 2] - 2900)
    # illite went on growing in the water leg after the gas had come, and trapped gas hinders
    # water there: some two thousand times less permeable, at the low end of what is known
    porosity = np.clip(porosity - 0.02 * (1 - np.exp(-below.clip(0) / 40)), 0.07, 0.25)
    permeability = 10 ** (-2.7 + 20 * porosity) * np.where(
        wet, 0.0003 * np.exp(-below.clip(0) / 60) + 0.0003, 1.0
    )
    middle = cells.centre[..., :2] - np.array(ORIGIN)
    c, s = np.cos(np.radians(ROTATION)), np.sin(np.radians(ROTATION))
    u, v = middle[..., 0] * c + middle[..., 1] * s, middle[..., 1] * c - middle[..., 0] * s
    return {
        "porosity": porosity,
        "net_to_gross": np.clip(LAYER_NET[:, None, None] + 0.03 * noise, 0.3, 1.0),
        "permeability": permeability,
        # invented trend: 1.15e-5 1/bar at a porosity of 0.20, a factor e for every 0.11
        "cm": 1.15e-5 * np.exp((porosity - 0.20) / 0.11),
        "region": block + 1 + 3 * wet,
        "active": np.abs(u / 6700) ** 4 + np.abs(v / 4250) ** 4 < 1.25,
    }


def start_pressure(depth: np.ndarray, block: np.ndarray, fluids: list[Fluid]) -> np.ndarray:
    """Pressure [Pa] at rest: one aquifer, 334 bar at 2950 m, and a gas column in each block."""
    line = np.linspace(2600.0, 3700.0, 11001)

    def column(fluid: Fluid, depth0: float, p0: float) -> np.ndarray:
        p = np.full_like(line, p0)
        for _ in range(30):
            gradient = GRAVITY * fluid.density(p)
            total = np.concatenate(
                [[0], np.cumsum(0.5 * np.diff(line) * (gradient[1:] + gradient[:-1]))]
            )
            p = p0 + total - np.interp(depth0, line, total)
        return p

    water = column(fluids[1], 2950.0, 334 * BAR)
    p = np.interp(depth, line, water)
    for b, contact in enumerate(CONTACT):
        above = (block == b) & (depth < contact)
        dry = column(fluids[0], contact, float(np.interp(contact, line, water)))
        p[above] = np.interp(depth[above], line, dry)
    return p


def build(cells: Cells, props: dict[str, np.ndarray]) -> tuple[Field, np.ndarray]:
    """The flow problem over the active cells, and the flat numbers of those."""
    on = np.flatnonzero(props["active"])
    renumber = np.full(props["active"].size, -1)
    renumber[on] = np.arange(len(on))
    kh = props["permeability"] * props["net_to_gross"] * MILLIDARCY
    links = connect(cells, kh, 0.08 * kh, props["active"])
    columns = links.a % NI, links.b % NI
    sealed = (links.axis == 0) & (columns[0] < WEST_FAULT) & (columns[1] >= WEST_FAULT)
    leaky = (links.axis == 0) & (columns[0] < EAST_FAULT) & (columns[1] >= EAST_FAULT)
    t = links.transmissibility * np.where(leaky, LEAKY_FAULT, 1.0)
    links = Links(
        renumber[links.a[~sealed]], renumber[links.b[~sealed]], t[~sealed], links.axis[~sealed]
    )
    flat = {name: value.ravel()[on] for name, value in props.items()}
    depth, volume = cells.centre[..., 2].ravel()[on], cells.volume.ravel()[on]
    block, fluid = (flat["region"] - 1) % 3, (flat["region"] > 3).astype(int)
    net = volume * flat["net_to_gross"]
    pores = net * flat["porosity"]
    connate = np.where(fluid == 0, CONNATE_WATER, 0.0)
    cm, never = flat["cm"] / BAR, np.full(len(on), 1e12)
    fluids = [gas(), brine()]
    wells = []
    for name, i, j, year, rate in WELLS:
        column = np.arange(NK) * NI * NJ + j * NI + i
        column = column[props["region"].ravel()[column] < 4]
        height = cells.volume.ravel()[column] / cells.plan_area.ravel()[column]
        index = well_index(kh.ravel()[column], height, 190.0, 190.0)

        def schedule(time: float, year: int = year, rate: float = rate) -> float:
            date = START + time / YEAR
            fall = np.exp(-DECLINE * max(date - PLATEAU_END, 0.0))
            return rate * 1e6 / 86400 * fall if year <= date < SHUT_IN else 0.0

        wells.append(Well(name, renumber[column], index, schedule, WELL_FLOOR))
    return Field(
        links=links,
        depth=depth,
        fluid=fluid,
        fluids=fluids,
        start_pressure=start_pressure(depth, block, fluids),
        pore_volume=pores * (1 - connate),
        elastic_volume=pores * connate * 4.2e-10,
        net_volume=net,
        rock=Rock(cm, cm, never, cm),
        contact=CONTACT[block],
        wells=wells,
    ), on


def write(
    path: Path, cells: Cells, props: dict[str, np.ndarray], pressure: np.ndarray, days: np.ndarray
) -> None:
    """Write the pressure grid; `pressure` (time, k, j, i) [bar]."""
    with grid_file(
        path, "Marrow Fen, simulated pressure", EPSG, f"{START}-01-01", days, props["active"]
    ) as grid:
        grid.add(
            "corners",
            "f8",
            "k j i corner xyz",
            cells.corners,
            units="m",
            positive="down",
            vertical_datum="mean sea level",
            grid_mapping="crs",
            long_name="corners of the cells: easting, northing, depth",
            comment="top face (i, j), (i+1, j), (i+1, j+1), (i, j+1), then the bottom face",
        )
        grid.add_pressure(pressure, "bar", 512)
        grid.add_flags("region", props["region"], REGIONS, 1, "fault block and fluid")
        for name, unit, meaning in [
            ("porosity", "1", "pore share of the net rock"),
            ("net_to_gross", "1", "net share of the cell's volume"),
            ("cm", "1/bar", "uniaxial compressibility"),
        ]:
            grid.add(name, "f4", "k j i", props[name], units=unit, long_name=meaning)


def summary(field: Field, on: np.ndarray, props: dict[str, np.ndarray], p: np.ndarray) -> None:
    """Print the depletion of every block, by pore volume, and at the grid's outer edge."""
    region, drop = props["region"].ravel()[on], p[0, on] - p[:, on]
    print("depletion [bar], mean by pore volume:", *REGIONS)
    for n in range(0, len(p), 5):
        means = [
            np.average(drop[n, region == r + 1], weights=field.pore_volume[region == r + 1])
            for r in range(len(REGIONS))
        ]
        print(START + n, " ".join(f"{mean:6.1f}" for mean in means))
    edge = outer_edge(props["active"]).ravel()[on]
    print(
        f"largest depletion {drop.max():.1f} bar; on the outer edge of the active cells "
        f"{drop[:, edge].max():.2f} bar"
    )


def main() -> None:
    """Compute and write pressure.nc beside this script."""
    cells = Cells(geometry())
    props = rock(cells)
    # what is written is what flows: the same rounded numbers
    props = {
        name: value.astype("f4").astype(float) if value.dtype == float else value
        for name, value in props.items()
    }
    field, on = build(cells, props)
    days, states = run_years(field, START, LAST, parts=4)
    filled = states[-1].invaded / field.pore_volume
    print(
        f"water that crossed the contact {states[-1].invaded.sum() / 1e6:.3f} million m3; "
        f"at most {filled.max():.2f} of a gas cell's pores"
    )
    if filled.max() > 0.75:
        raise RuntimeError("water filled a gas cell; the sharp contact no longer holds")
    pressure = np.full((len(days), NK * NJ * NI), np.nan)
    pressure[:, on] = [state.pressure / BAR for state in states]
    write(HERE / "pressure.nc", cells, props, pressure.reshape(-1, NK, NJ, NI), days)
    summary(field, on, props, pressure)


if __name__ == "__main__":
    main()
