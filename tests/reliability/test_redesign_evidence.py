"""The evidence on a redesign from records whose truth is known: verdict, ratio, controls, modes, first days."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from scipy import stats

from reliability.redesigns.comparability import comparability
from reliability.redesigns.compared import AFTER, BEFORE, all_history, at_the_same_time
from reliability.redesigns.document import redesign_document
from reliability.redesigns.few import years_a_failure
from reliability.redesigns.fitting_faults import exact_share, fitting_faults
from reliability.redesigns.question import RedesignQuestion, question_for
from reliability.redesigns.with_past import sides_with_past
from reliability.stats.difference import counted_when_found, life_ratio, logrank
from tests.reliability.rollout_fleet import BEGAN, TODAY, RolloutFleet
from tests.reliability.slow_lives import as_seen_on
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db


def question(new: str = "N2", **choices: Any) -> RedesignQuestion:
    choices.setdefault("as_of", day(TODAY))
    return question_for(new, **choices)


def test_a_part_that_lives_twice_as_long_is_called_clear() -> None:
    RolloutFleet(2.0, sites=6, modules=10)
    document = redesign_document(question())
    assert document["verdict"]["phrase"] == "clear"
    assert document["verdict"]["decided_at"] is not None
    ratio = document["same_dates"]["ratio"]["sites differ"]["median"]
    assert ratio["lower"] < 2.0 < ratio["upper"]
    assert document["chances"]["longer"] > 0.99
    assert document["ahead"] is None


def test_a_part_that_lives_shorter_is_called_so() -> None:
    RolloutFleet(0.4, sites=6, modules=10)
    document = redesign_document(question())
    assert document["verdict"]["phrase"] == "shorter"
    assert document["same_dates"]["ratio"]["sites differ"]["median"]["upper"] < 1


def test_no_difference_is_not_called_clear_and_says_how_long_to_watch() -> None:
    RolloutFleet(1.0)
    document = redesign_document(question())
    assert document["verdict"]["phrase"] in ("likely", "not yet shown")
    ratio = document["same_dates"]["ratio"]["sites differ"]["median"]
    assert ratio["lower"] < 1.0 < ratio["upper"]
    if not document["verdict"]["final"]:
        assert document["ahead"]["information_a_week"] > 0


def test_old_parts_enter_at_their_age_on_the_sites_first_day() -> None:
    RolloutFleet()
    lives = at_the_same_time(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    old = lives.side(BEFORE)
    assert old is not None
    assert set(lives.starts.values()) == {day(BEGAN)}
    assert old.entries.max() > 0
    assert (lives.begun >= day(BEGAN).toordinal()).all()
    everything = all_history(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    assert everything.side(BEFORE).count > old.count
    assert everything.side(AFTER).count == lives.side(AFTER).count


def test_the_score_by_site_agrees_with_a_count_by_hand() -> None:
    """Log-rank with late entries and strata, added up failure by failure (Mantel 1966)."""
    RolloutFleet(1.3)
    document = redesign_document(question())
    lives = at_the_same_time(question().component, ["N2"], ["N1"], as_of=day(TODAY)).lifetimes
    score = variance = 0.0
    for site in set(lives.sites.tolist()):
        here = lives.subset(lives.sites == site)
        for at in sorted(set(here.durations[here.observed].tolist())):
            risk = (here.entries < at) & (at <= here.durations)
            died = here.observed & (here.durations == at)
            n, d = risk.sum(), died.sum()
            old = (risk & (here.groups == BEFORE)).sum()
            score += (died & (here.groups == BEFORE)).sum() - d * old / n
            variance += d * old * (n - old) * (n - d) / (n * n * (n - 1)) if n > 1 else 0.0
    by_site = document["same_dates"]["tests"][0]
    assert by_site["z"] == pytest.approx(score / variance**0.5, rel=1e-9)
    assert by_site["information"] == pytest.approx(variance, rel=1e-9)


def test_positions_are_compared_with_their_own_past_sites_over_the_same_dates_only() -> None:
    """Over the same dates a position has hardly held an old part, and the positions could not agree for long."""
    RolloutFleet(1.3)
    last = redesign_document(question())["path"][-1]
    whole = all_history(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    beside = at_the_same_time(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    by_position, by_site = (
        logrank(counted_when_found(lives.lifetimes), strata=strata)
        for lives, strata in ((whole, whole.positions), (beside, beside.lifetimes.sites))
    )
    # groups in the order of their names: after, before
    assert last["position_z"] == pytest.approx(-by_position.z)
    assert last["z"] == pytest.approx(-by_site.z)


def test_the_past_of_the_positions_ends_on_the_sites_first_day() -> None:
    RolloutFleet(1.3)
    whole = all_history(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    beside = at_the_same_time(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    (before, after), options = sides_with_past(whole, beside.starts)
    for side, same in ((before, beside.side_of_positions(BEFORE)), (after, beside.side_of_positions(AFTER))):
        assert side.failures == same.failures
        assert np.array_equal(np.sort(side.durations), np.sort(same.durations))
        assert np.array_equal(np.sort(side.entries), np.sort(same.entries))
    past = options["past"]
    at_sites = np.isin(whole.lifetimes.sites, list(beside.starts))
    assert past.exposure == pytest.approx(whole.lifetimes.subset(at_sites).exposure - before.exposure - after.exposure)
    assert [len(column) for column in options["positions"]] == [len(before), len(after), len(past)]
    told = redesign_document(question())["same_dates"]["ratio"]["positions differ"]["median"]
    assert told["estimate"] == pytest.approx(life_ratio(before, after, **options).median.estimate)


def test_sites_switched_all_at_once_are_named() -> None:
    RolloutFleet(at_once=True)
    document = redesign_document(question())
    assert document["comparability"]["all_at_once"] == ["SITE-1", "SITE-3"]
    assert document["comparability"]["beside"] == []
    assert document["same_dates"]["tests"][0]["information"] in (None, 0)
    assert document["verdict"]["phrase"] == "not yet shown"


def test_without_a_new_part_nothing_is_claimed() -> None:
    fleet = SmallFleet()
    fleet.fit(fleet.module("M-1", fleet.site()), 0, 50, "failed")
    document = redesign_document(question_for("N2", ["N1"], as_of=day(TODAY)))
    assert document["verdict"]["phrase"] == "not yet shown"
    assert document["chances"] is None
    assert document["chances_missing"]
    assert document["path"] == []


def test_the_path_ends_with_today_and_ages_lie_on_the_way() -> None:
    RolloutFleet()
    lives = at_the_same_time(question().component, ["N2"], ["N1"], as_of=day(TODAY))
    halfway, _ = as_seen_on(lives, day(300).toordinal())
    assert halfway.failures == sum(lives.lifetimes.observed & (lives.ended <= day(300).toordinal()))
    assert (halfway.durations <= 300).all()
    same, _ = as_seen_on(lives, day(TODAY).toordinal())
    assert np.array_equal(np.sort(same.durations), np.sort(lives.lifetimes.durations))
    path = redesign_document(question())["path"]
    assert path[-1]["on"] == day(TODAY).isoformat()
    assert path[0]["information"] < path[len(path) // 2]["information"] < path[-1]["information"]


def test_one_mode_alone_counts_the_others_as_withdrawn() -> None:
    RolloutFleet()
    whole, alone = redesign_document(question()), redesign_document(question(modes=("STRIPPED",)))
    failures = {group["group"]: group["failures"] for group in alone["all_history"]["curves"]["groups"]}
    rows = {row["mode"]: row for row in whole["by_mode"]["rows"]}
    assert set(rows) == {"WORN", "STRIPPED"}
    assert rows["STRIPPED"]["after_failures"] == alone["same_dates"]["curves"]["groups"][1]["failures"]
    assert failures["N1"] < whole["all_history"]["curves"]["groups"][0]["failures"]
    assert rows["WORN"]["change"] in ("rarer", "no clear change")


def test_how_alike_the_sides_are_is_counted_in_days() -> None:
    fleet = SmallFleet()
    here, there = fleet.site("HERE"), fleet.site("THERE")
    one, two = fleet.module("M-1", here), fleet.module("M-2", there)
    fleet.fit(one, 0, 30, "failed", lot="A")
    fleet.fit(two, 0, 10, "failed", lot="A")
    fleet.fit(one, 30, 50, "failed", part=fleet.n2, lot="B")
    from fleet.actions.rebuild_clocks import rebuild_clocks

    rebuild_clocks()
    asked = {"as_of": day(TODAY)}
    everything = all_history(fleet.component, ["N2"], ["N1"], **asked)
    found = comparability(everything, at_the_same_time(fleet.component, ["N2"], ["N1"], **asked))
    sites = found.mix("site")
    assert dict(zip(sites.labels, sites.before, strict=True)) == pytest.approx({"HERE": 0.75, "THERE": 0.25})
    assert dict(zip(sites.labels, sites.after, strict=True)) == pytest.approx({"HERE": 1.0, "THERE": 0.0})
    assert sites.overlap == pytest.approx(0.75)
    assert found.mix("lot").overlap == 0
    assert found.mix("season").labels[0] == "January to March"
    assert sum(found.mix("season").before) == pytest.approx(1)


def test_failures_of_the_first_days_are_counted_apart() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    for number, end in enumerate((3, 7, 8, 90)):
        fleet.fit(fleet.module(f"M-{number}", site), 0, end, "failed", part=fleet.n2)
    fleet.fit(fleet.module("M-9", site), TODAY - 4, part=fleet.n2)  # not watched long enough to count
    from fleet.actions.rebuild_clocks import rebuild_clocks

    rebuild_clocks()
    found = fitting_faults(all_history(fleet.component, ["N2"], ["N1"], as_of=day(TODAY)), 0.95)
    assert (found["after"]["failed"], found["after"]["parts"]) == (2, 4)
    assert found["before"]["parts"] == 0


@pytest.mark.parametrize(("count", "of"), [(0, 12), (2, 4), (12, 12), (3, 250)])
def test_limits_of_a_share_are_those_of_clopper_and_pearson(count: int, of: int) -> None:
    """Clopper & Pearson 1934, by an independent library."""
    wanted = stats.binomtest(count, of).proportion_ci(0.95, method="exact")
    assert exact_share(count, of, 0.95) == pytest.approx((wanted.low, wanted.high), abs=1e-12)


def test_the_bound_of_a_rate_without_failures() -> None:
    """NIST/SEMATECH e-Handbook 8.4.5.1: with no failure the rate is below -log(0.05) / T at 95 %."""
    assert years_a_failure(0, 100.0, 0.95) == pytest.approx(100.0 / -np.log(0.05))
    assert years_a_failure(2, 100.0, 0.95) == pytest.approx(200.0 / stats.chi2.ppf(0.95, 6))


def test_few_failures_give_bounds_and_a_test_that_shows_more() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    for number in range(20):
        fleet.fit(fleet.module(f"A-{number}", site), 0, 40 + 3 * number, "failed")
        fleet.fit(fleet.module(f"B-{number}", site), 100, part=fleet.n2)
    from fleet.actions.rebuild_clocks import rebuild_clocks

    rebuild_clocks()
    few = redesign_document(question_for("N2", ["N1"], as_of=day(TODAY)))["few"]
    assert (few["parts"], few["failures"], few["exposure"]) == (20, 0, 20 * 300)
    assert few["years_a_failure"] == pytest.approx(20 * 300 / 365.25 / -np.log(0.05))
    assert [row["b10_lower"] for row in few["bounds"]][1] < few["bounds"][-1]["b10_lower"]
    same_length = {plan["allowed"]: plan["parts"] for plan in few["plans"] if plan["age"] == few["target"]}
    # success run, 90 % at 95 % confidence: 29, 46, 61, 76 parts (common practice; checks of topic 10)
    assert [same_length[allowed] for allowed in range(4)] == [29, 46, 61, 76]


def test_candidates_stand_side_by_side_and_stands_apart() -> None:
    fleet = RolloutFleet()
    from fleet.actions.rebuild_clocks import rebuild_clocks
    from fleet.models import Part

    n3 = Part.objects.create(code="N3", component=fleet.component)
    rig = fleet.site("TANK", kind="rig")
    for number in range(8):
        module = fleet.module(f"R-{number}", rig)
        fleet.put(module, fleet.n2, 0, 30 + 4 * number, "failed")
        other = fleet.module(f"T-{number}", fleet.places[0])
        fleet.put(other, n3, 220, 260 + 5 * number, "failed")
    rebuild_clocks()
    before = redesign_document(question())
    document = redesign_document(question(also=("N3",)))
    assert [row["part"] for row in document["candidates"]] == ["N2", "N3"]
    assert document["candidates"][1]["failures"] == 8
    assert document["same_dates"]["ratio"] == before["same_dates"]["ratio"], "stands and candidates change no ratio"
    (stand,) = document["rigs"]
    assert (stand["part"], stand["rig_failures"]) == ("N2", 8)
    assert stand["factor"]["lower"] < stand["factor"]["estimate"] < stand["factor"]["upper"]


def test_the_hope_is_fixed_before_and_moves_the_boundary() -> None:
    RolloutFleet(1.3)
    modest, bold = (redesign_document(replace(question(), hope=hope)) for hope in (1.2, 3.0))
    assert modest["verdict"]["planned"] > bold["verdict"]["planned"]
    assert modest["chances"]["hope"] > bold["chances"]["hope"]
