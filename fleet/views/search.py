"""The search box in the head: modules, sites and parts by part of their code or name."""

from __future__ import annotations

from typing import Any
from urllib.parse import urlencode

from django.db.models import Q
from django.http import HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse

from fleet.forms.filters import folded, module_words
from fleet.models import BenchJob, Module, Part, Site, Store, SupplyOrder
from fleet.rights import BENCH, CATALOGUE, SEE, STORES, may, needs

MOST = 20


@needs(SEE)
def search(request: Any) -> HttpResponse:
    words = request.GET.get("q", "").replace("\0", "").strip()[:100]
    if not words:
        return render(request, "search/page.html", {"query": "", "found": []})
    exact = request.seen(Module).filter(code=words.upper()).first()
    if exact is not None:
        return redirect("module", tag=exact.code)
    return render(request, "search/page.html", {"query": words, "found": found(request, words)})


def all_of(name: str, **asked: str) -> str:
    """The list with the same words as its filter, whatever signs they hold."""
    return f"{reverse(name)}?{urlencode(asked)}"


def found(request: Any, words: str) -> list[dict[str, Any]]:
    modules = module_words(request.seen(Module).with_state().select_related("type"), "", words)
    sites = folded(request.seen(Site), "folded", words)
    groups = [
        {
            "name": "Modules",
            "all_url": all_of("modules", q=words),
            "rows": [
                {
                    "name": each.code,
                    "url": reverse("module", args=[each.code]),
                    "more": " · ".join(filter(None, [each.type.code, each.now_site_name, each.now_bay])),
                }
                for each in modules.order_by("code_order")[: MOST + 1]
            ],
        },
        {
            "name": "Sites",
            "all_url": all_of("sites", q=words),
            "rows": [
                {"name": each.title, "url": reverse("site", args=[each.code]), "more": each.code}
                for each in sites.order_by("code_order")[: MOST + 1]
            ],
        },
    ]
    if may(request.user, CATALOGUE):
        parts = folded(request.seen(Part), "folded", words)
        groups.append(
            {
                "name": "Parts",
                "all_url": all_of("parts", q=words),
                "rows": [
                    {"name": each.code, "url": reverse("edit_part", args=[each.code]), "more": each.name}
                    for each in parts.order_by("code_order")[: MOST + 1]
                ],
            }
        )
    groups += stocked(request, words)
    for group in groups:
        group["more_than_shown"] = len(group["rows"]) > MOST
        group["rows"] = group["rows"][:MOST]
    return [group for group in groups if group["rows"]]


def stocked(request: Any, words: str) -> list[dict[str, Any]]:
    """Stores, supply orders and open bench jobs, as far as the person may see them."""
    code = words.upper()
    stores = folded(request.seen(Store), "folded", words) if may(request.user, STORES) else request.seen(Store).none()
    jobs = request.seen(BenchJob).open() if may(request.user, BENCH) else request.seen(BenchJob).none()
    orders = request.seen(SupplyOrder).filter(Q(code__contains=code) | Q(supplier__icontains=words))
    of_module = jobs.filter(Q(code__contains=code) | Q(module__code__contains=code)).select_related("module")
    return [
        {
            "name": "Stores",
            "all_url": reverse("stores"),
            "rows": [
                {"name": each.title, "url": reverse("store", args=[each.code]), "more": each.code}
                for each in stores.order_by("code_order")[: MOST + 1]
            ],
        },
        {
            "name": "Supply orders",
            "all_url": all_of("supply", order=words),
            "rows": [
                {"name": each.code, "url": reverse("supply_order", args=[each.code]), "more": each.supplier}
                for each in orders.order_by("-ordered_on", "code_order")[: MOST + 1]
            ],
        },
        {
            "name": "On the bench",
            "all_url": all_of("bench_jobs", module=words),
            "rows": [
                {"name": each.module.code, "url": reverse("bench_job", args=[each.code]), "more": each.stage}
                for each in of_module.order_by("module__code_order")[: MOST + 1]
            ],
        },
    ]
