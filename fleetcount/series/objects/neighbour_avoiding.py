"""Neighbour-avoiding walks: sites that are not consecutive are not adjacent."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject(
    "neighbour-avoiding", 1, "walks whose sites are adjacent only if consecutive", avoids="neighbours"
)
