"""What many records share."""

from __future__ import annotations

from typing import Any

from django.conf import settings
from django.db import models


class Versioned(models.Model):
    """`version` goes up with each change, so that a second, different edit is told what changed meanwhile."""

    version = models.PositiveIntegerField(default=1, editable=False)

    class Meta:
        abstract = True


class StrikeableQuerySet(models.QuerySet):
    def standing(self) -> StrikeableQuerySet:
        """Those that count: not struck out."""
        return self.filter(struck_out="")


class Strikeable(models.Model):
    """A wrong entry is struck out with a reason, never deleted; an empty reason means it stands."""

    struck_out = models.CharField(max_length=500, blank=True, default="")
    struck_out_at = models.DateTimeField(null=True, blank=True, editable=False)
    struck_out_by = models.ForeignKey(
        settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, blank=True, editable=False, related_name="+"
    )

    class Meta:
        abstract = True


class Entered(models.Model):
    """Who entered a record, and when it reached the book."""

    entered_by = models.ForeignKey(
        settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, blank=True, editable=False, related_name="+"
    )
    entered_at = models.DateTimeField(auto_now_add=True)

    class Meta:
        abstract = True


def fold(*texts: Any) -> str:
    """One folded text to search in: SQLite's own folding knows only ASCII."""
    return " ".join(str(text) for text in texts if text).casefold()
