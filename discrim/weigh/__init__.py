"""The one place that wires the stages: a study in, the evidence document out."""

from __future__ import annotations

from typing import Any

from discrim.study.model import Study


def weigh(study: Study, *, seed: int = 1, workers: int = 1, progress: Any = None) -> dict[str, Any]:
    """Derive, fit, compare and answer; the document that is saved as ``evidence.json``.

    The answer does not depend on ``workers``.
    """
    import numpy as np

    from discrim.weigh.document import document
    from discrim.weigh.run import run, with_all_runs

    weighed = run(study, seed=seed, progress=progress)
    # A law may overflow at a fit; the record then holds no number there, so no warning is due.
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        return document(weighed, with_all_runs(study, seed=seed))


def check(study: Study) -> dict[str, Any]:
    """The conditioning of the runs, before any fit is believed; works on a planned table."""
    import numpy as np

    from discrim.weigh.checked import checked

    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):  # as in weigh
        return checked(study)


def derive_all(study: Study) -> list[dict[str, Any]]:
    """Each candidate's law, derivation and assumptions, and which candidates are the same law."""
    from discrim.weigh.derived import derive_study

    return derive_study(study)


def derive_mechanism(path: str) -> dict[str, Any]:
    """The law of one mechanism file, or of one by name from the library."""
    from discrim.weigh.derived import derive_file

    return derive_file(path)


__all__ = ["check", "derive_all", "derive_mechanism", "weigh"]
