"""What tolerances do to results: the question read, and its answer."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.analysis import derivatives, stack_up
from service.analysis.derivatives import Derivatives
from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray
from service.analysis.limits import Limit, margins
from service.analysis.propagation import (
    Estimate,
    Probability,
    Propagation,
    Sampling,
    propagate,
)
from service.analysis.stack_up import Corners, StackUp, most_cases_of_corners
from service.analysis.variance_indices import VarianceIndices, cases_of_indices, variance_indices
from service.models import tolerances as models
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.answers import number_or_none
from service.translation.limits import limit_shown
from service.translation.numbers import NumberInfo
from service.translation.sensitivities import derivatives_of, read_radii, unit_of_derivative
from service.translation.spreads import Spread, read_correlation, read_spread


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
    return Analysis(prepared, prepared.plan(infos, targets), read.most_cases, read.run)


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
        """Of derivatives, corners, samples and indices."""
        cases = derivatives.most_cases(len(self.infos)) + most_cases_of_corners(len(self.prepared.results.infos))
        if self.sampling is not None:
            cases += self.sampling.cases
        if self.question.variance_indices is not None:
            cases += cases_of_indices(self.question.variance_indices.count, len(self.infos))
        return cases

    def run(self, evaluate: Evaluate) -> dict[str, Any]:
        """The answer."""
        plus, minus = (np.array([getattr(spread, side) for spread in self.spreads]) for side in ("plus", "minus"))
        distributions = [spread.distribution for spread in self.spreads]
        nominal = np.array([info.nominal for info in self.infos])
        slopes = derivatives_of(evaluate, self.infos, self.radii)
        stacked = stack_up.stack_up(slopes, plus, minus, self.correlation)
        corners = stack_up.corners(evaluate, nominal, slopes, plus, minus)
        deviations = np.array([float(distribution.std()) for distribution in distributions])
        variance, shares = stack_up.variance(slopes.first, deviations, self.correlation)
        case_count = slopes.n_cases + corners.n_cases

        spread: Propagation | None = None
        if self.sampling is not None:
            spread = propagate(
                evaluate,
                distributions,
                self.sampling,
                limits=self.limits,
                quantiles=self.question.quantiles,
                correlation=self.correlation,
                confidence=self.question.confidence,
            )
            case_count += spread.n_cases
        indices: VarianceIndices | None = None
        if self.question.variance_indices is not None:
            asked = self.question.variance_indices
            indices = variance_indices(
                evaluate, distributions, asked.count, seed=asked.seed, confidence=self.question.confidence
            )
            case_count += indices.n_cases
        return {
            "numbers": [self._number(slopes, index) for index in range(len(self.infos))],
            "stack_ups": [
                self._stack_up(result, slopes, stacked, corners, float(np.sqrt(variance[result])), shares[result])
                for result in range(len(self.prepared.results.infos))
            ],
            "limits": self._limits(stacked, corners, spread),
            **({"propagation": self._propagation(spread)} if spread is not None else {}),
            **({"variance_indices": self._indices(indices)} if indices is not None else {}),
            "case_count": case_count,
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

    def _stack_up(
        self,
        result: int,
        slopes: Derivatives,
        stacked: StackUp,
        corners: Corners,
        deviation: float,
        shares: FloatArray,
    ) -> dict[str, Any]:
        info = self.prepared.results.infos[result]
        squares = stacked.variance_shares[result]
        ranked = sorted(range(len(self.infos)), key=lambda number: (-abs(np.nan_to_num(squares[number])), number))
        return {
            "result": info.name,
            "unit": info.measure.unit,
            "nominal": float(stacked.nominal[result]),
            "worst_low": number_or_none(stacked.worst_low[result]),
            "worst_high": number_or_none(stacked.worst_high[result]),
            "middle": number_or_none(stacked.middle[result]),
            "root_sum_square": number_or_none(stacked.root_sum_square[result]),
            "standard_deviation": number_or_none(deviation),
            "error_estimate": number_or_none(stacked.slope_error[result]),
            "low_corner": _corner(corners.low, corners.numbers_low, result),
            "high_corner": _corner(corners.high, corners.numbers_high, result),
            "contributions": [
                {
                    "number": self.infos[number].name,
                    "unit": unit_of_derivative(self.prepared, result, self.infos[number]),
                    "derivative": number_or_none(slopes.first[result, number]),
                    "error_estimate": number_or_none(slopes.first_error[result, number]),
                    "smooth": bool(slopes.smooth[result, number]),
                    "low": number_or_none(stacked.low_shares[result, number]),
                    "high": number_or_none(stacked.high_shares[result, number]),
                    "square_share": number_or_none(squares[number]),
                    "variance_share": number_or_none(shares[number]),
                }
                for number in ranked
            ],
        }

    def _limits(self, stacked: StackUp, corners: Corners, spread: Propagation | None) -> list[dict[str, Any]]:
        """Margins of each limit at the ends of the stack-ups: the smaller of both ends."""
        worst = np.minimum(*(margins(self.limits, ends) for ends in (stacked.worst_low, stacked.worst_high)))
        half = stacked.root_sum_square
        squares = np.minimum(*(margins(self.limits, stacked.middle + side * half) for side in (-1, 1)))
        computed = np.minimum(*(margins(self.limits, ends.values) for ends in (corners.low, corners.high)))
        bounds = np.maximum(corners.low.bounds, corners.high.bounds)
        return [
            {
                **limit_shown(asked, limit, self.prepared),
                "worst_case_margin": number_or_none(worst[index]),
                "root_sum_square_margin": number_or_none(squares[index]),
                "error_estimate": number_or_none(stacked.slope_error[limit.result]),
                "corner_margin": number_or_none(computed[index]),
                "corner_error_bound": number_or_none(bounds[limit.result]),
                **({"probability": _probability(spread.limits, index)} if spread is not None else {}),
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
            "failures": [
                {"code": code, "count": count, "message": example.message}
                for code, (count, example) in spread.failures.items()
            ],
        }

    def _intervals_in_words(self) -> str:
        sampling = self.sampling
        assert sampling is not None
        if sampling.method == "random":
            return (
                "Probabilities have the exact binomial interval, quantiles that between two order statistics; those of "
                "means and standard deviations hold for many samples."
            )
        return (
            f"Student's intervals of the values of {sampling.replicates} independent replicates; that of a probability "
            "is at least as wide as the exact binomial one of as many plain samples."
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


def _corner(ends: Evaluations, numbers: FloatArray, result: int) -> dict[str, Any]:
    return {
        "value": number_or_none(ends.values[result]),
        "error_bound": number_or_none(ends.bounds[result]),
        "numbers": numbers[result].tolist(),
        **_reason(ends.failures.get(result)),
    }


def _estimate(estimate: Estimate, place: int | tuple[int, int]) -> dict[str, Any]:
    return {part: number_or_none(getattr(estimate, part)[place]) for part in ("value", "low", "high")}


def _probability(probability: Probability, index: int) -> dict[str, Any]:
    return {**_estimate(probability.estimate, index), "undecided_cases": int(probability.undecided[index])}


def _reason(failure: Failure | None) -> dict[str, Any]:
    return {} if failure is None else {"reason": {"code": failure.code, "message": failure.message}}


CALL = AnalysisCall("tolerances", models.TolerancesQuestion, read_tolerances)
