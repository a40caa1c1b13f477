"""A small field and a way to run the command on it."""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

from small_field import Outcome, write_field

from subside.cli.main import main


@pytest.fixture
def field(tmp_path: Path) -> Path:
    """A folder with a sound scenario, its grid, points and survey."""
    return write_field(tmp_path / "field")


@pytest.fixture
def subside(capsys: pytest.CaptureFixture[str]) -> Callable[..., Outcome]:
    """``subside("run", path)``: exit code, stdout and stderr of the command, in this process."""

    def command(*arguments: object) -> Outcome:
        capsys.readouterr()
        with pytest.raises(SystemExit) as ended:
            main([str(a) for a in arguments])
        out, err = capsys.readouterr()
        return Outcome(int(ended.value.code or 0), out, err)

    return command
