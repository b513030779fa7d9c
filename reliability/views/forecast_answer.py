"""What a person asked of a forecast, and the documents that answer it: the base case and what would change it."""

from __future__ import annotations

from functools import cached_property
from typing import Any

from fleet.models import Component, Site
from reliability.forecasts.question import Question, question_of
from reliability.forecasts.what_if import WhatIf
from reliability.forms.forecast import ForecastForm
from reliability.forms.forecast_what_if import WhatIfForm
from reliability.life_errors import QuestionRefused

Document = dict[str, Any]


class Answer:
    """One document a component asked for; nobody gets sites that they do not see. The form is valid."""

    def __init__(self, request: Any, form: ForecastForm, *, again: bool = False) -> None:
        from reliability.forecasts.kept_forecast import kept_forecast

        self.request, self.form = request, form
        self.asked = form.cleaned_data["component"]
        self.asks_all = self.asked is None
        self.components = list(request.seen(Component)) if self.asks_all else [self.asked]
        self.documents = {each.code: kept_forecast(self.question(each), again=again) for each in self.components}
        self.chosen = self._chosen()
        self.what_if_form: WhatIfForm | None = None
        self.what_if = WhatIf(service_level=form.service_level())
        self.changed: Document | None = None
        self.difference: Document | None = None
        if self.chosen is not None:
            self._assume(self.chosen)

    def question(self, component: Component, what_if: WhatIf | None = None) -> Question:
        asked = self.form.cleaned_data
        return question_of(
            component,
            begin=asked["begin"],
            days=self.form.days(),
            sites=self.sites,
            what_if=what_if or WhatIf(service_level=self.form.service_level()),
        )

    @cached_property
    def sites(self) -> list[str] | None:
        """Codes; None where all are counted."""
        chosen = [each.code for each in self.form.cleaned_data["site"]]
        if not chosen and not self.request.user.all_sites:
            return list(self.request.seen(Site).values_list("code", flat=True))
        return chosen or None

    @property
    def told(self) -> Document:
        """What is shown of the chosen component: with the assumptions where there are any."""
        assert self.chosen is not None
        return self.changed if self.changed is not None else self.documents[self.chosen.code]

    @property
    def asked_question(self) -> Question:
        assert self.chosen is not None
        return self.question(self.chosen, self.what_if)

    def _chosen(self) -> Component | None:
        """The one asked for, else the one with the most failures to come."""
        return max(self.components, key=lambda each: self.documents[each.code]["total"]["mean"], default=None)

    def _assume(self, component: Component) -> None:
        from reliability.forecasts.kept_forecast import kept_difference, kept_forecast

        level = self.form.service_level()
        form = WhatIfForm(self.request.GET, request=self.request, component=component, service_level=level)
        self.what_if_form = form
        if not form.is_valid():
            return
        try:
            what_if = form.what_if()
            if what_if.is_base:
                return
            question = self.question(component, what_if)
            changed, difference = kept_forecast(question), kept_difference(question)
        except QuestionRefused as error:
            form.refuse(error)
            return
        self.what_if, self.changed, self.difference = what_if, changed, difference

    def counted_at_if_older(self) -> Any:
        """When the oldest of the documents was counted, if entries came after it."""
        return min((each["counted_at"] for each in self.documents.values() if not each["current"]), default=None)

    def document(self) -> Document:
        """Everything as one document."""
        told: Document = {"forecasts": list(self.documents.values())}
        if self.changed is not None:
            told |= {"what_if": self.changed, "difference": self.difference}
        return told

    def whole(self) -> Document:
        """What is kept of the chosen component: the answer, and beside assumptions the base case and the difference."""
        assert self.chosen is not None
        if self.changed is None:
            return self.told
        base = self.documents[self.chosen.code]
        plain = {name: value for name, value in base.items() if name not in ("counted_at", "current")}
        return {**self.told, "base": plain, "difference": self.difference}
