"""`subside run`: the main job."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from subside.cli.options import (
    bars,
    cluster_option,
    common,
    json_option,
    loading,
    memory_option,
    note_warnings,
    plugin_option,
    print_json,
    workers_option,
)

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr

    from subside.scenario import Scenario


@click.command("run")
@click.argument("scenario_file", metavar="SCENARIO", type=click.Path(path_type=Path))
@click.option("-o", "--output", type=click.Path(path_type=Path), metavar="FILE",
              help="Result file. Default: [output] file, else the scenario's name with .nc.")
@click.option("--overwrite", is_flag=True,
              help="Replace files that were not made from this scenario.")
@click.option("--no-figures", is_flag=True, help="Write no pictures.")
@click.option("--survey", type=click.Path(path_type=Path), metavar="FILE",
              help="Measured values to draw over the curves. Default: [survey] file.")
@memory_option
@workers_option
@cluster_option
@plugin_option
@json_option
@common
def command(scenario_file: Path, output: Path | None, overwrite: bool, no_figures: bool,
            survey: Path | None, memory: int | None, workers: int | None, cluster: str | None,
            plugins: tuple[Path, ...], as_json: bool, quiet: bool) -> None:
    """Compute subsidence: result file, figures, one summary table.

    \b
    Example:
        subside run marrow-fen/scenario.toml -o bowl.nc
        subside run marrow-fen/scenario.toml --memory "2 GB" --workers 2
    """
    with loading():
        from subside.cli.summary import facts_of, print_summary
        from subside.pipeline import run
        from subside.result_file import ResultFile
        from subside.scenario import load_scenario
        from subside.survey.overlay import read_survey

    note_warnings()
    scenario = load_scenario(scenario_file)
    path = result_path(scenario, output)
    if survey is None and scenario.survey is not None:
        survey = scenario.resolve(scenario.survey.file)
    measured = read_survey(survey) if survey is not None else None
    target = ResultFile(path, scenario)
    target.refuse(overwrite)
    stem = path.with_suffix("")
    if not no_figures:
        from subside.report.figures import refuse_figures

        refuse_figures(stem, target.source, overwrite)
    with bars(quiet) as progress:
        result = run(scenario, output=path, overwrite=overwrite, plugins=plugins,
                     progress=progress, memory=memory, workers=workers, cluster=cluster)
        files = [path]
        if not no_figures:
            with progress.stage("figures", 1, "set") as advance:
                files += _figures(result, stem, measured)
                advance(1)
    if as_json:
        print_json(facts_of(result) | {"files": [str(f) for f in files]})
    elif not quiet:
        print_summary(result, files)


def result_path(scenario: Scenario, output: Path | None) -> Path:
    """`-o` from the working folder, `[output] file` from the scenario's, else beside it."""
    if output is not None:
        return output
    if scenario.output.file is not None:
        return scenario.resolve(scenario.output.file)
    return scenario.path.with_suffix(".nc")


def _figures(result: xr.Dataset, stem: Path, survey: pd.DataFrame | None) -> list[Path]:
    from subside.report.figures import save_figures
    from subside.survey.overlay import measured_subsidence

    measured = measured_subsidence(survey, result) if survey is not None else None
    return save_figures(result, stem, survey=measured, overwrite=True)
