"""The sentences a manager reads: what is known, how surely, and what it rests on."""

from __future__ import annotations

from typing import Any

from fleet.formats import number, percent, rounded

USUAL_SHAPE = 2.0  # named in the sentence: wear without haste
SMALL_NUMBERS = {1: "one", 2: "two", 3: "three", 4: "four"}


def life_sentence(document: dict[str, Any], group: dict[str, Any]) -> str:
    """One group of a life document in words."""
    who = parts_of(document, group["group"])
    condition = only_modes(document)
    if group["few_failures"] is None and group["median"] is None:
        return condition + _not_fitted(group, who)
    if group["few_failures"] is not None:
        return condition + _few(document, group, who)
    return condition + " ".join((_life(document, group, who), _counts(group)))


def only_modes(document: dict[str, Any]) -> str:
    """“If only thread worn out acted: ”, by the names of the chosen modes."""
    if not document["modes"]:
        return ""
    names = document.get("mode_names") or {}
    return f"If only {' or '.join(in_sentence(names.get(code, code)) for code in document['modes'])} acted: "


def in_sentence(name: str) -> str:
    """A name inside a sentence: “Thread worn out” as “thread worn out”; a code stays as it is."""
    return name if name.isupper() else name[:1].lower() + name[1:]


def parts_of(document: dict[str, Any], label: str) -> str:
    """The parts of a group: “the N2 nuts”, “the nuts at K-3”."""
    noun = plural(document.get("component_name") or document["component"])
    if label == "all" or not document.get("by"):
        return f"the {noun}"
    return {
        "part": f"the {label} {noun}",
        "site": f"the {noun} at {label}",
        "type": f"the {noun} in {label} modules",
        "lot": f"the {noun} of {label}" if label.startswith("no ") else f"the {noun} of lot {label}",
        "quarter": f"the {noun} fitted in {label}",
    }[document["by"]]


def plural(name: str) -> str:
    """“Drive nut” as “drive nuts”; a code in capitals stays as it is, of parts."""
    if name.isupper():
        return f"{name} parts"
    word = name[:1].lower() + name[1:]
    if word.endswith(("s", "x", "ch", "sh")):
        return word + "es"
    if word.endswith("y") and word[-2:-1] not in tuple("aeiou"):
        return word[:-1] + "ies"
    return word + "s"


def sure(confidence: float) -> str:
    return f"we are {percent(confidence)} sure"


def age(value: float, clock: str) -> str:
    """61 days, 61 000 strokes: three figures at most, of which an interval leaves few standing."""
    word = clock[:-1] if value == 1 else clock
    return f"{number(rounded(value))} {word}"


def _life(document: dict[str, Any], group: dict[str, Any], who: str) -> str:
    clock, seen_to = document["clock"], group["curve"]["last_age"]
    median, b10 = group["median"], group["b10"]
    if median["estimate"] is not None and seen_to is not None and median["estimate"] <= seen_to:
        return f"{_at(group, 'Half')} of {who} fail within {age(median['estimate'], clock)}{_limits(document, median)}."
    oldest = "" if seen_to is None else f": the oldest ran {age(seen_to, clock)}"
    if b10["estimate"] is not None and seen_to is not None and b10["estimate"] <= seen_to:
        return (
            f"{_at(group, 'One')} in ten of {who} fails within {age(b10['estimate'], clock)}{_limits(document, b10)}. "
            f"When half of them will have failed has not been seen yet{oldest}."
        )
    if b10["estimate"] is None:
        return f"How long {who} last cannot be told from these records yet."
    beyond = "" if seen_to is None else f"; none has run longer than {age(seen_to, clock)} yet"
    return (
        f"{_at(group, 'One')} in ten of {who} is expected to fail within "
        f"{age(b10['estimate'], clock)}{_limits(document, b10)}. "
        f"This carries the records on beyond what has been seen{beyond}."
    )


def _at(group: dict[str, Any], word: str) -> str:
    """Where sites differ the figures are those of a typical one, which is not the same as the fleet's."""
    return f"At a typical site {word.lower()}" if group.get("independent") else word


def _limits(document: dict[str, Any], estimate: dict[str, Any]) -> str:
    lower, upper = estimate["lower"], estimate["upper"]
    if lower is not None and upper is not None:
        between = f"it lies between {number(rounded(lower))} and {number(rounded(upper))}"
    elif lower:
        between = f"it is at least {number(rounded(lower))}; the records give no upper limit"
    elif upper is not None:
        between = f"it is at most {number(rounded(upper))}"
    else:
        return ", but the records bound it on neither side"
    return f" ({sure(document['confidence'])} {between})"


def _counts(group: dict[str, Any]) -> str:
    failures, lives = group["failures"], group["lives"]
    told = [f"{number(failures)} of {number(lives)} {'has' if failures == 1 else 'have'} failed"]
    if group["running"]:
        told.append(f"{number(group['running'])} {_are(group['running'])} still running")
    if group["removed_otherwise"]:
        removed = group["removed_otherwise"]
        told.append(f"{number(removed)} {'was' if removed == 1 else 'were'} taken out for another reason")
    return "; ".join(told) + "."


def _not_fitted(group: dict[str, Any], who: str) -> str:
    """Of groups beyond those that are fitted: what was counted."""
    failed = "has" if group["failures"] == 1 else "have"
    return f"Of {who} {number(group['failures'])} of {number(group['lives'])} {failed} failed."


def _few(document: dict[str, Any], group: dict[str, Any], who: str) -> str:
    lives, failures, clock = group["lives"], group["failures"], document["clock"]
    together = f"{number(rounded(group['exposure']))} {clock} together"
    if failures == 0:
        one = lives == 1
        start = f"None of {who} has failed: {number(lives)} {'part' if one else 'parts'} in {together}."
    elif failures in SMALL_NUMBERS:
        start = (
            f"Only {SMALL_NUMBERS[failures]} of {number(lives)} among {who} {'has' if failures == 1 else 'have'} "
            f"failed in {together}, too few to say how fast they wear."
        )
    else:
        start = f"{number(failures)} of {number(lives)} among {who} have failed, but how fast they wear cannot be told."
    bound = next((row for row in group["few_failures"]["bounds"] if row["shape"] == USUAL_SHAPE), None)
    if bound is None or not bound["b10_lower"]:
        return start
    return (
        f"{start} If they wear as parts often do (shape {number(USUAL_SHAPE)}), {sure(document['confidence'])} that "
        f"nine in ten last longer than {age(bound['b10_lower'], clock)}."
    )


def _are(count: float) -> str:
    return "is" if count == 1 else "are"
