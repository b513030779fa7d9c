"""What the records teach of each design: its posterior, and how often it comes out for other reasons."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from reliability.fleet_lives import FleetLives

if TYPE_CHECKING:
    from reliability.stats.lifetimes import Lifetimes
    from reliability.stats.posterior import WeibullPosterior

OTHER_REASONS = ("withdrawn", "not known", "worn")


@dataclass
class Learned:
    """Posteriors by part, made when first asked for; a design without a life of its own borrows its component's."""

    found: FleetLives
    warnings: list[str] = field(default_factory=list)
    _posteriors: dict[str, WeibullPosterior] = field(default_factory=dict)

    def lifetimes(self, part: str) -> Lifetimes | None:
        everything = self.found.lifetimes
        if everything is None:
            return None
        own = everything.groups == part
        if own.any():
            return everything.subset(own)
        borrowed = f"No life of {part} is on record yet: it counts as the {self.found.component} parts so far."
        if borrowed not in self.warnings:
            self.warnings.append(borrowed)
        return everything

    def posterior(self, part: str) -> WeibullPosterior | None:
        """None where the component has no life on record at all; with two or more sites they may differ."""
        from reliability.stats.posterior import weibull_posterior

        if part not in self._posteriors:
            lifetimes = self.lifetimes(part)
            if lifetimes is None:
                return None
            self._posteriors[part] = weibull_posterior(lifetimes, site_spread=len(lifetimes.site_labels) > 1)
        return self._posteriors[part]

    def failures(self, part: str | None = None) -> int:
        return self.found.count("failed", group=part)

    def other_removals(self, part: str) -> float:
        """Removals for other reasons per unit of the clock: the design's own, and one more at its component's rate."""
        everything = self.found.lifetimes
        if everything is None or everything.exposure <= 0:
            return 0.0
        rate = self.found.count(*OTHER_REASONS) / everything.exposure
        own = everything.groups == part
        if rate == 0 or not own.any():
            return rate
        removed = self.found.count(*OTHER_REASONS, group=part)
        return (removed + 1.0) / (everything.subset(own).exposure + 1.0 / rate)
