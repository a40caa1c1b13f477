"""W5: 1000 realisations of the strength of ten regions, from one run.

The map is linear in the regions: one run gives a map for each, and whatever is asked of the
realisations follows from those ten maps. No realisation is ever written.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click
import netCDF4
import numpy as np

from bench.timing import in_turn, stopwatch
from bench.whole_job import measure_job
from bench.workloads import Workload, scenario_text

__all__ = ["measure_ensemble"]

_REALISATIONS = 1000
_LEVELS = (0.1, 0.5, 0.9)
_PIXELS_AT_ONCE = 4096


def measure_ensemble(load: Workload, scenario: Path, repeats: int) -> dict[str, Any]:
    """Seconds of mean and spread, of quantiles, of the run with region maps; the ratio to runs.

    The baseline is as many whole runs as there are realisations, one timed and scaled.
    """
    plain = measure_job(scenario, repeats)
    by_region = scenario.with_name("regions.toml")
    by_region.write_text(scenario_text(load, quantities=("region_subsidence",)))
    regions = measure_job(by_region, repeats)
    with netCDF4.Dataset(scenario.with_name("result.nc")) as file:
        maps = np.asarray(file["region_subsidence"][:], dtype=float)
    steps, count = maps.shape[:2]
    maps = maps.reshape(steps, count, -1)
    weights = np.random.default_rng(2).lognormal(0.0, 0.3, (_REALISATIONS, count))
    _same_numbers(weights, maps)
    seconds = in_turn({
        "mean and spread, all dates": lambda: stopwatch(
            lambda: [mean_and_spread(weights, m) for m in maps]),
        "quantiles, last date": lambda: stopwatch(lambda: quantiles(weights, maps[-1])),
    }, repeats)
    spread, ranked = seconds.values()
    runs = _REALISATIONS * plain["seconds"]["median"]
    found = {
        "realisations": _REALISATIONS, "regions": count, "pixels": maps.shape[2], "dates": steps,
        "one_run": plain, "region_run": regions, "runs_s": runs,
        "mean_and_spread_all_dates_s": spread.record(), "quantiles_last_date_s": ranked.record(),
        "quantiles_us_per_pixel": 1e6 * ranked.median / maps.shape[2],
        "ratio": runs / (regions["seconds"]["median"] + spread.median + ranked.median),
    }
    click.echo(f"  {_REALISATIONS} runs would take {runs:.0f} s; ratio {found['ratio']:.0f}")
    return found


def mean_and_spread(weights: np.ndarray, maps: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Mean and standard deviation (pixel,) over realisations, from the regions' covariance."""
    covariance = np.cov(weights, rowvar=False)
    return (weights.mean(axis=0) @ maps,
            np.sqrt(np.einsum("rp,rp->p", maps, covariance @ maps)))


def quantiles(weights: np.ndarray, maps: np.ndarray) -> np.ndarray:
    """Quantiles (level, pixel) over realisations, a few thousand pixels at a time."""
    out = np.empty((len(_LEVELS), maps.shape[1]))
    for start in range(0, maps.shape[1], _PIXELS_AT_ONCE):
        part = slice(start, start + _PIXELS_AT_ONCE)
        values = maps[:, part].T @ weights.T  # (pixel, realisation): each pixel's lie together
        out[:, part] = np.quantile(values, _LEVELS, axis=1, overwrite_input=True)
    return out


def _same_numbers(weights: np.ndarray, maps: np.ndarray) -> None:
    """Mean and spread from the covariance against those of the realisations themselves."""
    some = maps[-1][:, ::97]
    mean, spread = mean_and_spread(weights, some)
    values = weights @ some
    gap = max(float(np.abs(mean - values.mean(axis=0)).max() / np.abs(mean).max()),
              float(np.abs(spread - values.std(axis=0, ddof=1)).max() / spread.max()))
    if not gap < 1e-10:
        raise SystemExit(f"mean and spread are off by {gap:.2g}")
