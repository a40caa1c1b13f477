"""Checksums in the background: right, told when asked for, and left off when nobody asks."""

from __future__ import annotations

import threading
import time
from pathlib import Path

import pytest

from subside import checksums
from subside.checksums import Checksums
from subside.errors import CannotDo


def test_digests_are_those_of_the_standard(tmp_path: Path) -> None:
    """FIPS 180-2, appendix B: 'abc' and a million times 'a'; and the empty file."""
    contents = {"abc": b"abc", "a": b"a" * 1_000_000, "empty": b""}
    files = {name: tmp_path / name for name in contents}
    for name, file in files.items():
        file.write_bytes(contents[name])
    with Checksums(files.values()) as found:
        assert found.of(files["abc"]) == (
            "sha256:ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad")
        assert found.of(files["a"]) == (
            "sha256:cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0")
        assert found.of(files["empty"]).startswith("sha256:e3b0c44298fc1c149afb")


def test_several_pieces_are_one_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """FIPS 180-2, appendix B.2, read three bytes at a time."""
    monkeypatch.setattr(checksums, "_BYTES_AT_ONCE", 3)
    file = tmp_path / "long"
    file.write_bytes(b"abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq")
    with Checksums([file]) as found:
        assert found.of(file) == (
            "sha256:248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1")


def test_a_file_that_has_gone_is_told_to_whoever_asks(tmp_path: Path) -> None:
    (tmp_path / "here").write_bytes(b"abc")
    with Checksums([tmp_path / "gone", tmp_path / "here"]) as found:
        assert found.of(tmp_path / "here").startswith("sha256:ba7816bf")
        with pytest.raises(CannotDo, match=r"gone' cannot be read again .* No such file"):
            found.of(tmp_path / "gone")


def test_a_failed_run_does_not_wait(tmp_path: Path) -> None:
    """A sparse file of 64 GB takes a minute at least: the thread must leave off."""
    file = tmp_path / "huge"
    with file.open("wb") as stream:
        stream.truncate(64_000_000_000)
    start = time.monotonic()
    with pytest.raises(RuntimeError, match="the run failed"), Checksums([file]):
        raise RuntimeError("the run failed")
    assert time.monotonic() - start < 5.0
    assert not [t for t in threading.enumerate() if t.name == "checksums"]
