"""Fits per second, against general-purpose minimisers with numerical derivatives on the same compiled likelihood."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from statistics import median

import numpy as np
from numpy.typing import NDArray
from semitau.core.compiled import kernel
from semitau.core.templates import TemplateSet
from semitau.fit import Data, Model, maximise, run_toys
from semitau.fit.fitting.algebra import inverse_diagonal
from semitau.fit.fitting.newton import Scratch, minimise, scratch
from semitau.fit.likelihood.layout import Arrays, Indices
from semitau.fit.likelihood.likelihood import VALUE, evaluate

from .figures import Figure
from .timing import interleaved

Floats = NDArray[np.float64]
FITS_EACH = 20
"""Our fits of each data set: one alone is too short for the clock."""


@kernel
def fit_again(
    arrays: Arrays,
    free: Indices,
    counts: Floats,
    gammas: Floats,
    centres: Floats,
    start: Floats,
    x: Floats,
    s: Scratch,
    times: int,
) -> float:
    """Fit the same data so many times, with errors; -ln L at the minimum."""
    variances, value = np.zeros(free.shape[0]), 0.0
    for _ in range(times):
        x[:] = start
        value = minimise(arrays, free, counts, gammas, centres, x, s).value
        inverse_diagonal(s.lower, s.scale, free.shape[0], s.step, variances)
    return value


class NumpyLikelihood:
    """The light form for templates without functions and coefficients, vectorised over components and bins."""

    def __init__(self, model: Model) -> None:
        self.model, templates = model, model.templates
        components, nuisances = templates.components, templates.nuisances
        self.nominal = np.zeros((len(components), model.bins))
        self.odd = np.zeros((len(nuisances), len(components) * model.bins))
        self.even = np.zeros_like(self.odd)
        odd, even = (part.reshape(len(nuisances), len(components), model.bins) for part in (self.odd, self.even))
        first = 0
        for category in templates.categories:
            here = slice(first, first + int(np.prod(category.shape)))
            for c, component in enumerate(components):
                template = templates.templates.get((category.name, component.name))
                if template is None:
                    continue
                self.nominal[c, here] = template.nominal.ravel()
                for k, nuisance in enumerate(nuisances):
                    if nuisance.name in template.plus:
                        up, down = template.plus[nuisance.name].ravel(), template.minus[nuisance.name].ravel()
                        odd[k, c, here] = 0.5 * (up - down)
                        even[k, c, here] = 0.5 * (up + down) - template.nominal.ravel()
            first = here.stop
        self.scales = [[model.index(name) for name in component.scales_with] for component in components]
        self.floor = model.layout.arrays.floor[model.layout.bin_lane]
        self.variance = model.layout.arrays.template_variance[model.layout.bin_lane]
        self.there = model.layout.bin_lane >= 0
        self.weights = model.layout.arrays.inverse_variance

    def __call__(self, x: Floats, data: Data) -> float:
        theta = x[x.size - self.odd.shape[0] :]
        t = theta * theta
        bend = np.where(np.abs(theta) < 1.0, 0.125 * t * (15.0 + t * (3.0 * t - 10.0)), np.abs(theta))
        contents = self.nominal + (theta @ self.odd + bend @ self.even).reshape(self.nominal.shape)
        relative = x / np.where(self.model.injected != 0, self.model.injected, 1.0)
        nu = np.array([relative[own].prod() for own in self.scales]) @ contents
        nu, floor, v = nu[self.there], self.floor[self.there], self.variance[self.there]
        n, centre = data.counts[self.there], data.gamma_centres[self.there]
        y = 1.0 - nu / floor
        mu = np.where(nu < floor, floor / (1.0 + y + y * y), nu)
        b = mu * v - centre
        known = v > 0
        gamma = np.where(known, 0.5 * (np.sqrt(b * b + 4.0 * n * v) - b), centre)
        expected = gamma * mu
        terms = expected - n + n * np.log(np.where(n > 0, n, 1.0) / np.where(n > 0, expected, 1.0))
        terms += np.where(known, 0.5 * (gamma - centre) ** 2 / np.where(known, v, 1.0), 0.0)
        return float(terms.sum() + 0.5 * ((x - data.centres) ** 2 @ self.weights))


class DataSet:
    """One data set to fit, for every minimiser; all begin at the injected values."""

    def __init__(self, model: Model, data: Data, errors: Floats) -> None:
        self.model, self.data, self.errors = model, data, errors
        self.counts, self.gammas = model.lanes(data.counts, 0.0), model.lanes(data.gamma_centres, 1.0)
        self.scratch = scratch(model.layout.arrays)
        self.plain = NumpyLikelihood(model)
        self.calls = 0

    def value(self, scaled: Floats) -> float:
        """-ln L; free parameters in units of their expected errors, which is as kind as it gets to a minimiser."""
        self.calls += 1
        x, s = self.model.start.copy(), self.scratch
        x[self.model.free] += np.asarray(scaled) * self.errors
        arrays, centres = self.model.layout.arrays, self.data.centres
        return float(evaluate(arrays, x, self.counts, self.gammas, centres, VALUE, s.gradient, s.hessian, s.work))

    def ours(self) -> float:
        """Minimum and errors, FITS_EACH times in a compiled loop as the one over toys."""
        arrays, free, start = self.model.layout.arrays, self.model.free, self.model.start
        measured = self.counts, self.gammas, self.data.centres
        return float(fit_again(arrays, free, *measured, start, start.copy(), self.scratch, FITS_EACH))

    def door(self) -> float:
        """The same through the public function: data checked, covariance, eigenvalues, goodness of fit."""
        return maximise(self.model, self.data).minus_log_likelihood

    def migrad(self) -> float:
        """Minimum and errors of iminuit, to the same depth: distance below 1e-6 in -ln L."""
        from iminuit import Minuit

        minuit = Minuit(self.value, np.zeros(self.model.free.size))
        minuit.errordef, minuit.tol = Minuit.LIKELIHOOD, 1e-3
        minuit.errors[:] = 1.0
        minuit.migrad().hesse()
        return float(minuit.fval)

    def migrad_in_numpy(self) -> float:
        """The same with -ln L written in numpy, as one would without a compiler."""
        from iminuit import Minuit

        plain = self.plain
        start, free = self.model.start, self.model.free

        def value(scaled: Floats) -> float:
            self.calls += 1
            x = start.copy()
            x[free] += np.asarray(scaled) * self.errors
            return plain(x, self.data)

        minuit = Minuit(value, np.zeros(free.size))
        minuit.errordef, minuit.tol = Minuit.LIKELIHOOD, 1e-3
        minuit.errors[:] = 1.0
        minuit.migrad().hesse()
        return float(minuit.fval)

    def bfgs(self) -> float:
        """Minimum of scipy; its inverse Hessian is a rough one, so there are no errors."""
        from scipy.optimize import minimize

        return float(minimize(self.value, np.zeros(self.model.free.size), method="BFGS").fun)


@dataclass(frozen=True)
class Race:
    """What the minimisers took: seconds of processor and value for each data set."""

    seconds: dict[str, list[float]]
    values: dict[str, list[float]]
    calls: dict[str, list[int]]

    def time(self, name: str) -> float:
        return median(self.seconds[name])

    def excess(self, name: str) -> float:
        """Largest distance of a minimum to ours, in -ln L."""
        return max(abs(a - b) for a, b in zip(self.values[name], self.values["ours"], strict=True))


def race(model: Model, data_sets: int) -> Race:
    """All minimisers fit the same Poisson data sets, in turns."""
    errors = maximise(model, model.expected_data()).errors[model.free]
    random = np.random.default_rng(1)
    fits: dict[str, tuple[Callable[[DataSet], float], int]] = {  # and how many fits each of them is
        "ours": (DataSet.ours, FITS_EACH),
        "door": (DataSet.door, 1),
        "migrad": (DataSet.migrad, 1),
        "migrad in numpy": (DataSet.migrad_in_numpy, 1),
        "bfgs": (DataSet.bfgs, 1),
    }
    found = Race({}, {}, {})
    for _ in range(data_sets):
        data_set = DataSet(model, model.data(random.poisson(model.expected_counts())), errors)
        for name, (fit, times) in fits.items():
            fit(data_set)  # compiled, and in the cache
            data_set.calls = 0
            start = time.process_time()
            value = fit(data_set)
            found.seconds.setdefault(name, []).append((time.process_time() - start) / times)
            found.values.setdefault(name, []).append(value)
            found.calls.setdefault(name, []).append(data_set.calls)
    return found


def fit_figures(templates: TemplateSet, data_sets: int) -> list[Figure]:
    """Fits per second of processor time, and what others take for the same."""
    model = Model(templates)
    found = race(model, data_sets)
    ours = found.time("ours")
    model_size = f"{len(model.free)} free parameters, {model.bins} bins; medians of {data_sets} Poisson data sets"

    def note(name: str) -> str:
        evaluations, seconds = median(found.calls[name]), found.time(name)
        depth = f"minima within {found.excess(name):.0e} of ours in -ln L"
        of = "the same likelihood in numpy" if "numpy" in name else "the same compiled likelihood"
        return f"{evaluations:.0f} evaluations of {of}, {1e3 * seconds:.1f} ms; {depth}"

    return [
        Figure("fits: minimum and errors, as toys do", 1 / ours, "/s/core", note=model_size),
        Figure("fits through fit.maximise, with all checks", 1 / found.time("door"), "/s/core"),
        Figure(
            "  over MIGRAD and HESSE, likelihood in numpy",
            found.time("migrad in numpy") / ours,
            "times",
            300,
            "at least",
            note("migrad in numpy"),
        ),
        Figure("  over MIGRAD and HESSE", found.time("migrad") / ours, "times", note=note("migrad")),
        Figure("  over BFGS, which gives no errors", found.time("bfgs") / ours, "times", note=note("bfgs")),
    ]


def toy_figures(templates: TemplateSet, number: int, repetitions: int) -> list[Figure]:
    """Drawing and fitting toys, one and two workers in turns."""
    model = Model(templates)
    timings = interleaved({str(n): partial(run_toys, model, number, 1, n) for n in (1, 2)}, repetitions)
    return [
        Figure(f"{number} toys, two workers", timings["2"].wall, "s", 20),
        Figure("  two workers over one", timings["1"].wall / timings["2"].wall, "times", 1.7, "at least"),
        Figure("  toys drawn and fitted", number / timings["1"].cpu, "/s/core"),
    ]
