from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

import fleet.converters  # noqa: F401  (the sort of code in the addresses below)
from fleet.views import catalogue, corrections, doubts, history, modules, people, search, sign_in, sites

urlpatterns: list[URLPattern | URLResolver] = [
    path("sign-in/", sign_in.sign_in, name="sign_in"),
    path("sign-out/", sign_in.sign_out, name="sign_out"),
    path("password/", sign_in.change_password, name="change_password"),
    path("password/<uidb64>/<token>/", sign_in.reset_password, name="reset_password"),
    path("sites/", sites.sites, name="sites"),
    path("sites/new/", sites.new_site, name="new_site"),
    path("sites/<code:code>/", sites.site, name="site"),
    path("sites/<code:code>/edit/", sites.edit_site, name="edit_site"),
    path("modules/", modules.modules, name="modules"),
    path("modules/new/", modules.new_module, name="new_module"),
    path("modules/place/", modules.place_module, name="place_module"),
    path("modules/<code:tag>/edit/", modules.edit_module, name="edit_module"),
    path("modules/<code:tag>/take-away/", modules.take_away_module, name="take_away_module"),
    path("catalogue/", catalogue.catalogue, name="catalogue"),
    path("catalogue/parts/", catalogue.parts, name="parts"),
    path("catalogue/parts/new/", catalogue.new_part, name="new_part"),
    path("catalogue/parts/<code:code>/edit/", catalogue.edit_part, name="edit_part"),
    path("catalogue/components/new/", catalogue.new_component, name="new_component"),
    path("catalogue/components/<code:code>/", catalogue.component, name="component"),
    path("catalogue/components/<code:code>/edit/", catalogue.edit_component, name="edit_component"),
    path("catalogue/components/<code:code>/modes/new/", catalogue.new_mode, name="new_mode"),
    path("catalogue/components/<code:code>/modes/<code:mode>/edit/", catalogue.edit_mode, name="edit_mode"),
    path("catalogue/types/new/", catalogue.new_type, name="new_type"),
    path("catalogue/types/<code:code>/", catalogue.module_type, name="type"),
    path("catalogue/types/<code:code>/edit/", catalogue.edit_type, name="edit_type"),
    path("catalogue/types/<code:code>/positions/new/", catalogue.new_position, name="new_position"),
    path("catalogue/types/<code:code>/positions/<code:position>/edit/", catalogue.edit_position, name="edit_position"),
    path("correct/<slug:kind>/<int:pk>/", corrections.correct_record, name="correct_record"),
    path("strike-out/<slug:kind>/<int:pk>/", corrections.strike_out_record, name="strike_out_record"),
    path("looks-wrong/", doubts.doubts, name="doubts"),
    path("looks-wrong/<slug:kind>/<int:pk>/", doubts.say_looks_wrong, name="say_looks_wrong"),
    path("looks-wrong/<int:pk>/", doubts.settle_doubt, name="settle_doubt"),
    path("history/", history.history, name="history"),
    path("people/", people.people, name="people"),
    path("people/new/", people.new_person, name="new_person"),
    path("people/<code:code>/edit/", people.edit_person, name="edit_person"),
    path("people/<code:code>/link/", people.make_reset_link, name="make_reset_link"),
    path("people/<code:code>/sign-out/", people.sign_out_everywhere, name="sign_out_everywhere"),
    path("settings/", people.book, name="book"),
    path("search/", search.search, name="search"),
]
