"""Parts of results with invented numbers, for the pages of the report that only large studies fill."""

from __future__ import annotations

from pathlib import Path

from semitau.study.averages.measurement_file import read_average
from semitau.study.averages.run import averaged
from semitau.study.bias.part import (
    Bias,
    BiasChange,
    BiasCoverage,
    BiasGoodness,
    BiasPair,
    BiasRatio,
    BiasStudy,
)
from semitau.study.design.part import (
    Design,
    DesignAxis,
    DesignBinning,
    DesignCategory,
    DesignChoice,
    DesignConfirmation,
    DesignCurve,
    DesignCut,
    DesignError,
    DesignMerging,
    DesignPoint,
    DesignVariation,
)
from semitau.study.inputs.part import (
    InputAxis,
    InputCategory,
    InputComponent,
    InputCut,
    InputFormFactors,
    InputNumber,
    InputParameter,
    Inputs,
    InputVariation,
)
from semitau.study.reach.part import (
    Reach,
    ReachAmount,
    ReachCompared,
    ReachDeviation,
    ReachError,
    ReachNeeded,
    ReachWall,
)
from semitau.study.results import NuisanceResult, RatioShift, Results, Reweighting
from semitau.study.sizing.part import (
    Sizing,
    SizingAllocation,
    SizingCheck,
    SizingCost,
    SizingCurve,
    SizingGain,
    SizingRatio,
    SizingSample,
    SizingShareOfTime,
    SizingToyRatio,
    SizingToys,
    SizingVerification,
)

RATIOS = (("R_D", "R(D)", 0.299, 0.031), ("R_Dst", "R(D*)", 0.254, 0.018))
AVERAGE = Path(__file__).parents[2] / "configs" / "average.toml"
NOT_COVERED = "R(D*), made with a worse resolution: shift −0.021 ± 0.001, −1.17 of its error; covering error 0.004."
TOO_FEW = "Continuum needs 2.5 times as many events."


def with_every_part(results: Results) -> Results:
    """The results with a page for everything."""
    return results.model_copy(
        update={
            "inputs": inputs(),
            "bias": bias(),
            "sizing": sizing(),
            "design": design(),
            "reach": reach(),
            "average": averaged(read_average(AVERAGE)).results,
            "nuisances": nuisances(),
            "reweightings": tuple(
                Reweighting(
                    component="Dst_tau", label="B → D* τ ν", source=f"v{i}", where=f"v{i} −1", events=9e5,
                    effective=9e5 * (0.2 + 0.04 * i), share=0.2 + 0.04 * i,
                )
                for i in range(15)
            ),
        }
    )  # fmt: skip


def nuisances() -> tuple[NuisanceResult, ...]:
    return tuple(
        NuisanceResult(
            name=f"n{i}", label=f"nuisance {i} of D*", group="detector", pull=(-1) ** i * 0.3 * i, constraint=0.95,
            shifts=tuple(
                RatioShift(ratio=name, down=None if i == 3 else -error / (2 + i), up=error / (2.5 + i))
                for name, _, _, error in RATIOS
            ),
        )
        for i in range(5)
    )  # fmt: skip


def inputs() -> Inputs:
    mm2 = InputAxis(observable="mm2", label="missing mass squared", unit="GeV²", edges=(-2.0, -0.5, 0.25, 9.0))
    cut = InputCut(observable="q2", label="q²", unit="GeV²", low=4.0, high=None)
    return Inputs(
        components=(
            InputComponent(
                name="D_tau", label="B → D τ ν", role="signal", moves="ratio", chains=4, generated=600_000,
                expected=1096.2,
            ),
            InputComponent(
                name="fakes", label="fakes", role="background", moves="± 20 %", chains=0, generated=0, expected=None
            ),
        ),
        categories=tuple(
            InputCategory(name=name, label=label, axes=(mm2,), cuts=(cut,))
            for name, label in (("D0_e", "D⁰ e"), ("D0_mu", "D⁰ μ"))
        ),
        form_factors=(
            InputFormFactors(
                transition="D",
                label="B → D",
                set="BCL-2021",
                parametrisation="BCL",
                source="from memory",
                parameters=(InputParameter(name="a1", value=-7.94, error=0.2),),
            ),
        ),
        numbers=(
            InputNumber(key="detector.tracks.efficiency", value="0.95", unit="", meaning="within acceptance"),
            InputNumber(
                key="detector.soft_pion.charged",
                value="; ".join(f"0.{i} at 0.0{i} GeV" for i in range(1, 9)),
                unit="",
                meaning="efficiency for charged pions, within acceptance; it stands in place of the track efficiency",
            ),
        ),
        variations=(
            InputVariation(
                name="Dst_R0", label="R₀(1) of D*", kind="form_factor", group="form factors",
                what="set Dst, parameter R0(1), shift 0.07", acts_on=("B → D* τ ν", "B → D* ℓ ν"),
            ),
        ),
    )  # fmt: skip


def bias() -> Bias:
    studies = [("nominal", "the study"), ("other_set", "D* from BGL"), ("worse_tag", "worse tag resolution")]
    changes = (
        BiasChange(
            key="detector.tag.momentum_resolution", before='"22 MeV"', after='"26 MeV"',
        ),
    )  # fmt: skip
    pairs = []
    for i, (made, _) in enumerate(studies):
        for j, (fitted, _) in enumerate(studies):
            failed = (i, j) == (2, 1)
            pairs.append(
                BiasPair(
                    made_with=made,
                    fitted_with=fitted,
                    valid=not failed,
                    reason="no minimum" if failed else "",
                    outside=0.0,
                    toys=0 if failed else 500,
                    failures=0,
                    goodness=None
                    if failed
                    else BiasGoodness(
                        deviance=3.0 * abs(i - j),
                        degrees_of_freedom=567,
                        p_value=0.5 - 0.1 * abs(i - j),
                        toy_p_value=0.4,
                    ),
                    ratios=() if failed else tuple(_bias_ratio(*ratio, i - j) for ratio in RATIOS),
                )
            )
    return Bias(
        studies=tuple(
            BiasStudy(name=name, label=label, changes=changes if name != "nominal" else (), covered_by=())
            for name, label in studies
        ),
        negligible=0.1,
        not_covered=(NOT_COVERED,),
        sentences=("R(D) is covered everywhere.",),
        pairs=tuple(pairs),
    )


def _bias_ratio(name: str, label: str, injected: float, error: float, steps: int) -> BiasRatio:
    shift = -0.585 * steps * error
    return BiasRatio(
        ratio=name,
        label=label,
        true=injected,
        shift=shift,
        shift_error=0.02 * error if steps else 0.0,
        error=error,
        significance=shift / error,
        covering=0.25 * error,
        covered_by=(),
        status="negligible" if steps == 0 else "not covered",
        pull_mean=shift / error,
        pull_mean_error=0.045,
        pull_width=1.01,
        pull_width_error=0.032,
        coverage=(BiasCoverage(level=0.683, expected=0.5, fraction=0.49, low=0.46, high=0.52),),
    )


def reach() -> Reach:
    factors = (0.1, 1.0, 10.0, 100.0)
    return Reach(
        unit="B pairs",
        generated="fixed",
        ratios=(
            ReachCompared(ratio="R_D", label="R(D)", true=0.34, value=0.298, error=0.004),
            ReachCompared(ratio="R_Dst", label="R(D*)", true=0.284, value=None, error=None),
        ),
        amounts=tuple(
            ReachAmount(
                factor=factor,
                amount=7e8 * factor,
                errors=tuple(
                    ReachError(
                        ratio=name, total=error, statistical=0.9 * error, template_statistics=0.1 * error,
                        systematic=0.4 * error, sources={"statistical": 0.9 * error, "form factors": 0.4 * error},
                    )
                    for name, _, _, error in RATIOS
                ),
                deviations=(
                    ReachDeviation(
                        name="R_D", growth=factor, degrees_of_freedom=1, sigmas=factor**0.5, evidence=0.02,
                        discovery=1e-4,
                    ),
                ),
            )
            for factor in factors
        ),
        walls=(
            ReachWall(ratio="R_D", label="R(D)", factor=12.0, source="form factors", sentence="R(D): a wall at × 12."),
        ),
        needed=(
            ReachNeeded(
                name="R_D", label="R(D)", evidence=9.0, discovery=25.0, sentence="R(D): 3 σ with 6.3 × 10⁹ B pairs."
            ),
        ),
    )  # fmt: skip


def design() -> Design:
    def point(scale: float, cut: float) -> DesignPoint:
        return DesignPoint(
            merit=0.08 * scale,
            errors=tuple(DesignError(ratio=n, error=e * scale, relative=e * scale / r) for n, _, r, e in RATIOS),
            cuts=(DesignCut(cut="e_res.max", value=cut),),
            binnings=(
                DesignBinning(
                    table="D0, D+ with e, μ", observables=("mm2",), edges=((-2.0, -0.25, 1.0, 9.0),), bins=3, least=12.5
                ),
            ),
            bins=24,
            events=14_321.0,
        )

    curve = DesignCurve(
        cut="e_res.max", label="residual energy below", unit="GeV", values=(0.4, 0.8, 1.2), at_start=(1.04, 1.0, None),
        at_proposed=(1.02, 1.0, 1.01), errors=((1.02, 1.0, 1.01), (1.03, 1.0, None)), start=0.8, proposed=0.9,
        flat=(0.7, 1.2), matters=True,
    )  # fmt: skip
    return Design(
        minimised="mean",
        ratios=("R_D", "R_Dst"),
        labels=("R(D)", "R(D*)"),
        start=point(1.0, 0.8),
        proposed=point(0.95, 0.9),
        gain=0.05,
        confirmation=DesignConfirmation(
            start=point(1.0, 0.8).errors,
            proposed=point(0.96, 0.9).errors,
            gain=0.04,
            uncertainty=0.01,
            noise=(0.004, 0.006),
            confirmed=True,
        ),
        flat=0.005,
        curves=(
            curve,
            curve.model_copy(update={"cut": "p_lepton.min", "label": "lepton momentum above", "matters": False}),
        ),
        choices=(
            DesignChoice(table="D0", observables=("mm2",), bins=12, merit=1.1, now=False, chosen=False),
            DesignChoice(table="D0", observables=("mm2", "el"), bins=40, merit=1.0, now=True, chosen=True),
            DesignChoice(table="D0", observables=("el",), bins=6, merit=None, now=False, chosen=False),
        ),
        mergings=(DesignMerging(table="D0", bins=(72, 40, 20), merit=(1.0, 1.001, 1.02), chosen=40),),
        axes=(
            DesignAxis(
                table="D0", observable="mm2", label="missing mass squared", unit="GeV²", edges=(-2.0, 1.0, 9.0),
                shares=((0.2, 0.8), (0.3, 0.7)), loss=0.12,
            ),
        ),
        categories=(
            DesignCategory(category="D0_e", label="D⁰ e", loss=0.07),
            DesignCategory(category="D0_mu", label="D⁰ μ", loss=None),
        ),
        variations=(DesignVariation(nuisance="Dst_R0", label="R₀(1) of D*", before=0.021, after=0.018),),
        points=2345,
        generated=8_000_000,
        snippet="[selection]\ne_res = { max = 0.9 }\n",
        notes=("The scan ends at residual energies of 1.2 GeV.",),
    )  # fmt: skip


def sizing() -> Sizing:
    samples = (("D_tau", "B → D τ ν"), ("Dst_tau", "B → D* τ ν"), ("continuum", "continuum"))
    return Sizing(
        ratios=tuple(
            SizingRatio(
                ratio=name, label=label, injected=injected, exact=0.98 * error, now=error, templates=0.2 * error,
                templates_error=0.01 * error, with_needed=0.99 * error,
            )
            for name, label, injected, error in RATIOS
        ),
        samples=tuple(
            SizingSample(
                sample=name, label=label, components=(name,), generated=None if i == 2 else 600_000 * (i + 1),
                effective=5e5, share=0.01, needed=0.5 + i, needed_error=0.03, needed_events=None if i == 2 else 300_000,
                decisive="R_Dst", because="precision",
            )
            for i, (name, label) in enumerate(samples)
        ),
        costs=tuple(
            SizingCost(
                sample=name, ratio=ratio, part=0.002, part_error=0.0001, cost=0.004, needed=1.25, needed_formula=1.3,
                needed_error=0.04, bias=0.001, bias_error=0.0001, understated=0.002, understated_error=0.0002,
                decisive="precision", needed_precision=1.25, needed_bias=0.5, needed_reported=0.2,
            )
            for name, _ in samples
            for ratio, *_ in RATIOS
        ),
        curves=tuple(
            SizingCurve(ratio=ratio, sample=sample, factors=(0.1, 1.0, 10.0), errors=(2 * error, error, 0.9 * error))
            for ratio, _, _, error in RATIOS
            for sample in ("", "D_tau")
        ),
        toys=(
            SizingToys(
                what="alone", sample="D_tau", factor=0.1, multiple=1.2, number=1000, failures=2,
                ratios=tuple(
                    SizingToyRatio(
                        ratio=ratio, true=1.2 * injected, expected=error, mean_error=0.95 * error, spread=1.02 * error,
                        spread_error=0.02 * error, bias=-0.01 * error, bias_error=0.03 * error, pull_width=1.07,
                        pull_width_error=0.024, coverage=0.651, coverage_low=0.636, coverage_high=0.666,
                    )
                    for ratio, _, injected, error in RATIOS
                ),
            ),
        ),
        verifications=(
            SizingVerification(
                what="fewer", sets=8, fraction=0.125, events=1_200_000,
                checks=tuple(
                    SizingCheck(
                        sample=sample, ratio=ratio, predicted=0.0054, predicted_error=0.0002, measured=0.0055,
                        measured_error=0.0001, scatter=0.0051, scatter_error=0.0013, p_value=0.81,
                    )
                    for sample in ("", *(name for name, _ in samples))
                    for ratio, *_ in RATIOS
                ),
            ),
        ),
        allocation=SizingAllocation(
            target="all", seconds=12.0, seconds_now=12.5, aim=0.01, seconds_aim=20.0, seconds_aim_as_now=35.0,
            samples=tuple(
                SizingShareOfTime(
                    sample=name, nanoseconds=1234.5, nanoseconds_error=None if i else 12.0, now=600_000, best=700_000,
                    cheapest=900_000,
                )
                for i, (name, _) in enumerate(samples)
            ),
            gains=tuple(
                SizingGain(
                    ratio=ratio, templates_now=0.2 * error, templates_best=0.15 * error, error_now=error,
                    error_best=0.99 * error, error_cheapest=0.985 * error,
                )
                for ratio, _, _, error in RATIOS
            ),
            snippet="events = 700_000\n",
        ),
        snippet="events = 300_000\n",
        sentences=(TOO_FEW, "Template statistics cost R(D) 2.0 % of its error."),
    )  # fmt: skip
