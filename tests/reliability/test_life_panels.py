"""Each panel of the Life screen, on a fleet whose truth is known: what it finds, says and refuses."""

from __future__ import annotations

import copy
import json
import math
from typing import Any

import numpy as np
import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import LifeSet, SetLife
from reliability.life_panels import BY_NAME, PANELS, panel_document, whole_document
from reliability.lifetimes_from_fleet import lives
from reliability.stats.competing import cumulative_incidence
from reliability.stats.fitted import compare_fits
from reliability.stats.other_fits import fit_exponential, fit_lognormal
from reliability.stats.weibull_fit import fit_weibull
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_charts import with_colours
from tests.reliability.worked_fleet import BAD_LOT, LAST_DAY, WorkedFleet

pytestmark = pytest.mark.django_db
AS_OF = day(LAST_DAY)


def plain(text: str) -> str:
    return text.replace("\N{NO-BREAK SPACE}", " ")


def ask(name: str, component: str = "NUT", **choices: Any) -> Any:
    data = panel_document(component, name, **{"by": "part", "as_of": AS_OF, **choices})
    json.dumps(data, allow_nan=False)
    return data


@pytest.fixture(scope="module")
def made(made_once: Any) -> WorkedFleet:
    return made_once(WorkedFleet)


@pytest.fixture
def worked(made: WorkedFleet, db: None) -> WorkedFleet:
    return copy.deepcopy(made)


def test_curves_are_compared_on_the_same_lives(worked: WorkedFleet) -> None:
    """The table is the AICc table of the three fits, with what each would answer."""
    data = ask("fit")
    (group,) = data["groups"]
    lifetimes = lives("NUT", as_of=AS_OF).lifetimes
    fits = [fit(lifetimes) for fit in (fit_weibull, fit_lognormal, fit_exponential)]
    expected = compare_fits(fits)
    assert [row["distribution"] for row in group["fits"]] == [row.distribution.lower() for row in expected]
    assert [row["difference"] for row in group["fits"]] == pytest.approx([row.difference for row in expected])
    by_name = {fit.distribution.lower(): fit for fit in fits}
    for row in group["fits"]:
        assert row["b10"]["estimate"] == pytest.approx(by_name[row["distribution"]].quantile(0.1))
        assert row["b10"]["lower"] < row["b10"]["estimate"] < row["b10"]["upper"]
    assert "A Weibull curve fits the N1 drive nuts best" in plain(data["sentence"])
    assert not group["bend"]["warn"]
    table = BY_NAME["fit"].load().page(data)["tables"][0]
    assert table["rows"][0][2] == "fits best"
    assert table["rows"][-1][2] == "does not fit"  # parts that wear are no exponential


def test_a_lognormal_that_fits_better_is_said_with_its_answer() -> None:
    fleet = SmallFleet()
    lock = fleet.site()
    rng = np.random.default_rng(3)
    for number, age in enumerate(np.ceil(np.exp(rng.normal(4.0, 0.8, 120)))):
        fleet.fit(fleet.module(f"M-{number}", lock), 0, min(int(age), 900), "failed")
    rebuild_clocks()
    data = ask("fit", as_of=day(1000))
    best, weibull = data["groups"][0]["fits"][:2]
    assert (best["distribution"], weibull["distribution"]) == ("lognormal", "weibull")
    said = plain(data["sentence"])
    assert "A lognormal curve fits the N1 drive nuts" in said
    assert "better than the Weibull (AICc lower by" in said
    assert "B10 would be" in said


def test_shares_by_mode_are_those_of_the_estimator_and_add_up(worked: WorkedFleet) -> None:
    data = ask("modes")
    (group,) = data["groups"]
    found = lives("NUT", as_of=AS_OF, also="mode")
    curve = cumulative_incidence(found.lifetimes, found.also, minimum_at_risk=5)
    assert [row["name"] for row in group["modes"]] == ["Thread worn out", "Thread stripped"]
    for row in group["modes"]:
        own = curve.incidence[curve.row_of(row["mode"])]
        assert row["incidence"] == pytest.approx(own.tolist(), abs=1e-6)
        assert row["failures"] == curve.failures[curve.row_of(row["mode"])].sum()
        for share in row["at"]:
            assert share["lower"] <= share["estimate"] <= share["upper"]
    total = np.sum([row["incidence"] for row in group["modes"]], axis=0) + group["survival"]
    assert total == pytest.approx(np.ones(len(total)), abs=1e-5)
    said = plain(data["sentence"])
    assert "by thread worn out (" in said
    assert "we are 95 % sure of each range" in said


def test_bands_of_modes_allow_for_sites() -> None:
    """At half of the sites everything is stripped: leaving sites out says more than independent lives."""
    fleet = SmallFleet()
    for place in range(6):
        site = fleet.site(f"S-{place}")
        for number in range(15):
            mode = fleet.stripped if place % 2 else fleet.worn
            fleet.fit(fleet.module(f"M-{place}-{number}", site), 0, 20 + 7 * number, "failed", mode=mode)
    rebuild_clocks()
    found = lives("NUT", as_of=AS_OF, also="mode")
    alone = cumulative_incidence(found.lifetimes, found.also)
    row = next(row for row in ask("modes")["groups"][0]["modes"] if row["mode"] == "WORN")
    share = row["at"][0]
    low, high = (float(limit) for limit in alone.band_at("WORN", share["age"]))
    assert share["upper"] - share["lower"] > 1.5 * (high - low)


def test_failures_without_a_mode_are_a_layer_of_their_own(worked: WorkedFleet) -> None:
    module = worked.module("NO-MODE", worked.sites["ALDER"])
    for _ in range(40):
        worked.fit(module, 0, 90, "failed")
    rebuild_clocks()
    data = ask("modes")
    assert any(row["name"] == "no mode written down" and row["failures"] == 40 for row in data["groups"][0]["modes"])
    page = BY_NAME["modes"].load().page(data, address=lambda mode: f"?mode={mode}")
    assert any("have no mode written down" in note for note in page["chart"]["notes"])
    links = [row[-1] for row in page["tables"][0]["rows"]]
    assert {"text": "its life alone", "url": "?mode=WORN"} in links
    assert {"text": None} in links


def test_chosen_modes_are_called_by_name_and_do_not_change_the_shares(worked: WorkedFleet) -> None:
    document = whole_document("NUT", by="part", as_of=AS_OF, modes=["WORN"])
    assert document["groups"][0]["sentence"].startswith("If only thread worn out acted: ")
    assert "If only this mode acted (thread worn out)" in document["warnings"][0]
    assert document["mode_names"] == {"WORN": "Thread worn out"}
    assert len(document["incidence"]["groups"][0]["modes"]) == 2
    assert document["trend"]["sentence"].startswith("If only thread worn out acted: By ")
    assert document["incidence"]["sentence"].startswith("Of the N1 drive nuts")


def test_positions_are_followed_from_one_part_to_the_next(worked: WorkedFleet) -> None:
    data = ask("trend")
    assert (data["positions"], data["modules"]) == (30, 30)
    assert data["failures"] == lives("NUT", as_of=AS_OF).lifetimes.failures
    curve, renewal = data["curve"], data["renewal"]
    assert curve["mean"] == sorted(curve["mean"])
    module = BY_NAME["trend"].load()
    _, mean, low, high, expected = module.told_at(data)
    assert low < mean < high
    assert expected == pytest.approx(mean, rel=0.25)  # the fleet has no trend
    assert renewal["expected_failures"] == pytest.approx(data["failures"], rel=0.15)
    assert data["tests"]["modulated renewal"]["p_value"] > 0.01
    assert "cannot be shown" in data["sentence"]
    page = module.page(data)
    says = {row[0]: row[-1] for row in page["tables"][0]["rows"]}
    assert says["Lewis–Robinson"] == "no trend shown"
    assert {row[0] for row in page["detail"][0]["rows"]} == {
        "modulated renewal",
        "Lewis–Robinson",
        "Laplace",
        "MIL-HDBK-189",
    }


def test_worse_parts_in_older_positions_are_a_trend() -> None:
    """Each next part of a position lasts three quarters of the one before."""
    fleet = SmallFleet()
    site = fleet.site()
    for number in range(16):
        module = fleet.module(f"M-{number}", site)
        now, life, first = 0, 60 + number, None
        for _ in range(5):
            fitting = fleet.fit(module, now, now + life, "failed")
            first = first or fitting.position
            fitting.position = first
            fitting.save()
            now, life = now + life, max(1, round(0.75 * life))
    rebuild_clocks()
    data = ask("trend", as_of=day(400))
    assert data["tests"]["modulated renewal"]["p_value"] < 0.001
    assert "fail sooner than equally old parts in younger ones (P under 0.001" in plain(data["sentence"])
    assert data["sentence"].endswith("it gets worse as positions grow older.")


def test_positions_that_only_differ_are_not_called_worse() -> None:
    """The first test alone takes bad positions, renewed more often, for older ones."""
    worse = {"p_value": 0.001, "p_worsening": 0.0005, "p_improving": 0.9995}
    level = {"p_value": 0.6, "p_worsening": 0.3, "p_improving": 0.7}
    words = BY_NAME["trend"].load().test_words
    assert "it gets worse" in words({"tests": {"modulated renewal": worse, "Lewis–Robinson": worse}})
    for within in (level, {"refused": "too few"}):
        told = words({"tests": {"modulated renewal": worse, "Lewis–Robinson": within}})
        assert "it gets worse" not in told
        assert "positions that differ for good would look the same" in told


def test_with_chosen_parts_no_curve_is_drawn(worked: WorkedFleet) -> None:
    data = ask("trend", parts=["N1"])
    assert "curve" not in data
    page = BY_NAME["trend"].load().page(data)
    assert page["chart"] is None
    assert any("No curve is drawn while only some parts are chosen" in note for note in page["notes"])


def test_the_clock_that_explains_the_lives_is_found(worked: WorkedFleet) -> None:
    data = ask("clocks")
    (group,) = data["groups"]
    assert set(group["clocks"]) == {"days", "strokes"}
    assert group["preferred"] == "strokes"
    assert group["sure"]
    assert data["not_known"] == ["hours"]
    assert data["interpolated"]["strokes"] < 0.4
    assert "they wear by strokes" in data["sentence"]


def test_clocks_that_are_one_are_not_compared() -> None:
    """Strokes that only the sites' daily figure gives are days by another name."""
    fleet = SmallFleet(clock="strokes")
    for place in range(5):
        site = fleet.site(f"S-{place}", strokes_per_day=100 + place)
        for number in range(6):
            fleet.fit(fleet.module(f"M-{place}-{number}", site), 0, 30 + 9 * number, "failed")
    rebuild_clocks()
    data = ask("clocks")
    assert data["interpolated"]["strokes"] == 1.0
    assert data["sentence"].startswith("Which clock explains the lives of the N1 drive nuts we cannot tell")
    assert not data["groups"][0]["clocks"]


def test_a_bad_lot_is_named_and_no_good_one() -> None:
    WorkedFleet(bad_lot=True)
    data = ask("stand-outs")
    families = {family["kind"]: family for family in data["families"]}
    chosen = [row["label"] for row in families["lots"]["rows"] if row["stands_out"]]
    assert chosen == [BAD_LOT]
    assert families["lots"]["false_discovery_rate"] <= data["allowed"]
    worst = families["lots"]["rows"][0]
    assert worst["chance_worse"] > 0.9
    assert worst["failures"] > worst["expected"]
    said = plain(data["sentence"])
    assert f"Lots whose parts fail clearly faster than a typical one's: {BAD_LOT}" in said
    assert "or fewer are expected to be false" in said


def test_of_very_many_lots_those_with_most_lives_are_judged() -> None:
    from reliability.life_stand_outs import MOST_JUDGED, most_seen

    lots = np.array([f"L-{number}" for number in range(MOST_JUDGED + 5)] + ["L-3", "L-204", ""])
    judged, left = most_seen(lots, np.ones(len(lots)))
    kept = set(lots[judged])
    assert (len(kept), left) == (MOST_JUDGED, 5)
    assert {"L-3", "L-204"} <= kept
    assert "" not in kept


def test_alike_lots_and_sites_do_not_stand_out(worked: WorkedFleet) -> None:
    data = ask("stand-outs")
    assert not any(row["stands_out"] for family in data["families"] for row in family["rows"])
    assert "No site stands out" in data["sentence"]
    assert "No lot stands out" in data["sentence"]


def test_twice_the_duty_halves_the_days_and_keeps_the_strokes(worked: WorkedFleet) -> None:
    data = ask("duty")
    ratio = {each["clock"]: each["ratio"] for each in data["effects"]}
    assert ratio["days"]["lower"] < 0.5 < ratio["days"]["upper"]
    assert ratio["strokes"]["lower"] < 1.0 < ratio["strokes"]["upper"]
    assert ratio["days"]["method"] == "sites"
    assert ratio["days"]["upper"] / ratio["days"]["lower"] < 1.5
    assert "beyond the count of strokes itself, no effect of working harder can be shown" in data["sentence"]
    sites = {row["site"]: row["mean"] for row in data["sites"]}
    assert sites["MAPLE"] == pytest.approx(400, rel=0.05)
    (strokes,) = [each for each in data["effects"] if each["clock"] == "strokes"]
    medians = [point["estimate"] for point in strokes["points"]]
    assert math.log(max(medians) / min(medians)) < 0.5


def test_modules_that_work_alike_tell_nothing_of_duty() -> None:
    WorkedFleet(duties={"ALDER": 200, "BIRCH": 205, "CEDAR": 210, "ELDER": 215, "HAZEL": 220})
    data = ask("duty")
    assert data["sentence"].endswith("its modules all work about equally hard.")


@pytest.mark.parametrize("name", list(BY_NAME))
def test_too_few_failures_are_refused_in_words(name: str) -> None:
    fleet = SmallFleet()
    lock = fleet.site()
    for number in range(6):
        fleet.fit(fleet.module(f"M-{number}", lock), 0)
    rebuild_clocks()
    data = ask(name)
    assert data["sentence"].startswith("We cannot tell, because")


@pytest.mark.parametrize("name", list(BY_NAME))
def test_an_empty_book_of_lives_is_refused_in_words(name: str) -> None:
    SmallFleet()
    rebuild_clocks()
    assert ask(name)["sentence"].startswith("We cannot tell, because")


@pytest.mark.parametrize("name", list(BY_NAME))
def test_one_life_is_refused_in_words(name: str) -> None:
    fleet = SmallFleet()
    fleet.fit(fleet.module("ADA", fleet.site()), 0, 50, "failed", mode=fleet.worn)
    rebuild_clocks()
    said = ask(name)["sentence"]
    assert said.startswith("We cannot tell") or name == "modes"


@pytest.mark.parametrize("name", list(BY_NAME))
def test_imported_lives_answer_what_they_can(name: str) -> None:
    fleet = SmallFleet()
    chosen = LifeSet.objects.create(code="TRIAL")
    fields = {"set": chosen, "component": fleet.component, "part": fleet.n1, "clock": "days"}
    for age in range(20, 60):
        SetLife.objects.create(age=age, observed=age % 3 > 0, site="LOCK" if age % 2 else "MILL", **fields)
    data = ask(name, life_set="TRIAL")
    if name in ("fit", "stand-outs"):
        assert "refused" not in data
    else:
        assert data["sentence"].startswith("We cannot tell, because imported lives")


def test_the_whole_document_holds_every_panel(worked: WorkedFleet) -> None:
    document = whole_document("NUT", by="site", as_of=AS_OF)
    for panel in PANELS:
        assert document[panel.key]["sentence"]
    assert (
        document["distributions"]["groups"][0]["group"] == "N1"
    )  # each design by itself, however the screen is grouped
    json.dumps(document, allow_nan=False)


def test_files_hold_the_figures(worked: WorkedFleet) -> None:
    for panel in PANELS:
        data, module = ask(panel.name), panel.load()
        rows = list(module.lines(data))
        assert rows, panel.name
        assert {len(row) for row in rows} == {len(module.FILE_HEAD)}, panel.name


def test_figures_are_what_the_drawing_library_takes(worked: WorkedFleet) -> None:
    from plotly.graph_objects import Figure

    for panel in PANELS:
        page = panel.load().page(ask(panel.name), address=lambda mode: f"?mode={mode}")
        if page["chart"]:
            Figure(with_colours(page["chart"]["figure"]))
