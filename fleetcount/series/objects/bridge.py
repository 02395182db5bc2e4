"""Bridges: above the start after the first step, and never above the end."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject(
    "bridge", 1, "walks above their start that end at their highest level", ends="on top", above_start=True
)
