"""Which curve fits the lives: Weibull, lognormal and exponential side by side, what each would answer, and the bend."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fleet.formats import number, percent
from reliability.life_panels import FEWEST_FAILURES, Data, PanelQuestion, Stratum, main_stratum, refused
from reliability.life_words import joined, p_words
from reliability.wording import age, parts_of

if TYPE_CHECKING:
    from reliability.stats.fitted import LifeFit

QUANTITIES: dict[str, Any] = {"b10": ("quantile", 0.1), "median": ("quantile", 0.5)}
# What a difference in AICc means: Burnham & Anderson, Model Selection and Multimodel Inference (2002), section 2.6.
AS_GOOD, WORSE, CLEARLY_WORSE = 2.0, 4.0, 10.0
CURVE_POINTS = 60
FINEST_STEP = 0.002
WRITTEN = {"weibull": "Weibull", "lognormal": "lognormal", "exponential": "exponential"}
SAYS = {
    "weibull": "the older, the sooner, without a turn",
    "lognormal": "sooner up to an age, then later again",
    "exponential": "at any age alike: no wear",
}


def answer(question: PanelQuestion) -> Data:
    found = question.found
    strata = [each for each in question.strata(found) if each.lifetimes.failures >= FEWEST_FAILURES]
    if not strata:
        return refused(f"fewer than {FEWEST_FAILURES} parts have failed: no curve can be told from another yet.")
    groups = [_group(stratum, question.confidence) for stratum in strata]
    groups = [group for group in groups if group["fits"]]
    if not groups:
        return refused("the failures give no curve a spread: they may all lie at one age.")
    return {"groups": groups}


def _group(stratum: Stratum, confidence: float) -> Data:
    from reliability.stats.errors import StatisticsError
    from reliability.stats.fitted import compare_fits
    from reliability.stats.other_fits import fit_exponential, fit_lognormal
    from reliability.stats.weibull_fit import fit_weibull

    fits: dict[str, LifeFit] = {}
    notes = []
    for name, fit in (("weibull", fit_weibull), ("lognormal", fit_lognormal), ("exponential", fit_exponential)):
        try:
            fits[name] = fit(stratum.lifetimes)
        except StatisticsError as error:
            notes.append(f"No {WRITTEN[name]} curve: {error}")
    rows = [
        {
            "distribution": row.distribution.lower(),
            "log_likelihood": row.log_likelihood,
            "aicc": row.aicc,
            "difference": row.difference,
            "weight": row.weight,
            **{
                name: _interval(fits[row.distribution.lower()], asked, confidence) for name, asked in QUANTITIES.items()
            },
        }
        for row in (compare_fits(fits.values()) if fits else ())
    ]
    return {
        "group": stratum.label,
        "lives": round(stratum.lifetimes.count),
        "failures": round(stratum.lifetimes.failures),
        "running": stratum.running,
        "sites": len(stratum.lifetimes.site_labels),
        "fits": rows,
        "curves": _curves(stratum, fits, confidence) if fits else None,
        "bend": bend_of(stratum) if "weibull" in fits else None,
        "notes": notes,
    }


def _curves(stratum: Stratum, fits: dict[str, LifeFit], confidence: float) -> Data:
    """Survival of each fit at a few ages, over the steps of the curve that assumes nothing."""
    import numpy as np

    from reliability.survival_curve import survival_curve

    seen = survival_curve(stratum.lifetimes, confidence)
    ages = np.linspace(0.0, seen.last_age, CURVE_POINTS)
    start = float(seen.given_survival_to)
    steps, level = [(start, 1.0)], 1.0
    for step, survival in zip(seen.ages.tolist(), seen.survival.tolist(), strict=True):
        if level - survival > FINEST_STEP:
            steps.append((step, round(survival, 5)))
            level = survival
    steps.append((seen.last_age, steps[-1][1]))
    return {
        "age": [round(float(value), 3) for value in ages],
        "fitted": {name: [round(float(value), 5) for value in fit.survival(ages)] for name, fit in fits.items()},
        "seen": {"age": [step for step, _ in steps], "survival": [survival for _, survival in steps]},
    }


def _interval(fit: LifeFit, quantity: Any, confidence: float) -> Data:
    from reliability.life_answer import interval_of

    return interval_of(fit, quantity, confidence, [])


def bend_of(stratum: Stratum) -> Data | None:
    """Whether the points leave the Weibull line: a test inside the generalised gamma, and a gap that can be seen."""
    from reliability.life_answer import finite
    from reliability.stats.bend import bend_test
    from reliability.stats.errors import StatisticsError

    try:
        found = bend_test(stratum.lifetimes, site_spread=len(stratum.lifetimes.site_labels) > 1)
    except StatisticsError as error:
        return {"refused": str(error), "warn": False}
    return {
        "p_value": finite(found.p_value),
        "largest_gap": finite(found.largest_gap),
        "gap_age": finite(found.gap_age),
        "visible": bool(found.visible),
        "warn": bool(found.warn),
    }


def sentence(data: Data) -> str:
    """Which curve is best for the main design, and whether the choice changes the answer."""
    main = main_stratum(data["groups"])
    assert main is not None
    return _choice(data, main)


def _choice(data: Data, group: Data) -> str:
    who, best = parts_of(data, group["group"]), group["fits"][0]
    weibull = next((row for row in group["fits"] if row["distribution"] == "weibull"), None)
    if weibull is None:
        return f"No Weibull curve can be drawn through {who}; the {best['distribution']} stands below."
    equals = [row["distribution"] for row in group["fits"][1:] if row["difference"] < AS_GOOD]
    if best is weibull:
        start = f"A Weibull curve fits {who} best"
        if equals:
            start = f"A Weibull curve and {joined([with_article(name) for name in equals])} fit {who} equally well"
        others = [row for row in group["fits"][1:] if row["distribution"] in equals]
    else:
        start = (
            f"{with_article(best['distribution']).capitalize()} curve fits {who} {meaning(weibull['difference'])[1]} "
            f"than the Weibull (AICc lower by {number(weibull['difference'], 1)})"
        )
        others = [best]
    return f"{start}. {_what_changes(data, weibull, others)}".strip()


def _what_changes(data: Data, weibull: Data, others: list[Data]) -> str:
    """What B10 and median would be under the curves that fit as well or better, and whether that matters."""
    if not others:
        return "The figures of this screen are its figures."
    told = []
    for row in others:
        inside = all(_within(row[name]["estimate"], weibull[name]) for name in QUANTITIES)
        b10, median = (age(row[name]["estimate"], data["clock"]) for name in QUANTITIES)
        own = " and ".join(age(weibull[name]["estimate"], data["clock"]) for name in QUANTITIES)
        told.append(
            f"Under the {row['distribution']} B10 would be {b10} and the median {median} instead of {own}: "
            + ("inside the Weibull's own intervals, so the choice matters little here." if inside else "it matters.")
        )
    return " ".join(told)


def _within(value: float | None, interval: Data) -> bool:
    if value is None:
        return False
    low, high = interval["lower"], interval["upper"]
    return (low is None or low <= value) and (high is None or value <= high)


def with_article(name: str) -> str:
    return "a Weibull" if name == "weibull" else f"an {name}" if name[0] in "aeiou" else f"a {name}"


def meaning(difference: float) -> tuple[str, str]:
    """What a difference in AICc to the best means, of the curve itself and of the best beside it."""
    if difference < AS_GOOD:
        return "as good as the best", "as well, or a little better,"
    if difference < WORSE:
        return "a little worse", "a little better"
    if difference < CLEARLY_WORSE:
        return "clearly worse", "clearly better"
    return "does not fit", "far better"


def warnings(data: Data) -> list[str]:
    """A bend, only where the test and the eye both see it."""
    told = []
    for group in data["groups"]:
        bend = group["bend"]
        if bend and bend["warn"]:
            told.append(
                f"The points of {parts_of(data, group['group'])} leave the Weibull line by up to "
                f"{percent(bend['largest_gap'])} of all parts, most about {age(bend['gap_age'], data['clock'])} "
                f"({p_words(bend['p_value'])}, sites allowed to differ). A mixture of two ways of failing can do "
                "that: look at the modes and lots below, and read B10 off the curve rather than the line."
            )
    return told


def page(data: Data, *, address: Any = None, ranks: dict[str, int] | None = None) -> Data:
    from reliability.charts.fits import fits_figure

    main = main_stratum(data["groups"])
    assert main is not None
    rest = [group for group in data["groups"] if group is not main]
    chart = {
        "figure": fits_figure(data, main, WRITTEN),
        "notes": [f"Grey steps: what was seen of {parts_of(data, main['group'])}; lines: the three curves through it."],
    }
    return {
        "chart": chart,
        "warnings": warnings(data),
        "tables": [_table(data, [main])],
        "more_tables": [_table(data, rest)] if rest else [],
        "more_title": "The other designs",
        "notes": notes(data),
        "how": (
            "Maximum likelihood each; AICc: Hurvich & Tsai, Biometrika 76 (1989) 297–307; what a difference means: "
            "Burnham & Anderson, Model Selection and Multimodel Inference (2002), section 2.6. Under 2: as good; under "
            "4: a little worse; under 10: clearly worse; above: does not fit. Bend: a likelihood-ratio "
            "test of the Weibull inside the generalised gamma, one degree of freedom, after each site's multiplier was "
            "taken out (Farewell & Prentice, Technometrics 19 (1977) 69–75); a warning only where the gap between the "
            "Weibull and the bent curve can be seen as well, 3 % of all parts or more."
        ),
    }


def notes(data: Data) -> list[str]:
    told = [note for group in data["groups"] for note in group["notes"]]
    if any(group["sites"] > 1 for group in data["groups"]):
        told.append(
            "AICc takes lives as independent; where sites differ it is surer than it should be. The figures here are "
            "of all lives as one population, those of the table above of a typical site."
        )
    gaps = [
        percent(group["bend"]["largest_gap"]) + (f" ({group['group']})" if group["group"] != "all" else "")
        for group in data["groups"]
        if group["bend"] and not group["bend"]["warn"] and group["bend"].get("largest_gap") is not None
    ]
    if gaps:
        told.append(
            f"The widest gap between the Weibull line and a curve free to bend, in parts of a hundred: {joined(gaps)}; "
            "within chance, or too little to matter."
        )
    return told


def _table(data: Data, groups: list[Data]) -> Data:
    columns = [
        {"key": "curve", "label": "Curve"},
        {"key": "difference", "label": "AICc above the best", "numeric": True, "digits": 1},
        {"key": "meaning", "label": "Which means"},
        {"key": "b10", "label": f"B10 would be, {data['clock']}", "numeric": True},
        {"key": "median", "label": f"Median would be, {data['clock']}", "numeric": True},
    ]
    rows = []
    for group in groups:
        for row in group["fits"]:
            name = row["distribution"]
            head = WRITTEN[name] if group["group"] == "all" else f"{group['group']}, {WRITTEN[name]}"
            best = row is group["fits"][0]
            rows.append(
                [
                    {"text": head, "sub": SAYS[name]},
                    row["difference"],
                    "fits best" if best else meaning(row["difference"])[0],
                    {"estimate": row["b10"]},
                    {"estimate": row["median"]},
                ]
            )
    return {"columns": columns, "rows": rows, "narrow": "stacked", "caption": "Three curves through the same lives"}


FILE_HEAD = [
    *("component", "clock", "group", "distribution", "log_likelihood", "aicc", "difference", "weight"),
    *(f"{name}{end}" for name in QUANTITIES for end in ("", "_lower", "_upper")),
    "bend_p_value",
]


def lines(data: Data) -> Any:
    for group in data["groups"]:
        for row in group["fits"]:
            yield [
                *(data["component"], data["clock"], group["group"], row["distribution"]),
                *(row[name] for name in ("log_likelihood", "aicc", "difference", "weight")),
                *(row[name][end] for name in QUANTITIES for end in ("estimate", "lower", "upper")),
                (group["bend"] or {}).get("p_value"),
            ]
