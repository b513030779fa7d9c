"""The kinds of background work on estimates, found here by their registry."""

from reliability.forecasts.works import count_forecasts

__all__ = ["count_forecasts"]
