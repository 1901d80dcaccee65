"""What a rendering says about the answer besides its numbers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from ladderband import __version__


@dataclass(frozen=True)
class Sheet:
    """Head of a rendered answer: what it is, its digest, warnings, and how a plot should look."""

    name: str
    digest: str
    warnings: Sequence[str] = ()
    title: str = ""
    width: int = 760
    height: int = 420
    theme: str = "light"
    array: str = ""
    version: str = field(default=__version__)

    @classmethod
    def of(cls, name: str, digest: str, warnings: Sequence[str], view: Mapping[str, Any]) -> Sheet:
        """The sheet of one request, from its view parameters."""
        return cls(
            name,
            digest,
            tuple(warnings),
            title=view["title"],
            width=round(view["width"]),
            height=round(view["height"]),
            theme=view["theme"],
            array=view["array"],
        )
