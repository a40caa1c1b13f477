"""The results file and the table made from it: only what a run has measured."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

__all__ = ["Record"]

_HEAD = """\
# Measured speed

Written by `python tests/benchmarks/run.py`; every number comes from a run named at the
end. Seconds depend on the machine; ratios compare methods in turn on the same one.
{trial}
"""
_TRIAL = """
**This was a quick trial with few repeats and small samples: do not quote it.**
"""


class Record:
    """Sections of results, each with the facts of the run that gave it.

    Parameters
    ----------
    folder : Path or None
        Where ``results.json`` and ``table.md`` are kept; None: nothing is written.
    """

    def __init__(self, folder: Path | None, facts: dict[str, str], quick: bool) -> None:
        self._folder, self._facts, self._quick = folder, facts, quick
        self.sections: dict[str, Any] = {}
        if folder is not None:
            folder.mkdir(parents=True, exist_ok=True)
            file = folder / "results.json"
            if file.exists():
                self.sections = json.loads(file.read_text())

    def add(self, name: str, result: dict[str, Any]) -> None:
        """Put a section in place of an older one, and write."""
        self.sections[name] = {"run": self._facts, "quick": self._quick, "result": result}
        if self._folder is not None:
            (self._folder / "results.json").write_text(json.dumps(self.sections, indent=1) + "\n")
            (self._folder / "table.md").write_text(self.table())

    def table(self) -> str:
        """All sections as markdown."""
        trial = any(section["quick"] for section in self.sections.values())
        lines = [_HEAD.format(trial=_TRIAL if trial else "")]
        for title, prefix, rows in (
            ("Superposition alone, in one process", "superposition", _superposition),
            ("Whole job: `subside run`, file to file", "job", _jobs),
            ("1000 realisations of ten regions", "ensemble", _ensemble),
            ("Growth of the whole job", "growth", _growth),
        ):
            found = {k: v for k, v in self.sections.items() if k.split(" ")[0] == prefix}
            if found:
                body = list(rows({k: v["result"] for k, v in found.items()}))
                lines += [f"## {title}\n", *body, ""]
        return "\n".join([*lines, "## Runs\n", *_runs(self.sections), ""])


def _row(*cells: object) -> str:
    return "| " + " | ".join(str(c) for c in cells) + " |"


def _rule(head: str) -> str:
    return "|" + "---|" * (head.count("|") - 1)


def _spread(seconds: dict[str, float]) -> str:
    return f"{seconds['median']:.3g} ({seconds['lowest']:.3g}-{seconds['highest']:.3g})"


def _short(number: float) -> str:
    return f"{number:.0f}" if number >= 10 else f"{number:.2g}"


def _superposition(found: dict[str, Any]) -> Iterator[str]:
    head = _row("job", "cells x targets x dates", "tolerance", "lattice, s (spread)",
                "tile + product, s", "x", "per-step sum, s", "x", "plain sum of finite cells, s",
                "x", "error", "slope", "strain", "rate")
    yield head
    yield _rule(head)
    for name, result in found.items():
        base = result["baselines_s"]
        for row in result["lattice"]:
            columns = [part for key in ("tile", "per_step", "direct") for part in
                       (_spread(base[key]), _short(row["ratio"][key]))]
            yield _row(name.split(" ")[1], f"{result['cells']:,} x {result['targets']:,} x "
                       f"{result['steps']}", f"{row['tolerance']:g}", _spread(row["seconds"]),
                       *columns, *(f"{row['error'][k]:.1e}" for k in
                                   ("displacement", "slope", "strain", "rate")))
    yield ""
    for name, result in found.items():
        tile = "; tile + product {:.2g} G pair-steps/s (tiles of {} targets x {} cells)".format(
            result["tile_pair_steps_per_s"] / 1e9, *result["tile_targets_cells"])
        forced = result.get("forced_lattice_s")
        yield (f"- {name.split(' ')[1]}{tile}, per-step sum "
               f"{result['per_step_pairs_per_s'] / 1e9:.2g} G pairs/s; timed on "
               f"{result['timed_pair_steps']:.2g} pair-steps and scaled."
               + (f" With a lattice in any case: {_spread(forced)} s." if forced else ""))
    yield ("\nx: seconds over those of the lattice (the method that the product chooses). The "
           "first two baselines sum point sources at the centres of cells, which is cheaper than "
           "finite cells, for all three components in float64. Spread: lowest and highest of the "
           "repeats. Errors: largest difference from the plain sum over finite cells at about 300 "
           "pixels, computed by the benchmark, over the largest value of that kind on the map at "
           "any date (of 60 dates at most); rate: change from one to the next.")


def _jobs(found: dict[str, Any]) -> Iterator[str]:
    head = _row("job", "run, s (spread)", "read, s", "write, s", "run / (read + write)",
                "peak memory, GB", "grid, MB", "result, MB", "error stated in the result")
    yield head
    yield _rule(head)
    for name, r in found.items():
        yield _row(name.split(" ", 1)[1], _spread(r["seconds"]), _spread(r["read_s"]),
                   _spread(r["write_s"]), f"{r['ratio']:.2f}", f"{r['peak_bytes'] / 1e9:.2f}",
                   f"{r['grid_bytes'] / 1e6:.0f}", f"{r['result_bytes'] / 1e6:.0f}",
                   _stated(r["result_attributes"]))
    yield ("\nRead and write: every variable of the same two files by netCDF4, one after the "
           "other, each storage chunk once, zlib 1 + shuffle. Files were in the page cache. The "
           "run includes the start of Python.")


def _stated(attributes: dict[str, str]) -> str:
    text = attributes.get("solver_error", "")
    return f"{float(text):.1e}" if text else "none"


def _ensemble(found: dict[str, Any]) -> Iterator[str]:
    head = _row("job", "one run, s", "run with region maps, s", "mean and spread, all dates, s",
                "quantiles, last date, s", "us per pixel", "1000 runs, s", "x")
    yield head
    yield _rule(head)
    for name, r in found.items():
        yield _row(name.split(" ")[1], _spread(r["one_run"]["seconds"]),
                   _spread(r["region_run"]["seconds"]), _spread(r["mean_and_spread_all_dates_s"]),
                   _spread(r["quantiles_last_date_s"]), f"{r['quantiles_us_per_pixel']:.3g}",
                   f"{r['runs_s']:.0f}", _short(r["ratio"]))
    yield "\n1000 runs: one is timed and scaled. x: those over the run with region maps and both."


def _growth(found: dict[str, Any]) -> Iterator[str]:
    for result in found.values():
        budget = f", `--memory {result['memory']}`" if result["memory"] else ""
        head = _row("grows", "size", "run, s (spread)", "read + write, s", "ratio",
                    "peak memory, GB")
        yield head
        yield _rule(head)
        for series in ("cells", "pixels", "dates"):
            for r in result[series]:
                if "failed" in r:
                    yield _row(series, f"{r['size']:,}", "failed: " + r["failed"].splitlines()[-1],
                               "", "", "")
                    continue
                files = r["read_s"]["median"] + r["write_s"]["median"]
                yield _row(series, f"{r['size']:,}", _spread(r["seconds"]), f"{files:.3g}",
                           f"{r['ratio']:.2f}", f"{r['peak_bytes'] / 1e9:.2f}")
        yield (f"\nAll else as in {result['base']}{budget}. Cells: of the file, 60 % of them "
               "active in W2. Sizes that the disk had no room for are left out.")
        yield "\n![Growth of the whole job](growth.png)"


def _runs(found: dict[str, Any]) -> Iterator[str]:
    seen: dict[str, list[str]] = {}
    for name, section in found.items():
        text = ", ".join(f"{k} {v}" for k, v in section["run"].items())
        seen.setdefault(text, []).append(name)
    for text, names in seen.items():
        yield f"- {', '.join(names)}: {text}."
