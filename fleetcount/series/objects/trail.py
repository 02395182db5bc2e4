"""Trails: sites may come again, edges not."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject("trail", 1, "trails from the start site: no edge twice, in either sense", avoids="edges")
