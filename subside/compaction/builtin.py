"""The laws that come with the project, offered through the hook like a stranger's."""

from __future__ import annotations

from subside.api import Law, hookimpl
from subside.compaction.bilinear import Bilinear
from subside.compaction.isotach import Isotach
from subside.compaction.linear import Linear

__all__ = ["subside_compaction_laws"]


@hookimpl
def subside_compaction_laws() -> list[type[Law]]:
    """The built-in laws."""
    return [Linear, Bilinear, Isotach]
