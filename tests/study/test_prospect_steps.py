"""[reach] and [average] as steps of a study: from expected sets alone, and mistakes told with their lines.

Nothing is drawn at random. The templates are those of conftest.py instead of generated ones.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from semitau.core.content_digest import content_digest
from semitau.core.errors import InputError
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.newton import maximise
from semitau.fit.uncertainty.prospects import reach
from semitau.study.averages.part import AverageResults
from semitau.study.averages.picture import average_picture
from semitau.study.averages.step import average_part, ingredients
from semitau.study.command_line import main
from semitau.study.graph.materials import Materials
from semitau.study.pictures.reach import reach_curves
from semitau.study.reach.part import Reach
from semitau.study.reach.run import reach_part
from semitau.study.results import Results
from semitau.study.run.opening import open_study
from semitau.study.run.study_folder import study_key
from semitau.study.run.study_model import study_model

from .conftest import small_templates

WriteStudy = Callable[..., Path]
Capture = pytest.CaptureFixture[str]

ASKED = """
[reach]
factors = [0.5, 2.0, 40.0]
true = { R_D = 0.34 }
against = { R_D = { value = 0.298, error = 0.004 }, R_Dst = 0.24 }
luminosity = 711
"""
OTHERS = """[average]
name = "Others"
output = "nowhere"

[[source]]
name = "x"

[[measurement]]
name = "a"
R_D = { value = 0.35, statistical = 0.04, systematic = 0.03 }
R_Dst = { value = 0.28, statistical = 0.02, systematic = 0.01 }
statistical_correlation = -0.4
systematic_correlation = 0.2
sources.x = { R_D = 0.01, R_Dst = 0.005 }

[prediction]
R_D = { value = 0.299, error = 0.003 }
R_Dst = { value = 0.254, error = 0.005 }
"""

SAME = """[[measurement]]
name = "a"
R_Dst = { value = 0.28, systematic = 0.005 }
sources.x = { R_Dst = 0.005 }

[[measurement]]
name = "b"
R_Dst = { value = 0.31, systematic = 0.008 }
sources.x = { R_Dst = 0.008 }
"""


def written(mini: WriteStudy, tables: str, others: str = OTHERS) -> Path:
    """A study with these tables instead of its own [reach], beside the file others.toml."""
    path = mini()
    path.write_text(path.read_text().split("\n[reach]")[0] + tables)
    (path.parent / "others.toml").write_text(others)
    return path


def materials(path: Path, templates: TemplateSet) -> Materials:
    """Of the study in a file, with templates that need not be generated."""
    made = Materials(open_study(path))
    made.__dict__["templates"] = templates  # where the cached property looks first
    return made


def test_reach_says_what_the_fit_package_finds(mini: WriteStudy, templates: TemplateSet) -> None:
    made = materials(written(mini, ASKED), templates)
    part = reach_part(made.study, made, 1, None)
    found = reach(
        templates, (0.5, 2.0, 40.0), true={"R_D": 0.34}, against={"R_D": (0.298, 0.004), "R_Dst": (0.24, 0.0)},
        make=lambda t: study_model(made.study, t),
    )  # fmt: skip
    assert part.unit == "fb⁻¹"
    assert [amount.amount for amount in part.amounts] == [355.5, 1422.0, 28440.0]
    for told, amount in zip(part.amounts, found.amounts, strict=True):
        assert [error.total for error in told.errors] == [split.total for split in amount.budgets.values()]
        assert [seen.sigmas for seen in told.deviations] == [seen.sigmas for seen in amount.deviations.values()]
        for error in told.errors:
            squares = (error.statistical**2, error.template_statistics**2, error.systematic**2)
            assert sum(squares) == pytest.approx(error.total**2)
            assert sum(source**2 for source in error.sources.values()) == pytest.approx(error.total**2)
    assert [needed.label for needed in part.needed] == ["R(D)", "R(D*)", "R(D) and R(D*) together"]
    assert Reach.model_validate_json(part.model_dump_json()) == part
    reach_curves(part)


def test_generated_events_grow_if_the_study_says_so(mini: WriteStudy, templates: TemplateSet) -> None:
    shares = {}
    for generated in ("fixed", "grows"):
        made = materials(written(mini, f'[reach]\nfactors = [1, 25]\ngenerated = "{generated}"\n'), templates)
        part = reach_part(made.study, made, 1, None)
        assert (part.generated, part.unit, part.needed) == (generated, "times the data", ())
        errors = [amount.errors[0] for amount in part.amounts]
        shares[generated] = [error.template_statistics / error.statistical for error in errors]
    assert shares["fixed"][0] == shares["grows"][0]
    assert shares["grows"][1] == pytest.approx(shares["grows"][0], rel=0.2), "both shrink as the root of the data"
    assert shares["fixed"][1] > 3.0 * shares["fixed"][0]


def test_the_study_joins_with_the_errors_that_it_expects(mini: WriteStudy, templates: TemplateSet) -> None:
    """Independent measurements: the inverse covariances add up (A. C. Aitken, Proc. Roy. Soc. Edinb. 55 (1935) 42)."""
    made = materials(written(mini, '[average]\nfile = "others.toml"\nname = "ours"\n'), templates)
    part = average_part(made.study, made, 1, None)
    model = made.model
    fitted = maximise(model, model.expected_data())
    places = [model.index(name) for name in ("R_D", "R_Dst")]
    ours = fitted.covariance[np.ix_(places, places)]
    stat, syst = np.array([0.04, 0.02]), np.array([0.03, 0.01])
    others = np.outer(stat, stat) * [[1, -0.4], [-0.4, 1]] + np.outer(syst, syst) * [[1, 0.2], [0.2, 1]]
    joined = np.linalg.inv(np.linalg.inv(ours) + np.linalg.inv(others))
    case = next(case for case in part.planned if case.found_at == "average")
    assert case.planned == "ours"
    assert [case.errors[name] for name in ("R_D", "R_Dst")] == pytest.approx(np.sqrt(np.diag(ours)))
    assert [ratio.error for ratio in case.ratios] == pytest.approx(np.sqrt(np.diag(joined)))
    assert case.correlation == pytest.approx(joined[0, 1] / np.sqrt(joined[0, 0] * joined[1, 1]))
    assert [ratio.value for ratio in case.ratios] == pytest.approx([0.35, 0.28]), "it finds just the average"
    prediction = next(case for case in part.planned if case.found_at == "prediction")
    away = joined @ np.linalg.inv(ours) @ (np.array([0.299, 0.254]) - [0.35, 0.28])
    assert [ratio.value for ratio in prediction.ratios] == pytest.approx(np.array([0.35, 0.28]) + away)


def test_a_common_source_pulls_both_the_same_way(mini: WriteStudy, templates: TemplateSet) -> None:
    """A shift that is shared cannot be averaged away: the new error is larger than without it."""
    errors = {}
    for shift in (0.0, 0.003, -0.003):
        sources = f"sources.x = {{ R_Dst = {shift} }}\n" if shift else ""
        made = materials(written(mini, f'[average]\nfile = "others.toml"\n{sources}'), templates)
        errors[shift] = average_part(made.study, made, 1, None).planned[0].ratios[1].error
    assert errors[-0.003] < errors[0.0] < errors[0.003]


def test_fitted_values_are_never_looked_at(mini: WriteStudy) -> None:
    path = written(mini, '[reach]\n[average]\nfile = "others.toml"\n')
    made = [materials(path, small_templates(seed)) for seed in (None, 1, 2)]
    assert len({reach_part(one.study, one, 1, None).model_dump_json() for one in made}) == 1
    assert len({average_part(one.study, one, 1, None).model_dump_json() for one in made}) == 1


def test_results_of_another_study_belong_to_the_keys(mini: WriteStudy, results: Results) -> None:
    """Errors that the file takes from results.json of another study: the average is made again when they change, and
    only then."""
    planned = '\n[[planned]]\nname = "later"\nresults = "other.json"\n'
    path = written(mini, '[average]\nfile = "others.toml"\n', OTHERS + planned)
    other = path.parent / "other.json"

    def keys() -> tuple[str, str]:
        study = open_study(path)
        return study_key(study), content_digest(ingredients(study))

    other.write_text(results.text())
    before = keys()
    other.write_text(results.text() + "\n")
    assert keys() == before
    first, *rest = results.ratios
    worse = first.model_copy(update={"systematic": 1.5 * (first.systematic or 0.0)})
    other.write_text(results.model_copy(update={"ratios": (worse, *rest)}).text())
    assert all(new != old for new, old in zip(keys(), before, strict=True))


def test_the_picture_needs_the_part_alone(mini: WriteStudy, templates: TemplateSet, tmp_path: Path) -> None:
    made = materials(written(mini, '[average]\nfile = "others.toml"\nname = "ours"\n'), templates)
    part = average_part(made.study, made, 1, None)
    again = AverageResults.model_validate_json(part.model_dump_json())
    assert again == part
    # erf(n / sqrt 2) for one, two and three standard deviations
    expected = [math.erf(n / math.sqrt(2.0)) for n in (1, 2, 3)]
    assert [region.probability for region in part.regions] == pytest.approx(expected, abs=5e-7)
    drawn = [average_picture(one).save(tmp_path / str(k), "a", "b", "c").svg for k, one in enumerate((part, again))]
    assert drawn[0] == drawn[1]


@pytest.mark.parametrize(
    ("tables", "others", "words"),
    [
        (
            '[average]\nfile = "others.toml"\nsources.y = { R_D = 0.01 }\n',
            OTHERS,
            "mini.toml:{last}: average.sources.y: is no source of the file (got 'y', allowed x)",
        ),
        ('[average]\nfile = "others.toml"\n', OTHERS.replace("-0.4", "-1.4"), "others.toml:12: "),
        (
            '[average]\nfile = "others.toml"\n',
            OTHERS.replace(", statistical = 0.04, systematic = 0.03", ""),
            "others.toml:10: measurement[a].R_D: has no error",
        ),
        ('[average]\nfile = "others.toml"\n', OTHERS.replace("[[measurement]]", "[[mesurement]]"), "others.toml:8: "),
        (
            '[average]\nfile = "others.toml"\n',
            OTHERS[: OTHERS.index("[[measurement]]")] + SAME,
            "not positive definite, foremost those of R_Dst of a and R_Dst of b",
        ),
    ],
)
def test_mistakes_are_told_before_anything_is_made(
    tables: str, others: str, words: str, mini: WriteStudy, capsys: Capture
) -> None:
    path = written(mini, tables, others)
    last = path.read_text().count("\n")
    for command in ("check", "study"):
        assert main([command, str(path)]) == 2
        error = capsys.readouterr().err
        assert words.format(last=last) in error, error
        assert "Traceback" not in error
    assert not (path.parent / "out").exists()


def test_sources_larger_than_the_errors(mini: WriteStudy, templates: TemplateSet) -> None:
    path = written(mini, '[average]\nfile = "others.toml"\nname = "ours"\nsources.x = { R_D = 0.5 }\n')
    made = materials(path, templates)
    last = path.read_text().count("\n")
    with pytest.raises(InputError, match=rf"mini.toml:{last}: average.sources: ours: ") as caught:
        average_part(made.study, made, 1, None)
    assert "0.5" in str(caught.value)
