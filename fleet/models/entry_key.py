"""A submission's own key: sent twice, recorded once, answered the same."""

from __future__ import annotations

import uuid

from django.conf import settings
from django.db import models


class EntryKey(models.Model):
    key = models.UUIDField(primary_key=True, default=uuid.uuid4)
    person = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, related_name="+")
    verb = models.CharField(max_length=40)
    answer = models.JSONField(default=dict)
    made_at = models.DateTimeField(auto_now_add=True)

    def __str__(self) -> str:
        return f"{self.verb} {self.key}"
