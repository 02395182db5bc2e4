"""Closed trails: cyclic sequences of edges, none twice."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject(
    "closed-trail",
    1,
    "closed trails, up to translation, start and sense, per cell",
    closed=True,
    avoids="edges",
)
