"""Exit codes, what each command prints, where it writes, and what it leaves when stopped."""

from __future__ import annotations

import json
import os
import subprocess
import sys

import numpy as np
import pytest
from invented_fields import X0, Y0
from small_field import append, edit, files_of

import subside as sd
from subside.errors import InputError
from subside.names import CAUTIONS

MAP = (f'[map]\nspacing = "500 m"\nbounds = [{X0 - 1000}, {Y0 - 1000}, {X0 + 1000}, '
       f"{Y0 + 1000}]\n")
HEAVY = ("numpy", "xarray", "numba", "matplotlib", "pydantic", "scipy", "pandas", "netCDF4")


# -- help --------------------------------------------------------------------------------------


def test_help_is_light_and_shows_an_example():
    """One process asks every command for help; nothing heavy may be loaded at the end of it."""
    script = f"""
import contextlib, io, sys
from subside.cli.main import main, _COMMANDS

def text(*arguments):
    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        try:
            main([*arguments, "--help"])
        except SystemExit as ended:
            assert ended.code == 0, arguments
    return out.getvalue()

assert "subside run my-field/scenario.toml" in text()
for command in _COMMANDS:
    assert command in text()
    assert "Example:" in text(command) and f"subside {{command}} " in text(command), command
for command in ("list", "describe"):
    assert f"subside plugins {{command}}" in text("plugins", command), command
print(sorted(m for m in {HEAVY!r} if m in sys.modules))
"""
    ended = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True,
                           check=False)
    assert ended.returncode == 0, ended.stderr
    assert ended.stdout == "[]\n"


def test_a_run_without_figures_loads_neither_pictures_nor_clusters(field):
    script = """
import sys
from subside.cli.main import main
try:
    main(["run", sys.argv[1], "--no-figures", "--quiet"])
except SystemExit as ended:
    assert ended.code == 0
print(sorted({"matplotlib", "contourpy", "PIL", "rasterio", "distributed"} & set(sys.modules)))
"""
    ended = subprocess.run([sys.executable, "-c", script, str(field / "scenario.toml")],
                           capture_output=True, text=True, check=False)
    assert (ended.stdout, ended.stderr) == ("[]\n", "")


@pytest.mark.parametrize(("arguments", "words"), [
    (["rnu"], ["no command is called 'rnu'", "Did you mean 'run'?", "subside --help"]),
    (["run"], ["Missing argument 'SCENARIO'", "subside run --help"]),
    (["run", "a.toml", "--overwrit"], ["No such option", "--overwrit"]),
    (["run", "absent.toml"], ["absent.toml' does not exist", "subside init"]),
    (["inspect", "absent.nc"], ["absent.nc: ", "no such file"]),
    (["inspect", "absent.nc", "--surface", "5 bar"], ["--surface = '5 bar'", "length"]),
    (["export", "absent.nc", "--to", "geotiff", "-o", "x"], ["absent.nc' does not exist"]),
    (["export", "absent.nc", "--to", "geotif", "-o", "x"], ["Did you mean 'geotiff'?"]),
    (["plugins", "describe", "liner"], ["no plug-in is called 'liner'", "'linear'"]),
])
def test_wrong_words_on_the_command_line(arguments, words, subside, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    ended = subside(*arguments)
    assert (ended.code, ended.out) == (2, "")
    for word in words:
        assert word in ended.message
    assert not any(tmp_path.iterdir())


# -- exit codes --------------------------------------------------------------------------------


def test_what_cannot_be_done_is_3_and_said_before_the_work(field, subside, monkeypatch):
    (field / "plain").write_text("a file\n")
    monkeypatch.setattr("subside.pipeline.prepare", None)  # would fail with another message
    ended = subside("run", field / "scenario.toml", "-o", field / "plain" / "deeper" / "bowl.nc")
    assert ended.code == 3
    assert "bowl.nc' cannot be written" in ended.message
    assert "plain' is a file, not a folder" in ended.message


def test_a_full_disk_is_3_and_leaves_nothing(field, subside, monkeypatch):
    def full(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("subside.export.atomic.os.replace", full)
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 3
    assert "scenario.nc' cannot be written: No space left on device" in ended.message
    assert "Make room" in ended.message
    assert not [f for f in files_of(field) if "nc" in f and f != "grid.nc"]


def test_memory_is_3(field, subside, monkeypatch):
    def gone(*_: object) -> None:
        raise MemoryError("8 GB")

    monkeypatch.setattr("subside.pipeline._Run.result", gone)
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 3
    assert "memory ran out (8 GB)" in ended.message
    assert "coarser map" in ended.message


def test_an_unforeseen_error_is_3_and_says_whose_it_is(field, subside, monkeypatch):
    def broken(*_: object) -> None:
        raise ZeroDivisionError("division by zero")

    monkeypatch.setattr("subside.pipeline._Run.result", broken)
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 3
    assert "unforeseen ZeroDivisionError" in ended.message
    assert "defect of subside" in ended.message


def test_debug_shows_the_traceback(field, subside):
    edit(field, '"linear"', '"linaer"')
    assert "Traceback" not in subside("run", field / "scenario.toml").err
    ended = subside("run", field / "scenario.toml", "--debug")
    assert ended.code == 2
    assert "Traceback (most recent call last)" in ended.err
    assert "'linaer'" in ended.err.splitlines()[-1]


@pytest.mark.parametrize("old", [None, b"the old one"])
def test_an_interrupt_leaves_what_was_there(field, subside, monkeypatch, old):
    """The keyboard stops the run while the result is being written."""
    def stop(*_: object) -> None:
        raise KeyboardInterrupt

    if old:
        (field / "scenario.nc").write_bytes(old)
    before = files_of(field)
    monkeypatch.setattr("subside.export.writer.ResultWriter._end", stop)
    ended = subside("run", field / "scenario.toml", "--overwrite", "--no-figures")
    assert ended.code == 3
    assert "stopped by the user" in ended.err
    assert files_of(field) == before
    if old:
        assert (field / "scenario.nc").read_bytes() == old


# -- what is printed ---------------------------------------------------------------------------


def test_the_summary_has_units_and_cautions(field, subside):
    append(field, MAP)
    ended = subside("run", field / "scenario.toml", "--no-figures")
    assert (ended.code, ended.err) == (0, "")
    result = sd.read_result(field / "scenario.nc")
    largest = float(result["max_subsidence"][-1])
    lines = {line[2:].split("  ")[0]: line for line in ended.out.splitlines()}
    assert f"{1000 * largest:.1f} mm" in lines["largest subsidence"]
    assert " m, y " in lines["largest subsidence"]
    bowl = next(text for label, text in lines.items() if label.startswith("bowl volume 2"))
    assert "m3 in all" in bowl and "m3 on the map" in bowl
    assert lines["period"].endswith("2000-01-01 to 2001-12-31")
    assert "4 x 4 pixels of 500 m" in lines["map"]
    for caution in CAUTIONS:
        assert caution in ended.out
    # the small field falls as much on its edge as anywhere
    assert "cut off by the grid" in ended.out and "extend the grid" in ended.out


def test_quiet_is_quiet(field, subside, tmp_path):
    for arguments in (["run", field / "scenario.toml"], ["check", field / "scenario.toml"],
                      ["inspect", field / "grid.nc"], ["init", tmp_path / "new"]):
        ended = subside(*arguments, "--quiet")
        assert (ended.code, ended.out, ended.err) == (0, "", ""), arguments
    assert (field / "scenario-curves.png").is_file()


def test_run_as_json(field, subside):
    append(field, MAP)
    ended = subside("run", field / "scenario.toml", "--json")
    facts = json.loads(ended.out)
    result = sd.read_result(field / "scenario.nc")
    assert facts["title"] == "small field"
    assert facts["max_subsidence_m"] == float(result["max_subsidence"].max())
    assert facts["bowl_volume_m3"] == float(result["bowl_volume"][-1])
    # 6 boxes of 300 x 300 x 50 m3; 1e-10 1/Pa x (5 x 10 + 9 MPa) (one cell falls 10 bar less)
    volumes = facts["region_compaction_volume_m3"]
    assert volumes["south"] == pytest.approx(4.5e6 * 1e-10 * 3 * 10e6, rel=1e-12)
    assert volumes["north"] == pytest.approx(4.5e6 * 1e-10 * (2 * 10e6 + 9e6), rel=1e-12)
    assert facts["files"] == [str(field / name) for name in (
        "scenario.nc", "scenario-map.png", "scenario-curves.png")]
    assert facts["cautions"] == list(CAUTIONS)
    assert facts["map_pixels"] == [4, 4]


def test_check_as_json_and_as_text(field, subside):
    before = files_of(field)
    facts = json.loads(subside("check", field / "scenario.toml", "--json").out)
    assert facts["cells"] == 6
    assert facts["pressure_dates"] == facts["output_dates"] == 3
    assert facts["points"] == 2 and facts["map_pixels"] == 0
    assert facts["laws"] == ["linear"] and facts["earth_model"] == "half-space"
    assert facts["method"] == "direct" and facts["memory_bytes"] > 0
    text = subside("check", field / "scenario.toml").out
    assert "small field: in order" in text and "GB" in text
    assert files_of(field) == before


def test_check_tells_the_memory_it_may_take(field, subside):
    facts = json.loads(subside("check", field / "scenario.toml", "--json", "--memory", "2GB").out)
    assert facts["memory_allowed_bytes"] == 2_000_000_000
    assert "2.00 GB allowed" in subside(
        "check", field / "scenario.toml", "--memory", "2 GB").out


def test_limits_of_a_run_reach_it(field, subside, monkeypatch):
    """What is left out is left to the run."""
    taken = []

    def run(*_: object, **options: object) -> None:
        taken.append([options[word] for word in ("memory", "workers", "cluster")])
        raise InputError("enough")

    monkeypatch.setattr("subside.pipeline.run", run)
    path = field / "scenario.toml"
    assert subside("run", path).message == "enough"
    subside("run", path, "--memory", "1.5 GB", "--workers", 3, "--cluster", "tcp://10.0.0.5:8786")
    subside("run", path, "--cluster", "local")
    assert taken == [[None, None, None], [1_500_000_000, 3, "tcp://10.0.0.5:8786"],
                     [None, None, "local"]]


@pytest.mark.parametrize(("option", "value", "words"), [
    ("--memory", "2", ["--memory = '2'", 'for example "2 GB"']),
    ("--memory", "-1 GB", ["above zero"]),
    ("--memory", "2 bar", ["--memory = '2 bar'", "GiB"]),
    ("--workers", "0", ["--workers = 0", "from 1 to", "leave it out"]),
    ("--workers", "-3", ["--workers = -3"]),
    ("--workers", "many", ["--workers", "'many'", "subside run --help"]),
    ("--cluster", "", ["--cluster = ''", "'local'", "tcp://10.0.0.5:8786"]),
    ("--cluster", "10.0.0.5", ["--cluster = '10.0.0.5'", "HOST:PORT"]),
    ("--cluster", "tcp://host:99999", ["--cluster = 'tcp://host:99999'"]),
    ("--cluster", "Local", ["'local'"]),
])
def test_limits_that_make_no_sense(field, subside, option, value, words):
    before = files_of(field)
    ended = subside("run", field / "scenario.toml", option, value)
    assert (ended.code, ended.out) == (2, "")
    for word in words:
        assert word in ended.message
    assert files_of(field) == before


def test_the_summary_reads_no_map(field, subside, monkeypatch):
    """A result may be larger than the memory: the summary must leave its maps in the file."""
    from subside.cli.summary import facts_of, print_summary
    from subside.export.netcdf import open_result
    from subside.names import RESULT_VARIABLES

    append(field, MAP)
    assert subside("run", field / "scenario.toml", "--no-figures").code == 0
    result = open_result(field / "scenario.nc")
    maps = [n for n, v in RESULT_VARIABLES.items() if "y" in v.dims and n in result]
    facts_of(result)
    print_summary(result, [])
    assert "subsidence" in maps
    assert not [name for name in maps if result[name].variable._in_memory]


def test_inspect_as_json_and_as_text(field, subside):
    facts = json.loads(subside("inspect", field / "grid.nc", "--json").out)
    assert facts["active_cells"] == 6
    assert facts["regions"]["north"]["bulk_volume_m3"] == pytest.approx(3 * 4.5e6, rel=1e-12)
    assert facts["total"]["largest_depletion_bar"] == pytest.approx(100.0, rel=1e-12)
    assert facts["dates"] == ["2000-01-01", "2000-12-31", "2001-12-31"]
    text = subside("inspect", field / "grid.nc").out
    for word in ("north", "south", "bulk Mm3", "fall bar", "WGS 84 / UTM zone 31N", "2900-2950"):
        assert word in text


def test_plugins_list_and_describe(subside):
    listed = json.loads(subside("plugins", "list", "--json").out)
    found = {(p["kind"], p["name"]) for p in listed["plugins"]}
    assert {("law", "linear"), ("law", "isotach"), ("earth-model", "half-space"),
            ("reader", "netcdf-grid"), ("quantity", "tilt"), ("exporter", "geotiff")} <= found
    assert listed["left_out"] == {}
    text = subside("plugins", "describe", "linear").out
    for word in ("uniaxial_compressibility  [1/Pa]  required", "at least 0 1/Pa",
                 'for example uniaxial_compressibility = "1.1e-5 1/bar"', "biot", "Geertsma 1973"):
        assert word in text


def test_a_survey_named_on_the_command_line(field, subside, monkeypatch):
    """It is read before the run, and takes the place of the scenario's."""
    (field / "levels.csv").write_text("point,x,y,date,kind,value [mm],sigma [mm]\n"
                                      "A,0,0,2000-07-01,hight,1,1\n")
    before = files_of(field)
    ended = subside("run", field / "scenario.toml", "--survey", field / "levels.csv")
    assert ended.code == 2
    assert "levels.csv', line 2: kind 'hight'" in ended.message
    assert files_of(field) == before

    seen = []
    monkeypatch.setattr("subside.report.figures.save_figures",
                        lambda result, stem, survey, overwrite: seen.append((result, survey)) or [])
    # "subsidence" counts from the start; B has no height, C is no point of the run
    (field / "levels.csv").write_text("point,x,y,date,kind,value [mm],sigma [cm]\n"
                                      "A,0,0,2001-07-01,height,1519,0.2\n"
                                      "A,0,0,2000-07-01,height,1520,0.2\n"
                                      "B,0,0,2001-07-01,subsidence,3,0.1\n"
                                      "C,0,0,2001-07-01,height,3,0.1\n")
    append(field, "[output]\ntimes = [2000-12-31]\n")
    assert subside("run", field / "scenario.toml", "--survey", field / "levels.csv").code == 0
    result, survey = seen[0]
    assert sorted(survey["point"]) == ["A", "A", "B"]
    # Heights of a single point cannot be told from the offset of their epoch: A lies on the curve,
    # which is linear from zero at the start, 182 of 365 days to the one output date.
    first = survey[survey["date"] == np.datetime64("2000-07-01")]
    np.testing.assert_allclose(first["value_m"],
                               [182 / 365 * float(result["point_subsidence"][0, 0])], rtol=1e-9)
    by_start = survey[survey["point"] == "B"]
    np.testing.assert_allclose(by_start["value_m"], [0.003], rtol=1e-12)
    np.testing.assert_allclose(by_start["sigma_m"], [0.001], rtol=1e-12)


# -- where a run writes ------------------------------------------------------------------------


def test_output_option_is_relative_to_the_working_folder(field, subside, tmp_path, monkeypatch):
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    append(field, '[output]\nfile = "results/bowl.nc"\n')
    assert subside("run", field / "scenario.toml", "-o", "mine/bowl.nc").code == 0
    assert (tmp_path / "elsewhere" / "mine" / "bowl.nc").is_file()
    assert (tmp_path / "elsewhere" / "mine" / "bowl-curves.png").is_file()
    assert not (field / "results").exists()


def test_output_key_is_relative_to_the_scenario(field, subside, tmp_path, monkeypatch):
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    append(field, '[output]\nfile = "results/bowl.nc"\n')
    assert subside("run", field / "scenario.toml").code == 0
    assert (field / "results" / "bowl.nc").is_file()
    assert not any((tmp_path / "elsewhere").iterdir())


def test_default_output_lies_beside_the_scenario(field, subside, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert subside("run", "field/scenario.toml", "--no-figures").code == 0
    assert files_of(field) >= {"scenario.nc"}
    assert not [f for f in files_of(tmp_path) if f.endswith(".png")]


def test_a_result_of_the_same_scenario_is_replaced(field, subside):
    assert subside("run", field / "scenario.toml").code == 0
    first = sd.read_result(field / "scenario.nc")["point_subsidence"].values
    edit(field, "1e-5 1/bar", "2e-5 1/bar")
    assert subside("run", field / "scenario.toml").code == 0
    second = sd.read_result(field / "scenario.nc")["point_subsidence"].values
    np.testing.assert_allclose(second, 2 * first, rtol=1e-12)


def test_a_result_of_another_scenario_is_refused(field, subside):
    (field / "other.toml").write_text((field / "scenario.toml").read_text())
    assert subside("run", field / "other.toml", "-o", field / "bowl.nc").code == 0
    before = (field / "bowl.nc").read_bytes()
    ended = subside("run", field / "scenario.toml", "-o", field / "bowl.nc")
    assert ended.code == 2
    assert "made from 'other.toml'" in ended.message and "--overwrite" in ended.message
    assert (field / "bowl.nc").read_bytes() == before
    assert subside("run", field / "scenario.toml", "-o", field / "bowl.nc", "--overwrite").code == 0
    assert sd.read_result(field / "bowl.nc").attrs["scenario_file"] == "scenario.toml"


def test_a_file_of_another_kind_is_refused(field, subside):
    (field / "notes.nc").write_text("my notes\n")
    ended = subside("run", field / "scenario.toml", "-o", field / "notes.nc")
    assert ended.code == 2
    assert "not a result of subside" in ended.message
    assert (field / "notes.nc").read_text() == "my notes\n"


def test_a_figure_of_another_kind_is_refused_before_the_work(field, subside):
    (field / "scenario-curves.png").write_bytes(b"a photograph")
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 2
    assert "scenario-curves.png' already there" in ended.message
    assert "--overwrite" in ended.message
    assert not (field / "scenario.nc").exists()
    assert subside("run", field / "scenario.toml", "--overwrite").code == 0
    assert (field / "scenario-curves.png").read_bytes()[:4] == b"\x89PNG"


@pytest.mark.parametrize("name", ["scenario.toml", "grid.nc", "points.csv", "survey.csv"])
def test_an_input_is_never_overwritten(field, subside, name):
    before = (field / name).read_bytes()
    ended = subside("run", field / "scenario.toml", "-o", field / name, "--overwrite")
    assert ended.code == 2
    assert f"{name}' is an input of this run" in ended.message
    assert (field / name).read_bytes() == before


def test_export_makes_its_folder_and_takes_it_away_again(field, subside):
    append(field, MAP)
    subside("run", field / "scenario.toml", "--no-figures")
    result = field / "scenario.nc"
    ended = subside("export", result, "--to", "geotiff", "-o", field / "a" / "b",
                    "--variable", "subsidenc")
    assert ended.code == 2
    assert "subsidenc" in ended.message
    assert not (field / "a").exists()
    ended = subside("export", result, "--to", "geotiff", "-o", field / "a" / "b",
                    "--variable", "subsidence")
    assert ended.code == 0, ended.err
    assert "subsidence_2001-12-31.tif" in {f.name for f in (field / "a" / "b").iterdir()}
    (field / "plain").write_text("")
    ended = subside("export", result, "--to", "geotiff", "-o", field / "plain" / "x")
    assert ended.code == 3
    assert "plain/x' cannot be made" in ended.message


# -- init --------------------------------------------------------------------------------------


def test_init_refuses_a_folder_with_its_files(tmp_path, subside):
    (tmp_path / "levelling.csv").write_text("mine\n")
    ended = subside("init", tmp_path)
    assert ended.code == 2
    assert "levelling.csv' exists" in ended.message and "nothing was written" in ended.message
    assert files_of(tmp_path) == {"levelling.csv"}
    (tmp_path / "plain").write_text("")
    ended = subside("init", tmp_path / "plain")
    assert ended.code == 2
    assert "is a file, a folder is needed" in ended.message
    ended = subside("init", tmp_path / "plain" / "deeper")
    assert ended.code == 3


def test_the_scenario_of_init_runs(tmp_path, subside):
    ended = subside("init", tmp_path / "field")
    assert ended.code == 0
    scenario = tmp_path / "field" / "scenario.toml"
    assert str(scenario) in ended.out.splitlines()[-1]
    # a coarser map and fewer dates: this test is about whether it runs
    text = scenario.read_text().replace('spacing = "250 m"', 'spacing = "1 km"')
    scenario.write_text(text.replace("[output]\n", '[output]\ntimes = ["2005-01-01"]\n'))
    ended = subside("run", scenario)
    assert (ended.code, ended.err) == (0, "")
    result = sd.read_result(tmp_path / "field" / "results" / "bowl.nc")
    assert 0.001 < float(result["max_subsidence"][-1]) < 0.1
    assert (tmp_path / "field" / "results" / "bowl-map.png").is_file()


# -- in Python ---------------------------------------------------------------------------------


def test_run_in_python_writes_nothing_unless_told(field):
    before = files_of(field)
    result = sd.run(field / "scenario.toml")
    assert files_of(field) == before
    assert result["point_subsidence"].dims == ("time", "point")
    assert list(result["point_name"].values) == ["A", "B"]
    again = sd.run(sd.load_scenario(field / "scenario.toml"), output=field / "bowl.nc")
    np.testing.assert_array_equal(again["point_subsidence"], result["point_subsidence"])
    written = sd.read_result(field / "bowl.nc")
    np.testing.assert_array_equal(written["point_subsidence"], result["point_subsidence"])


def test_run_in_python_raises_what_the_command_says(field):
    from subside.errors import InputError

    edit(field, "poisson_ratio = 0.25", "poisson_ratio = 0.6")
    with pytest.raises(InputError, match=r"scenario\.toml'.*poisson_ratio = 0\.6"):
        sd.run(field / "scenario.toml")


def test_a_closed_pipe_is_silent(field):
    """``subside inspect grid.nc | true`` ends in silence."""
    read, write = os.pipe()
    os.close(read)
    script = f"from subside.cli.main import main; main(['inspect', {str(field / 'grid.nc')!r}])"
    ended = subprocess.run([sys.executable, "-c", script], stdout=write, stderr=subprocess.PIPE,
                           text=True, check=False)
    os.close(write)
    assert (ended.returncode, ended.stderr) == (3, "")
