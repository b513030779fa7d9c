"""Days, hours or strokes: on which clock the same lives vary least, and how sure that is."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fleet.formats import number, percent
from reliability.life_panels import ALL, FEWEST_FAILURES, MOST_STRATA, Data, PanelQuestion, main_stratum, refused
from reliability.life_words import joined
from reliability.wording import parts_of

if TYPE_CHECKING:
    from reliability.histories_from_fleet import LivesOnClocks

CLOCKS = ("days", "hours", "strokes")


def answer(question: PanelQuestion) -> Data:
    if question.life_set:
        return refused("imported lives are counted on one clock only.")
    found = question.found
    if found.lifetimes is None or found.lifetimes.failures < FEWEST_FAILURES:
        return refused(f"fewer than {FEWEST_FAILURES} parts have failed under these choices.")
    from reliability.histories_from_fleet import lives_on_clocks

    choices = {name: value for name, value in question.choices.items() if name not in ("life_set", "clock", "by")}
    by = "part" if found.by == "part" else None
    told = lives_on_clocks(found.component, CLOCKS, by=by, **choices)
    if len(told.by_clock) < 2:
        return refused("only one clock is known for most of these lives. Read the counters, or enter the sites' duty.")
    groups = [_group(told, label, question) for label in _labels(question)]
    return {
        "groups": groups,
        "known": list(told.by_clock),
        "not_known": told.not_known,
        "dropped": told.dropped,
        "interpolated": told.interpolated,
    }


def _labels(question: PanelQuestion) -> list[str]:
    strata = question.strata()
    return [stratum.label for stratum in strata][:MOST_STRATA]


def _group(told: LivesOnClocks, label: str, question: PanelQuestion) -> Data:
    """The choice for one design; a refusal where there are too few, or where the clocks are one."""
    from reliability.stats.clock_choice import choose_clock
    from reliability.stats.errors import StatisticsError

    lives = {
        clock: lifetimes if label == ALL else lifetimes.subset(lifetimes.groups == label)
        for clock, lifetimes in told.by_clock.items()
        if label == ALL or (lifetimes.groups == label).any()
    }
    first = next(iter(lives.values()), None)
    stratum = next(each for each in question.strata() if each.label == label)
    row: Data = {
        "group": label,
        "lives": 0 if first is None else round(first.count),
        "failures": 0 if first is None else round(first.failures),
        "running": stratum.running,
        "clocks": {},
        "preferred": None,
        "sure": False,
    }
    if first is None or first.failures < FEWEST_FAILURES:
        return {**row, "refused": f"fewer than {FEWEST_FAILURES} of them have failed"}
    try:
        choice = choose_clock(
            lives,
            interpolated_share=max(told.interpolated.values()),
            confidence_level=question.confidence,
        )
    except StatisticsError as error:
        return {**row, "refused": str(error).rstrip(".")}
    if choice.refusal:
        return {**row, "refused": choice.refusal.rstrip(".")}
    return {
        **row,
        "clocks": {
            name: {
                "estimate": clock.coefficient_of_variation,
                "lower": clock.lower,
                "upper": clock.upper,
                "preferred_share": clock.preferred_share,
            }
            for name, clock in choice.clocks.items()
        },
        "preferred": choice.preferred,
        "sure": choice.sure,
        "drawn": choice.drawn,
    }


def sentence(data: Data) -> str:
    main = main_stratum(data["groups"])
    assert main is not None
    who = parts_of(data, main["group"])
    if main.get("refused"):
        return f"Which clock explains the lives of {who} we cannot tell: {main['refused']}."
    best, share = main["preferred"], main["clocks"][main["preferred"]]["preferred_share"]
    told = [f"{number(each['estimate'], 2)} in {name}" for name, each in main["clocks"].items()]
    start = f"The lives of {who} vary by {joined(told)} (standard deviation over mean)"
    samples = f"{percent(share)} of the samples drawn again agree"
    if not main["sure"]:
        return f"{start}: least in {best}, but only {samples}, so no clock is surely the better one."
    end = (
        ""
        if best == data["clock"]
        else f" These figures are counted in {data['clock']}; counting in {best} fits better."
    )
    return f"{start}: they wear by {best} ({samples}).{end}"


def page(data: Data, *, address: Any = None, ranks: dict[str, int] | None = None) -> Data:
    from reliability.charts.clocks import clocks_figure

    chart = None
    if any(group["clocks"] for group in data["groups"]):
        chart = {
            "figure": clocks_figure(data, ranks or {}),
            "size": "short",
            "notes": ["The lower, the better the clock explains."],
        }
    return {
        "chart": chart,
        "tables": [_table(data)],
        "notes": notes(data),
        "how": (
            "Coefficient of variation of the Weibull through the same lives on each clock; the clock on which lives "
            "vary least is the one that explains them (Farewell & Cox, Applied Statistics 28 (1979) 115–124; Kordonsky "
            "& Gertsbakh, Lifetime Data Analysis 3 (1997) 261–288). Whole sites are drawn again 499 times, the same "
            "for each clock; preferred for sure is what wins in 95 of 100 draws."
        ),
    }


def notes(data: Data) -> list[str]:
    told = []
    if data["not_known"]:
        told.append(f"Not known for most of these lives: {joined(data['not_known'])}.")
    if data["dropped"]:
        told.append(f"{number(data['dropped'])} lives are left out here: one of the clocks is not known for them.")
    for clock, share in data["interpolated"].items():
        if share > 0:
            told.append(
                f"{percent(share)} of the {clock} lie beyond the readings taken within the lives and are spread evenly "
                "over the days."
            )
    return told


def _table(data: Data) -> Data:
    clocks = data["known"]
    columns = [
        {"key": "group", "label": "Parts"},
        {"key": "failures", "label": "Failed", "numeric": True},
        *({"key": clock, "label": f"Variation in {clock}", "numeric": True} for clock in clocks),
        *({"key": f"{clock} wins", "label": f"{clock} best in", "numeric": True} for clock in clocks),
        {"key": "says", "label": "Says"},
    ]
    rows = []
    for group in data["groups"]:
        if group.get("refused"):
            blank = [None] * (2 * len(clocks))
            rows.append([parts_of(data, group["group"]), group["failures"], *blank, f"cannot tell: {group['refused']}"])
            continue
        says = f"{group['preferred']}" if group["sure"] else f"perhaps {group['preferred']}"
        rows.append(
            [
                parts_of(data, group["group"]),
                group["failures"],
                *({"estimate": group["clocks"][clock], "digits": 2} for clock in clocks),
                *(percent(group["clocks"][clock]["preferred_share"]) for clock in clocks),
                says,
            ]
        )
    caption = f"How much lives vary on each clock ({percent(data['confidence'])} intervals)"
    return {"columns": columns, "rows": rows, "narrow": "stacked", "caption": caption}


FILE_HEAD = ["component", "group", "clock", "coefficient_of_variation", "lower", "upper", "preferred_share", "refused"]


def lines(data: Data) -> Any:
    for group in data["groups"]:
        if group.get("refused"):
            yield [data["component"], group["group"], None, None, None, None, None, group["refused"]]
        for clock, each in group["clocks"].items():
            figures = (each[name] for name in ("estimate", "lower", "upper", "preferred_share"))
            yield [data["component"], group["group"], clock, *figures, None]
