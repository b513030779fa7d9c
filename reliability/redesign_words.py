"""What the evidence on a redesign says, in the words of a meeting: verdict, ratio, chances, what would change it."""

from __future__ import annotations

import datetime as dt
import re
from typing import Any

from fleet.formats import counted, long_day, number, percent, rounded
from reliability.life_answer import FEWEST_FAILURES
from reliability.life_warnings import MANY_NOT_KNOWN, NAMED_AT_MOST
from reliability.wording import age, plural, sure

Document = dict[str, Any]
NEARLY_SURE = 0.995
ONE_LOT = 0.8
LEAST_TIMES, MANY_TIMES = 0.01, 100
FOR_PROGRAMMERS = re.compile(r"\s*(?:Ask for|Use|Assume)?[^.]*\b\w+_\w+[^.]*\.|\s*\(\w+_\w+\)")

VERDICTS = {
    "clear": "Clear: {new} live longer than {old}.",
    "likely": "Likely: {new} probably live longer than {old}.",
    "shorter": "Shorter: {new} do not live as long as {old}.",
    "not yet shown": "Not yet shown: the records do not tell {new} from {old}.",
}
MEANINGS = (
    (
        "Clear",
        "The new part lives longer: the evidence has reached the O’Brien–Fleming boundary, between sites and within "
        "positions. Were there no difference, this would be said of at most 1 rollout in 40, however often one looks.",
    ),
    ("Likely", "The chance that the new part lives longer is above 90 in 100, but it is not clear yet."),
    ("Shorter", "The mirror of clear: the new part lives shorter."),
    ("Not yet shown", "Neither. More time or more modules are needed, or there is no difference to be seen."),
)
ASSUMED = {
    "sites differ": "sites differ (stands first)",
    "positions differ": "positions differ too",
    "one shape for both": "one shape for old and new is assumed",
    "lives independent": "sites alike is assumed",
}


def names_of(document: Document) -> dict[str, str]:
    noun = plural(document["component_name"] or document["component"])
    return {"new": f"the {listed(document['new'])} {noun}", "old": listed(document["old"])}


def listed(names: list[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def plain_notes(notes: list[str]) -> list[str]:
    """What the estimators say, without the sentences that tell a programmer what to call instead; each once."""
    plain = (FOR_PROGRAMMERS.sub("", note).strip() for note in notes)
    return [note for note in dict.fromkeys(plain) if note]


def verdict_words(document: Document) -> str:
    """The verdict alone, in one of its fixed phrases."""
    if not new_lives(document):
        noun = plural(document["component_name"] or document["component"])
        return f"Not yet shown: of the {listed(document['new'])} {noun} none has run in the field yet."
    told = VERDICTS[document["verdict"]["phrase"]].format(**names_of(document))
    return f"If only {listed(document['mode_names'])} acted. {told}" if document["modes"] else told


def lead(document: Document) -> str:
    """Verdict, ratio and chances: the first thing that is read."""
    told = verdict_words(document)
    if not new_lives(document):
        return told
    return " ".join(filter(None, (told, ratio_sentence(document), chance_sentence(document))))


def new_lives(document: Document) -> int:
    """New parts on record in the field, whenever they ran."""
    groups = (document["all_history"]["curves"] or {"groups": []})["groups"]
    return int(sum(group["lives"] for group in groups if group["group"] == listed(document["new"])))


def main_ratio(found: dict[str, Any]) -> dict[str, Any] | None:
    """The ratio where sites differ, else under one shape: the first that the records give."""
    ratio = found["ratio"] or {}
    return next((ratio[way] for way in ("sites differ", "one shape for both") if ratio.get(way)), None)


def ratio_sentence(document: Document) -> str:
    found = main_ratio(document["same_dates"])
    if found is None:
        return "How many times as long they last cannot be told yet."
    median = found["median"]
    where = "At the same sites over the same dates" if found["clusters"] else "Over the same dates"
    times = f"{number(median['estimate'], 2)} times as long"
    told = f"{where} the life by which half have failed is {times}{limits_words(median, document['confidence'])}."
    return f"{told}{beyond_words(document)}"


def beyond_words(document: Document) -> str:
    """Where a side's median lies beyond its oldest part, or rests on a handful of failures, that is said with it."""
    groups = (document["same_dates"]["curves"] or {"groups": []})["groups"]
    few = [
        f"{number(group['failures'])} of the {group['group']}"
        for group in groups
        if group["failures"] < FEWEST_FAILURES
    ]
    if few:
        return f" Failed have only {listed(few)}: too few to rest a decision on."
    beyond = [group["group"] for group in groups if not half_seen(group)]
    if not beyond:
        return ""
    return f" Of {listed(beyond)} none has run so long yet: this carries the fitted curve on beyond what has been seen."


def half_seen(group: dict[str, Any]) -> bool:
    """Whether the age by which half have failed has been reached by a part, as the Life screen asks it."""
    median, oldest = group["median"], group["curve"]["last_age"]
    if median is None or median["estimate"] is None or oldest is None:
        return False
    return bool(median["estimate"] <= oldest)


def limits_words(ratio: dict[str, Any], confidence: float) -> str:
    lower, upper = ratio["lower"], ratio["upper"]
    if lower and upper is not None:
        return f" ({sure(confidence)} it lies between {times_of(lower)} and {times_of(upper)})"
    if lower:
        return f" ({sure(confidence)} it is at least {times_of(lower)}; the records give no upper limit)"
    if upper is not None:
        return f" ({sure(confidence)} it is at most {times_of(upper)})"
    return ", but the records bound it on neither side"


def times_of(value: float) -> str:
    """0.05, 1.48, 350; never 0.00."""
    if value < LEAST_TIMES:
        return f"less than {number(LEAST_TIMES, 2)}"
    return number(value, 2) if value < MANY_TIMES else number(rounded(value, 2))


def chance_sentence(document: Document) -> str:
    chances = document["chances"]
    if chances is None:
        return "Before old and new parts have failed side by side no chance is told."
    hope = f"that they reach the hope of {number(document['hope'], 2)} times as long is {in_hundred(chances['hope'])}"
    told = f"the chance that they live longer is {in_hundred(chances['longer'])}, {hope}."
    return f"{chance_rests(document)}{told}"


def chance_rests(document: Document) -> str:
    """On what the chances rest: they are reckoned with the past of each position, which the ratio above is not."""
    ratio = document["same_dates"]["ratio"] or {}
    with_past = ratio.get("positions differ")
    if with_past:
        median = with_past["median"]
        times = times_of(median["estimate"])
        return f"Allowing for what each position did before ({times} times{short_limits(median)}), "
    if main_ratio(document["same_dates"]):
        return "Allowing for what each position did before, "
    none = [name for name, failed in failed_of(document).items() if not failed]
    if none:
        return (
            f"None of the {listed(none)} has failed over the same dates, so this rests on how long they have run "
            "without it and on what is usual for such parts: "
        )
    return "This rests on very few failures and on what is usual for such parts: "


def failed_of(document: Document) -> dict[str, int]:
    groups = (document["same_dates"]["curves"] or {"groups": []})["groups"]
    return {group["group"]: group["failures"] for group in groups}


def short_limits(ratio: dict[str, Any]) -> str:
    if ratio["lower"] is None or ratio["upper"] is None:
        return ""
    return f", {times_of(ratio['lower'])} to {times_of(ratio['upper'])}"


def in_hundred(chance: float) -> str:
    if chance > NEARLY_SURE:
        return "above 99 in 100"
    if chance < 1.0 - NEARLY_SURE:
        return "below 1 in 100"
    return f"{round(100 * chance)} in 100"


def strength(document: Document) -> str:
    """Where the evidence stands against its boundary, and since when."""
    found = document["verdict"]
    if found["boundary"] is None:
        return (
            "No part has yet failed while old and new parts of its age ran beside each other at its site, so there is "
            "nothing to weigh."
        )
    within = "" if found["position_z"] is None else f" and within positions {number(found['position_z'], 2)}"
    needed = f"{number(found['boundary'], 2)} was needed with {percent(min(found['share'], 1.0))}"
    stands = f"Log-rank Z by site {number(found['z'], 2)}{within}; {needed} of the planned information."
    if found["decided_at"]:
        day = dt.date.fromisoformat(found["decided_at"])
        return f"{stands} Decided by what was known of {long_day(day)}; what came later does not change it."
    return f"{stands} It is looked at again with every entry."


def ahead(document: Document) -> str:
    """What would change the verdict."""
    found = document["ahead"]
    if document["verdict"]["final"]:
        return "Nothing more has to be seen."
    if found is None:
        return "How long to watch on cannot be told before both have failed side by side."
    if not found["information_a_week"]:
        return "At the present pace nothing is learned: no old part runs beside the new ones any more, or none fails."
    longest = found["looked_ahead"]
    if found["weeks"] is None:
        chance = in_hundred(found["clear_in"][str(longest)])
        told = f"At the present pace the chance that it is called clear within {longest} weeks is {chance}."
    else:
        told = f"At the present pace it is as likely as not clear within {counted(found['weeks'], 'week')}"
        sure_in = found["weeks_sure"]
        told += f", and in 80 of 100 cases within {counted(sure_in, 'week')}." if sure_in else "."
    extra = found["extra_modules"]
    if extra:
        modules = counted(extra, "more module", "more modules")
        told += f" {modules} upgraded now would make it clear within {found['by_week']} weeks in 80 of 100 cases."
    return told


def few_sentence(document: Document) -> str:
    found = document["few"]
    noun = plural(document["component_name"] or document["component"])
    failed = {0: "No failures"}.get(found["failures"], counted(found["failures"], "failure"))
    used = f"{number(found['parts'])} {noun} and {age(found['exposure'], document['clock'])}"
    told = f"{failed} in {used}"
    if document["clock"] != "days":
        told += f" ({number(rounded(found['part_years']))} part-years)"
    if found["years_a_failure"] and found["years_a_failure"] >= 1:
        rate = number(rounded(found["years_a_failure"], 2))
        return (
            f"{told}: at {percent(found['confidence'])} confidence fewer than 1 in {rate} a year, as long as they are "
            "no older than these. Parts that wear fail more often later."
        )
    return f"{told}: too little yet to bound how many fail a year below one each."


def warnings(document: Document) -> list[str]:
    """What stands against the comparison, in words."""
    alike, told = document["comparability"], []
    if document.get("newer"):
        told.append(
            f"{listed(document['newer'])} came after {listed(document['new'])}: here an older part is held against its "
            "successor, and “new” and “old” below are meant the other way round."
        )
    sides = f"{listed(document['new'])} and {listed(document['old'])}"
    for mix in alike["mixes"]:
        if mix["name"] in ("site", "season") and mix["overlap"] is not None and mix["overlap"] < 0.5:
            where = "at the same sites" if mix["name"] == "site" else "in the same seasons"
            told.append(
                f"{sides} hardly ran {where}: their shares overlap to {percent(mix['overlap'])}. "
                "Only what ran side by side decides here."
            )
    if alike["all_at_once"]:
        told.append(
            f"At {listed(alike['all_at_once'])} hardly an old part ran beside the new ones: switched all at once, such "
            "a site cannot tell the new part from a change of water, season or habits."
        )
    if alike["unlike_duty"]:
        told.append(duty_words(document))
    told += records_words(document["records"])
    lots = next(mix for mix in alike["mixes"] if mix["name"] == "lot")
    largest = max(lots["rows"], key=lambda row: row["after"], default=None)
    if largest and largest["after"] > ONE_LOT and largest["label"] != "no lot":
        told.append(
            f"{percent(largest['after'])} of the new parts are of lot {largest['label']}: a good lot looks like a good "
            "design."
        )
    return told


def records_words(records: dict[str, Any]) -> list[str]:
    """What the records leave open that could make one side look longer-lived."""
    told, places = [], records["unanswered"]
    if places:
        named = ", ".join(places[:NAMED_AT_MOST]) + (" and others" if len(places) > NAMED_AT_MOST else "")
        told.append(
            f"Nobody has said whether every failure is reported at once at {named}. Until then a running part counts "
            "there only up to the last time its module was seen, so that old and new parts may look unlike for that "
            "alone. Answer it on the site's page."
        )
    if records["not_known"] > MANY_NOT_KNOWN * records["removed"]:
        told.append(
            f"The reason of {number(records['not_known'])} of {number(records['removed'])} removals is not known. They "
            "count as removals in good order; if they were failures, the answer could be another. Ask the crews for "
            "the reasons."
        )
    return told


def duty_words(document: Document) -> str:
    duty = document["comparability"]["duty"]
    a_day = f"{number(rounded(duty['after']))} and {number(rounded(duty['before']))} {duty['clock']} a day"
    if document["clock"] != "days":
        return f"New and old parts ran {a_day}; their lives are counted in {document['clock']}, which allows for that."
    adjusted = document["same_dates"].get("at_like_duty")
    told = f"New and old parts ran {a_day}, and their lives are counted in days."
    if not adjusted:
        return f"{told} What the difference in duty does cannot be told apart from the design yet."
    ratio = f"{number(adjusted['estimate'], 2)} times as long{limits_words(adjusted, document['confidence'])}"
    return f"{told} At like duty (regression on {duty['clock']} a day) they last {ratio}."


def faults_sentence(document: Document) -> str:
    found = document["fitting_faults"]
    told = []
    for side, names in (("after", document["new"]), ("before", document["old"])):
        each = found[side]
        if not each["parts"]:
            continue
        limits = f"{percent(each['lower'], 1)} to {percent(each['upper'], 1)}"
        told.append(f"{each['failed']} of {number(each['parts'])} {listed(names)} ({limits})")
    if not told:
        return "No part has been watched through its first days yet."
    return f"In the first {found['days']} days after fitting failed {' and '.join(told)}."
