"""What the Life screen says beside the sentence of each group: comparisons, wear, and what to do about gaps."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Any

from django.utils.html import conditional_escape, format_html
from django.utils.safestring import SafeString, mark_safe

from fleet.formats import FIXED, number, percent, rounded
from reliability.wording import age, sure

Document = dict[str, Any]
Group = dict[str, Any]
MOST_COMPARED = 4
INTERVAL = re.compile(r"\((?:we are|it lies)[^()]*\)")
UNANSWERED = "Nobody has said whether every failure is reported at once at "

# What can be done about fittings that are left out, by the reason given in reliability/life_rules.py.
REMEDIES = {
    "on a test stand": "Test stands run otherwise than the field. Tick “Count test stands too” to see them.",
    "fitting day not known": "Their age is not known. If somebody knows the day, correct the fitting.",
    "module never looked at": "No visit and no reading that advanced: log one.",
    "fitted after the last day that counts at its site": "Too young to say anything; they come in by themselves.",
    "used part whose age on this clock is not known": "Count in the component's own clock to see them.",
    "neither readings nor a duty known": "Read the counter, or enter the site's strokes or hours a day.",
    "ended before records were kept": "Shorter lives of that time were not written down; counting these would flatter.",
    "nothing observed yet: age 0": "Fitted too lately to have run; they come in by themselves.",
    "struck out": "Wrong entries; each keeps its reason.",
    "counted on another clock": "Choose the clock that the set was counted in.",
}
# What an assumed shape means, for people who never met one.
WEAR = {
    1.0: "does not wear: fails by chance at any age",
    1.5: "wears a little",
    2.0: "wears steadily, as nuts and seals often do",
    2.5: "wears steadily",
    3.0: "wears out within a fairly short stretch of ages",
    4.0: "wears out almost together",
    5.0: "wears out almost at one age",
}


def with_soft_interval(sentence: str) -> SafeString:
    """The sentence with its “(we are 95 % sure …)” in the softer ink."""
    parts = []
    end = 0
    for match in INTERVAL.finditer(sentence):
        parts += [
            conditional_escape(sentence[end : match.start()]),
            format_html('<span class="ci">{}</span>', match[0]),
        ]
        end = match.end()
    parts.append(conditional_escape(sentence[end:]))
    return mark_safe("".join(parts))  # every piece is escaped above


def main_group(document: Document) -> Group | None:
    """The one that matters most now: of which most still run, then with most lives."""
    return max(document["groups"], key=lambda group: (group["running"], group["lives"]), default=None)


def narrowed_words(question: dict[str, Any], titles: dict[str, str]) -> str:
    """The choices that leave something out, in words, so that a printed sheet says what it speaks of."""
    told = []
    for name, start in (("parts", "only parts"), ("sites", "only at"), ("modes", "only failures by")):
        if question[name]:
            told.append(f"{start} {joined([titles.get(code, code) for code in question[name]])}")
    if question["life_set"]:
        told.append(f"lives of the imported set {question['life_set']}")
    if not question["worn_is_failure"]:
        told.append("parts worn to the limit taken as removed in good order")
    if question["with_rigs"]:
        told.append("with test stands")
    return f"Chosen: {'; '.join(told)}." if told else ""


def survival_sentence(document: Document, compared: list[dict[str, Any]], at: float | None, drawn: int) -> str:
    """What the curves show, with their numbers at one age."""
    start = "The share still working at each age."
    if not any(group["failures"] for group in document["groups"]):
        oldest = max((group["curve"]["last_age"] or 0 for group in document["groups"]), default=0)
        start = f"None has failed yet: the line stays at the top. The oldest ran {age(oldest, document['clock'])}."
    elif at is not None and compared:
        start = f"At {age(at, document['clock'])}, {compared_words(compared)} still work."
    left = len(document["groups"]) + len(document["more_groups"]) - drawn
    if left > 0:
        start += f" Drawn are the {number(drawn)} groups with most lives; the other {number(left)} stand in the table."
    return start


def compared_words(compared: list[dict[str, Any]]) -> str:
    """Each share with its band; of many the lowest and the highest."""
    if len(compared) > MOST_COMPARED:
        rows = sorted(compared, key=lambda row: row["survival"])
        return f"between {share_of(rows[0])} and {share_of(rows[-1])}"
    return joined([share_of(row) for row in compared])


def share_of(row: dict[str, Any]) -> str:
    of = "" if row["group"] == "all" else f" of {row['group']}"
    return f"{percent(row['survival'])}{of}{between(row['lower'], row['upper'])}"


def curves_note(document: Document, *, bands: bool, fits: bool) -> str:
    """How to read the drawing."""
    notes = ["Steps: what was seen, counting parts that still run."]
    if not any(group["failures"] for group in document["groups"]):
        notes.append("Without a failure no band can be drawn; the bounds below say what is proven.")
    elif bands:
        wider = (
            ", wider where sites differ"
            if any("sites" in group["curve"]["band"] for group in document["groups"])
            else ""
        )
        notes.append(f"Tint: {percent(document['confidence'])} band (log–log{wider}), age by age.")
    else:
        notes.append("Bands are left out here to keep the lines apart; they stand in the table below.")
    if fits:
        notes.append("Thin line: the fitted Weibull; dots where it is carried on beyond the oldest part.")
    return " ".join(notes)


def between(lower: float | None, upper: float | None) -> str:
    if lower is None or upper is None:
        return ""
    return f" ({percent(lower).removesuffix(f'{FIXED}%')}–{percent(upper).removesuffix(f'{FIXED}%')})"


def p_words(value: float | None, name: str = "P") -> str:
    """“P = 0.03”, “P under 0.001”; without a name the value alone, for tables."""
    if value is None:
        return f"{name} not known".strip()
    if value < 0.001:
        return f"{name} under 0.001".strip()
    return f"{name} = {number(value, 3 if value < 0.1 else 2)}" if name else number(value, 3 if value < 0.1 else 2)


def joined(texts: list[str]) -> str:
    return texts[0] if len(texts) == 1 else f"{', '.join(texts[:-1])} and {texts[-1]}"


def wear_sentence(document: Document, group: Group) -> str:
    """What the shape says about the way the parts fail, only as far as its interval allows."""
    shape = (group.get("weibull") or {}).get("shape")
    if not shape or shape["estimate"] is None:
        return ""
    who = "They" if group["group"] == "all" else group["group"]
    numbers = f"shape {number(shape['estimate'], 1)}{shape_limits(shape)}"
    lower, upper = shape["lower"], shape["upper"]
    if lower is not None and lower > 1:
        does = "wear" if who == "They" else "wears"
        return f"{who} {does} out: the older, the sooner the next failure ({numbers})."
    if upper is not None and upper < 1:
        does = "fail" if who == "They" else "fails"
        return f"{who} {does} most when young: look at fitting faults and bad lots ({numbers})."
    return f"Whether {who.lower() if who == 'They' else who} wear out or fail by chance cannot be told yet ({numbers})."


def shape_limits(shape: dict[str, Any]) -> str:
    if shape["lower"] is None and shape["upper"] is None:
        return ", not bounded"
    low = "0" if shape["lower"] is None else number(shape["lower"], 1)
    return f", over {low}" if shape["upper"] is None else f", {low} to {number(shape['upper'], 1)}"


def plot_sentence(document: Document, drawn: Iterable[Group]) -> str:
    """What the Weibull plot shows: how the drawn groups wear, or why there is no line."""
    fitted = [group for group in drawn if group["weibull"] and group["weibull"]["shape"]["estimate"] is not None]
    if not fitted:
        return "Too few failures for a line; the points are what was seen."
    if len(fitted) < MOST_COMPARED:
        return " ".join(wear_sentence(document, group) for group in fitted)
    shapes = sorted((group["weibull"]["shape"]["estimate"], group["group"]) for group in fitted)
    (least, flattest), (most, steepest) = shapes[0], shapes[-1]
    wearing = sum((group["weibull"]["shape"]["lower"] or 0) > 1 for group in fitted)
    return (
        f"The shapes lie between {number(least, 1)} ({flattest}) and {number(most, 1)} ({steepest}). "
        f"In {number(wearing)} of {number(len(fitted))} groups it is sure that the parts wear out: the older, the "
        "sooner the next failure."
    )


def plot_note(document: Document, groups: Iterable[Group], *, bands: bool) -> str:
    """How to read the plot, and what its band leaves out."""
    groups = list(groups)
    notes = [
        "On this paper a Weibull life is a straight line, steeper the more the parts wear. Points: what was seen, each "
        "at half its step. Whether they leave the line by more than chance is said below, not judged by eye."
    ]
    if any(group.get("fitted") for group in groups):
        band = f", with its {percent(document['confidence'])} likelihood band, age by age" if bands else ""
        notes.append(f"Line: all lives of the group as one population{band}.")
    if any(group.get("independent") for group in groups):
        notes.append(
            "Line and band take lives as independent, too narrow where sites differ. The bars at 10 and 50 % are B10 "
            "and median of a typical site as in the table, with the spread between sites in their intervals."
            if bands
            else "The lines take lives as independent; the table's figures are those of a typical site."
        )
    return " ".join(notes)


def few_sentence(document: Document, group: Group) -> str:
    """What stands behind the bounds, and which test would show more."""
    few, oldest = group["few_failures"], age(group["curve"]["last_age"] or 0, document["clock"])
    failures = "no failure" if group["failures"] == 0 else f"{number(group['failures'])} failed"
    together = f"{number(rounded(group['exposure']))} {document['clock']} together"
    return (
        f"{number(group['lives'])} parts, {failures}, {together}. "
        f"What they prove depends on how the part wears, which so few failures do not tell. To show that nine in ten "
        f"last a given age, {number(few['parts_for_nine_in_ten'])} new parts must all reach it without a failure, or "
        f"fewer must run to twice that age, as the table says ({sure(few['confidence'])} then). Bounds beyond the "
        f"oldest part ({oldest}) rest on the assumed shape alone."
    )


def many_few_sentence(groups: int, confidence: float) -> str:
    return (
        f"{number(groups)} groups have too few failures to say how they wear. What they prove depends on the shape "
        "that is assumed: 1 does not wear, 2 wears steadily, 5 wears out almost at one age. The bounds are "
        f"{percent(confidence)} sure if the shape is right; those beyond the oldest part rest on it alone."
    )


def left_out_sentence(document: Document) -> str:
    total = sum(row["count"] for row in document["left_out"])
    lives = sum(group["lives"] for group in [*document["groups"], *document["more_groups"]])
    if not total:
        return f"Nothing is left out: every fitting counts among the {number(lives)} lives."
    one = total == 1
    return (
        f"{number(total)} {'fitting is' if one else 'fittings are'} in no figure above; {number(lives)} lives are in."
    )


def warnings_seen(warnings: list[str], unanswered: list[str], *, all_sites: bool) -> list[str]:
    """For a person who sees some sites only: no warning names another's."""
    if all_sites:
        return list(warnings)
    kept = [warning for warning in warnings if not warning.startswith(UNANSWERED)]
    if len(kept) == len(warnings):
        return kept
    named = f"Among yours: {', '.join(unanswered)}." if unanswered else "None of them is yours."
    return [
        *kept,
        f"{UNANSWERED.removesuffix(' at ')} at some sites; lives there may look shorter than they are. {named}",
    ]


def method_line(document: Document) -> str:
    """One line for the foot of the figures, also on paper."""
    differ = any(group["independent"] for group in document["groups"])
    sites = " of a typical site, with the spread between sites in them" if differ else ""
    level = percent(document["confidence"])
    if not any(group["weibull"] for group in document["groups"]):
        return "Too few failures for a fit. These figures plan stock; they do not certify safe life."
    return (
        f"Weibull by maximum likelihood; intervals are {level} likelihood-ratio intervals{sites}. "
        "These figures plan stock; they do not certify safe life."
    )
