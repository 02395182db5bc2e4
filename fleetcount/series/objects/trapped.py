"""Trapped walks: after exactly their last step there is no way on."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject("trapped", 1, "self-avoiding walks that cannot be continued", ends="trapped")
