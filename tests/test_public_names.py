"""What the package says it offers is there, and the worked examples in docstrings run."""

from __future__ import annotations

import doctest
from importlib import import_module

import pytest

import subside
import subside.api


@pytest.mark.parametrize("module", ["subside", "subside.api"])
def test_public_names_are_importable(module: str) -> None:
    loaded = import_module(module)
    for name in loaded.__all__:
        assert getattr(loaded, name) is not None
    assert loaded.__all__ == sorted(loaded.__all__)


def test_unknown_names_are_refused() -> None:
    with pytest.raises(AttributeError, match="nonsense"):
        subside.nonsense  # noqa: B018


@pytest.mark.parametrize("module", ["subside.hooks.contracts", "subside.api"])
def test_examples_in_docstrings_run(module: str) -> None:
    failures, tried = doctest.testmod(import_module(module))
    assert tried > 0 and failures == 0
