"""The shared parts of pages, rendered alone: what they show, and that they show nothing where there is nothing."""

from __future__ import annotations

import datetime as dt
from typing import Any

import pytest
from django import forms
from django.core.paginator import Paginator
from django.template.loader import render_to_string
from django.test import RequestFactory

from fleet.formats import FIXED

COLUMNS = [
    {"key": "tag", "label": "Module", "sort": True},
    {"key": "strokes", "label": "Strokes", "numeric": True, "sort": True},
    {"key": "chance", "label": "Fails before 15 Dec", "numeric": True},
]


def part(name: str, address: str = "/modules/", **context: Any) -> str:
    request = RequestFactory().get(address)
    return render_to_string(f"parts/{name}.html", {"request": request, **context}).replace(FIXED, " ")


class VisitForm(forms.Form):
    module = forms.CharField(help_text="The tag on the label.")
    strokes = forms.IntegerField(label="Counter, strokes", required=False)
    found = forms.ChoiceField(choices=[("failed", "failed"), ("cleaned", "cleaned")], widget=forms.RadioSelect)
    to_bench = forms.BooleanField(label="Goes to the bench", required=False)

    def clean_strokes(self) -> int | None:
        raise forms.ValidationError("Counter 48 210 is below the last reading 51 877 of 3 March.")


def test_table_names_its_rows_and_writes_figures_for_people() -> None:
    rows = [[{"text": "KM-0147", "url": "/m/KM-0147"}, 61400, None]]
    text = part("table", columns=COLUMNS, rows=rows, caption="Modules")
    assert '<th scope="row"><a href="/m/KM-0147">KM-0147</a></th>' in text
    assert ">61 400</td>" in text
    assert 'class="n blank" data-label="Fails before 15 Dec">–</td>' in text
    assert "<caption>Modules</caption>" in text


def test_table_shows_estimates_with_their_interval() -> None:
    chance = {"estimate": {"estimate": 0.22, "lower": 0.14, "upper": 0.33}, "unit": "share"}
    text = part("table", columns=COLUMNS, rows=[["KM-0147", 61400, chance]])
    assert '<b>22 %</b> <span class="ci">14–33</span>' in text


def test_table_shows_an_estimate_of_nothing_known() -> None:
    chance = {"estimate": {"estimate": None, "lower": None, "upper": None}, "unit": "share"}
    assert "<b>not known</b>" in part("table", columns=COLUMNS, rows=[["KM-0147", 1, chance]])


def test_table_sorts_by_links_and_marks_the_order() -> None:
    text = part("table", "/modules/?sort=-tag&site=A", columns=COLUMNS, rows=[["KM-0147", 1, 2]])
    assert '<th scope="col" aria-sort="descending"><a href="?sort=tag&amp;site=A">Module</a></th>' in text
    assert '<th scope="col" class="n">Fails before 15 Dec</th>' in text


def test_table_escapes_what_people_typed() -> None:
    assert "<script>" not in part("table", columns=COLUMNS[:1], rows=[["<script>"]])


def test_table_with_a_row_of_the_wrong_length_is_a_mistake() -> None:
    with pytest.raises(ValueError, match="zip"):
        part("table", columns=COLUMNS, rows=[["KM-0147"]])


def test_empty_table_says_so_with_a_remedy() -> None:
    text = part("table", columns=COLUMNS, rows=[], empty_state="No module stands here.", empty_remedy="Place one.")
    assert "<table" not in text
    assert "No module stands here." in text
    assert "Place one." in text


def test_pages_are_linked_with_the_filters_kept() -> None:
    page = Paginator(range(1234), 25).get_page(4)
    text = part("pagination", "/modules/?site=A&page=4", page=page, what="modules")
    assert "76 to 100 of 1 234 modules" in text
    assert '<a href="?site=A&amp;page=3" rel="prev">' in text
    assert '<span aria-current="page">4</span>' in text


def test_one_page_needs_no_links() -> None:
    text = part("pagination", page=Paginator(range(3), 25).get_page(1))
    assert "1 to 3 of 3 rows" in text
    assert "<nav" not in text


def test_form_ties_help_and_faults_to_their_field() -> None:
    text = part("form", form=VisitForm({"module": "KM-0147", "strokes": "48210", "found": "failed"}), submit="Store it")
    assert '<p class="help" id="id_module_helptext">The tag on the label.</p>' in text
    assert 'aria-describedby="id_module_helptext"' in text
    assert 'id="id_strokes_error"' in text
    assert 'aria-describedby="id_strokes_error"' in text
    assert 'aria-invalid="true"' in text
    assert "Counter 48 210 is below the last reading 51 877 of 3 March." in text
    assert "One field needs another look." in text
    assert ">Store it</button>" in text


def test_every_control_of_a_form_has_a_label() -> None:
    text = part("form", form=VisitForm())
    for name in ("module", "strokes", "to_bench", "found_0", "found_1"):
        assert f'for="id_{name}"' in text
    assert "<legend>Found</legend>" in text


def test_filter_form_keeps_the_order_and_needs_no_script() -> None:
    class Filter(forms.Form):
        q = forms.CharField(required=False)

    text = part("filter_form", "/modules/?sort=-tag&q=K", form=Filter({"q": "K"}))
    assert 'method="get"' in text
    assert '<input type="hidden" name="sort" value="-tag">' in text
    assert 'hx-get="/modules/"' in text
    assert "[" not in text.split("hx-trigger=", 1)[1].split(">", 1)[0]  # a trigger filter would need eval
    assert "<button" in text


def test_chart_has_a_sentence_above_and_a_table_below() -> None:
    chart = {
        "id": "curves",
        "sentence": "Half of the N2 nuts fail within 61 days.",
        "figure": {"data": [{"name": "</script><b>"}], "layout": {}},
        "columns": COLUMNS[:1],
        "rows": [["N2"]],
        "csv_url": "?as=csv",
    }
    text = part("chart", chart=chart)
    places = [text.index(word) for word in ("Half of the N2 nuts", 'data-chart="curves"', "<table", "?as=csv")]
    assert places == sorted(places)
    assert "</script><b>" not in text
    assert 'id="plotly.js-style-global" class="no-inline-styles"' in text


def test_two_charts_bring_the_library_once() -> None:
    chart = {"sentence": "Nothing yet.", "figure": {"data": [], "layout": {}}}
    request = RequestFactory().get("/life/")
    texts = [
        render_to_string("parts/chart.html", {"request": request, "chart": chart | {"id": name}}) for name in ("a", "b")
    ]
    assert [text.count("scripts/charts.js") for text in texts] == [1, 0]
    assert part("chart", chart=chart | {"id": "c"}).count("scripts/charts.js") == 1  # another page


def test_progress_can_be_cancelled_until_it_has_ended() -> None:
    work = {"title": "Import", "state": "running", "done": 48210, "total": 120000, "ended": False}
    running = part("progress", work=work, work_url="/here/", cancel_url="/here/cancel/")
    assert "48 210 of 120 000" in running
    assert 'action="/here/cancel/"' in running
    assert 'hx-trigger="every 2s"' in running
    ended = part("progress", work=work | {"state": "done", "ended": True}, work_url="/w", cancel_url="/w/cancel/")
    assert "hx-trigger" not in ended
    assert "<form" not in ended


def test_caution_defers_to_the_site_and_is_absent_without_words() -> None:
    assert "local codes and licensed persons come first" in part("caution", caution="Isolate and lock out.")
    assert part("caution", caution="").strip() == ""


def test_key_tells_parts_by_dash_and_marker() -> None:
    text = part("key", key=[{"kind": "part", "rank": 3, "label": "N4"}, {"kind": "failed", "label": "failed"}])
    assert 'class="fit p4"' in text
    assert 'class="mark p4"' in text
    assert 'class="fail"' in text


@pytest.mark.parametrize("name", ["400", "403", "404", "422", "500"])
def test_fault_pages_render_without_anything(name: str) -> None:
    """The 400 and 500 pages are rendered without a request, perhaps without a database."""
    text = render_to_string(f"{name}.html")
    assert "<h1>" in text
    assert 'href="/"' in text


def test_fault_pages_say_what_they_were_told() -> None:
    text = render_to_string("403.html", {"fault": "Only a manager sees <people>.", "remedy": "Ask one."})
    assert "Only a manager sees &lt;people&gt;." in text
    assert "Ask one." in text


def test_head_shows_the_screens_given_and_the_day_of_the_records() -> None:
    screens = [{"name": "Today", "url": "/", "current": True}, {"name": "Sites", "url": "/sites/", "current": False}]
    text = render_to_string("base.html", {"screens": screens, "as_of": dt.date(2026, 12, 1), "version": "0.1.0"})
    assert '<a href="/" aria-current="page">Today</a>' in text
    assert '<a href="/sites/">Sites</a>' in text
    assert "From the records of 1 December 2026" in text
