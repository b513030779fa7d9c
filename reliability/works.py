"""The kinds of background work on estimates, found here by their registry."""

from reliability.forecasts.backtest_works import expect_failures, judge_past_forecasts, judge_what_is_due
from reliability.forecasts.supply_works import count_use, judge_past_backlogs
from reliability.forecasts.works import count_forecasts
from reliability.life_works import fit_lives

__all__ = [
    "count_forecasts",
    "count_use",
    "expect_failures",
    "fit_lives",
    "judge_past_backlogs",
    "judge_past_forecasts",
    "judge_what_is_due",
]
