"""All resources of the service."""

from __future__ import annotations

from typing import Any

from ladderband.web.bands import BANDS
from ladderband.web.lines import LINES
from ladderband.web.mode_maps import MODE_MAPS
from ladderband.web.overlaps import OVERLAPS
from ladderband.web.progressions import PROGRESSIONS
from ladderband.web.resource import Resource
from ladderband.web.wavefunctions import WAVEFUNCTIONS

RESOURCES: tuple[Resource[Any, Any], ...] = (
    OVERLAPS,
    PROGRESSIONS,
    WAVEFUNCTIONS,
    MODE_MAPS,
    LINES,
    BANDS,
)
