"""Self-avoiding walks: no site twice, ending anywhere."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject("walk", 1, "self-avoiding walks from the start site, directed")
