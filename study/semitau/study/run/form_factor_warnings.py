"""Form factors of a study that break what holds exactly: no reason to stop, but to look."""

from __future__ import annotations

from semitau.gen.decays.exact_relations import Relation, exact_relations
from semitau.gen.study_file.names import FORM_FACTORS_OF
from semitau.gen.study_file.study import StudyConfig

from ..numbers import percent, signed


def form_factor_warnings(study: StudyConfig) -> tuple[str, ...]:
    """Broken relations of the sets that the study's modes use, each a sentence with advice; empty if there are none."""
    used = dict.fromkeys(FORM_FACTORS_OF[charm] for mode in study.modes for charm in mode.charm)
    return tuple(
        _sentence(str(getattr(study.form_factors, transition)), relation)
        for transition in used
        for relation in exact_relations(study.form_factor_set(transition), transition)
        if relation.status == "broken"
    )


def _sentence(name: str, relation: Relation) -> str:
    if relation.kind == "bound":
        found = f"the {relation.name} is {signed(relation.value, 2)} ± {relation.error:.2f}, above 1"
    else:
        found = f"{relation.name} is off by {percent(relation.value)} ± {percent(relation.error)}, yet it is exact"
    return f"Form factors {name}: {found}. Check the coefficients, and the masses and conventions they belong to."
