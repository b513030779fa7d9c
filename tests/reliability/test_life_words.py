"""What the Life screen says: no more than the intervals allow, nothing unescaped, a remedy for every gap."""

from __future__ import annotations

import pytest

from reliability import life_words as words
from reliability.fleet_lives import LifeRow
from reliability.life_page import cell_of, few_tables, notes_of, page_of, sorted_groups
from reliability.life_rules import Reason
from reliability.life_warnings import warnings_for
from tests.reliability.told_lives import document, failed, some, withdrawn
from tests.stats.reference import bearing_cages


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


def test_every_reason_to_leave_something_out_has_a_remedy() -> None:
    assert set(words.REMEDIES) == {reason.value for reason in Reason}


def test_the_warning_that_names_sites_is_known_by_its_beginning() -> None:
    """Else it would reach people who may not know of these sites."""
    rows = [LifeRow(None, "failed", 0, 10, None, 1, 1, 1)]
    (warning,) = warnings_for(
        rows, clock="days", modes=(), unanswered={1: "Marl Mill"}, failures_without_mode=0, same_clock=True
    )
    assert warning.startswith(words.UNANSWERED)
    assert words.warnings_seen([warning, "x"], [], all_sites=True) == [warning, "x"]
    kept = words.warnings_seen([warning, "x"], ["Withy Lock"], all_sites=False)
    assert "Marl Mill" not in " ".join(kept)
    assert kept[0] == "x"
    assert "Among yours: Withy Lock." in kept[1]


def test_an_interval_is_softer_and_everything_is_escaped() -> None:
    marked = words.with_soft_interval("Half of <b> fail by 3 (we are 95 % sure it lies between 2 and 5). 1 of <9.")
    interval = '<span class="ci">(we are 95 % sure it lies between 2 and 5)</span>'
    assert marked == f"Half of &lt;b&gt; fail by 3 {interval}. 1 of &lt;9."


@pytest.mark.parametrize(
    ("estimate", "lower", "upper", "says"),
    [
        (2.1, 1.6, 2.7, "N1 wears out: the older, the sooner the next failure (shape 2.1, 1.6 to 2.7)."),
        (1.3, 0.8, 1.9, "Whether N1 wear out or fail by chance cannot be told yet (shape 1.3, 0.8 to 1.9)."),
        (0.6, 0.4, 0.9, "N1 fails most when young: look at fitting faults and bad lots (shape 0.6, 0.4 to 0.9)."),
        (2.1, 1.6, None, "N1 wears out: the older, the sooner the next failure (shape 2.1, over 1.6)."),
        (2.1, None, None, "Whether N1 wear out or fail by chance cannot be told yet (shape 2.1, not bounded)."),
    ],
)
def test_wear_is_told_only_as_far_as_its_interval_allows(
    estimate: float, lower: float | None, upper: float | None, says: str
) -> None:
    shape = {"estimate": estimate, "lower": lower, "upper": upper}
    assert plain(words.wear_sentence({}, {"group": "N1", "weibull": {"shape": shape}})) == says


def test_of_many_groups_the_lowest_and_the_highest_are_named() -> None:
    rows = [{"group": f"L{n}", "survival": n / 10, "lower": None, "upper": None} for n in (3, 1, 7, 5, 6)]
    assert plain(words.compared_words(rows)) == "between 10 % of L1 and 70 % of L7"
    rows[1] |= {"lower": 0.05, "upper": 0.2}
    assert plain(words.compared_words(rows[:2])) == "30 % of L3 and 10 % of L1 (5–20)"


def test_without_a_failure_no_share_is_claimed() -> None:
    told = document({"P1": withdrawn(10, 20, 30)})
    page = page_of(told, {}, {})
    assert plain(page["survival"]["sentence"]) == (
        "None has failed yet: the line stays at the top. The oldest ran 30 hours."
    )
    assert page["plot"] is None
    assert "Too few failures for a fit." in page["method_line"]


def test_the_group_that_leads_is_the_one_that_runs_now() -> None:
    told = document({"P1": failed(*range(10, 60)), "P2": withdrawn(5, 6, 7)})
    main = words.main_group(told)
    assert main is not None
    assert main["group"] == "P2"


def test_a_figure_beyond_what_was_seen_says_so_in_its_cell() -> None:
    """Bearing cages: the median, some 9,800 h, lies far beyond the oldest cage, 2,050 h."""
    (group,) = document({"P1": bearing_cages()}, confidence=0.99)["groups"]
    assert cell_of(group, "median")["sub"] == "beyond the oldest part"
    group["median"] = {"estimate": 9800.0, "lower": 4000.0, "upper": None, "unbounded": ["upper"]}
    assert cell_of(group, "median")["sub"] == "no upper limit, beyond the oldest part"


def test_many_groups_with_few_failures_share_one_table() -> None:
    told = document({f"L{n}": withdrawn(10 + n, 20) for n in range(6)}, by="lot")
    (table,) = few_tables(told)
    assert len(table["rows"]) == 6
    assert plain(table["sentence"]).startswith("6 groups have too few failures to say how they wear.")
    assert len(few_tables(document({"L1": withdrawn(10), "L2": withdrawn(20)}, by="lot"))) == 2


def test_a_note_that_groups_share_is_told_once() -> None:
    told = document({"P1": failed(5, 5, 5, 5, 5), "P2": failed(5, 5, 5, 5, 5)})
    told["groups"][0]["notes"] = told["groups"][1]["notes"] = ["The same."]
    assert notes_of(told) == ["P1, P2: The same."]


def test_sorting_puts_what_cannot_be_told_last() -> None:
    told = document({"P1": some(60, 2.0, 100), "P2": some(60, 2.0, 50), "P3": withdrawn(9)})
    names = {sort: [group["group"] for group in sorted_groups(told["groups"], sort)] for sort in ("median", "-median")}
    assert names == {"median": ["P2", "P1", "P3"], "-median": ["P1", "P2", "P3"]}
    assert [group["group"] for group in sorted_groups(told["groups"], "-group")] == ["P3", "P2", "P1"]
    assert sorted_groups(told["groups"], "nonsense") == told["groups"]
