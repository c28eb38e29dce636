"""Where templates and event files come from, as they keep it: plain JSON values."""

from __future__ import annotations

from importlib.metadata import version

from ..study_file.study import StudyConfig


def provenance(study: StudyConfig) -> dict[str, object]:
    """Text, name and hash of the study file, seed, and versions."""
    return {
        "study": study.text,
        "study_name": study.study.name,
        "study_sha256": study.digest,
        "seed": study.study.seed,
        "versions": {name: version(name) for name in ("semitau", "numpy", "numba")},
    }
