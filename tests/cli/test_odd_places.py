"""Odd places: refused before anything is computed, and nothing of the user's is lost."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time

import pytest
from small_field import append, edit, files_of, write_grid


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no named pipes on this system")
def test_what_is_no_file_is_never_replaced(field, subside):
    pipe = field / "pipe.nc"
    os.mkfifo(pipe)
    ended = subside("run", field / "scenario.toml", "-o", pipe, "--overwrite")
    assert ended.code == 2 and "not a file" in ended.message
    assert not pipe.is_file() and pipe.exists()


@pytest.mark.parametrize("name", ["g" * 300 + ".nc", "g\\u0000.nc"])
def test_a_name_that_cannot_be_a_file(field, subside, name):
    edit(field, 'file = "grid.nc"', f'file = "{name}"')
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 2 and "cannot be a file" in ended.message


def test_an_output_name_that_cannot_be_a_file(field, subside):
    ended = subside("run", field / "scenario.toml", "-o", field / ("r" * 300 + ".nc"))
    assert ended.code == 2 and "cannot be a file" in ended.message


def test_an_absurd_automatic_map_is_refused_by_check_too(field, subside):
    append(field, '[map]\nspacing = "0.1 m"\n')
    for command in ("check", "run"):
        ended = subside(command, field / "scenario.toml")
        assert ended.code == 2 and "larger spacing" in ended.message


def test_feet_that_are_not_the_feet_of_the_crs(field, subside):
    write_grid(field / "grid.nc", epsg=2276)
    edit(field, 'file = "grid.nc"', 'file = "grid.nc"\naccept = ["area-of-use"]')
    edit(field, "x [m]", "x [ft]", "points.csv")
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 2
    assert "points.csv" in ended.message and "'ft' is not the foot" in ended.message


def test_a_scenario_with_a_byte_order_mark_is_read(field, subside):
    path = field / "scenario.toml"
    path.write_bytes(b"\xef\xbb\xbf" + path.read_bytes())
    assert subside("check", path).code == 0


@pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX")
def test_a_polite_kill_leaves_nothing(field):
    before = files_of(field)
    code = ("import sys, time\n"
            "from subside.export.writer import ResultWriter\n"
            "def slow(writer, result):\n"
            "    print('writing', flush=True)\n"
            "    time.sleep(60)\n"
            "ResultWriter._end = slow\n"
            "from subside.cli.main import main\n"
            "main(['run', sys.argv[1], '--no-figures'])\n")
    process = subprocess.Popen([sys.executable, "-c", code, str(field / "scenario.toml")],
                               stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "writing\n"
    time.sleep(0.1)
    process.send_signal(signal.SIGTERM)
    _, err = process.communicate(timeout=60)
    assert process.returncode == 3 and "Traceback" not in err
    assert files_of(field) == before
