"""Fits, posteriors and forecasts kept so that a page reads them instead of computing again."""

from __future__ import annotations

from django.db import models


class KeptResult(models.Model):
    """Keyed by what was asked and by the version of the data it was computed from."""

    kind = models.CharField(max_length=30)
    key = models.CharField(max_length=64)  # SHA-256 of the question: component, clock, filter, as-of day …
    data_version = models.BigIntegerField()
    payload = models.BinaryField()
    made_at = models.DateTimeField(auto_now_add=True)

    class Meta:
        constraints = [models.UniqueConstraint(fields=["kind", "key"], name="one_answer_a_question")]

    def __str__(self) -> str:
        return f"{self.kind} {self.key[:8]} at {self.data_version}"
