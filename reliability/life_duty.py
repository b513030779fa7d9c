"""Life and duty: what twice the strokes a day do to a part's life, and how hard each site works its modules."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from fleet.formats import number, percent, rounded
from reliability.life_panels import FEWEST_FAILURES, Data, PanelQuestion, Stratum, main_stratum, refused
from reliability.wording import parts_of, sure

if TYPE_CHECKING:
    from reliability.stats.life_regression import LifeRegression
    from reliability.stats.lifetimes import Lifetimes

CLOCKS_OF_DUTY = ("strokes", "hours")  # the first that the records know
LEAST_SPREAD = 1.25  # the hardest tenth of modules beside the gentlest: below, there is nothing to compare
FEWEST_SITES = 5
FEWEST_AT_SITE = 3
POINTS = 9
NAME = "duty"


def answer(question: PanelQuestion) -> Data:
    if question.life_set:
        return refused("imported lives do not say how hard their modules were used.")
    found = question.found
    if found.lifetimes is None or found.lifetimes.failures < FEWEST_FAILURES:
        return refused(f"fewer than {FEWEST_FAILURES} parts have failed under these choices.")
    duties, unit = duties_of(question)
    if not duties:
        return refused("no module has a counter that was read twice, and no site says its strokes a day.")
    clocks = list(dict.fromkeys((found.clock, "days", unit)))
    effects, sites = [], []
    for clock in clocks:
        told, of_sites = _on_clock(question, clock, duties)
        effects += told
        sites = sites or of_sites
    main = [each for each in effects if each["clock"] == found.clock]
    if not main:
        return refused("too few failures are left of modules whose duty is known.")
    measured = sum(duty.measured for duty in duties.values())
    return {"unit": unit, "modules": len(duties), "measured": measured, "effects": effects, "sites": sites}


def duties_of(question: PanelQuestion) -> tuple[dict[str, Any], str]:
    from reliability.histories_from_fleet import module_duties
    from reliability.life_question import asked_of

    asked = asked_of(question.component, as_of=question.choices["as_of"])
    for clock in CLOCKS_OF_DUTY:
        duties = module_duties(asked, clock)
        if duties:
            return duties, clock
    return {}, CLOCKS_OF_DUTY[0]


def _on_clock(question: PanelQuestion, clock: str, duties: dict[str, Any]) -> tuple[list[Data], list[Data]]:
    """The effect on each design on one clock, and on the screen's own clock the sites' duty."""
    import numpy as np

    found = question.lives(also="module", clock=clock)
    if found.lifetimes is None:
        return [], []
    a_day = np.array([duties[module].a_day if module in duties else np.nan for module in found.also])
    effects = []
    for stratum in question.strata(found):
        known = ~np.isnan(a_day[stratum.chosen])
        if known.any():
            effects.append(_effect(stratum, clock, known, a_day[stratum.chosen], question, found.clock))
    kept = [each for each in effects if each]
    return kept, _sites(found.lifetimes, found.also, a_day)


def _effect(
    stratum: Stratum, clock: str, known: Any, a_day: Any, question: PanelQuestion, own_clock: str
) -> Data | None:
    """Life ratio for twice the duty: with sites left out in turn from five on, else by likelihood ratio."""
    import numpy as np

    from reliability.life_answer import finite
    from reliability.stats.errors import StatisticsError
    from reliability.stats.life_regression import fit_weibull_regression

    # in an order that does not depend on the database's numbers: sums are then the same to the last digit
    lives, duty = stratum.lifetimes.subset(known), a_day[known]
    order = np.lexsort((lives.last_good, duty, lives.site_codes, lives.observed, lives.entries, lives.durations))
    lifetimes, duty = lives.subset(order), duty[order]
    told: Data = {
        "group": stratum.label,
        "clock": clock,
        "lives": round(lifetimes.count),
        "failures": round(lifetimes.failures),
        "running": stratum.running,
        "without_duty": round(stratum.lifetimes.count - lifetimes.count),
        "ratio": None,
        "line": None,
        "points": [],
    }
    if lifetimes.failures < FEWEST_FAILURES:
        return {**told, "refused": f"fewer than {FEWEST_FAILURES} failures"}
    low, high = np.quantile(duty, (0.1, 0.9))
    told["duty_low"], told["duty_high"] = float(low), float(high)
    if high < LEAST_SPREAD * low:
        return {**told, "refused": "its modules all work about equally hard"}
    method = "sites" if len(lifetimes.site_labels) >= FEWEST_SITES else "likelihood-ratio"
    try:
        fit = fit_weibull_regression(lifetimes, {NAME: np.log2(duty)})
        ratio = fit.life_ratio(NAME, 1.0, question.confidence, method)
    except StatisticsError as error:
        return {**told, "refused": str(error)}
    told["ratio"] = {
        "estimate": finite(ratio.estimate),
        "lower": finite(ratio.lower),
        "upper": finite(ratio.upper),
        "method": method,
    }
    told["shape"] = finite(fit.shape)
    told["line"] = _line(fit, float(duty.min()), float(duty.max()), question.confidence, method)
    told["points"] = _site_medians(lifetimes, duty, fit.shape, question.confidence)
    return told


def _line(fit: LifeRegression, low: float, high: float, confidence: float, method: str) -> list[Data]:
    """The median life at a few duties, with its interval."""
    from reliability.life_answer import finite
    from reliability.stats.errors import StatisticsError

    points = []
    for place in range(POINTS):
        duty = low * (high / low) ** (place / (POINTS - 1))
        try:
            found = fit.quantile_interval(0.5, {NAME: math.log2(duty)}, confidence, method)
        except StatisticsError:
            continue
        points.append(
            {
                "duty": duty,
                "estimate": finite(found.estimate),
                "lower": finite(found.lower),
                "upper": finite(found.upper),
            }
        )
    return points


def _site_medians(lifetimes: Lifetimes, duty: Any, shape: float, confidence: float) -> list[Data]:
    """Each site's own median under the common shape, from its failures and its exposure in age to that power.

    (A / D)^(1/shape) (log 2)^(1/shape), A = sum(age^shape - entry^shape); limits by the chi-square quantiles with 2 D
    and 2 D + 2 degrees of freedom. Nelson, IEEE Trans. Reliability 34 (1985) 230-232.
    """
    import numpy as np
    from scipy import special

    tail, points = 0.5 * (1.0 - confidence), []
    area = lifetimes.weights * (lifetimes.durations**shape - lifetimes.entries**shape)
    for place, site in enumerate(lifetimes.site_labels):
        mine = lifetimes.site_codes == place
        failed = float(lifetimes.weights[mine & lifetimes.observed].sum())
        if failed < FEWEST_AT_SITE:
            continue
        total = float(area[mine].sum())
        exposed = lifetimes.weights[mine] * (lifetimes.durations[mine] - lifetimes.entries[mine])
        divisors = (failed, special.gammaincinv(failed + 1.0, 1.0 - tail), special.gammaincinv(failed, tail))
        estimate, lower, upper = ((total / divisor * math.log(2.0)) ** (1.0 / shape) for divisor in divisors)
        points.append(
            {
                "site": str(site),
                "duty": float(np.average(duty[mine], weights=exposed)),
                "failures": round(failed),
                "estimate": float(estimate),
                "lower": float(lower),
                "upper": float(upper),
            }
        )
    return points


def _sites(lifetimes: Lifetimes, modules: Any, a_day: Any) -> list[Data]:
    """How hard each site works the modules whose parts are counted: mean by working time, gentlest and hardest."""
    import numpy as np

    told = []
    exposed = lifetimes.weights * (lifetimes.durations - lifetimes.entries)
    for place, site in enumerate(lifetimes.site_labels):
        mine = (lifetimes.site_codes == place) & ~np.isnan(a_day)
        if not mine.any():
            continue
        told.append(
            {
                "site": str(site),
                "modules": len(set(modules[mine].tolist())),
                # exact sums: the same to the last digit whatever the order of the rows
                "mean": math.fsum(a_day[mine] * exposed[mine]) / math.fsum(exposed[mine]),
                "least": float(a_day[mine].min()),
                "most": float(a_day[mine].max()),
                "failures": round(float(lifetimes.weights[mine & lifetimes.observed].sum())),
            }
        )
    return sorted(told, key=lambda row: -row["mean"])


def as_seen(data: Data, mine: set[str]) -> Data:
    """Without the names of other sites."""
    if data.get("refused"):
        return data
    effects = [
        {**each, "points": [point for point in each["points"] if point["site"] in mine]} for each in data["effects"]
    ]
    return {**data, "effects": effects, "sites": [row for row in data["sites"] if row["site"] in mine]}


def own_effects(data: Data) -> list[Data]:
    """On the screen's own clock."""
    return [each for each in data["effects"] if each["clock"] == data["clock"]]


def sentence(data: Data) -> str:
    main = main_stratum(own_effects(data))
    assert main is not None
    who, unit = parts_of(data, main["group"]), data["unit"]
    if not main["ratio"]:
        return f"Whether duty changes the life of {who} we cannot tell: {main['refused']}."
    ratio = main["ratio"]
    if ratio["lower"] is None or ratio["upper"] is None:
        return f"What duty does to the life of {who} is not bounded by these records."
    between = f"{number(ratio['lower'], 2)} to {number(ratio['upper'], 2)}, {sure(data['confidence'])}"
    start = (
        f"Where a module makes twice the {unit} a day, {who} last {number(ratio['estimate'], 2)} times as many "
        f"{data['clock']} ({between})"
    )
    return f"{start}: {_meaning(data, ratio)}."


def _meaning(data: Data, ratio: Data) -> str:
    unit, by_use = data["unit"], data["clock"] == data["unit"]
    if ratio["lower"] <= 1.0 <= ratio["upper"]:
        return (
            f"beyond the count of {unit} itself, no effect of working harder can be shown"
            if by_use
            else "no effect of working harder can be shown"
        )
    change = percent(abs(1.0 - ratio["estimate"]))
    shorter = ratio["estimate"] < 1.0
    if by_use:
        return (
            f"each stroke wears more where there are many a day, {change} fewer in a life"
            if shorter
            else f"the count of {unit} is not all: some of the wear goes by time"
        )
    return f"{change} {'shorter' if shorter else 'longer'} lives"


def page(data: Data, *, address: Any = None, ranks: dict[str, int] | None = None) -> Data:
    from reliability.charts.duty import duty_figure

    first = main_stratum(own_effects(data))
    assert first is not None
    of_main = [each for each in data["effects"] if each["group"] == first["group"]]
    others = [each for each in data["effects"] if each["group"] != first["group"]]
    main = first if first["line"] else None
    chart = None
    if main:
        chart = {
            "figure": duty_figure(data, main),
            "notes": [
                f"Line and tint: the median of {parts_of(data, main['group'])} at each duty. Points: each site with at "
                f"least {FEWEST_AT_SITE} failures, its own median with its {percent(data['confidence'])} interval."
            ],
        }
    return {
        "chart": chart,
        "tables": [_effect_table(data, of_main, f"What duty does to life, {parts_of(data, first['group'])}")],
        "more_tables": [
            *([_effect_table(data, others, "What duty does to life, the other designs")] if others else []),
            *([_site_table(data)] if data["sites"] else []),
        ],
        "more_title": "How hard each site works" if not others else "The other designs, and how hard each site works",
        "notes": notes(data),
        "how": (
            "Weibull accelerated-life regression of log life on the module's mean strokes a day in service (log, base "
            "2): Lawless, Statistical Models and Methods for Lifetime Data (2003), chapter 6. From five sites on each "
            "site is left out in turn, with Student's t (Lipsitz, Dear & Zhao, Biometrics 50 (1994) 842–846); with "
            "fewer, likelihood-ratio intervals that take lives as independent. A ratio of 0.5 in days is what strokes "
            "alone would give; 1 in strokes says that strokes explain the lives."
        ),
    }


def notes(data: Data) -> list[str]:
    told = []
    guessed = data["modules"] - data["measured"]
    if guessed > 0:
        told.append(
            f"{number(guessed)} of {number(data['modules'])} modules have no two readings of their own; there the "
            f"site's {data['unit']} a day count. Read the counters to make this sure."
        )
    without = sum(each["without_duty"] for each in own_effects(data))
    if without:
        told.append(f"{number(without)} lives are left out here: nothing says how hard their modules work.")
    if any(each["ratio"] and each["ratio"]["method"] != "sites" for each in own_effects(data)):
        told.append("With fewer than five sites the intervals take lives as independent; they may be too narrow.")
    return told


def _effect_table(data: Data, effects: list[Data], caption: str) -> Data:
    columns = [
        {"key": "group", "label": "Parts"},
        {"key": "clock", "label": "Life counted in"},
        {"key": "ratio", "label": f"Life where {data['unit']} a day are twice as many, times", "numeric": True},
        {"key": "failures", "label": "Failed", "numeric": True},
        {"key": "range", "label": f"{data['unit'].capitalize()} a day, tenth to nine tenths", "numeric": True},
    ]
    rows = []
    for each in effects:
        shown: Data = {"text": f"cannot tell: {each.get('refused')}"}
        if each["ratio"]:
            shown = {"estimate": each["ratio"], "digits": 2}
        low, high = each.get("duty_low"), each.get("duty_high")
        between = None if low is None or high is None else f"{number(rounded(low))}–{number(rounded(high))}"
        rows.append([parts_of(data, each["group"]), each["clock"], shown, each["failures"], between])
    return {"columns": columns, "rows": rows, "narrow": "stacked", "caption": caption}


def _site_table(data: Data) -> Data:
    unit = data["unit"]
    columns = [
        {"key": "site", "label": "Site"},
        {"key": "mean", "label": f"{unit.capitalize()} a day", "numeric": True, "digits": 0},
        {"key": "least", "label": "gentlest module", "numeric": True, "digits": 0},
        {"key": "most", "label": "hardest module", "numeric": True, "digits": 0},
        {"key": "modules", "label": "Modules", "numeric": True},
        {"key": "failures", "label": "Failed", "numeric": True},
    ]
    rows = [[row[column["key"]] for column in columns] for row in data["sites"]]
    return {"columns": columns, "rows": rows, "caption": f"How hard the sites work: {unit} a day in service"}


FILE_HEAD = ["component", "group", "clock", "life_ratio", "lower", "upper", "method", "lives", "failures"]


def lines(data: Data) -> Any:
    for each in data["effects"]:
        ratio = each["ratio"] or {}
        limits = (ratio.get(name) for name in ("estimate", "lower", "upper", "method"))
        yield [data["component"], each["group"], each["clock"], *limits, each["lives"], each["failures"]]
