"""`whole`: a file appears complete or not at all."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from subside.errors import CannotDo
from subside.export.atomic import whole


def test_the_file_appears_at_the_end_and_nothing_else_stays(tmp_path: Path) -> None:
    target = tmp_path / "new" / "folder" / "a.txt"
    with whole(target) as part:
        assert part.parent == target.parent
        part.write_text("all of it")
        assert not target.exists()
    assert target.read_text() == "all of it"
    assert os.listdir(target.parent) == ["a.txt"]


@pytest.mark.parametrize("failure", [ValueError("inside"), KeyboardInterrupt(), SystemExit(1)])
def test_a_failure_leaves_the_old_file(tmp_path: Path, failure: BaseException) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")
    with pytest.raises(type(failure)), whole(target) as part:
        part.write_text("half")
        raise failure
    assert target.read_text() == "old"
    assert os.listdir(tmp_path) == ["a.txt"]


def test_disk_errors_name_the_file_and_the_reason(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    with pytest.raises(CannotDo, match=r"a\.txt' cannot be written: No space left") as e, \
            whole(target) as part:
        part.write_text("half")
        raise OSError(28, "No space left on device")
    assert e.value.exit_code == 3
    assert os.listdir(tmp_path) == []


def test_a_folder_or_a_file_in_the_way_is_said(tmp_path: Path) -> None:
    with pytest.raises(CannotDo, match="folder"), whole(tmp_path):
        pass
    (tmp_path / "file").write_text("x")
    with pytest.raises(CannotDo, match="cannot be written"), whole(tmp_path / "file" / "a.txt"):
        pass


def test_a_link_stays_a_link(tmp_path: Path) -> None:
    real = tmp_path / "elsewhere" / "a.txt"
    real.parent.mkdir()
    real.write_text("old")
    link = tmp_path / "a.txt"
    link.symlink_to(real)
    with whole(link) as part:
        part.write_text("new")
    assert link.is_symlink()
    assert real.read_text() == "new"


def test_permissions_are_those_of_any_new_file(tmp_path: Path) -> None:
    (tmp_path / "plain.txt").write_text("x")
    with whole(tmp_path / "a.txt") as part:
        part.write_text("x")
    assert (tmp_path / "a.txt").stat().st_mode == (tmp_path / "plain.txt").stat().st_mode


@pytest.mark.skipif(os.name != "posix", reason="signals of POSIX")
@pytest.mark.parametrize("sign", [signal.SIGINT, signal.SIGKILL])
def test_killed_in_mid_write_leaves_no_result(tmp_path: Path, sign: signal.Signals) -> None:
    # The writer stops half way, says so, and waits for the signal.
    script = (
        "import sys, time\n"
        "from made_up_results import control_result\n"
        "from subside.export import netcdf\n"
        "put = netcdf.ResultWriter.put\n"
        "def stop_at_tilt(self, name, *rest):\n"
        "    if name == 'tilt':\n"
        "        self.flush(); print('half', flush=True); time.sleep(60)\n"
        "    put(self, name, *rest)\n"
        "netcdf.ResultWriter.put = stop_at_tilt\n"
        "netcdf.write_result(control_result(32631), sys.argv[1])\n"
    )
    paths = os.pathsep.join([str(Path(__file__).parent), *filter(None, sys.path)])
    target = tmp_path / "bowl.nc"
    with subprocess.Popen([sys.executable, "-c", script, str(target)], stdout=subprocess.PIPE,
                          stderr=subprocess.DEVNULL, env={**os.environ, "PYTHONPATH": paths},
                          text=True) as process:
        assert process.stdout is not None
        assert process.stdout.readline() == "half\n"
        process.send_signal(sign)
        assert process.wait(30) != 0
    assert not target.exists()
    if sign is signal.SIGINT:  # nobody can tidy up after SIGKILL; the name is never the result's
        assert os.listdir(tmp_path) == []
    else:
        assert [name[:9] for name in os.listdir(tmp_path)] == [".subside-"]


@pytest.mark.skipif(os.name != "posix", reason="limits of POSIX")
@pytest.mark.parametrize("kind", ["netcdf", "netcdf without h5py", "geotiff"])
def test_a_disk_that_fills_up_gives_a_clear_error_and_no_file(tmp_path: Path, kind: str) -> None:
    # A limit on the size of files stands in for the full disk: writing fails in the middle alike.
    script = (
        "import resource, signal, sys\n"
        "from pathlib import Path\n"
        "import numpy as np\n"
        "from made_up_results import control_result\n"
        "from subside.errors import CannotDo\n"
        "from subside.export.geotiff import GeoTiff\n"
        "from subside.export import chunks\n"
        "from subside.export.netcdf import write_result\n"
        "result = control_result(32631, ny=300, nx=300)\n"
        "noise = np.random.default_rng(0).normal(size=result['subsidence'].shape)\n"
        "result['subsidence'] = result['subsidence'] + noise\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (300_000, resource.RLIM_INFINITY))\n"
        "try:\n"
        "    if 'without' in sys.argv[2]:\n"
        "        chunks.h5py = None\n"
        "    if 'netcdf' in sys.argv[2]:\n"
        "        write_result(result, Path(sys.argv[1]) / 'bowl.nc')\n"
        "    else:\n"
        "        GeoTiff().export(result, Path(sys.argv[1]), False, ('subsidence',))\n"
        "except CannotDo as error:\n"
        "    sys.exit(7 if 'cannot be written' in str(error) else 8)\n"
    )
    paths = os.pathsep.join([str(Path(__file__).parent), *filter(None, sys.path)])
    done = subprocess.run([sys.executable, "-c", script, str(tmp_path), kind],
                          env={**os.environ, "PYTHONPATH": paths}, capture_output=True, text=True,
                          timeout=60)
    assert done.returncode == 7, done.stderr
    assert os.listdir(tmp_path) == []
