"""Typed errors of the statistics: each says what is wrong, with the value, and what to do about it."""

from __future__ import annotations


class StatisticsError(ValueError):
    """Base of every error raised on purpose by the statistics; its text can be shown to people."""


class InvalidLifetimes(StatisticsError):
    """A row or a column of the life data cannot be true; `row` counts from 0, None where the whole column is meant."""

    def __init__(self, message: str, *, row: int | None = None) -> None:
        super().__init__(message)
        self.row = row


class InvalidArgument(StatisticsError):
    """An argument other than the life data lies outside its domain."""


class TooFewFailures(StatisticsError):
    """The records hold fewer failures than the method needs."""

    def __init__(self, message: str, *, failures: float, needed: float) -> None:
        super().__init__(message)
        self.failures = failures
        self.needed = needed


class NoSpreadInFailures(StatisticsError):
    """The failures do not bound the shape: the likelihood rises for ever as the shape grows."""


class UndefinedEstimate(StatisticsError):
    """The records do not determine the estimate (for example because of truncation)."""


class CollinearCovariates(StatisticsError):
    """Covariates that do not vary, or that follow from one another; `names` are those to choose from."""

    def __init__(self, message: str, *, names: tuple[str, ...]) -> None:
        super().__init__(message)
        self.names = names


class UnsupportedRows(StatisticsError):
    """The method cannot use rows of this kind; the text names the one that can."""


class NotConverged(StatisticsError):
    """A search ended without reaching its tolerance."""

    def __init__(self, message: str, *, iterations: int) -> None:
        super().__init__(message)
        self.iterations = iterations
