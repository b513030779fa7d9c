"""A document of a redesign for somebody who sees some sites only: other sites are in the estimates, never named."""

from __future__ import annotations

import re
from typing import Any

ELSEWHERE = "other sites"
NAMED_SITE = re.compile(r"\bthe site (\S*\w)")  # how estimators name the site that a refusal speaks of


def only_sites(document: dict[str, Any], mine: set[str]) -> dict[str, Any]:
    alike = document["comparability"]
    mixes = [_without(mix, mine) if mix["name"] == "site" else mix for mix in alike["mixes"]]
    kept = {name: [site for site in alike[name] if site in mine] for name in ("all_at_once", "beside")}
    return {
        **document,
        "starts": {site: day for site, day in document["starts"].items() if site in mine},
        "comparability": {**alike, "mixes": mixes, **kept},
        "same_dates": _side(document["same_dates"], mine),
        "all_history": _side(document["all_history"], mine),
        "records": _records(document["records"], mine),
        "chances_missing": unnamed(document["chances_missing"], mine),
    }


def unnamed(note: str, mine: set[str]) -> str:
    """A sentence without the code of a site that is not theirs; the code as a whole, A1 is not A10."""
    return NAMED_SITE.sub(lambda found: found[0] if found[1] in mine else "another site", note)


def _records(records: dict[str, Any], mine: set[str]) -> dict[str, Any]:
    asked = records["unanswered"]
    own = [site for site in asked if site in mine]
    return {**records, "unanswered": own if len(own) == len(asked) else [*own, ELSEWHERE]}


def _without(mix: dict[str, Any], mine: set[str]) -> dict[str, Any]:
    """Own sites by name, the others in one line."""
    rows = [row for row in mix["rows"] if row["label"] in mine]
    others = [row for row in mix["rows"] if row["label"] not in mine]
    if others:
        total = {side: sum(row[side] for row in others) for side in ("before", "after")}
        rows.append({"label": ELSEWHERE, **total})
    return {**mix, "rows": rows}


def _side(found: dict[str, Any], mine: set[str]) -> dict[str, Any]:
    """Notes may name a site, and fits hold what each site's hazard is multiplied by."""
    curves = found["curves"]
    notes = [unnamed(note, mine) for note in found["notes"]]
    if curves is None:
        return {**found, "notes": notes}
    groups = [{**group, "weibull": _weibull(group["weibull"], mine)} for group in curves["groups"]]
    return {**found, "notes": notes, "curves": {**curves, "groups": groups}}


def _weibull(fit: dict[str, Any] | None, mine: set[str]) -> dict[str, Any] | None:
    if fit is None or "site_multipliers" not in fit:
        return fit
    known = {site: value for site, value in fit["site_multipliers"].items() if site in mine}
    return {**fit, "site_multipliers": known}
