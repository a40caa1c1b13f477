"""Flow in a porous, compacting rock by finite volumes: what the invented fields are made with.

Mass of one fluid per cell is kept, ``d(m)/dt + sum(flux) + wells = 0``, with two-point fluxes
from the cell corners, one pressure per cell, implicit in time, solved by Newton's method with a
direct sparse solver (Aziz & Settari 1979, "Petroleum Reservoir Simulation"; well index of
Peaceman 1978, SPE-6893-PA).  Each cell holds one mobile fluid for good.  Where two fluids meet,
the heavier one pushes like a piston: its volume crosses, and the pore space of the lighter
shrinks by it.  Pore space also shrinks by exactly the uniaxial strain that makes the ground
sink, so flow and subsidence rest on one rock.  SI units; depth and gravity positive down.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from cells import Links
from numpy.typing import ArrayLike
from scipy.interpolate import CubicSpline
from scipy.sparse import csc_matrix
from scipy.sparse.linalg import splu

GRAVITY = 9.80665
YEAR = 365.25 * 86400.0
BAR = 1e5
MILLIDARCY = 9.869233e-16


@dataclass
class Fluid:
    """Density [kg/m3] and viscosity [Pa s] against pressure, as splines through a table."""

    density: CubicSpline
    viscosity: CubicSpline
    surface_density: float

    @classmethod
    def tabulated(
        cls, p: np.ndarray, density: np.ndarray, viscosity: np.ndarray, surface: float
    ) -> Fluid:
        """Fluid from table columns: pressure [Pa], density [kg/m3], viscosity [Pa s]."""
        return cls(CubicSpline(p, density), CubicSpline(p, viscosity), surface)


@dataclass
class Rock:
    """Uniaxial strain against depletion: stiff, then softer past yield, stiff on the way back."""

    before: np.ndarray  # [1/Pa]
    after: np.ndarray  # [1/Pa]
    yield_drop: np.ndarray  # depletion at yield [Pa]
    unloading: np.ndarray  # [1/Pa]

    def strain(self, drop: np.ndarray, largest: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Strain and its slope [1/Pa] at depletion `drop`, when `largest` was felt before."""
        reached = np.maximum(np.maximum(drop, largest), 0.0)
        loaded = self.before * reached + (self.after - self.before) * np.maximum(
            reached - self.yield_drop, 0.0
        )
        virgin = drop >= np.maximum(largest, 0.0)
        slope = np.where(reached > self.yield_drop, self.after, self.before)
        return loaded - self.unloading * (reached - drop), np.where(virgin, slope, self.unloading)


@dataclass
class Well:
    """A well on one column of cells; rates are surface volumes [m3/s], production positive."""

    name: str
    cells: np.ndarray  # flat cell numbers
    index: np.ndarray  # well index of each [m3]
    rate: Callable[[float], float]  # target at a time [s] since the start; 0 is shut in
    limit: float  # flowing pressure [Pa] at the top cell: floor of a producer, lid of an injector
    pressure: float = 0.0


def well_index(
    k: np.ndarray, height: np.ndarray, dx: float, dy: float, radius: float = 0.1
) -> np.ndarray:
    """Peaceman (1978) index ``2 pi k h / ln(0.14 sqrt(dx^2 + dy^2) / radius)`` [m3]."""
    return 2 * np.pi * k * height / np.log(0.14 * np.hypot(dx, dy) / radius)


@dataclass
class Field:
    """All that stays the same during a run; arrays run over the active cells only."""

    links: Links  # numbered over the active cells
    depth: np.ndarray
    fluid: np.ndarray  # which of `fluids`; the higher number is the heavier one
    fluids: list[Fluid]
    start_pressure: np.ndarray
    pore_volume: np.ndarray  # of the mobile fluid, at the start [m3]
    elastic_volume: np.ndarray  # further volume it gains on depletion, connate water [m3/Pa]
    net_volume: np.ndarray  # rock that compacts [m3]
    rock: Rock
    contact: np.ndarray  # depth of the contact each cell belongs to [m]
    wells: list[Well]

    def properties(self, p: np.ndarray) -> tuple[np.ndarray, ...]:
        """Density, its slope, mobility density/viscosity, its slope, viscosity per cell."""
        rho, drho, mu, dmu = (np.empty_like(p) for _ in range(4))
        for n, fluid in enumerate(self.fluids):
            own = self.fluid == n
            rho[own], drho[own] = fluid.density(p[own]), fluid.density(p[own], 1)
            mu[own], dmu[own] = fluid.viscosity(p[own]), fluid.viscosity(p[own], 1)
        return rho, drho, rho / mu, (drho - rho / mu * dmu) / mu, mu


@dataclass
class State:
    """What changes: pressure, largest depletion so far, volume invaded by the heavier fluid."""

    pressure: np.ndarray
    largest_drop: np.ndarray
    invaded: np.ndarray  # [m3]
    produced: np.ndarray  # mass per well [kg], injection negative


def mobile_volume(
    field: Field, p: np.ndarray, largest: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Pore volume open to the cell's own fluid before invasion, and its slope [m3/Pa]."""
    drop = field.start_pressure - p
    strain, slope = field.rock.strain(drop, largest)
    volume = field.pore_volume - field.net_volume * strain - field.elastic_volume * drop
    return volume, field.net_volume * slope + field.elastic_volume


def mass_in_place(field: Field, state: State) -> np.ndarray:
    """Mass [kg] of each fluid in its own cells; what invaded other cells is not in it."""
    rho = field.properties(state.pressure)[0]
    mass = (mobile_volume(field, state.pressure, state.largest_drop)[0] - state.invaded) * rho
    return np.array([mass[field.fluid == n].sum() for n in range(len(field.fluids))])


def advance(field: Field, state: State, time: float, dt: float, depth: int = 0) -> State:
    """One implicit step from `time` to `time + dt`, in two halves when Newton does not settle."""
    end = newton(field, state, time + dt, dt)
    if end is None:
        if depth > 8:
            raise RuntimeError(f"no solution {time / YEAR:.2f} years after the start")
        middle = advance(field, state, time, dt / 2, depth + 1)
        end = advance(field, middle, time + dt / 2, dt / 2, depth + 1)
    return end


def newton(field: Field, old: State, time: float, dt: float) -> State | None:
    """Pressures at `time` that keep every cell's mass over `dt`; None when it does not converge."""
    a, b, t = field.links.a, field.links.b, field.links.transmissibility
    same = field.fluid[a] == field.fluid[b]
    one, two, t_same = a[same], b[same], t[same]
    heavy = np.where(field.fluid[a] > field.fluid[b], a, b)[~same]
    light, t_meet = (a + b)[~same] - heavy, t[~same]
    n, nw = len(field.depth), len(field.wells)
    z, rho0 = field.depth, field.properties(old.pressure)[0]
    mass0 = (mobile_volume(field, old.pressure, old.largest_drop)[0] - old.invaded) * rho0
    open_wells = [w.rate(time - dt / 2) != 0.0 for w in field.wells]
    p, bhp = old.pressure.copy(), np.array([w.pressure for w in field.wells])
    for m, w in enumerate(field.wells):
        bhp[m] = bhp[m] or p[w.cells[0]]
    for _ in range(14):
        rho, drho, lam, dlam, mu = field.properties(p)
        volume, dvolume = mobile_volume(field, p, old.largest_drop)
        entries: list = []  # of the Jacobian: rows, columns, values

        def put(r: ArrayLike, c: ArrayLike, v: ArrayLike, entries: list = entries) -> None:
            entries.append(np.broadcast_arrays(np.atleast_1d(r), c, v))

        # one fluid on both sides: upstream mobility, gravity by the mean density
        dz = GRAVITY * (z[one] - z[two])
        drive = p[one] - p[two] - 0.5 * (rho[one] + rho[two]) * dz
        up = np.where(drive > 0, one, two)
        flux = t_same * lam[up] * drive
        d1 = t_same * ((up == one) * dlam[one] * drive + lam[up] * (1 - 0.5 * drho[one] * dz))
        d2 = t_same * ((up == two) * dlam[two] * drive - lam[up] * (1 + 0.5 * drho[two] * dz))
        residual = np.bincount(one, flux, n) - np.bincount(two, flux, n)
        for sign, row in ((1, one), (-1, two)):
            put(row, one, sign * d1 * dt)
            put(row, two, sign * d2 * dt)
        # two fluids: the heavier crosses as a volume, gravity by each fluid up to the contact
        zc = field.contact[light]
        column = rho[light] * (zc - z[light]) + rho[heavy] * (z[heavy] - zc)
        q = t_meet / mu[heavy] * (p[heavy] - p[light] - GRAVITY * column)
        dq_heavy = t_meet / mu[heavy] * (1 - GRAVITY * drho[heavy] * (z[heavy] - zc))
        dq_light = -t_meet / mu[heavy] * (1 + GRAVITY * drho[light] * (zc - z[light]))
        residual += np.bincount(heavy, rho[heavy] * q, n)
        put(heavy, heavy, dt * (rho[heavy] * dq_heavy + drho[heavy] * q))
        put(heavy, light, dt * rho[heavy] * dq_light)
        put(light, light, -dt * rho[light] * dq_light)
        put(light, heavy, -dt * rho[light] * dq_heavy)
        invaded = old.invaded + dt * np.bincount(light, q, n)
        # wells
        well_residual, rates = np.zeros(nw), np.zeros(nw)
        for m, w in enumerate(field.wells):
            if not open_wells[m]:
                put(n + m, n + m, 1.0)
                continue
            c, target = w.cells, w.rate(time - dt / 2)
            target *= field.fluids[field.fluid[c[0]]].surface_density
            draw = p[c] - bhp[m] - rho0[c] * GRAVITY * (z[c] - z[c[0]])
            each = w.index * lam[c] * draw
            rates[m] = each.sum()
            residual += np.bincount(c, each, n)
            slope = w.index * (dlam[c] * draw + lam[c])
            put(c, c, dt * slope)
            put(c, n + m, -dt * w.index * lam[c])
            side = np.sign(target)
            reach = rates[m] + (w.index * lam[c]).sum() * (bhp[m] - w.limit)
            if side * reach < side * target:  # the limit gives less than the target
                put(n + m, n + m, 1.0)
                well_residual[m] = bhp[m] - w.limit
            else:
                put(n + m, c, slope)
                put(n + m, n + m, -(w.index * lam[c]).sum())
                well_residual[m] = rates[m] - target
        open_volume = volume - invaded
        put(np.arange(n), np.arange(n), dvolume * rho + open_volume * drho)
        residual = open_volume * rho - mass0 + dt * residual
        rows, cols, values = (np.concatenate(parts) for parts in zip(*entries, strict=True))
        matrix = csc_matrix((values, (rows, cols)), shape=(n + nw, n + nw))
        try:
            step = splu(
                matrix,
                permc_spec="MMD_AT_PLUS_A",
                options={"SymmetricMode": True},
                diag_pivot_thresh=0.0,
            ).solve(-np.concatenate([residual, well_residual]))
        except RuntimeError:
            return None
        step[:n] = np.clip(step[:n], -60 * BAR, 60 * BAR)
        p, bhp = p + step[:n], bhp + step[n:]
        if not (p > BAR).all():
            return None
        if np.abs(step[:n]).max() < 0.1 and np.abs(residual / mass0).max() < 1e-9:
            for m, w in enumerate(field.wells):
                w.pressure = bhp[m]
            largest = np.maximum(old.largest_drop, field.start_pressure - p)
            return State(p, largest, invaded, old.produced + dt * rates)
    return None


def run_years(field: Field, first: int, last: int, parts: int) -> tuple[np.ndarray, list[State]]:
    """States on 1 January of the years `first` to `last`, and their day numbers.

    Each year takes `parts` steps.  Prints the balance of the lightest fluid, which all wells
    must produce or inject, and refuses a result whose balance is off by more than 1e-6.
    """
    n, surface = len(field.depth), field.fluids[0].surface_density
    state = State(field.start_pressure.copy(), np.zeros(n), np.zeros(n), np.zeros(len(field.wells)))
    before, states = mass_in_place(field, state)[0], [state]
    dates = np.array([f"{year}-01-01" for year in range(first, last + 1)], "datetime64[D]")
    days = (dates - dates[0]).astype(float)
    out = back = 0.0
    for d0, d1 in pairwise(days):
        dt = (d1 - d0) / parts * 86400
        for part in range(parts):
            then = state.produced
            state = advance(field, state, d0 * 86400 + part * dt, dt)
            out += (state.produced - then).clip(0).sum()
            back -= (state.produced - then).clip(None, 0).sum()
        states.append(state)
    lost = before - mass_in_place(field, state)[0]
    error = abs(lost - out + back) / out
    print(
        f"in place {before / surface / 1e6:.4f} million surface m3, lost "
        f"{lost / surface / 1e6:.6f}; produced {out / surface / 1e6:.6f}, injected "
        f"{back / surface / 1e6:.6f}, relative difference {error:.1e}"
    )
    if error > 1e-6:
        raise RuntimeError("the balance of mass does not close")
    return days, states
