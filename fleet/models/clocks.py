"""Derived rows, made again from the records by `fleet.actions.rebuild_clocks`; never entered, kept without history.

Days are ordinal day numbers (`date.toordinal()`, with the fraction of the day where an instant is known), so that
both engines do plain arithmetic on them. The three clocks do not run while a module is stopped, at a depot or
without a place where it has placements at all. The last knot lies on `fleet.clocks.FAR_DAY`, so that every later day
lies between two knots: drawings leave it out.
"""

from __future__ import annotations

from django.db import models

from fleet.models.fitting import Fitting
from fleet.models.module import Module
from fleet.models.site import Site


class ClockPoint(models.Model):
    """A knot of a module's three clocks, with straight lines between: exact for days, interpolated for the rest."""

    module = models.ForeignKey(Module, on_delete=models.CASCADE, related_name="clock_points")
    day = models.FloatField()
    days = models.FloatField()  # days in service since the first knot
    hours = models.FloatField(null=True)  # accumulated; empty where neither a meter nor a duty is known
    strokes = models.FloatField(null=True)
    measured = models.BooleanField(default=False)  # a counter or meter was read here
    seen_working = models.BooleanField(default=False)  # a visit, or a reading that advanced: the module was looked at
    strokes_read = models.BooleanField(default=False)
    hours_read = models.BooleanField(default=False)

    class Meta:
        constraints = [models.UniqueConstraint(fields=["module", "day"], name="one_knot_a_day_part")]

    def __str__(self) -> str:
        return f"{self.module_id} {self.day}"


class FittingClock(models.Model):
    """What the module's clocks said when a part came in, was last known good, failed or came out."""

    fitting = models.OneToOneField(Fitting, on_delete=models.CASCADE, primary_key=True, related_name="clock")
    module = models.ForeignKey(Module, on_delete=models.CASCADE, related_name="+")
    site = models.ForeignKey(Site, on_delete=models.PROTECT, null=True, related_name="+")  # at its end, or now
    fitted_day = models.IntegerField(null=True)
    end_day = models.IntegerField(null=True)  # failed_on, else removed_on; empty while it runs
    records_day = models.IntegerField(null=True)  # records_from of the module or its site
    last_good_day = models.FloatField(null=True)  # entered, else the last time the module was seen before the failure
    last_good_entered = models.BooleanField(default=False)
    days_at_fit = models.FloatField(null=True)
    days_at_records = models.FloatField(null=True)  # at records_from, where that is after the fitting
    days_at_good = models.FloatField(null=True)
    days_at_end = models.FloatField(null=True)
    hours_at_fit = models.FloatField(null=True)
    hours_at_records = models.FloatField(null=True)
    hours_at_good = models.FloatField(null=True)
    hours_at_end = models.FloatField(null=True)
    strokes_at_fit = models.FloatField(null=True)
    strokes_at_records = models.FloatField(null=True)
    strokes_at_good = models.FloatField(null=True)
    strokes_at_end = models.FloatField(null=True)
    strokes_measured = models.BooleanField(default=False)  # both ends lie on or between readings
    hours_measured = models.BooleanField(default=False)

    class Meta:
        indexes = [models.Index(fields=["module"])]

    def __str__(self) -> str:
        return f"clock of {self.fitting_id}"
