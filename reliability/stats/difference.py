"""Comparing two groups of lives: the names that other code calls, gathered from the files that hold them."""

from __future__ import annotations

from reliability.stats.difference_logrank import LogRank, counted_at_middle, counted_when_found, logrank
from reliability.stats.difference_mean import RestrictedMeanDifference, restricted_mean_difference
from reliability.stats.difference_modes import ModeComparison, compare_modes
from reliability.stats.difference_sums import WEIGHTINGS, joined_strata
from reliability.stats.life_ratio import LifeRatio, Ratio, life_ratio
from reliability.stats.life_ratio_posterior import LifeRatioPosterior, life_ratio_posterior
from reliability.stats.life_ratio_split import SplitLives, split_at_start
from reliability.stats.sequential import (
    Look,
    Verdict,
    planned_information,
    sequential_boundary,
    take_look,
    verdict,
)

__all__ = [
    "WEIGHTINGS",
    "LifeRatio",
    "LifeRatioPosterior",
    "LogRank",
    "Look",
    "ModeComparison",
    "Ratio",
    "RestrictedMeanDifference",
    "SplitLives",
    "Verdict",
    "compare_modes",
    "counted_at_middle",
    "counted_when_found",
    "joined_strata",
    "life_ratio",
    "life_ratio_posterior",
    "logrank",
    "planned_information",
    "restricted_mean_difference",
    "sequential_boundary",
    "split_at_start",
    "take_look",
    "verdict",
]
