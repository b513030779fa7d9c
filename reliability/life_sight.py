"""A life document as a person may see it: estimates draw on all sites, but only their own are named."""

from __future__ import annotations

from typing import Any

Document = dict[str, Any]


def as_seen(document: Document, mine: set[str] | None) -> Document:
    """`mine`: codes of the only sites that may be named; None: all."""
    if mine is None:
        return document
    seen = dict(document)
    if document["by"] == "site":
        for name in ("groups", "more_groups"):
            seen[name] = [group for group in document[name] if group["group"] in mine]
        counts = document["at_risk"]["counts"].items()
        seen["at_risk"] = {**document["at_risk"], "counts": {site: count for site, count in counts if site in mine}}
    seen["groups"] = [_group(group, mine) for group in seen["groups"]]
    return seen


def _group(group: Document, mine: set[str]) -> Document:
    weibull = group["weibull"]
    if not weibull or "site_multipliers" not in weibull:
        return group
    multipliers = {site: value for site, value in weibull["site_multipliers"].items() if site in mine}
    return {**group, "weibull": {**weibull, "site_multipliers": multipliers}}
