"""What a run depended on besides its input: versions, platform, threads."""

from __future__ import annotations

import importlib.metadata
import os
import platform
from typing import Any

__all__ = ["describe_environment", "version"]

_LIBRARIES = ("numpy", "scipy", "numba", "pyparsing", "rich")


def version() -> str:
    """The installed version of netpart."""
    return importlib.metadata.version("netpart")


def describe_environment(jobs: int) -> dict[str, Any]:
    """The `environment` part of a record."""
    return {
        "version": version(),
        "python": platform.python_version(),
        "libraries": {name: importlib.metadata.version(name) for name in _LIBRARIES},
        "platform": platform.platform(),
        "processors": os.cpu_count() or 1,
        "threads": jobs,
    }
