"""What somebody of one site reads of a redesign: every sentence, and no other site's name."""

from __future__ import annotations

import json

import pytest
from django.test import Client
from django.urls import reverse

from fleet.models import Site
from reliability.redesigns.seen import unnamed
from tests.factories import make_planner
from tests.reliability.rollout_fleet import TODAY, RolloutFleet
from tests.reliability.small_fleet import day

LEFT_OUT = "Without the site A10 the means up to 90 are not known. Choose an earlier horizon."


@pytest.mark.parametrize("mine", [{"A1"}, {"A", "10"}, {"A100"}, set()])
def test_a_longer_or_shorter_code_is_another_site(mine: set[str]) -> None:
    told = unnamed(LEFT_OUT, mine)
    assert told == "Without another site the means up to 90 are not known. Choose an earlier horizon."


def test_own_sites_are_named_and_sentences_without_one_stay() -> None:
    assert unnamed(LEFT_OUT, {"A1", "A10"}) == LEFT_OUT
    assert unnamed("All lives are from the site A.10_B-2.", {"A.10_B-2"}) == "All lives are from the site A.10_B-2."
    assert unnamed("All lives are from the site A.10_B-2.", {"A.10_B"}) == "All lives are from another site."
    many = "6 sites are too few; at no site two lots ran."
    assert unnamed(many, {"A1"}) == many


@pytest.mark.django_db
def test_sites_that_have_not_answered_are_named_to_their_own_people_only() -> None:
    fleet = RolloutFleet(2.0, sites=3, modules=4)
    fleet.redesign()
    for site in Site.objects.all():
        site.reports_at_once = None
        site.save()
    client = Client()
    client.force_login(make_planner(sites=[fleet.places[1]]))
    asked = {"as_of": day(TODAY).isoformat()}
    document = client.get(reverse("redesign", args=["LIP"]), {**asked, "as": "json"}).json()
    assert document["records"]["unanswered"] == ["SITE-2", "other sites"]
    told = json.dumps(document) + client.get(reverse("redesign", args=["LIP"]), asked).content.decode()
    assert [site.code for site in fleet.places if site.code in told] == ["SITE-2"]
