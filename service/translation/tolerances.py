"""What tolerances do to results: the question read, and its answer."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis import derivatives, stack_up
from service.analysis.derivatives import Derivatives
from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.limits import Limit
from service.analysis.propagation import (
    Estimate,
    Probability,
    Propagation,
    Sampling,
    propagate,
)
from service.analysis.variance_indices import VarianceIndices, cases_of_indices, variance_indices
from service.analysis.worst_case import Extreme, Watched, Zone, look, most_cases_of_worst
from service.models import tolerances as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.answers import number_or_none
from service.translation.limits import all_held, limit_shown
from service.translation.numbers import NumberInfo
from service.translation.sensitivities import derivatives_of, read_radii, unit_of_derivative
from service.translation.spreads import Spread, read_correlation, read_spread
from service.translation.tolerance_findings import Found, warnings_of


def read_tolerances(question: models.TolerancesQuestion, prepared: Prepared) -> Analysis:
    """The question with its numbers, zones and limits in their units. Raises RequestRefused."""
    collector = prepared.collector()
    infos, targets = prepared.numbers(collector, question.numbers)
    collector.raise_if_any()
    radii = read_radii(collector, question.numbers, infos, targets, prepared)
    spreads = [
        read_spread(collector, asked, info, ("numbers", index))
        for index, (asked, info) in enumerate(zip(question.numbers, infos, strict=True))
    ]
    correlation = read_correlation(collector, question.correlations, infos)
    if correlation is not None and question.variance_indices is not None:
        detail = "Sobol indices are those of independent numbers; leave out them or the correlations."
        collector.add(("variance_indices",), detail, "correlated")
    limits = prepared.limits(collector, question.limits)
    collector.raise_if_any()
    read = _Read(
        question, prepared, infos, radii, [spread for spread in spreads if spread is not None], correlation, limits
    )
    return Analysis(prepared, prepared.plan(infos, targets), read.most_cases, read.run, derivatives.ACCURACY)


@dataclass(frozen=True)
class _Read:
    """A question about tolerances, read."""

    question: models.TolerancesQuestion
    prepared: Prepared
    infos: Sequence[NumberInfo]
    radii: FloatArray
    spreads: Sequence[Spread]
    correlation: FloatArray | None
    limits: Sequence[Limit]

    @property
    def sampling(self) -> Sampling | None:
        asked = self.question.samples
        if asked is None:
            return None
        replicates = 1 if isinstance(asked, models.RandomSamples) else asked.replicates
        return Sampling(asked.count, replicates, asked.method, asked.seed)

    @property
    def most_cases(self) -> int:
        """Of derivatives, the worst case, samples and indices."""
        n_numbers = len(self.infos)
        cases = derivatives.most_cases(n_numbers) + most_cases_of_worst(len(self.prepared.results.infos), n_numbers)
        if self.sampling is not None:
            cases += self.sampling.cases
        if self.question.variance_indices is not None:
            cases += cases_of_indices(self.question.variance_indices.count, len(self.infos))
        return cases

    def run(self, evaluate: Evaluate) -> dict[str, Any]:
        """The answer."""
        plus, minus = (np.array([getattr(spread, side) for spread in self.spreads]) for side in ("plus", "minus"))
        distributions = [spread.distribution for spread in self.spreads]
        zone = Zone(np.array([info.nominal for info in self.infos]), plus, minus)
        watched = Watched(evaluate, zone)
        slopes = derivatives_of(watched, self.infos, self.radii)
        alone = look(watched, zone, slopes)

        spread: Propagation | None = None
        if self.sampling is not None:
            spread = propagate(
                watched,
                distributions,
                self.sampling,
                limits=self.limits,
                quantiles=self.question.quantiles,
                correlation=self.correlation,
                confidence=self.question.confidence,
            )
        indices: VarianceIndices | None = None
        if self.question.variance_indices is not None:
            asked = self.question.variance_indices
            indices = variance_indices(
                watched, distributions, asked.count, seed=asked.seed, confidence=self.question.confidence
            )

        stacked = stack_up.stack_up(slopes, plus, minus, self.correlation)
        found = Found(
            infos=self.infos,
            results=self.prepared.results.infos,
            limits=self.limits,
            zone=zone,
            slopes=slopes,
            stacked=stacked,
            alone=alone,
            lowest=watched.lowest,
            highest=watched.highest,
            failures=watched.failures,
            spread=spread,
        )
        deviations = np.array([float(distribution.std()) for distribution in distributions])
        variance, shares = stack_up.variance(slopes, deviations, self.correlation)
        return {
            "numbers": [self._number(slopes, index) for index in range(len(self.infos))],
            "stack_ups": [
                self._stack_up(result, found, float(np.sqrt(variance[result])), shares[result])
                for result in range(len(self.prepared.results.infos))
            ],
            "limits": self._limits(found),
            **({"all_held": all_held(found.held)} if self.limits else {}),
            "failures": _failures(watched.failures),
            **({"propagation": self._propagation(spread)} if spread is not None else {}),
            **({"variance_indices": self._indices(indices)} if indices is not None else {}),
            "case_count": watched.n_cases,
            "warnings": warnings_of(found),
        }

    def _number(self, slopes: Derivatives, index: int) -> dict[str, Any]:
        info, spread = self.infos[index], self.spreads[index]
        return {
            "name": info.name,
            "unit": info.measure.unit,
            "nominal": info.nominal,
            "plus": spread.plus,
            "minus": spread.minus,
            "mean": float(spread.distribution.mean()),
            "standard_deviation": float(spread.distribution.std()),
            **_reason(slopes.failures.get(index)),
        }

    def _stack_up(self, result: int, found: Found, deviation: float, shares: FloatArray) -> dict[str, Any]:
        info, stacked = self.prepared.results.infos[result], found.stacked
        return {
            "result": info.name,
            "unit": info.measure.unit,
            "nominal": float(stacked.nominal[result]),
            "lowest": self._worst(found.lowest, result),
            "highest": self._worst(found.highest, result),
            "first_order_low": number_or_none(stacked.worst_low[result]),
            "first_order_high": number_or_none(stacked.worst_high[result]),
            "middle": number_or_none(stacked.middle[result]),
            "root_sum_square": number_or_none(stacked.root_sum_square[result]),
            "standard_deviation": number_or_none(deviation),
            "error_estimate": number_or_none(stacked.slope_error[result]),
            "bend": number_or_none(found.bend[result]),
            "contributions": [
                self._contribution(result, number, found, shares[number]) for number in _ranked(found, result)
            ],
        }

    def _worst(self, extreme: Extreme, result: int) -> dict[str, Any]:
        is_known = bool(np.all(np.isfinite(extreme.numbers[result])))
        return {
            "value": number_or_none(extreme.values[result]),
            "error_bound": number_or_none(extreme.bounds[result]),
            "numbers": [
                {"name": info.name, "value": float(value)}
                for info, value in zip(self.infos, extreme.numbers[result], strict=True)
                if is_known
            ],
        }

    def _contribution(self, result: int, number: int, found: Found, share: float) -> dict[str, Any]:
        place = result, number
        return {
            "number": self.infos[number].name,
            "unit": unit_of_derivative(self.prepared, result, self.infos[number]),
            "derivative": number_or_none(found.slopes.first[place]),
            "error_estimate": number_or_none(found.slopes.first_error[place]),
            "smooth": bool(found.slopes.smooth[place]),
            "low": number_or_none(found.stacked.low_shares[place]),
            "high": number_or_none(found.stacked.high_shares[place]),
            "at_low_end": number_or_none(found.alone.low_end[place]),
            "at_high_end": number_or_none(found.alone.high_end[place]),
            "bend": number_or_none(found.alone.bend[place]),
            "square_share": number_or_none(found.stacked.variance_shares[place]),
            "variance_share": number_or_none(share),
        }

    def _limits(self, found: Found) -> list[dict[str, Any]]:
        """How each limit fares at the worst that was computed, first, and to first order."""
        return [
            {
                **limit_shown(asked, limit, self.prepared),
                "held": found.held[index],
                "margin": number_or_none(found.worst.margins[index]),
                "error_bound": number_or_none(found.worst.bounds[index]),
                "root_sum_square_held": found.squares.verdicts[index],
                "root_sum_square_margin": number_or_none(found.squares.margins[index]),
                "first_order_margin": number_or_none(found.first_order.margins[index]),
                "error_estimate": number_or_none(found.first_order.bounds[index]),
                **({"probability": _probability(found.spread.limits, index)} if found.spread is not None else {}),
            }
            for index, (asked, limit) in enumerate(zip(self.question.limits, self.limits, strict=True))
        ]

    def _propagation(self, spread: Propagation) -> dict[str, Any]:
        return {
            "case_count": spread.n_cases,
            "confidence": self.question.confidence,
            "intervals": self._intervals_in_words(),
            "results": [
                {
                    "result": info.name,
                    "unit": info.measure.unit,
                    "mean": _estimate(spread.mean, result),
                    "standard_deviation": _estimate(spread.standard_deviation, result),
                    "lowest": number_or_none(spread.lowest[result]),
                    "highest": number_or_none(spread.highest[result]),
                    "error_bound": number_or_none(spread.bounds[result]),
                    "quantiles": [
                        {**_estimate(spread.quantiles, (index, result)), "probability": level}
                        for index, level in enumerate(self.question.quantiles)
                    ],
                }
                for result, info in enumerate(self.prepared.results.infos)
            ],
            **({"all_limits": _probability(spread.together, 0)} if self.limits else {}),
            "failures": _failures(spread.failures),
        }

    def _intervals_in_words(self) -> str:
        sampling = self.sampling
        assert sampling is not None
        if sampling.method == "random":
            return (
                "Probabilities have the exact binomial interval, quantiles that between two order statistics; those of "
                "means and standard deviations are approximate."
            )
        return (
            f"Approximate, from how {sampling.replicates} independent replicates differ; that of a probability is at "
            "least as wide as the exact binomial one of as many plain samples."
        )

    def _indices(self, indices: VarianceIndices) -> dict[str, Any]:
        return {
            "case_count": indices.n_cases,
            "left_out": indices.n_left_out,
            "results": [
                {
                    "result": result.name,
                    "numbers": [
                        {
                            "number": number.name,
                            "first": _estimate(indices.first, (row, column)),
                            "total": _estimate(indices.total, (row, column)),
                        }
                        for column, number in enumerate(self.infos)
                    ],
                }
                for row, result in enumerate(self.prepared.results.infos)
            ],
        }


def _ranked(found: Found, result: int) -> list[int]:
    """Numbers by how much each changes the result as computed, the strongest first."""
    changes = np.fmax.reduce(np.abs(found.alone.changes[:, result]), axis=0, initial=0.0)
    return sorted(range(len(changes)), key=lambda number: (-changes[number], number))


def _failures(failures: Mapping[str, tuple[int, Failure]]) -> list[dict[str, Any]]:
    """Failures by their code, with an example of each."""
    return [{"code": code, "count": count, "message": example.message} for code, (count, example) in failures.items()]


def _estimate(estimate: Estimate, place: int | tuple[int, int]) -> dict[str, Any]:
    return {part: number_or_none(getattr(estimate, part)[place]) for part in ("value", "low", "high")}


def _probability(probability: Probability, index: int) -> dict[str, Any]:
    return {**_estimate(probability.estimate, index), "undecided_cases": int(probability.undecided[index])}


def _reason(failure: Failure | None) -> dict[str, Any]:
    return {} if failure is None else {"reason": {"code": failure.code, "message": failure.message}}


CALL = AnalysisCall("tolerances", models.TolerancesQuestion, read_tolerances)
