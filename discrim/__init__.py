"""discrim: decide between competing reaction mechanisms from laboratory rate data.

The names below are loaded when they are first used, so that ``import discrim`` stays light::

    import discrim

    study = discrim.load("study.toml")
    evidence = study.weigh()
    discrim.write_report(evidence, "results/study")
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from discrim.errors import DiscrimError as DiscrimError
    from discrim.errors import Place as Place
    from discrim.mechanism.library import load_mechanism as load_mechanism
    from discrim.mechanism.model import Mechanism as Mechanism
    from discrim.ratelaw.derive import derive as derive
    from discrim.ratelaw.model import RateLaw as RateLaw
    from discrim.report.folder import write_report as write_report
    from discrim.report.text import summary as summary
    from discrim.study import load as load
    from discrim.study.model import Study as Study

    __version__: str

_HOMES = {
    "DiscrimError": "discrim.errors",
    "Place": "discrim.errors",
    "Mechanism": "discrim.mechanism.model",
    "RateLaw": "discrim.ratelaw.model",
    "Study": "discrim.study.model",
    "derive": "discrim.ratelaw.derive",
    "load": "discrim.study",
    "load_mechanism": "discrim.mechanism.library",
    "summary": "discrim.report.text",
    "write_report": "discrim.report.folder",
}

__all__ = [
    "DiscrimError",
    "Mechanism",
    "Place",
    "RateLaw",
    "Study",
    "__version__",
    "derive",
    "load",
    "load_mechanism",
    "summary",
    "write_report",
]


def __getattr__(name: str) -> Any:
    if name == "__version__":
        value: Any = _version()
    elif name in _HOMES:
        value = getattr(importlib.import_module(_HOMES[name]), name)
    else:
        raise AttributeError(f"module 'discrim' has no attribute {name!r}")
    globals()[name] = value
    return value


def _version() -> str:
    """The installed version, or ``0+unknown`` when the source runs without being installed."""
    from importlib import metadata

    try:
        return metadata.version("discrim")
    except metadata.PackageNotFoundError:
        return "0+unknown"


def __dir__() -> list[str]:
    return sorted(__all__)
