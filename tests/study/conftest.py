"""A small invented analysis with the shape of the real one, so that what users see can be tested without generating."""

from __future__ import annotations

import math
import os
import re
from collections.abc import Callable, Mapping
from pathlib import Path

import numpy as np
import pytest
from semitau.core.template_file import write_templates
from semitau.core.templates import (
    Category,
    Component,
    Nuisance,
    Observable,
    ScaleParameter,
    Template,
    TemplateSet,
)
from semitau.study.results import (
    Budget,
    BudgetRow,
    ComponentInfo,
    Coverage,
    CutFlowComponent,
    CutFlowStep,
    DataSource,
    Fit,
    Goodness,
    Linearity,
    LinearityPoint,
    Named,
    Parameter,
    Projection,
    PullHistogram,
    RatioResult,
    Results,
    StackedComponent,
    StageTime,
    StudyIdentity,
    Timing,
    ToyRatio,
    Toys,
    Verdict,
)
from semitau.study.run.study_run import run_study

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))

MM2 = Observable("mm2", "missing mass squared", "GeV²", (-2, -0.5, -0.2, 0, 0.2, 0.5, 1, 2, 3, 4, 5, 6.5, 9))
EL = Observable("el", "lepton energy in the B frame", "GeV", (0.2, 0.6, 0.9, 1.2, 1.5, 1.8, 2.5))
CATEGORIES = tuple(
    Category(f"{name}_{lepton}", f"{charm} {letter}", (MM2, EL))
    for name, charm, lepton, letter in (
        ("D0", "D⁰", "e", "e"),
        ("Dp", "D⁺", "mu", "μ"),
        ("Dst0", "D*⁰", "e", "e"),
        ("Dstp", "D*⁺", "mu", "μ"),
    )
)
PARAMETERS = (
    ScaleParameter("R_D", "R(D)", "ratio", 0.299),
    ScaleParameter("R_Dst", "R(D*)", "ratio", 0.254),
    ScaleParameter("yield_D_light", "yield of B → D ℓ ν", "yield", 1.0),
    ScaleParameter("yield_Dst_light", "yield of B → D* ℓ ν", "yield", 1.0),
    ScaleParameter("yield_Dss_light", "yield of B → D** ℓ ν", "yield", 1.0, 0.3),
    ScaleParameter("yield_continuum", "yield of continuum", "yield", 1.0, 0.1),
)
NUISANCES = (
    Nuisance("Dst_R0", "R₀(1) of D*", "form factors"),
    Nuisance("soft_pion", "soft-pion efficiency", "efficiencies"),
    Nuisance("tag_resolution", "tag resolution", "resolution"),
)
COMPONENTS = (
    Component("continuum", "continuum", "background", ("yield_continuum",)),
    Component("combinatorial", "combinatorial B", "background", ()),
    Component("Dss_light", "B → D** ℓ ν", "feed-down", ("yield_Dss_light",)),
    Component("D_light", "B → D ℓ ν", "normalisation", ("yield_D_light",)),
    Component("Dst_light", "B → D* ℓ ν", "normalisation", ("yield_Dst_light",)),
    Component("D_tau", "B → D τ ν", "signal", ("R_D", "yield_D_light")),
    Component("Dst_tau", "B → D* τ ν", "signal", ("R_Dst", "yield_Dst_light")),
)
# component -> mean and width in mm2, mean and width in el, events in (D, D*) categories
LAWS = {
    "continuum": (1.0, 2.0, 1.0, 0.5, 60, 25),
    "combinatorial": (3.0, 2.5, 0.9, 0.4, 120, 60),
    "Dss_light": (0.9, 0.7, 1.3, 0.4, 160, 110),
    "D_light": (0.0, 0.25, 1.6, 0.4, 900, 15),
    "Dst_light": (0.05, 0.3, 1.5, 0.4, 1300, 800),
    "D_tau": (4.0, 1.6, 0.8, 0.3, 85, 2),
    "Dst_tau": (3.6, 1.5, 0.8, 0.3, 90, 70),
}


def _shares(mean: float, width: float, edges: tuple[float, ...]) -> np.ndarray:
    steps = np.diff([math.erf((edge - mean) / width / math.sqrt(2)) / 2 for edge in edges])
    return steps / steps.sum()


def _template(component: str, starred: bool, neutral_share: float) -> Template:
    mean, width, el, el_width, plain, star = LAWS[component]

    def counts(shift: float = 0.0, stretch: float = 1.0) -> np.ndarray:
        shape = np.outer(_shares(mean, width * stretch, MM2.edges), _shares(el + shift, el_width, EL.edges))
        return (star if starred else plain) * neutral_share * shape

    nominal = counts()
    plus: dict[str, np.ndarray] = {"tag_resolution": counts(stretch=1.06)}
    minus: dict[str, np.ndarray] = {"tag_resolution": counts(stretch=0.94)}
    if component == "Dst_tau":
        plus["Dst_R0"], minus["Dst_R0"] = counts(shift=0.02), counts(shift=-0.02)
    if component.startswith("Dst"):
        sign = 1 if starred else -1
        plus["soft_pion"], minus["soft_pion"] = nominal * (1 + 0.03 * sign), nominal * (1 - 0.03 * sign)
    if component in ("continuum", "combinatorial"):
        plus, minus = {}, {}
    return Template(nominal, nominal * 0.02, plus, minus)


def small_templates(data_seed: int | None = SEED) -> TemplateSet:
    """Four categories, seven components; data from a Poisson draw, or none."""
    templates = {
        (category.name, component.name): _template(
            component.name, category.name.startswith("Dst"), 1.0 if "0" in category.name else 0.6
        )
        for category in CATEGORIES
        for component in COMPONENTS
    }
    data = {}
    if data_seed is not None:
        random = np.random.default_rng(data_seed)
        for category in CATEGORIES:
            total = sum(templates[category.name, component.name].nominal for component in COMPONENTS)
            data[category.name] = random.poisson(total).astype(float)
    return TemplateSet(CATEGORIES, COMPONENTS, PARAMETERS, NUISANCES, templates, data, {"seed": SEED})


def _projections(templates: TemplateSet) -> tuple[Projection, ...]:
    found = []
    for region, start in (("", 0), ("mm2 > 1 GeV²", 6)):
        for category in CATEGORIES:
            for axis, observable in enumerate((MM2, EL)):

                def project(array: np.ndarray, axis: int = axis, start: int = start) -> tuple[float, ...]:
                    kept = array[start:]
                    return tuple(kept.sum(axis=1 - axis).tolist())

                total = sum(templates.templates[category.name, c.name].nominal for c in COMPONENTS)
                found.append(
                    Projection(
                        category=category.name,
                        observable=observable.name,
                        label=observable.label,
                        unit=observable.unit,
                        region=region,
                        edges=observable.edges[start:] if axis == 0 else observable.edges,
                        data=project(templates.data[category.name]),
                        components=tuple(
                            StackedComponent(
                                component=c.name, counts=project(templates.templates[category.name, c.name].nominal)
                            )
                            for c in COMPONENTS
                        ),
                        uncertainty=tuple(0.06 * n for n in project(total)),
                    )
                )
    return tuple(found)


def _toy_ratio(name: str, label: str, injected: float, error: float, shift: int) -> ToyRatio:
    pulls = np.random.default_rng(SEED + shift).normal(size=2000)
    counts, edges = np.histogram(pulls, bins=40, range=(-5, 5))
    return ToyRatio(
        ratio=name,
        label=label,
        injected=injected,
        mean=injected + error * pulls.mean(),
        bias=error * pulls.mean(),
        bias_error=error / math.sqrt(2000),
        mean_error=error,
        pull_mean=pulls.mean(),
        pull_mean_error=1 / math.sqrt(2000),
        pull_width=pulls.std(),
        pull_width_error=1 / math.sqrt(4000),
        coverage=tuple(
            Coverage(level=level, fraction=float((abs(pulls) < k).mean()), low=level - 0.01, high=level + 0.01)
            for level, k in ((0.683, 1), (0.954, 2))
        ),
        pulls=PullHistogram(edges=tuple(edges.tolist()), counts=tuple(counts.tolist()), outside=0),
        judgement="unbiased",
        significance=0.5,
        excluded=0.06,
        toys_needed=400,
        covers=True,
        verdict="no bias seen",
    )


def small_results() -> Results:
    """Results as a study would leave them, with invented numbers of the right size."""
    templates = small_templates()
    ratios = (("R_D", "R(D)", 0.299, 0.031), ("R_Dst", "R(D*)", 0.254, 0.018))
    names = [*((p.name, p.label, p.kind, p.injected, p.constraint) for p in PARAMETERS)]
    names += [(n.name, n.label, "nuisance", 0.0, 1.0) for n in NUISANCES]
    mixing = np.random.default_rng(1).normal(size=(len(names), 2 * len(names)))
    covariance = mixing @ mixing.T
    correlation = covariance / np.sqrt(np.outer(covariance.diagonal(), covariance.diagonal()))
    sources = (("statistical", "finite data", 0.85), ("template_statistics", "finite templates", 0.25))
    sources += tuple((g, g, s) for g, s in (("form factors", 0.3), ("efficiencies", 0.2), ("resolution", 0.1)))
    return Results(
        study=StudyIdentity(name="Marlow, test", seed=SEED, hash="a" * 64, key="b" * 64, text='[study]\nname = "x"\n'),
        versions={"semitau": "0.1.0", "numpy": "2.4"},
        data=DataSource(kind="pseudo", description="pseudo-data from independent events", events=14_321),
        ratios=tuple(
            RatioResult(
                name=n, label=label, injected=r, value=r + 0.4 * e, error=e, pull=0.4,
                statistical=0.85 * e, template_statistics=0.25 * e, systematic=0.45 * e,
            )
            for n, label, r, e in ratios
        ),
        verdict=Verdict(status="sound", sentences=("R(D): no bias seen: +0.3 ± 0.7 % of the error.",)),
        fit=Fit(
            valid=True,
            reasons=(),
            minus_log_likelihood=-1234.5,
            goodness=Goodness(statistic=560.0, degrees_of_freedom=567, p_value=0.57, toy_p_value=0.55),
            parameters=tuple(
                Parameter(name=n, label=label, kind=k, injected=i, constraint=c, value=i, error=0.1)
                for n, label, k, i, c in names
            ),
            correlation=tuple(tuple(row) for row in correlation.tolist()),
        ),
        budget=tuple(
            Budget(
                ratio=n,
                rows=tuple(BudgetRow(source=s, label=t, error=share * e) for s, t, share in sources),
                total=e,
            )
            for n, _, _, e in ratios
        ),
        toys=Toys(
            number=2003,
            failures=3,
            failure_reasons={"no minimum": 3},
            ratios=tuple(_toy_ratio(n, label, r, e, i) for i, (n, label, r, e) in enumerate(ratios)),
        ),
        linearity=tuple(
            Linearity(
                ratio=n, label=label, slope=1.002, slope_error=0.01,
                intercept=0.0004, intercept_error=0.0026, p_value=0.4,
                verdict="straight",
                points=tuple(
                    LinearityPoint(
                        injected=f * r, mean=f * r + e * 0.03, mean_error=e / 22, spread=e, toys=500, failures=0
                    )
                    for f in (0.8, 1.0, 1.2, 1.4)
                ),
            )
            for n, label, r, e in ratios
        ),
        categories=tuple(Named(name=c.name, label=c.label) for c in CATEGORIES),
        components=tuple(
            ComponentInfo(name=c.name, label=c.label, role=c.role, scales_with=c.scales_with) for c in COMPONENTS
        ),
        projections=_projections(templates),
        cut_flow=tuple(
            CutFlowComponent(
                component=c.name,
                label=c.label,
                steps=(
                    CutFlowStep(name="tagged", events=50_000, efficiency=1),
                    CutFlowStep(name="reconstructed", events=8_000, efficiency=0.16),
                    CutFlowStep(name="q2 ≥ 4 GeV²", events=3_000, efficiency=0.375),
                ),
                purity=0.12,
            )
            for c in COMPONENTS
        ),
        warnings=(),
        timing=Timing(
            started="2026-12-01T09:00:00Z",
            stages=(StageTime(stage="templates", seconds=12.3, reused=False),),
            total=20.0,
            workers=2,
            peak_memory=512,
        ),
    )  # fmt: skip


@pytest.fixture(scope="session")
def templates() -> TemplateSet:
    return small_templates()


@pytest.fixture(scope="session")
def results() -> Results:
    return small_results()


MARLOW = (Path(__file__).parents[2] / "configs" / "marlow_small.toml").read_text()


def mini_text(changes: Mapping[str, str] | None = None, *, questions: bool = True) -> str:
    """The small Marlow study with a fiftieth of its events, few bins and toys, and no alternatives.

    changes : text -> text in its place. questions : whether it asks for design and reach.
    """
    text = re.sub(r"^events = ([\d_]+)", lambda found: f"events = {int(found[1]) // 50}", MARLOW, flags=re.M)
    text = re.sub(r"^number = \d+", "number = 60", text, flags=re.M)
    text = re.sub(r"^(linearity = .*number = )\d+", r"\g<1>40", text, flags=re.M)
    text = re.sub(r"^mm2 = \[.*\]$", "mm2 = [-2.0, 0.2, 1.0, 3.0, 9.0]", text, flags=re.M)
    text = re.sub(r"^el = \[.*\]$", "el = [0.2, 0.9, 1.5, 2.6]", text, flags=re.M)
    text = re.sub(r'^output = ".*"', 'output = "out"', text, flags=re.M)
    text = re.sub(r"\n# ── Other worlds.*?(?=\n# ── |\Z)", "", text, flags=re.S)  # test_bias.py has its own
    text = re.sub(r"\n# ── How many events.*?(?=\n# ── |\Z)", "", text, flags=re.S)  # test_sizing.py has its own
    if not questions:
        text = text.split("# ── Design")[0]
    for old, new in (changes or {}).items():
        assert old in text, old
        text = text.replace(old, new)
    return text


WriteStudy = Callable[..., Path]


@pytest.fixture
def mini(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> WriteStudy:
    """Writes a quick study, with changes if any, into a folder of its own, which is the current one."""
    monkeypatch.chdir(tmp_path)

    def write(changes: Mapping[str, str] | None = None, *, questions: bool = True) -> Path:
        path = tmp_path / "mini.toml"
        path.write_text(mini_text(changes, questions=questions))
        return path

    return write


@pytest.fixture(scope="session")
def template_file(templates: TemplateSet, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The small template set as a file, not to be changed."""
    path = tmp_path_factory.mktemp("templates") / "templates.root"
    write_templates(templates, path)
    return path


@pytest.fixture(scope="session")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Folder of a quick study that has run to its end, not to be changed."""
    folder = tmp_path_factory.mktemp("finished")
    (folder / "mini.toml").write_text(mini_text())
    run_study(folder / "mini.toml", output=folder / "out", workers=2)
    return folder / "out"
